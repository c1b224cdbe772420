//! D.c. resistance some time after an edge: `(U1 - U(t)) / (I(t) - I1)`.
//!
//! U1 and I1 are those of the step before, at its end. U(t) lies on the straight line between
//! the middles of the two readbacks around the instant; where readbacks are too coarse, it is the
//! mean of the samples captured within a tenth of the time around it.

use quantity::{Current, SinkTime, Span, Voltage};
use sequence::plan::DutKind;

use crate::capture::{Capture, of_stage};
use crate::contribution::{of_resistance, of_samples};
use crate::figure::{Figure, Figures, Missing, Name, Rows, Unit};
use crate::resistance::{LEAST_RISE, ended};
use crate::stage::{EACH_MAX, Stage};
use crate::walk::{Around, DELAYS, Delivered, Sample};
use crate::work::Workbench;

const NAMES: [Name; DELAYS.len()] = [
    Name::ResistanceAt10Ms,
    Name::ResistanceAt100Ms,
    Name::ResistanceAt1S,
    Name::ResistanceAt10S,
];

const BY_READBACKS: &str = "(U1 - U(t)) / (I(t) - I1) some time after an edge: U1 and I1 at the \
                            end of the step before, U(t) and I(t) on a straight line between the \
                            middles of the readbacks around the instant";
const BY_SAMPLES: &str = "(U1 - U(t)) / (I(t) - I1) some time after an edge: U1 and I1 at the end \
                          of the step before, U(t) and I(t) the means of the captured samples \
                          within a tenth of the time around the instant";
const SOURCE: &str = "common practice, no source; the pattern is that of IEC 61960-3, d.c. \
                      internal resistance (from memory)";

/// Share of the time around an instant whose samples are taken together.
const AROUND: f64 = 0.1;

/// Whether a stage is an upward edge from one held current to another.
pub(crate) fn is_pulse(before: &Stage<'_>, stage: &Stage<'_>) -> bool {
    let held = before.held_current().zip(stage.held_current());
    held.is_some_and(|(low, high)| high > low)
        && stage.follows(before)
        && !stage.is_beyond_counting()
}

impl Workbench<'_> {
    /// The resistances after every upward edge of a cell or a pack.
    pub(crate) fn pulses(&self, figures: &mut Figures) {
        if self.plan.dut.kind == DutKind::Supply {
            return;
        }
        let steps = self.stages.iter().zip(self.walked);
        for ((before, from), (stage, delivered)) in steps.clone().zip(steps.skip(1)) {
            if !is_pulse(before, stage) {
                continue;
            }
            let Some((start, weight)) = ended(before, from) else {
                continue;
            };
            let rested = before.held_current().is_some_and(|held| held <= 0.0);
            let capture = of_stage(self.captures, stage, self.plan.tick);
            for (index, (delay, name)) in DELAYS.into_iter().zip(NAMES).enumerate() {
                if delay > stage.length() {
                    continue;
                }
                match self.after(index, delay, stage, delivered, capture) {
                    Some(seen) => figures.figures.extend(self.pulse(
                        name,
                        stage,
                        (start, weight, rested),
                        &seen,
                    )),
                    None if stage.is_first() => {
                        figures
                            .missing
                            .push(Missing::of(name, stage.label, coarse(delay)));
                    }
                    None => {}
                }
            }
            if stage.occurrence == Some(EACH_MAX) {
                let reason = format!("given for the first {EACH_MAX} steps of this label only");
                figures
                    .missing
                    .push(Missing::of(NAMES[0], stage.label, reason));
            }
        }
    }

    /// In a rest no current flows, whatever a converter that ends at zero makes of its offset.
    fn pulse(
        &self,
        name: Name,
        stage: &Stage<'_>,
        (start, weight, rested): (Sample, f64, bool),
        seen: &Seen,
    ) -> Option<Figure> {
        let (read_a, low_v) = self.true_values(&start);
        let low_a = if rested { 0.0 } else { read_a };
        let rise = seen.amperes - low_a;
        if rise <= LEAST_RISE * self.instrument.current.step {
            return None;
        }
        let resistance = (low_v - seen.volts) / rise;
        // Captured samples are fewer than a readback is made of.
        let weight = weight.hypot(seen.weight);
        let mut budget = of_resistance(self.instrument, resistance, rise, weight);
        if rested {
            // The one current that was read errs by its offset, too.
            let of_current = self.instrument.current.of_reading(rise);
            for line in &mut budget.contributions {
                let read = of_current.iter().find(|read| read.name == line.name);
                if let Some(read) = read {
                    *line = read.clone().scaled(resistance / rise);
                }
            }
        }
        if let Some(samples) = seen.samples {
            let lines = of_samples(self.instrument, resistance, rise, samples);
            budget.contributions.extend(lines);
        }
        Some(Figure::of_stage(
            name,
            stage,
            (resistance, Unit::Ohm),
            budget,
            (seen.how, SOURCE),
            Rows {
                first: start.row,
                last: seen.row,
            },
        ))
    }

    /// Current and voltage at an instant after the edge.
    fn after(
        &self,
        index: usize,
        delay: Span,
        stage: &Stage<'_>,
        delivered: &Delivered,
        capture: Option<&Capture>,
    ) -> Option<Seen> {
        let instant = stage.begin.saturating_add(delay);
        let around = delivered.looked.around.as_ref()?.get(index)?;
        self.between(*around, instant, delivered)
            .or_else(|| self.captured(capture?, delay))
    }

    fn between(&self, around: Around, instant: SinkTime, delivered: &Delivered) -> Option<Seen> {
        let before = around.before?;
        let (one, other) = match around.after {
            Some(after) => (before, after),
            // The last readback's middle: carried on by no more than half its interval.
            None if instant <= before.time => (delivered.last.0?, before),
            None => return None,
        };
        let apart = other.middle().saturating_since(one.middle()).seconds();
        if apart <= 0.0 {
            return None;
        }
        let share = instant.saturating_since(one.middle()).seconds() / apart;
        let (from, to) = (self.true_values(&one), self.true_values(&other));
        Some(Seen {
            amperes: from.0 + share * (to.0 - from.0),
            volts: from.1 + share * (to.1 - from.1),
            row: other.row,
            weight: share.hypot(1.0 - share),
            samples: None,
            how: BY_READBACKS,
        })
    }

    fn captured(&self, capture: &Capture, delay: Span) -> Option<Seen> {
        let tick_s = self.plan.tick.seconds();
        let (middle, width) = (delay.seconds(), AROUND * delay.seconds());
        let within: Vec<(f64, f64)> = capture
            .after()
            .filter(|sample| (f64::from(sample.tick) * tick_s - middle).abs() <= width + 1e-9)
            .map(|sample| self.true_pair(sample.current, sample.voltage))
            .collect();
        // Both sides of the instant must be there, or the mean stands for another one.
        let last = capture.after().last()?;
        if within.len() < 3 || f64::from(last.tick) * tick_s < middle + 0.5 * width {
            return None;
        }
        let count = crate::least_squares::number(within.len());
        let sum = within
            .iter()
            .fold((0.0, 0.0), |sum, pair| (sum.0 + pair.0, sum.1 + pair.1));
        Some(Seen {
            amperes: sum.0 / count,
            volts: sum.1 / count,
            row: capture.rows().last,
            weight: 0.0,
            samples: Some(count),
            how: BY_SAMPLES,
        })
    }

    /// The true values of nominal means, ampere and volt.
    pub(crate) fn true_means(&self, amperes: f64, volts: f64) -> (f64, f64) {
        let current = Current::from_amperes(amperes).unwrap_or(Current::ZERO);
        let voltage = Voltage::from_volts(volts).unwrap_or(Voltage::ZERO);
        self.true_pair(current, voltage)
    }

    /// Ampere and volt of a readback, corrected.
    pub(crate) fn true_values(&self, sample: &Sample) -> (f64, f64) {
        self.true_pair(sample.current, sample.voltage)
    }

    /// Ampere and volt, corrected.
    pub(crate) fn true_pair(&self, current: Current, voltage: Voltage) -> (f64, f64) {
        let correction = &self.plan.correction;
        (
            correction.current_from_readback(current).amperes(),
            correction.voltage_from_readback(voltage, current).volts(),
        )
    }
}

/// What was seen at an instant, true values.
struct Seen {
    amperes: f64,
    volts: f64,
    row: u64,
    /// How often the errors of single readbacks count in it.
    weight: f64,
    /// How many captured samples it is the mean of; `None`: of readbacks.
    samples: Option<f64>,
    how: &'static str,
}

fn coarse(delay: Span) -> String {
    format!(
        "the readbacks are too coarse to show {delay} after the edge, and no capture reaches \
         there; read back faster or capture with `burst`"
    )
}
