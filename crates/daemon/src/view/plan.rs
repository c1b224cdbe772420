//! A plan before it runs: its steps in words, how hot the sink gets, how near each interlock is to
//! come.

use std::fmt::Write as _;

use quantity::{Current, Span};
use sequence::plan::{
    Action, Condition, Foresight, LoopHead, Next, Op, Peak, Plan, PlanStep, Until,
};
use sequencer::event::Interlock;
use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::margin::{scaled, unit_of};

/// Most steps that are told; an imported profile has thousands.
const STEPS_MOST: usize = 200;

/// A step of a plan, or the head of a repeat.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct PlanStepView {
    /// In how many repeats it stands.
    pub depth: u32,
    /// What it does, in words with units.
    pub text: String,
    /// Its label.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub label: Option<String>,
    /// Where it stands in the sequence (JSON pointer).
    pub pointer: String,
}

/// How hot a sink gets, at most: on the DUT's largest voltage.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct TemperaturesView {
    /// The air's temperature that it is reckoned from.
    pub ambient_degc: f64,
    /// The heat sink.
    pub heat_sink_degc: f64,
    /// The hottest that it may get.
    pub heat_sink_max_degc: f64,
    /// The MOSFET's junction.
    pub junction_degc: f64,
    /// The hottest that it may get.
    pub junction_max_degc: f64,
}

/// How near an interlock is to come.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct PlannedMarginView {
    /// Which interlock, such as `undervoltage`.
    #[schema(value_type = String)]
    pub interlock: Interlock,
    /// The unit of both values.
    pub unit: String,
    /// The value nearest to the threshold that the plan leads to.
    pub planned: f64,
    /// What must not be crossed.
    pub threshold: f64,
    /// How near it comes: 0 far away, 1 at the threshold.
    pub nearness: f64,
}

impl TemperaturesView {
    pub(crate) fn new(peak: &Peak) -> Self {
        Self {
            ambient_degc: peak.ambient.degrees_celsius(),
            heat_sink_degc: peak.heat_sink.degrees_celsius(),
            heat_sink_max_degc: peak.heat_sink_max.degrees_celsius(),
            junction_degc: peak.junction.degrees_celsius(),
            junction_max_degc: peak.junction_max.degrees_celsius(),
        }
    }
}

/// The steps of a plan in words.
pub(crate) fn steps(plan: &Plan) -> Vec<PlanStepView> {
    let mut depth = 0;
    let mut steps = Vec::new();
    for op in &plan.ops {
        if steps.len() == STEPS_MOST {
            break;
        }
        match op {
            Op::Step(step) => steps.push(PlanStepView {
                depth,
                text: step_text(plan, step),
                label: label_of(plan, step.label),
                pointer: step.pointer.clone(),
            }),
            Op::LoopBegin(head) => {
                steps.push(PlanStepView {
                    depth,
                    text: loop_text(head),
                    label: None,
                    pointer: head.pointer.clone(),
                });
                depth += 1;
            }
            Op::LoopEnd { .. } => depth = depth.saturating_sub(1),
        }
    }
    steps
}

fn label_of(plan: &Plan, label: Option<u32>) -> Option<String> {
    plan.labels.get(usize::try_from(label?).ok()?).cloned()
}

// Writing to a text cannot fail.
fn step_text(plan: &Plan, step: &PlanStep) -> String {
    let mut text = match step.action {
        Action::Rest => "rest".to_owned(),
        Action::Current { target, ramp } if ramp == Span::ZERO => format!("draw {target}"),
        Action::Current { target, ramp } => format!("ramp to {target} over {ramp}"),
        Action::Power { target } => format!("draw {target}"),
        Action::Resistance { target } => format!("draw as {target}"),
    };
    if step.until.is_empty() {
        let _ = write!(text, " for {}", step.duration);
    } else {
        text.push_str(&untils(&step.until));
        let _ = write!(text, ", at most {}", step.duration);
    }
    if step.may_give_up {
        text.push_str(", or until the source gives up");
    }
    if let Some(interval) = step.readback.filter(|interval| *interval != plan.readback) {
        let _ = write!(text, ", read back every {interval}");
    }
    if let Some(burst) = step.burst {
        let _ = write!(
            text,
            ", captured from {} before to {} after its edge",
            burst.before, burst.after
        );
    }
    text
}

fn loop_text(head: &LoopHead) -> String {
    let mut text = "repeat".to_owned();
    if let Some(times) = head.times {
        let _ = write!(text, " {times} times");
    }
    text.push_str(&untils(&head.until));
    if let Some(at_most) = head.at_most {
        let _ = write!(text, ", at most {at_most}");
    }
    text
}

fn untils(untils: &[Until]) -> String {
    let told: Vec<String> = untils.iter().map(until_text).collect();
    if told.is_empty() {
        return String::new();
    }
    format!(" until {}", told.join(" or "))
}

fn until_text(until: &Until) -> String {
    let mut text = match until.condition {
        Condition::VoltageBelow(value) => format!("below {value}"),
        Condition::VoltageAbove(value) => format!("above {value}"),
        Condition::CurrentBelow(value) => format!("below {value}"),
        Condition::CurrentAbove(value) => format!("above {value}"),
        Condition::Charge(value) => format!("{value} drawn"),
        Condition::Energy(value) => format!("{value} drawn"),
        Condition::TemperatureAbove(value) => format!("hotter than {value}"),
        Condition::TemperatureBelow(value) => format!("cooler than {value}"),
        Condition::VoltageSettled { change, window } => {
            format!("the voltage moves less than {change} in {window}")
        }
        Condition::TemperatureSettled { change, window } => {
            format!("the temperature moves less than {change} in {window}")
        }
    };
    if until.persistence > Span::ZERO {
        let _ = write!(text, " for {}", until.persistence);
    }
    match until.then {
        Next::GoOn => {}
        Next::SkipTo(_) => text.push_str(" (then skips)"),
        Next::End => text.push_str(" (then ends)"),
    }
    text
}

/// How near each interlock is to come, as far as the data sheet's values tell, the nearest first.
pub(crate) fn margins(plan: &Plan, foresight: &Foresight) -> Vec<PlannedMarginView> {
    let (armed, dut, forecast) = (&plan.interlocks, &plan.dut, &foresight.forecast);
    let mut margins = Vec::new();
    let mut above = |interlock, planned: i64, threshold: i64| {
        margins.push(margin(interlock, planned, threshold, planned, threshold));
    };
    if let Some(peak) = foresight.peak {
        let threshold = armed.over_temperature.threshold;
        above(
            Interlock::OverTemperature,
            peak.heat_sink.millidegrees_celsius(),
            threshold.millidegrees_celsius(),
        );
    }
    above(
        Interlock::OverPower,
        foresight.power_max.microwatts(),
        armed.over_power.threshold.microwatts(),
    );
    above(
        Interlock::OverVoltage,
        dut.voltage_max.microvolts(),
        armed.over_voltage.threshold.microvolts(),
    );
    if foresight.current_max > Current::ZERO {
        above(
            Interlock::OverCurrent,
            foresight.current_max.microamperes(),
            armed.over_current.threshold.microamperes(),
        );
    }
    above(
        Interlock::Silence,
        micros(slowest_readback(plan)),
        micros(armed.silence),
    );
    if let Some(most) = armed.charge {
        above(
            Interlock::Charge,
            forecast.charge.microcoulombs(),
            most.microcoulombs(),
        );
    }
    if let Some(most) = armed.energy {
        above(
            Interlock::Energy,
            forecast.energy.microjoules(),
            most.microjoules(),
        );
    }
    if let Some(most) = armed.time {
        above(Interlock::Time, micros(forecast.duration), micros(most));
    }
    if let Some(cut_off) = foresight.cut_off {
        let (planned, threshold) = (
            cut_off.microvolts(),
            armed.undervoltage.threshold.microvolts(),
        );
        // Below is crossed downwards: the threshold over the value.
        margins.push(margin(
            Interlock::Undervoltage,
            planned,
            threshold,
            threshold,
            planned,
        ));
    }
    margins.sort_by(|one, other| other.nearness.total_cmp(&one.nearness));
    margins
}

fn margin(
    interlock: Interlock,
    planned: i64,
    threshold: i64,
    part: i64,
    whole: i64,
) -> PlannedMarginView {
    let (unit, per_unit) = unit_of(interlock);
    PlannedMarginView {
        interlock,
        unit: unit.to_owned(),
        planned: scaled(planned, per_unit),
        threshold: scaled(threshold, per_unit),
        nearness: if whole > 0 {
            scaled(part, 1.0) / scaled(whole, 1.0)
        } else {
            0.0
        },
    }
}

fn micros(span: Span) -> i64 {
    i64::try_from(span.micros()).unwrap_or(i64::MAX)
}

/// The longest time between two readbacks of the plan.
fn slowest_readback(plan: &Plan) -> Span {
    plan.ops
        .iter()
        .filter_map(|op| match op {
            Op::Step(step) => step.readback,
            Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
        })
        .chain([plan.readback])
        .max()
        .unwrap_or(plan.readback)
}
