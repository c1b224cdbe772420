//! The orders of a run: everything true that becomes nominal becomes so here, by the plan's
//! correction.
//!
//! Limits round to the safe side. No setpoint leaves here that is above the limits sent.

use quantity::{Current, Power, Resistance, Span, Voltage};
use sequence::plan::{Action, Plan};
use sink::correction::Bound;
use wire::{LimitKind, Mode, Order};

/// The sink's own copies of the interlocks, nominal.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Limits {
    pub(crate) current: Current,
    pub(crate) power: Power,
    voltage_high: Voltage,
    voltage_low: Voltage,
    excess: Current,
}

impl Limits {
    /// Works them out from the plan's interlocks.
    pub(crate) fn new(plan: &Plan) -> Self {
        let (armed, correction) = (&plan.interlocks, &plan.correction);
        let current =
            correction.current_limit_to_nominal(armed.over_current.threshold, Bound::Upper);
        let voltage_high =
            correction.voltage_limit_to_nominal(armed.over_voltage.threshold, Bound::Upper);
        Self {
            current,
            power: correction.power_limit_to_nominal(
                armed.over_power.threshold,
                voltage_high,
                current,
            ),
            voltage_high,
            voltage_low: correction
                .voltage_limit_to_nominal(armed.undervoltage.threshold, Bound::Lower),
            excess: excess(plan),
        }
    }

    /// What must be ordered before the first step, in this order.
    pub(crate) fn setup(&self, plan: &Plan) -> [Order; 8] {
        let armed = &plan.interlocks;
        let limit = |limit, persistence| Order::Limit { limit, persistence };
        [
            limit(
                LimitKind::Current(self.current),
                armed.over_current.persistence,
            ),
            limit(LimitKind::Power(self.power), armed.over_power.persistence),
            limit(
                LimitKind::VoltageHigh(self.voltage_high),
                armed.over_voltage.persistence,
            ),
            limit(
                LimitKind::VoltageLow(self.voltage_low),
                armed.undervoltage.persistence,
            ),
            limit(
                LimitKind::Temperature(armed.over_temperature.threshold),
                armed.over_temperature.persistence,
            ),
            limit(
                LimitKind::Excess(self.excess),
                armed.not_releasing.persistence,
            ),
            Order::Deadman {
                interval: plan.deadman,
            },
            Order::Readback {
                interval: plan.readback,
            },
        ]
    }

    /// What the sink is to hold for an action, given the voltage now.
    ///
    /// A power or a resistance is regulated by the sink from its own nominal samples. It is
    /// converted at the present voltage, at which it is exact; with a correction that is not a
    /// mere gain it is off by the little that the voltage changes during the step, and what
    /// really flowed is in the counters.
    pub(crate) fn mode(&self, plan: &Plan, action: Action, voltage: Voltage) -> Mode {
        let correction = &plan.correction;
        match action {
            Action::Rest => Mode::Current(Current::ZERO),
            Action::Current { target, .. } => {
                Mode::Current(correction.to_nominal_setpoint(target).min(self.current))
            }
            Action::Power { target } => {
                let nominal = target
                    .over(voltage)
                    .filter(|_| voltage > Voltage::ZERO)
                    .map(|true_current| {
                        nominal_voltage(plan, voltage)
                            .times(correction.to_nominal_setpoint(true_current))
                    });
                Mode::Power(nominal.unwrap_or(target).min(self.power).max(Power::ZERO))
            }
            Action::Resistance { target } => {
                let nominal = voltage
                    .over(target)
                    .filter(|_| voltage > Voltage::ZERO)
                    .map(|true_current| correction.to_nominal_setpoint(true_current))
                    .and_then(|current| nominal_voltage(plan, voltage).over_current(current))
                    .filter(|resistance| resistance.microohms() > 0);
                Mode::Resistance(nominal.unwrap_or(target).max(Resistance::from_microohms(1)))
            }
        }
    }
}

/// The nominal readback of a true voltage.
fn nominal_voltage(plan: &Plan, voltage: Voltage) -> Voltage {
    plan.correction
        .voltage_limit_to_nominal(voltage, Bound::Upper)
}

/// The sink compares its nominal readback with its nominal setpoint. Where the two lines of the
/// correction differ, a sink that follows perfectly shows a difference already; the limit allows
/// for the least of it, so that no true excess beyond the threshold is missed, but never so
/// little that following itself would trip.
fn excess(plan: &Plan) -> Current {
    let (correction, armed) = (&plan.correction, &plan.interlocks);
    let threshold = armed.not_releasing.threshold;
    let shown = |target: Current, above: Current| {
        let readback =
            correction.current_limit_to_nominal(target.saturating_add(above), Bound::Upper);
        readback.saturating_sub(correction.to_nominal_setpoint(target))
    };
    let ends = [Current::ZERO, armed.over_current.threshold];
    let tightest = ends.iter().map(|end| shown(*end, threshold)).min();
    let following = ends.iter().map(|end| shown(*end, Current::ZERO)).max();
    let half = Current::from_microamperes(threshold.microamperes() / 2);
    tightest
        .unwrap_or(threshold)
        .max(following.unwrap_or(Current::ZERO).saturating_add(half))
        .max(Current::ZERO)
}

/// How long after its start a step may last if nothing follows: exactly its duration for the
/// last one; a little more for one that is followed, so that the sink's own timer never ends it
/// at the very tick at which the next begins.
pub(crate) fn hold(duration: Span, last: bool) -> Span {
    if last {
        duration
    } else {
        duration.saturating_add(HOLD_MARGIN)
    }
}

/// Longest time by which a step outlasts its duration if the host dies before it has queued the
/// next.
pub(crate) const HOLD_MARGIN: Span = Span::from_millis(50);
