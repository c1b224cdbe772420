//! Rows gathered by column until there are enough of them for a row group.

use std::io::Write;

use journal::{COLUMNS, Cell, Kind, Row};
use parquet::column::writer::ColumnWriter;
use parquet::data_type::ByteArray;
use parquet::errors::ParquetError;
use parquet::file::writer::SerializedFileWriter;

/// Definition levels of a column that may be null.
const NULL: i16 = 0;
const PRESENT: i16 = 1;

/// A row group in the making.
pub(crate) struct Group {
    columns: Vec<Gathered>,
    rows: usize,
}

/// What a column has so far: a level a row, a value where it is present.
struct Gathered {
    levels: Vec<i16>,
    values: Values,
}

enum Values {
    Doubles(Vec<f64>),
    Wholes(Vec<i64>),
    Texts(Vec<ByteArray>),
}

impl Group {
    pub(crate) fn new() -> Self {
        let gathered = |kind| Gathered {
            levels: Vec::new(),
            values: match kind {
                Kind::Decimal => Values::Doubles(Vec::new()),
                Kind::Whole => Values::Wholes(Vec::new()),
                Kind::Text => Values::Texts(Vec::new()),
            },
        };
        Self {
            columns: COLUMNS.iter().map(|column| gathered(column.kind)).collect(),
            rows: 0,
        }
    }

    pub(crate) fn rows(&self) -> usize {
        self.rows
    }

    pub(crate) fn take(&mut self, row: &Row<'_>) {
        for (gathered, column) in self.columns.iter_mut().zip(COLUMNS) {
            gathered.take((column.cell)(row));
        }
        self.rows += 1;
    }

    /// Writes the group and empties it.
    pub(crate) fn write<W: Write + Send>(
        &mut self,
        writer: &mut SerializedFileWriter<W>,
    ) -> Result<(), ParquetError> {
        let mut group = writer.next_row_group()?;
        for gathered in &mut self.columns {
            let Some(mut column) = group.next_column()? else {
                unreachable!("the schema has a field for each column");
            };
            gathered.write(column.untyped())?;
            column.close()?;
        }
        group.close()?;
        self.rows = 0;
        Ok(())
    }
}

impl Gathered {
    fn take(&mut self, cell: Cell<'_>) {
        let level = match (&mut self.values, cell) {
            (_, Cell::Empty) => NULL,
            (Values::Doubles(all), Cell::Decimal { scaled, decimals }) => {
                all.push(double(scaled, decimals));
                PRESENT
            }
            (Values::Wholes(all), Cell::Whole(value)) => {
                all.push(value);
                PRESENT
            }
            (Values::Texts(all), Cell::Text(words)) => {
                all.push(text(all.last(), words));
                PRESENT
            }
            (
                Values::Doubles(_) | Values::Wholes(_) | Values::Texts(_),
                Cell::Decimal { .. } | Cell::Whole(_) | Cell::Text(_),
            ) => unreachable!("a column's cells are of its kind"),
        };
        self.levels.push(level);
    }

    fn write(&mut self, column: &mut ColumnWriter<'_>) -> Result<(), ParquetError> {
        let levels = Some(self.levels.as_slice());
        match (&mut self.values, column) {
            (Values::Doubles(all), ColumnWriter::DoubleColumnWriter(column)) => {
                column.write_batch(all, levels, None)?;
                all.clear();
            }
            (Values::Wholes(all), ColumnWriter::Int64ColumnWriter(column)) => {
                column.write_batch(all, levels, None)?;
                all.clear();
            }
            (Values::Texts(all), ColumnWriter::ByteArrayColumnWriter(column)) => {
                column.write_batch(all, levels, None)?;
                all.clear();
            }
            (Values::Doubles(_) | Values::Wholes(_) | Values::Texts(_), _) => {
                unreachable!("the schema has each column's kind")
            }
        }
        self.levels.clear();
        Ok(())
    }
}

/// The double nearest to the decimal: both parts of the quotient are exact up to 2^53.
#[expect(
    clippy::cast_precision_loss,
    reason = "a double has sixteen digits, which is more than was measured"
)]
fn double(scaled: i64, decimals: u8) -> f64 {
    scaled as f64 / 10_f64.powi(i32::from(decimals))
}

/// Labels and states are the same for many rows: they share one piece of memory.
fn text(last: Option<&ByteArray>, words: &str) -> ByteArray {
    match last {
        Some(last) if last.data() == words.as_bytes() => last.clone(),
        _ => ByteArray::from(words),
    }
}
