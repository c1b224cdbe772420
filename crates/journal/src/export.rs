//! A record as a table, one row a readback; the table as CSV.
//!
//! Streams segment by segment, so any record fits any machine. What the columns are is in
//! `columns`; another format takes the same rows and columns.

use std::io::Write;

use quantity::{Charge, Energy, HostTime, SinkTime, Span, Voltage};
use sequence::plan::{Op, Plan};
use sequencer::event::Finding;
use sink::correction::Correction;
use wire::{Counters, Reading};

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

/// Time, charge and energy since the first readback, over restarts of the sink.
struct Account {
    correction: Correction,
    last: Option<(SinkTime, HostTime)>,
    /// Sink time from which `elapsed_before` counts on.
    from: SinkTime,
    elapsed_before: Span,
    elapsed: Span,
    /// Counters from which charge and energy count on.
    base: Option<Counters>,
    before: (Charge, Energy),
    total: (Charge, Energy),
    /// Nominal voltage times time since `base`, for the mean.
    volt_micros: i128,
    micros: i128,
}

impl Account {
    fn new(correction: Correction) -> Self {
        Self {
            correction,
            last: None,
            from: SinkTime::ZERO,
            elapsed_before: Span::ZERO,
            elapsed: Span::ZERO,
            base: None,
            before: (Charge::ZERO, Energy::ZERO),
            total: (Charge::ZERO, Energy::ZERO),
            volt_micros: 0,
            micros: 0,
        }
    }

    fn row<'a>(
        &'a mut self,
        number: u64,
        at: HostTime,
        reading: &'a Reading,
        label: &'a str,
    ) -> Row<'a> {
        match self.last {
            None => self.from = reading.time,
            Some((time, last_at)) if reading.time < time => self.restart(reading, at, last_at),
            Some((time, _)) => {
                let span = i128::from(reading.time.saturating_since(time).micros());
                self.micros += span;
                self.volt_micros += span * i128::from(reading.values.voltage.microvolts());
            }
        }
        self.last = Some((reading.time, at));
        let since = reading.time.saturating_since(self.from);
        self.elapsed = self.elapsed_before.saturating_add(since);
        let counted = reading.counters.is_some();
        if let Some(counters) = reading.counters {
            self.count(&counters);
        }
        Row {
            number,
            at,
            elapsed: self.elapsed,
            reading,
            charge: counted.then_some(self.total.0),
            energy: counted.then_some(self.total.1),
            label,
            correction: &self.correction,
        }
    }

    /// The sink has started anew: clock and counters from zero. The host's clock bridges the
    /// time; no charge flowed, since a sink is off at power-up.
    fn restart(&mut self, reading: &Reading, at: HostTime, last_at: HostTime) {
        self.elapsed_before = self.elapsed.saturating_add(at.saturating_since(last_at));
        self.from = reading.time;
        self.before = self.total;
        self.base = reading.counters.map(|counters| Counters {
            charge: Charge::ZERO,
            energy: Energy::ZERO,
            ..counters
        });
        self.volt_micros = 0;
        self.micros = 0;
    }

    fn count(&mut self, counters: &Counters) {
        let base = *self.base.get_or_insert(*counters);
        let over = counters.time.saturating_since(base.time);
        let charge = counters.charge.saturating_sub(base.charge);
        let energy = counters.energy.saturating_sub(base.energy);
        let mean = self.volt_micros.checked_div(self.micros).unwrap_or(0);
        let mean = Voltage::from_microvolts(i64::try_from(mean).unwrap_or(0));
        let true_charge = self.correction.charge_from_counter(charge, over);
        let true_energy = self
            .correction
            .energy_from_counter(energy, charge, mean, over);
        self.total = (
            self.before.0.saturating_add(true_charge),
            self.before.1.saturating_add(true_energy),
        );
    }
}
