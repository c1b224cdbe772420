//! A record as a table, one row a readback; the table as CSV.
//!
//! Streams segment by segment, so any record fits any machine. What the columns are is in
//! `columns`; another format takes the same rows and columns.

use std::io::Write;

use sequence::plan::{Op, Plan};
use sequencer::event::Finding;

use crate::account::Account;
use crate::columns::{COLUMNS, Cell, Row};
use crate::{Body, Entry, JournalError, Record};

/// How far an export has come.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Progress {
    /// Segments done.
    pub segments_done: u64,
    /// Segments in all.
    pub segments: u64,
    /// Rows written.
    pub rows: u64,
}

/// Goes through every readback of a record as a row of the table, in order. Returns the number
/// of rows. `progress` is called after each segment.
///
/// # Errors
/// What `each` returns; else what is wrong with the record. A torn end of an unsealed record is
/// no error.
pub fn for_each_row<E: From<JournalError>>(
    record: &Record,
    mut each: impl FnMut(&Row<'_>) -> Result<(), E>,
    mut progress: impl FnMut(Progress),
) -> Result<u64, E> {
    let plan = &record.manifest().plan;
    let mut account = Account::new(plan.correction);
    let mut label = "";
    let segments = record.segments().len() as u64;
    let mut state = Progress {
        segments_done: 0,
        segments,
        rows: 0,
    };
    for chunk in record.chunks()? {
        let chunk = chunk?;
        let mut others = chunk.others.iter().peekable();
        for index in 0..chunk.readings.len() {
            let (Some(reading), Some(&number), Some(&at)) = (
                chunk.readings.get(index),
                chunk.readings.number.get(index),
                chunk.readings.at.get(index),
            ) else {
                break;
            };
            while let Some(other) = others.next_if(|other| other.number < number) {
                label = label_after(plan, other).unwrap_or(label);
            }
            each(&account.row(number, at, &reading, label))?;
            state.rows += 1;
        }
        for other in others {
            label = label_after(plan, other).unwrap_or(label);
        }
        state.segments_done += 1;
        progress(state);
    }
    Ok(state.rows)
}

/// Writes every readback of a record as CSV (RFC 4180), true values by the record's own
/// correction beside the nominal ones. Returns the number of rows. `progress` is called after
/// each segment.
///
/// # Errors
/// [`JournalError::Export`] if the target takes no more; else what is wrong with the record. A
/// torn end of an unsealed record is no error.
pub fn export_csv(
    record: &Record,
    target: &mut dyn Write,
    progress: impl FnMut(Progress),
) -> Result<u64, JournalError> {
    let mut csv = csv::Writer::from_writer(target);
    // An error of the target keeps its kind, so that a reader who closes the pipe can be told
    // from a full disk.
    let refused = |error: csv::Error| JournalError::Export(error.into());
    csv.write_record(COLUMNS.iter().map(|column| column.name))
        .map_err(refused)?;
    let mut text = Vec::new();
    let write_row = |row: &Row<'_>| {
        for column in COLUMNS {
            write_cell(&mut text, (column.cell)(row));
            csv.write_field(&text).map_err(refused)?;
            text.clear();
        }
        csv.write_record(None::<&[u8]>).map_err(refused)
    };
    let rows = for_each_row(record, write_row, progress)?;
    csv.flush().map_err(JournalError::Export)?;
    Ok(rows)
}

/// The label from here on, if the entry says that a step began.
fn label_after<'a>(plan: &'a Plan, entry: &Entry) -> Option<&'a str> {
    let Body::Finding(Finding::StepBegan { op, .. }) = &entry.body else {
        return None;
    };
    let op = plan.ops.get(usize::try_from(*op).ok()?)?;
    let label = match op {
        Op::Step(step) => step.label,
        Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
    };
    let text = label
        .and_then(|label| usize::try_from(label).ok())
        .and_then(|label| plan.labels.get(label));
    Some(text.map_or("", String::as_str))
}

fn write_cell(text: &mut Vec<u8>, cell: Cell<'_>) {
    let mut digits = itoa::Buffer::new();
    match cell {
        Cell::Empty => {}
        Cell::Whole(value) => text.extend_from_slice(digits.format(value).as_bytes()),
        Cell::Text(words) => text.extend_from_slice(words.as_bytes()),
        Cell::Decimal { scaled, decimals } => {
            if scaled < 0 {
                text.push(b'-');
            }
            let unit = 10_u64.pow(u32::from(decimals.min(18)));
            let magnitude = scaled.unsigned_abs();
            text.extend_from_slice(digits.format(magnitude / unit).as_bytes());
            text.push(b'.');
            let fraction = digits.format(magnitude % unit).as_bytes();
            text.extend(std::iter::repeat_n(
                b'0',
                usize::from(decimals) - fraction.len(),
            ));
            text.extend_from_slice(fraction);
        }
    }
}
