//! Profile import: a measured current becomes the fewest steps a sink can carry out.
//!
//! A recording has up to ten million rows; a sink has a queue of some steps, a tick and a
//! converter. Four stages lie between, each a module, and a row passes through them once:
//!
//! 1. `tick`: rows are cut at the sink's ticks. A change within one tick becomes the tick's mean.
//! 2. `shape`: pieces join into constant currents and straight lines as long as these stay within
//!    the stated error of every sample (a cone that narrows with each piece decides, so nothing
//!    is looked at twice; an edge waits for one piece more to see which tick it belongs to).
//! 3. `balance`: currents become settings of the converter. What rounding takes from one step is
//!    carried into the next; what is left at the end of a cycle goes into one step that is split
//!    between two neighbouring settings. A sleep current under the floor is drawn as a rest, and
//!    its charge goes the same way.
//! 4. Cycles: told the period, the recording is cut into cycles, each with its own balance; where
//!    they agree, one cycle stands for all of them.
//!
//! Invariants:
//! - No current is left further from a sample than the stated error, but for what the report
//!   names: sleep under the floor, edges within a tick, clipped peaks; and below twice the floor,
//!   where a tick may be drawn as none, since no smaller setting could settle the charge.
//! - The charge of each cycle is kept to one converter step for one tick; the report says what
//!   is left. All sums are whole numbers.
//! - Nothing is clipped unless it was asked for, and then with its charge.
//!
//! What it deliberately does not do: it guesses no period, no unit and no limit.

mod balance;
mod cycle;
mod levels;
mod shape;
mod tick;

use quantity::{Charge, Current, Quantity, Span};
use serde::{Deserialize, Serialize};
use sink::converter::Converter;
use sink::correction::Correction;

use crate::facts::Facts;
use crate::profile::{Fault, Row, Rows};

pub use crate::profile::{Interpolation, Segment};

use cycle::{Cycle, Fold};
use levels::Levels;
use shape::Shaper;
use tick::Ticker;

/// Most rows of a recording.
pub const ROWS_MOST: usize = 10_000_000;

const NANO_PER_MICRO: i64 = 1_000;
/// Nanoampere-microseconds, twice, in a microcoulomb: a straight line's charge has halves.
const HALVES_PER_MICROCOULOMB: i128 = 2_000_000_000;

/// What the sink that is to draw a profile can do.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Limits {
    /// Its sampling period.
    pub tick: Span,
    /// Its setting converter.
    pub converter: Converter,
    /// Least current it can hold.
    pub floor: Current,
    /// Most current it may draw.
    pub largest: Current,
    /// Its calibration.
    pub correction: Correction,
}

impl Limits {
    /// Those of a sink of which the facts are known.
    pub const fn of(facts: &Facts) -> Self {
        Self {
            tick: facts.tick,
            converter: facts.converter,
            floor: facts.current_floor,
            largest: facts.current_max,
            correction: facts.correction,
        }
    }
}

/// What is asked of an import.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct ImportOptions {
    /// Largest error of the current, at least one step of the converter.
    pub error: Current,
    /// The period of the recording's cycle, if it has one.
    pub period: Option<Span>,
    /// The current at which peaks are cut; `None`: none is.
    pub clip_above: Option<Current>,
}

/// A recording as a sink can draw it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Imported {
    /// The steps of the recording, or of one cycle of it.
    pub segments: Vec<Segment>,
    /// How often they are to be gone through: the number of cycles where they agree, else 1.
    pub turns: u64,
    /// What came of it.
    pub report: ImportReport,
}

/// What an import kept and what it lost.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ImportReport {
    /// Rows of the recording.
    pub rows: u64,
    /// How long it lasts.
    pub duration: Span,
    /// Steps that it became.
    pub steps: u64,
    /// Whole cycles in it; 1 without a period.
    pub cycles: u64,
    /// The charge that was measured, in all whole cycles, after clipping.
    pub measured: Charge,
    /// The charge that the steps draw in the same time.
    pub planned: Charge,
    /// The largest difference of the two in one cycle.
    pub charge_error: Charge,
    /// Sleep under the sink's floor.
    pub below_floor: BelowFloor,
    /// Edges between two ticks, which moved by up to half a tick.
    pub edges_moved: u64,
    /// Ticks that hold more than an edge: their mean is drawn.
    pub ticks_averaged: u64,
    /// The largest departure of a sample from the mean that is drawn for its tick.
    pub tick_departure: Current,
    /// Peaks that were cut.
    pub clipped: Clipped,
    /// The first cycle (from 1) that departs from the cycle before by more than the error, so
    /// that no cycle stands for the others.
    pub departing_cycle: Option<u64>,
    /// What lies behind the last whole cycle and is left out.
    pub tail: Span,
}

/// Sleep under a sink's floor.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct BelowFloor {
    /// How long, in one pass of the steps.
    pub time: Span,
    /// Its charge, which is drawn within other steps.
    pub charge: Charge,
    /// Its largest mean current.
    pub largest: Current,
}

/// Peaks that were cut.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Clipped {
    /// Rows above the limit.
    pub rows: u64,
    /// The largest current among them.
    pub largest: Current,
    /// The charge that is not drawn.
    pub charge: Charge,
}

/// A recording that cannot be imported.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum ImportError {
    /// The text is no recording.
    #[error("{message}; {hint}")]
    Text {
        /// The line, from 1.
        line: usize,
        /// What is wrong.
        message: String,
        /// What would mend it.
        hint: String,
    },
    /// An error that the converter alone exceeds.
    #[error(
        "an error of {error} is less than the {step} of one step of the converter; allow {step} \
         or more, or take a sink with a larger sense resistor"
    )]
    Error {
        /// The error asked for.
        error: Current,
        /// One step of the converter.
        step: Current,
    },
    /// A period that is none for this sink or this recording.
    #[error("{message}; {hint}")]
    Period {
        /// What is wrong.
        message: String,
        /// What would mend it.
        hint: String,
        /// The period.
        found: Span,
        /// What it was held against.
        limit: Span,
    },
    /// A peak that the sink cannot draw and that nobody allowed to cut.
    #[error(
        "line {line}: the recording reaches {current}, above the {largest} that the sink can \
         draw; add `clip_above` to cut its peaks, or take a larger sink"
    )]
    Peak {
        /// Where the largest peak is.
        line: usize,
        /// Its current.
        current: Current,
        /// What the sink can draw.
        largest: Current,
    },
}

impl From<Fault> for ImportError {
    fn from(fault: Fault) -> Self {
        Self::Text {
            line: fault.index,
            message: fault.message,
            hint: fault.hint,
        }
    }
}

fn text_error(line: usize, message: String, hint: &str) -> ImportError {
    ImportError::Text {
        line,
        message,
        hint: hint.to_owned(),
    }
}

/// Makes the fewest steps of a recording.
///
/// The times of the recording count from its first row.
///
/// # Errors
/// [`ImportError`] with the line, or with the option that does not fit.
pub fn import(
    text: &str,
    interpolation: Interpolation,
    limits: &Limits,
    options: &ImportOptions,
) -> Result<Imported, ImportError> {
    let step = limits.converter.step();
    if options.error < step {
        let error = options.error;
        return Err(ImportError::Error { error, step });
    }
    check_period(limits, options)?;
    let mut pass = Pass::new(interpolation, limits, options);
    for row in Rows::new(text)? {
        pass.row(row?)?;
    }
    pass.finish()
}

fn check_period(limits: &Limits, options: &ImportOptions) -> Result<(), ImportError> {
    let Some(period) = options.period else {
        return Ok(());
    };
    let tick = limits.tick;
    if period > Span::ZERO && period.micros().is_multiple_of(tick.micros().max(1)) {
        return Ok(());
    }
    Err(ImportError::Period {
        message: format!("a period of {period} is no whole number of the sink's ticks of {tick}"),
        hint: format!("write a multiple of {tick}"),
        found: period,
        limit: tick,
    })
}

/// One pass over the rows.
struct Pass<'a> {
    interpolation: Interpolation,
    limits: &'a Limits,
    options: &'a ImportOptions,
    clip: i64,
    first: Option<i64>,
    before: Option<Row>,
    /// The row with the largest current.
    peak: Option<Row>,
    /// Twice the clipped charge.
    cut: i128,
    /// When the cycle at work ends, in microseconds from the beginning.
    cycle_end: Option<i64>,
    ticker: Ticker,
    shaper: Shaper,
    cycles: Vec<Cycle>,
    report: ImportReport,
}

impl<'a> Pass<'a> {
    fn new(interpolation: Interpolation, limits: &'a Limits, options: &'a ImportOptions) -> Self {
        // A step of room for the converter, which sets the next current above or below.
        let room = nano(options.error) - nano(limits.converter.step());
        let tick = i64::try_from(limits.tick.micros())
            .unwrap_or(i64::MAX)
            .max(1);
        Self {
            interpolation,
            limits,
            options,
            clip: options.clip_above.map_or(i64::MAX, nano),
            first: None,
            before: None,
            peak: None,
            cut: 0,
            cycle_end: options
                .period
                .map(|period| i64::try_from(period.micros()).unwrap_or(i64::MAX)),
            ticker: Ticker::new(tick, room),
            shaper: Shaper::new(tick, room),
            cycles: Vec::new(),
            report: ImportReport::default(),
        }
    }

    fn row(&mut self, mut row: Row) -> Result<(), ImportError> {
        self.report.rows += 1;
        if self.report.rows > u64::try_from(ROWS_MOST).unwrap_or(u64::MAX) {
            let message = format!("more than {ROWS_MOST} rows");
            return Err(text_error(
                row.line,
                message,
                "import a part of the recording",
            ));
        }
        if row.current < -nano(self.options.error) {
            let message = format!(
                "line {}: {} flows into the DUT, and a sink only draws",
                row.line,
                micro(row.current)
            );
            let hint = "turn the sign round, or leave the charging out of the recording";
            return Err(text_error(row.line, message, hint));
        }
        row.time -= *self.first.get_or_insert(row.time);
        if self.peak.is_none_or(|peak| row.current > peak.current) {
            self.peak = Some(row);
        }
        let Some(before) = self.before.replace(row) else {
            return Ok(());
        };
        let span = row.time - before.time;
        if span < 0 || (span == 0 && self.interpolation == Interpolation::Steps) {
            let message = format!(
                "line {}: the time is not after the time before it",
                row.line
            );
            return Err(text_error(row.line, message, "sort the rows by time"));
        }
        let to = match self.interpolation {
            Interpolation::Steps => before.current,
            Interpolation::Linear => row.current,
        };
        self.piece(before.time, span, before.current, to);
        Ok(())
    }

    /// A straight line between two rows, cut at the limit and at the ends of cycles.
    fn piece(&mut self, begins: i64, span: i64, from: i64, to: i64) {
        let (mut from, mut to) = (from, to);
        if from > self.clip || to > self.clip {
            self.report.clipped.rows += u64::from(from > self.clip);
            let above = (from - self.clip).max(0) + (to - self.clip).max(0);
            self.cut += i128::from(above) * i128::from(span);
            from = from.min(self.clip);
            to = to.min(self.clip);
        }
        let (mut begins, mut span) = (begins, span);
        while let Some(end) = self.cycle_end.filter(|&end| begins + span >= end) {
            let part = end - begins;
            let middle = tick::between(from, to, part, span);
            self.straight(part, from, middle);
            self.close_cycle();
            let period = end / i64::try_from(self.cycles.len()).unwrap_or(1).max(1);
            self.cycle_end = Some(end.saturating_add(period));
            (begins, span, from) = (end, span - part, middle);
        }
        self.straight(span, from, to);
    }

    fn straight(&mut self, span: i64, from: i64, to: i64) {
        let shaper = &mut self.shaper;
        self.ticker
            .push(span, from, to, &mut |piece| shaper.push(piece));
    }

    fn close_cycle(&mut self) {
        let shaper = &mut self.shaper;
        let rest = self.ticker.flush(&mut |piece| shaper.push(piece));
        self.cycles.push(self.shaper.close(rest));
    }

    fn finish(mut self) -> Result<Imported, ImportError> {
        self.check_peak()?;
        let line = self.before.map_or(1, |row| row.line);
        let lasts = self.before.map_or(0, |row| row.time);
        if self.report.rows < 2 || lasts < self.ticker.tick() {
            let message = "the recording lasts no tick of the sink".to_owned();
            return Err(text_error(
                line,
                message,
                "give at least two rows with their times",
            ));
        }
        let duration = Span::from_micros(u64::try_from(lasts).unwrap_or(0));
        match self.options.period {
            None => self.close_cycle(),
            Some(period) if self.cycles.is_empty() => {
                return Err(ImportError::Period {
                    message: format!("the recording of {duration} is shorter than the period"),
                    hint: "record a whole cycle, or leave `period` out".to_owned(),
                    found: period,
                    limit: duration,
                });
            }
            Some(period) => {
                self.report.tail = Span::from_micros(duration.micros() % period.micros());
            }
        }
        self.report.duration = duration;
        self.report.clipped.charge = charge(self.cut);
        if self.report.clipped.rows > 0 {
            self.report.clipped.largest = self.peak.map_or(Current::ZERO, |row| micro(row.current));
        }
        Ok(self.fold())
    }

    fn check_peak(&self) -> Result<(), ImportError> {
        let (Some(peak), largest) = (self.peak, self.limits.largest) else {
            return Ok(());
        };
        let current = micro(peak.current).min(self.options.clip_above.unwrap_or(Current::MAX));
        if current > largest {
            let line = peak.line;
            return Err(ImportError::Peak {
                line,
                current,
                largest,
            });
        }
        Ok(())
    }

    /// One cycle for all where they agree, else one after the other.
    fn fold(self) -> Imported {
        let mut report = self.report;
        report.cycles = u64::try_from(self.cycles.len()).unwrap_or(u64::MAX);
        for cycle in &self.cycles {
            report.edges_moved += cycle.edges_moved;
            report.ticks_averaged += cycle.ticks_averaged;
            report.tick_departure = report.tick_departure.max(micro(cycle.tick_departure));
        }
        let levels = Levels::new(self.limits);
        let tick = self.ticker.tick();
        let measured: i128 = self.cycles.iter().map(|cycle| cycle.drawn).sum();
        let error = nano(self.options.error);
        let (cycles, turns) = match cycle::fold(self.cycles, error, tick) {
            Fold::Same(cycle, turns) => (vec![cycle], turns),
            Fold::Departing(cycles, at) => {
                report.departing_cycle = Some(at);
                (cycles, 1)
            }
        };
        let mut balance = balance::Balance::new(&levels, tick);
        let (mut planned, mut worst) = (0_i128, 0_i128);
        for cycle in &cycles {
            let left = balance.cycle(cycle);
            planned += cycle.drawn - left;
            worst = worst.max(left.abs());
        }
        report.measured = charge(measured);
        report.planned = charge(planned.saturating_mul(i128::from(turns)));
        report.charge_error = charge(worst);
        report.below_floor = balance.below_floor();
        let segments = balance.segments();
        report.steps = u64::try_from(segments.len()).unwrap_or(u64::MAX);
        Imported {
            segments,
            turns,
            report,
        }
    }
}

fn nano(current: Current) -> i64 {
    current.microamperes().saturating_mul(NANO_PER_MICRO)
}

fn micro(nanoamperes: i64) -> Current {
    let half = NANO_PER_MICRO / 2 * nanoamperes.signum();
    Current::from_microamperes((nanoamperes.saturating_add(half)) / NANO_PER_MICRO)
}

/// From twice the nanoampere-microseconds, to the nearest microcoulomb.
fn charge(twice: i128) -> Charge {
    let half = HALVES_PER_MICROCOULOMB / 2 * twice.signum();
    Charge::from_base_units((twice + half) / HALVES_PER_MICROCOULOMB).unwrap_or(Charge::MAX)
}

#[cfg(test)]
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "expect-test writes its texts with hashes"
)]
mod tests;
