//! D.c. internal resistance from two currents, `(U1 - U2) / (I2 - I1)`.
//!
//! Two constant currents, the second larger and right after the first, each with a voltage at
//! its end. IEC 61960-3 has 0,2 It for 10 s and then 1,0 It for 1 s; other currents and times
//! give a resistance as well, which the label of the second step then names.

use quantity::{Span, Voltage};
use sequence::plan::Plan;

use crate::channel::Instrument;
use crate::contribution::of_resistance;
use crate::figure::{Figure, Name, Rows, Unit};
use crate::stage::Stage;
use crate::walk::{Delivered, Sample};

/// The smallest rise of current, in steps of the converter, that a resistance is worked out for.
pub(crate) const LEAST_RISE: f64 = 2.0;

const HOW: &str = "(U1 - U2) / (I2 - I1), each at the end of its step: the last readback wholly \
                   within it, its voltage carried on in a straight line to the step's end; \
                   the second step right after the first and at a larger current";
const SOURCE: &str = "IEC 61960-3, d.c. internal resistance by two currents (from memory)";

/// Every pair of steps that gives a resistance.
pub(crate) fn resistances(
    plan: &Plan,
    stages: &[Stage<'_>],
    delivered: &[Delivered],
    instrument: &Instrument,
) -> Vec<Figure> {
    let steps = stages.iter().zip(delivered);
    let pairs = steps.clone().zip(steps.skip(1));
    pairs
        .filter_map(|((first, before), (second, after))| {
            let (one, other) = (first.held_current()?, second.held_current()?);
            if one <= 0.0 || other <= one || !second.follows(first) || second.is_beyond_counting() {
                return None;
            }
            let (low, high) = (ended(first, before)?, ended(second, after)?);
            figure(plan, second, low, high, instrument)
        })
        .collect()
}

/// The last readback of a step, its voltage carried on from the middle of its interval to the
/// end of the step, along the straight line through it and the readback before; `None` where the
/// step holds fewer than two readbacks, so that nothing tells which way the voltage went. Beside it
/// how often the errors of single readings count in it.
pub(crate) fn ended(stage: &Stage<'_>, delivered: &Delivered) -> Option<(Sample, f64)> {
    let last = delivered.last.1?;
    let before = delivered.last.0?;
    let apart = last.middle().saturating_since(before.middle()).seconds();
    let on = stage.end.min(last.time.saturating_add(interval(&last)));
    let on = on.saturating_since(last.middle()).seconds();
    if apart <= 0.0 {
        return None;
    }
    let rise = last.voltage.volts() - before.voltage.volts();
    let voltage = Voltage::from_volts(last.voltage.volts() + rise * on / apart).ok()?;
    let beyond = on / apart;
    Some((Sample { voltage, ..last }, (1.0 + beyond).hypot(beyond)))
}

fn interval(sample: &Sample) -> Span {
    sample.time.saturating_since(sample.from)
}

fn figure(
    plan: &Plan,
    stage: &Stage<'_>,
    (low, low_weight): (Sample, f64),
    (high, high_weight): (Sample, f64),
    instrument: &Instrument,
) -> Option<Figure> {
    let current = |sample: &Sample| {
        plan.correction
            .current_from_readback(sample.current)
            .amperes()
    };
    let voltage = |sample: &Sample| {
        plan.correction
            .voltage_from_readback(sample.voltage, sample.current)
            .volts()
    };
    let rise = current(&high) - current(&low);
    if rise <= LEAST_RISE * instrument.current.step {
        return None;
    }
    let resistance = (voltage(&low) - voltage(&high)) / rise;
    Some(Figure::of_stage(
        Name::DcResistance,
        stage,
        (resistance, Unit::Ohm),
        of_resistance(instrument, resistance, rise, low_weight.hypot(high_weight)),
        (HOW, SOURCE),
        Rows {
            first: low.row,
            last: high.row,
        },
    ))
}
