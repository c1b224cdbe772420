//! Points from the text of a CSV.
//!
//! The header names one column of time and one of current, each with its unit: `time_s`,
//! `time (ms)`, `t [s]`, `current_a`, `I/mA`. Other columns are left alone. Fields are separated
//! by commas, semicolons or tabs; lines that begin with `#` are remarks. Numbers have a decimal
//! point, an exponent if they like, and are rounded to whole microseconds and microamperes,
//! which is finer than any sink.

use quantity::{Current, Quantity, Span};

use super::{Fault, Point, fault};

/// Most pairs of one profile.
const POINTS_MOST: usize = 100_000;

/// A column: its place, its unit.
#[derive(Debug, Clone, Copy)]
struct Column {
    index: usize,
    unit: &'static str,
    /// The unit in the dimension's own one (seconds, amperes).
    scale: f64,
}

const TIME_NAMES: &[&str] = &["time", "t"];
const CURRENT_NAMES: &[&str] = &["current", "i"];
const TIME_UNITS: &[(&str, f64)] = &[
    ("s", 1.0),
    ("ms", 1e-3),
    ("us", 1e-6),
    ("µs", 1e-6),
    ("min", 60.0),
    ("h", 3600.0),
];
const CURRENT_UNITS: &[(&str, f64)] = &[("A", 1.0), ("mA", 1e-3), ("uA", 1e-6), ("µA", 1e-6)];

/// The points that a CSV gives.
///
/// # Errors
/// A header without known columns and units, a field that is no number, too many lines. The
/// index of the fault is the line's number in the text.
pub(crate) fn points(text: &str) -> Result<Vec<Point>, Fault> {
    let text = text.trim_start_matches('\u{feff}');
    let mut reader = ::csv::ReaderBuilder::new()
        .delimiter(delimiter(text))
        .comment(Some(b'#'))
        .trim(::csv::Trim::All)
        .from_reader(text.as_bytes());
    let header = reader
        .headers()
        .map_err(|error| fault(1, error.to_string(), "check the header line"))?
        .clone();
    let time = column(&header, TIME_NAMES, TIME_UNITS, "time", "time_s")?;
    let current = column(
        &header,
        CURRENT_NAMES,
        CURRENT_UNITS,
        "current",
        "current_a",
    )?;
    let mut points = Vec::new();
    for record in reader.records() {
        let record = record.map_err(|error| {
            let line = error.position().map_or(0, ::csv::Position::line);
            let message = format!("line {line} has not as many fields as the header");
            fault(
                usize::try_from(line).unwrap_or(0),
                message,
                "give every line the same fields",
            )
        })?;
        let line = record.position().map_or(0, ::csv::Position::line);
        let line = usize::try_from(line).unwrap_or(usize::MAX);
        if points.len() == POINTS_MOST {
            let message = format!("more than {POINTS_MOST} lines");
            return Err(fault(
                line,
                message,
                "thin the profile, or split it into several steps",
            ));
        }
        points.push(Point {
            time: value(&record, time, line, Span::from_seconds)?,
            current: value(&record, current, line, Current::from_amperes)?,
        });
    }
    Ok(points)
}

fn delimiter(text: &str) -> u8 {
    let header = text
        .lines()
        .find(|line| !line.trim().is_empty() && !line.starts_with('#'))
        .unwrap_or("");
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
    header: &::csv::StringRecord,
    names: &[&str],
    units: &[(&'static str, f64)],
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
                return Err(fault(1, message, &hint));
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
            return Err(fault(1, message, &hint));
        };
        if found.is_some() {
            let message = format!("more than one column of {what}");
            return Err(fault(1, message, "keep one"));
        }
        found = Some(Column { index, unit, scale });
    }
    found.ok_or_else(|| {
        let headings = header.iter().collect::<Vec<_>>().join(", ");
        let message = format!("no column of {what} among `{headings}`");
        fault(
            1,
            message,
            &format!("give the {what} a heading such as `{example}`"),
        )
    })
}

fn value<T: Quantity>(
    record: &::csv::StringRecord,
    column: Column,
    line: usize,
    convert: impl Fn(f64) -> Result<T, quantity::NotFinite>,
) -> Result<T, Fault> {
    let field = record.get(column.index).unwrap_or("");
    let refused = |hint: &str| {
        let unit = column.unit;
        fault(
            line,
            format!("line {line}: `{field}` is no number of {unit}"),
            hint,
        )
    };
    if field.contains(',') {
        return Err(refused("write a decimal point, not a comma"));
    }
    // "inf" and "nan" are numbers to the standard library; the conversion refuses both.
    let number: f64 = field
        .parse()
        .map_err(|_| refused("write a decimal number"))?;
    convert(number * column.scale).map_err(|_| refused("write a number within the range"))
}
