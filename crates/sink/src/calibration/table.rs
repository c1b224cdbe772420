//! A table of calibration points as CSV: what was set, what the meter read, what the sink read.
//!
//! Columns by their names, in any order, each with its unit: `setpoint_a`, `meter_a`,
//! `readback_a` for the current and `meter_v`, `readback_v` for the voltage; `_ma`, `_ua`, `_mv`
//! and `_uv` as well. Setpoints and readbacks are the sink's nominal values. Rows that follow each
//! other with the same setpoint are repeated readings of one point. An empty cell is a reading
//! that was not taken; a row without a setpoint is a voltage point of its own.
//!
//! Quotes, a byte order mark and semicolons (with either decimal sign) are understood; anything
//! that is not a number is refused with its line and column.

use quantity::{Current, Text, Textual, Voltage};

use super::{CurrentPoint, VoltagePoint};

/// Most rows.
const ROWS_MAX: usize = 100_000;

/// The points of a table.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Table {
    /// Those of the current.
    pub current_points: Vec<CurrentPoint>,
    /// Those of the voltage.
    pub voltage_points: Vec<VoltagePoint>,
}

/// Why a table cannot be read.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum TableError {
    /// No header, or one that lacks a column.
    #[error(
        "the header `{header}` lacks {missing}; name the columns setpoint_a,meter_a,readback_a,meter_v,readback_v"
    )]
    Header {
        /// What stands there.
        header: String,
        /// What is missing.
        missing: &'static str,
    },
    /// A column that means nothing here, or one that is named twice.
    #[error(
        "column `{column}` is {what}; columns are setpoint, meter or readback with a unit, as in meter_ma"
    )]
    Column {
        /// Its name.
        column: String,
        /// What is wrong with it.
        what: &'static str,
    },
    /// A cell that is no number in range.
    #[error("line {line}, column `{column}`: `{cell}` {what}")]
    Cell {
        /// The line, from 1.
        line: usize,
        /// The column's name.
        column: String,
        /// What stands there.
        cell: String,
        /// What is wrong with it.
        what: &'static str,
    },
    /// A row with one half of a pair.
    #[error("line {line}: {what}")]
    Row {
        /// The line, from 1.
        line: usize,
        /// What is missing.
        what: &'static str,
    },
    /// Too many rows.
    #[error("the table has more than {ROWS_MAX} rows; give the means of repeated readings")]
    TooLong,
}

/// What a column holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum What {
    Setpoint,
    Meter,
    Readback,
    MeterVoltage,
    ReadbackVoltage,
}

#[derive(Debug)]
struct Column {
    name: String,
    what: What,
    unit: &'static str,
}

/// One row's values.
#[derive(Debug, Default)]
struct Row {
    setpoint: Option<Current>,
    meter: Option<Current>,
    readback: Option<Current>,
    meter_voltage: Option<Voltage>,
    readback_voltage: Option<Voltage>,
}

impl Table {
    /// Reads a table's text.
    ///
    /// # Errors
    /// [`TableError`] with the line, the column and the mend.
    pub fn from_csv(text: &str) -> Result<Self, TableError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let mut lines = (1..)
            .zip(text.lines())
            .filter(|(_, line)| !line.trim().is_empty() && !line.starts_with('#'));
        let header = lines.next().map_or("", |(_, line)| line.trim());
        let separator = if header.contains(';') { ';' } else { ',' };
        let columns = columns(header, separator)?;
        let mut table = Self::default();
        let mut group = None;
        for (count, (line, text)) in lines.enumerate() {
            if count == ROWS_MAX {
                return Err(TableError::TooLong);
            }
            let row = row(line, text, &columns, separator)?;
            let same = row.setpoint.is_some() && group == row.setpoint;
            group = row.setpoint;
            table.take(line, &row, same)?;
        }
        Ok(table)
    }

    /// Enters a row; `same`: as a further reading of the point before.
    fn take(&mut self, line: usize, row: &Row, same: bool) -> Result<(), TableError> {
        match (row.setpoint, row.meter, row.readback) {
            (Some(setpoint), Some(meter), Some(readback)) => {
                let last = self.current_points.last_mut().filter(|_| same);
                if let Some(point) = last.filter(|point| point.setpoint == setpoint) {
                    point.reference.push(Text(meter));
                    point.readback.push(Text(readback));
                } else {
                    self.current_points.push(CurrentPoint {
                        setpoint,
                        reference: vec![Text(meter)],
                        readback: vec![Text(readback)],
                        spread: None,
                    });
                }
            }
            (_, None, None) => {}
            (None, _, _) => {
                let what = "a current without the setpoint that it belongs to; fill it in";
                return Err(TableError::Row { line, what });
            }
            (_, None, Some(_)) | (_, Some(_), None) => {
                let what = "a current needs the meter's reading and the sink's readback; fill both in, or neither";
                return Err(TableError::Row { line, what });
            }
        }
        match (row.meter_voltage, row.readback_voltage) {
            (Some(meter), Some(readback)) => match self.voltage_points.last_mut() {
                Some(point) if same => {
                    point.reference.push(Text(meter));
                    point.readback.push(Text(readback));
                }
                Some(_) | None => self.voltage_points.push(VoltagePoint {
                    reference: vec![Text(meter)],
                    readback: vec![Text(readback)],
                    spread: None,
                }),
            },
            (None, None) => {}
            (Some(_), None) | (None, Some(_)) => {
                let what = "a voltage needs the meter's reading and the sink's readback; fill both in, or neither";
                return Err(TableError::Row { line, what });
            }
        }
        Ok(())
    }
}

fn cells(line: &str, separator: char) -> impl Iterator<Item = &str> {
    line.split(separator)
        .map(|cell| cell.trim().trim_matches('"').trim())
}

fn columns(header: &str, separator: char) -> Result<Vec<Column>, TableError> {
    let mut columns: Vec<Column> = Vec::new();
    if header.is_empty() {
        return Err(TableError::Header {
            header: String::new(),
            missing: "every column",
        });
    }
    for name in cells(header, separator) {
        let wrong = |what| TableError::Column {
            column: name.to_owned(),
            what,
        };
        let lower = name.to_ascii_lowercase();
        let (what, unit) = lower
            .rsplit_once('_')
            .ok_or_else(|| wrong("without a unit"))?;
        let (unit, is_current) = match unit {
            "a" => ("A", true),
            "ma" => ("mA", true),
            "ua" => ("uA", true),
            "v" => ("V", false),
            "mv" => ("mV", false),
            "uv" => ("uV", false),
            _ => return Err(wrong("in a unit that is not A, mA, uA, V, mV or uV")),
        };
        let what = match (what, is_current) {
            ("setpoint", true) => What::Setpoint,
            ("meter", true) => What::Meter,
            ("readback", true) => What::Readback,
            ("meter", false) => What::MeterVoltage,
            ("readback", false) => What::ReadbackVoltage,
            _ => return Err(wrong("not known")),
        };
        if columns.iter().any(|column| column.what == what) {
            return Err(wrong("there twice"));
        }
        columns.push(Column {
            name: name.to_owned(),
            what,
            unit,
        });
    }
    let has = |what| columns.iter().any(|column| column.what == what);
    let lacks = |missing| TableError::Header {
        header: header.to_owned(),
        missing,
    };
    for (what, missing) in [
        (What::Setpoint, "the setpoint of the sink"),
        (What::Meter, "the meter's current"),
        (What::Readback, "the sink's current readback"),
    ] {
        if !has(what) {
            return Err(lacks(missing));
        }
    }
    if has(What::MeterVoltage) != has(What::ReadbackVoltage) {
        return Err(lacks("one of meter_v and readback_v"));
    }
    Ok(columns)
}

fn row(line: usize, text: &str, columns: &[Column], separator: char) -> Result<Row, TableError> {
    let mut row = Row::default();
    let mut given = cells(text, separator);
    for column in columns {
        let Some(cell) = given.next().filter(|cell| !cell.is_empty()) else {
            continue;
        };
        match column.what {
            What::Setpoint => row.setpoint = Some(value(line, column, cell, separator)?),
            What::Meter => row.meter = Some(value(line, column, cell, separator)?),
            What::Readback => row.readback = Some(value(line, column, cell, separator)?),
            What::MeterVoltage => row.meter_voltage = Some(value(line, column, cell, separator)?),
            What::ReadbackVoltage => {
                row.readback_voltage = Some(value(line, column, cell, separator)?);
            }
        }
    }
    if let Some(cell) = given.next().filter(|cell| !cell.is_empty()) {
        return Err(TableError::Cell {
            line,
            column: String::new(),
            cell: cell.to_owned(),
            what: "stands beyond the last column; give each cell a column",
        });
    }
    Ok(row)
}

fn value<T: Textual>(
    line: usize,
    column: &Column,
    cell: &str,
    separator: char,
) -> Result<T, TableError> {
    let wrong = |what| TableError::Cell {
        line,
        column: column.name.clone(),
        cell: cell.to_owned(),
        what,
    };
    let plain = if separator == ';' {
        cell.replace(',', ".")
    } else {
        cell.to_owned()
    };
    let is_number = plain.parse::<f64>().is_ok_and(f64::is_finite)
        && plain.bytes().any(|byte| byte.is_ascii_digit());
    if !is_number {
        return Err(wrong("is no number; correct or empty the cell"));
    }
    format!("{plain} {}", column.unit)
        .parse()
        .map_err(|_| wrong("cannot be told to a millionth, or is out of range; round it"))
}

#[cfg(test)]
mod tests;
