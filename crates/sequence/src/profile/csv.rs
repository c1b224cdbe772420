//! Rows of time and current from the text of a CSV.
//!
//! The header names one column of time and one of current, each with its unit: `time_s`,
//! `time (ms)`, `t [s]`, `current_a`, `I/mA`. Other columns are left alone. Fields are separated
//! by commas, semicolons or tabs; lines that begin with `#` are remarks. Numbers have a decimal
//! point and an exponent if they like.
//!
//! A recording has millions of lines, so [`Rows`] goes through the bytes once and keeps none of
//! them; only a line with quotes takes the long way through the general CSV reader.

use quantity::{Current, Span};

use super::number::{BadNumber, Scale};
use super::{Fault, Point, fault};

/// Most pairs of one profile that is drawn as it stands.
const POINTS_MOST: usize = 100_000;

/// A column: its place, its heading, its unit.
#[derive(Debug, Clone)]
struct Column {
    index: usize,
    heading: String,
    unit: &'static str,
    scale: Scale,
}

const TIME_NAMES: &[&str] = &["time", "t"];
const CURRENT_NAMES: &[&str] = &["current", "i"];
/// Units of a time, with their microseconds.
const TIME_UNITS: &[(&str, u64)] = &[
    ("s", 1_000_000),
    ("ms", 1_000),
    ("us", 1),
    ("µs", 1),
    ("min", 60_000_000),
    ("h", 3_600_000_000),
];
/// Units of a current, with their nanoamperes.
const CURRENT_UNITS: &[(&str, u64)] = &[
    ("A", 1_000_000_000),
    ("mA", 1_000_000),
    ("uA", 1_000),
    ("µA", 1_000),
];

/// One line of a CSV.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Row {
    /// Its line in the text, from 1.
    pub(crate) line: usize,
    /// Its time in microseconds.
    pub(crate) time: i64,
    /// Its current in nanoamperes.
    pub(crate) current: i64,
}

/// The rows of a CSV, one after the other.
#[derive(Debug, Clone)]
pub(crate) struct Rows<'a> {
    rest: &'a [u8],
    /// The line that was read last, from 1.
    line: usize,
    delimiter: u8,
    fields: usize,
    time: Column,
    current: Column,
}

impl<'a> Rows<'a> {
    /// The rows below a header.
    ///
    /// # Errors
    /// A header without known columns and units. The index of the fault is the line's number.
    pub(crate) fn new(text: &'a str) -> Result<Self, Fault> {
        let text = text.trim_start_matches('\u{feff}');
        let mut rest = text.as_bytes();
        let mut line = 0;
        let header = loop {
            let Some(next) = take_line(&mut rest) else {
                break &[][..];
            };
            line += 1;
            if !is_left_out(next) {
                break next;
            }
        };
        let header = std::str::from_utf8(header).unwrap_or_default();
        let delimiter = delimiter(header);
        let headings = by_csv_reader(header.as_bytes(), delimiter);
        let line = line.max(1);
        let columns = (line, &headings);
        Ok(Self {
            rest,
            line,
            delimiter,
            fields: headings.len(),
            time: column(columns, TIME_NAMES, TIME_UNITS, "time", "time_s")?,
            current: column(
                columns,
                CURRENT_NAMES,
                CURRENT_UNITS,
                "current",
                "current_a",
            )?,
        })
    }

    /// About how many rows are left, for a vector's first size.
    pub(crate) const fn about(&self) -> usize {
        self.rest.len() / 16
    }

    fn row(&self, line: &[u8]) -> Result<Row, Fault> {
        let (mut time, mut current, mut fields) = (&[][..], &[][..], 0);
        for (index, field) in line.split(|&byte| byte == self.delimiter).enumerate() {
            if index == self.time.index {
                time = field;
            } else if index == self.current.index {
                current = field;
            }
            fields = index + 1;
        }
        let quoted = |field: &[u8]| field.contains(&b'"');
        if quoted(time) || quoted(current) || fields != self.fields && quoted(line) {
            let record = by_csv_reader(line, self.delimiter);
            let field = |column: &Column| record.get(column.index).unwrap_or("").as_bytes();
            return self.values(field(&self.time), field(&self.current), record.len());
        }
        self.values(time, current, fields)
    }

    fn values(&self, time: &[u8], current: &[u8], fields: usize) -> Result<Row, Fault> {
        if fields != self.fields {
            let message = format!("line {} has not as many fields as the header", self.line);
            return Err(fault(self.line, message, "give every line the same fields"));
        }
        Ok(Row {
            line: self.line,
            time: self.value(&self.time, time)?,
            current: self.value(&self.current, current)?,
        })
    }

    fn value(&self, column: &Column, field: &[u8]) -> Result<i64, Fault> {
        let field = field.trim_ascii();
        column.scale.read(field).map_err(|bad| {
            let hint = match bad {
                BadNumber::OutOfRange => "write a number within the range",
                BadNumber::NotANumber if field.contains(&b',') => {
                    "write a decimal point, not a comma"
                }
                BadNumber::NotANumber => "write a decimal number",
            };
            self.refused(column, field, hint)
        })
    }

    fn refused(&self, column: &Column, field: &[u8], hint: &str) -> Fault {
        let message = format!(
            "line {}, column `{}`: `{}` is no number of {}",
            self.line,
            column.heading,
            String::from_utf8_lossy(field),
            column.unit
        );
        fault(self.line, message, hint)
    }
}

impl Iterator for Rows<'_> {
    type Item = Result<Row, Fault>;

    fn next(&mut self) -> Option<Self::Item> {
        loop {
            let line = take_line(&mut self.rest)?;
            self.line += 1;
            if !is_left_out(line) {
                return Some(self.row(line));
            }
        }
    }
}

/// Takes the next line off a text, without its end.
fn take_line<'a>(rest: &mut &'a [u8]) -> Option<&'a [u8]> {
    if rest.is_empty() {
        return None;
    }
    let end = rest.iter().position(|&byte| byte == b'\n');
    let (line, after) = rest.split_at(end.unwrap_or(rest.len()));
    *rest = after.get(1..).unwrap_or_default();
    Some(line)
}

/// A remark or an empty line.
fn is_left_out(line: &[u8]) -> bool {
    match line.first() {
        Some(b'#') | None => true,
        Some(first) => first.is_ascii_whitespace() && line.trim_ascii().is_empty(),
    }
}

/// One line by the general reader, which knows quotes; no field if it cannot read it.
fn by_csv_reader(line: &[u8], delimiter: u8) -> ::csv::StringRecord {
    let mut record = ::csv::StringRecord::new();
    let read = ::csv::ReaderBuilder::new()
        .delimiter(delimiter)
        .has_headers(false)
        .trim(::csv::Trim::All)
        .from_reader(line)
        .read_record(&mut record);
    if read.is_err() {
        record.clear();
    }
    record
}

/// The points that a CSV gives, rounded to whole microamperes, which is finer than any sink.
///
/// # Errors
/// A header without known columns and units, a field that is no number, too many lines. The
/// index of the fault is the line's number in the text.
pub(crate) fn points(text: &str) -> Result<Vec<Point>, Fault> {
    const NANO_PER_MICRO: i64 = 1_000;
    let rows = Rows::new(text)?;
    let time = rows.time.clone();
    let mut points = Vec::with_capacity(rows.about().min(POINTS_MOST));
    for row in rows {
        let row = row?;
        if points.len() == POINTS_MOST {
            let message = format!("more than {POINTS_MOST} lines");
            let hint = "add `import` to the profile, which thins it, or split it into steps";
            return Err(fault(row.line, message, hint));
        }
        let span = u64::try_from(row.time).map_err(|_| {
            let message = format!(
                "line {}, column `{}`: a time below zero",
                row.line, time.heading
            );
            fault(row.line, message, "let the times begin at 0")
        })?;
        let half = NANO_PER_MICRO / 2 * row.current.signum();
        points.push(Point {
            time: Span::from_micros(span),
            current: Current::from_microamperes((row.current + half) / NANO_PER_MICRO),
        });
    }
    Ok(points)
}

fn delimiter(header: &str) -> u8 {
    [b';', b'\t']
        .into_iter()
        .find(|&byte| header.contains(char::from(byte)))
        .unwrap_or(b',')
}

/// Splits `time_s`, `time (s)`, `time [s]`, `t/s` into name and unit.
fn name_and_unit(heading: &str) -> Option<(&str, &str)> {
    let heading = heading.trim();
    if let Some(open) = heading.find(['(', '[']) {
        let (name, rest) = heading.split_at(open);
        let unit = rest
            .trim_start_matches(['(', '['])
            .trim_end_matches([')', ']']);
        return Some((name.trim(), unit.trim()));
    }
    let (name, unit) = heading
        .split_once('/')
        .or_else(|| heading.rsplit_once('_'))?;
    Some((name.trim(), unit.trim()))
}

fn column(
    (line, header): (usize, &::csv::StringRecord),
    names: &[&str],
    units: &[(&'static str, u64)],
    what: &str,
    example: &str,
) -> Result<Column, Fault> {
    let listed = units
        .iter()
        .map(|&(unit, _)| unit)
        .collect::<Vec<_>>()
        .join(", ");
    let is_name = |name: &str| names.iter().any(|known| known.eq_ignore_ascii_case(name));
    let mut found = None;
    for (index, heading) in header.iter().enumerate() {
        let Some((name, unit)) = name_and_unit(heading) else {
            if is_name(heading) {
                let message = format!("the column `{heading}` has no unit");
                let hint = format!("name it `{example}`; units of a {what}: {listed}");
                return Err(fault(line, message, &hint));
            }
            continue;
        };
        if !is_name(name) {
            continue;
        }
        // `current_a` and `current_ma` are how columns are named; nothing between them differs
        // in case only.
        let known = units
            .iter()
            .find(|(known, _)| known.eq_ignore_ascii_case(unit));
        let Some(&(unit, scale)) = known else {
            let message = format!("the column `{heading}` has the unknown unit `{unit}`");
            let hint = format!("name it `{example}`; units of a {what}: {listed}");
            return Err(fault(line, message, &hint));
        };
        if found.is_some() {
            let message = format!("more than one column of {what}");
            return Err(fault(line, message, "keep one"));
        }
        found = Some(Column {
            index,
            heading: heading.to_owned(),
            unit,
            scale: Scale::new(scale),
        });
    }
    found.ok_or_else(|| {
        let headings = header.iter().collect::<Vec<_>>().join(", ");
        let message = format!("no column of {what} among `{headings}`");
        fault(
            line,
            message,
            &format!("give the {what} a heading such as `{example}`"),
        )
    })
}
