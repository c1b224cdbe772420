//! Rules on what is drawn: within the sink, within the DUT, above the floor.
//!
//! A regulated step has no current of its own: a power draws most at the least voltage, a
//! resistance at the largest. The least voltage is where the undervoltage interlock acts, since
//! below it nothing is drawn for long.

use std::fmt;

use quantity::{Current, Power, Quantity, Resistance, Voltage};

use super::Scene;
use super::flow::currents;
use crate::draft::{ActionDraft, StepDraft};
use crate::facts::Facts;
use crate::finding::{Finding, Findings};
use crate::rule::Rule;

/// A current and how it comes about, for a message.
struct Most {
    current: Current,
    why: String,
}

/// Where the value of a step's action stands.
pub(super) fn action_key(step: &StepDraft) -> String {
    step.key(match &step.action {
        Some(ActionDraft::Rest) | None => "rest",
        Some(ActionDraft::Draw(_)) => "draw",
        Some(ActionDraft::Power(_)) => "draw_power",
        Some(ActionDraft::Resistance(_)) => "draw_resistance",
        Some(ActionDraft::Ramp(_)) => "ramp",
        Some(ActionDraft::Profile(_)) => "profile",
        Some(ActionDraft::Repeat(_)) => "repeat",
    })
}

/// The least voltage at which the sink goes on drawing.
pub(super) fn least_voltage(scene: &Scene<'_>) -> Option<Voltage> {
    let least = scene.draft.dut.voltage_min?;
    let trip = scene.merged.undervoltage.map(|armed| armed.threshold);
    Some(trip.map_or(least, |trip| trip.max(least)))
}

/// The largest current of a step.
fn most(scene: &Scene<'_>, step: &StepDraft) -> Option<Most> {
    match &step.action {
        Some(ActionDraft::Power(Some(power))) => {
            let voltage = least_voltage(scene)?;
            let current = power.over(voltage)?;
            let why = format!("{power} at {voltage} is {current}");
            Some(Most { current, why })
        }
        Some(ActionDraft::Resistance(Some(resistance))) => {
            let voltage = scene.draft.dut.voltage_max?;
            let current = voltage.over(*resistance)?;
            let why = format!("{resistance} at {voltage} is {current}");
            Some(Most { current, why })
        }
        _ => {
            let current = currents(step).into_iter().max()?;
            let why = format!("the step draws {current}");
            Some(Most { current, why })
        }
    }
}

/// The largest current that the sequence asks for, at any voltage.
pub(super) fn most_of_all(scene: &Scene<'_>) -> Option<Current> {
    let mut largest = None;
    scene.draft.each_step(&mut |step| {
        largest = largest.max(most(scene, step).map(|most| most.current));
    });
    largest
}

/// The most power that a step puts into the sink, at the DUT's largest voltage.
fn most_power(scene: &Scene<'_>, step: &StepDraft) -> Option<(Power, String)> {
    if let Some(ActionDraft::Power(power)) = step.action {
        return power.map(|power| (power, format!("the step takes {power}")));
    }
    let voltage = scene.draft.dut.voltage_max?;
    let current = most(scene, step)?.current;
    let power = voltage.times(current);
    Some((power, format!("{current} at {voltage} is {power}")))
}

/// The step that takes most power, with it.
pub(super) fn each_power<'a>(
    scene: &'a Scene<'_>,
    visit: &mut dyn FnMut(&'a StepDraft, Power, String),
) {
    scene.draft.each_step(&mut |step| {
        if let Some((power, why)) = most_power(scene, step) {
            visit(step, power, why);
        }
    });
}

/// Every step with its largest current.
pub(super) fn each_current<'a>(
    scene: &'a Scene<'_>,
    visit: &mut dyn FnMut(&'a StepDraft, Current, String),
) {
    scene.draft.each_step(&mut |step| {
        if let Some(Most { current, why }) = most(scene, step) {
            visit(step, current, why);
        }
    });
}

fn negative<T: Quantity + Ord + fmt::Display>(
    step: &StepDraft,
    value: T,
    hint: &str,
    findings: &mut Findings,
) {
    findings.push(
        Finding::new(
            Rule::CurrentNegative,
            action_key(step),
            format!("a sink draws, and cannot draw {value}"),
            hint,
        )
        .numbers(value, "0"),
    );
}

pub(super) fn not_negative(scene: &Scene<'_>, findings: &mut Findings) {
    scene.draft.each_step(&mut |step| match step.action {
        Some(ActionDraft::Power(Some(power))) if power <= Power::ZERO => {
            negative(step, power, "write a power above zero, or `rest`", findings);
        }
        Some(ActionDraft::Resistance(Some(resistance))) if resistance <= Resistance::ZERO => {
            negative(step, resistance, "write a resistance above zero", findings);
        }
        _ => {
            let least = currents(step).into_iter().min();
            if let Some(least) = least.filter(|current| current.is_negative()) {
                negative(step, least, "write currents without a minus sign", findings);
            }
        }
    });
}

pub(super) fn abilities(scene: &Scene<'_>, findings: &mut Findings) {
    let facts = scene.facts;
    scene.draft.each_step(&mut |step| {
        let missing = match step.action {
            Some(ActionDraft::Power(_)) if !facts.holds_power => "a constant power",
            Some(ActionDraft::Resistance(_)) if !facts.holds_resistance => "a constant resistance",
            _ => return,
        };
        findings.push(Finding::new(
            Rule::AbilityMissing,
            action_key(step),
            format!("the sink `{}` cannot hold {missing}", facts.name),
            "draw a constant current or a profile instead, or take another sink",
        ));
    });
}

pub(super) fn within_sink(scene: &Scene<'_>, findings: &mut Findings) {
    let (limit, sink) = (scene.facts.current_max, &scene.facts.name);
    each_current(scene, &mut |step, current, why| {
        if current > limit {
            findings.push(
                Finding::new(
                    Rule::CurrentAboveSink,
                    action_key(step),
                    format!("{why}, above the {limit} that the sink `{sink}` can draw"),
                    format!("draw {limit} or less, or take a larger sink"),
                )
                .numbers(current, limit),
            );
        }
    });
}

pub(super) fn within_dut(scene: &Scene<'_>, findings: &mut Findings) {
    let Some(limit) = scene.draft.dut.current_max else {
        return;
    };
    each_current(scene, &mut |step, current, why| {
        if current > limit {
            findings.push(
                Finding::new(
                    Rule::CurrentAboveDut,
                    action_key(step),
                    format!("{why}, above the {limit} that the DUT's maker allows"),
                    format!("draw {limit} or less"),
                )
                .numbers(current, limit),
            );
        }
    });
}

pub(super) fn power_within_sink(scene: &Scene<'_>, findings: &mut Findings) {
    let (limit, sink) = (scene.facts.power_max, &scene.facts.name);
    each_power(scene, &mut |step, power, why| {
        if power > limit {
            findings.push(
                Finding::new(
                    Rule::PowerAboveSink,
                    action_key(step),
                    format!("{why}, above the {limit} that the sink `{sink}` may take"),
                    "draw less, or take a larger sink",
                )
                .numbers(power, limit),
            );
        }
    });
}

/// The least current above zero that a step asks for.
fn least_above_zero(scene: &Scene<'_>, step: &StepDraft) -> Option<Current> {
    let voltage = scene.draft.dut.voltage_max;
    match step.action {
        Some(ActionDraft::Power(power)) => power?.over(voltage?),
        Some(ActionDraft::Resistance(resistance)) => least_voltage(scene)?.over(resistance?),
        _ => currents(step)
            .into_iter()
            .filter(|&current| current > Current::ZERO)
            .min(),
    }
}

pub(super) fn above_floor(scene: &Scene<'_>, findings: &mut Findings) {
    let (floor, sink) = (scene.facts.current_floor, &scene.facts.name);
    scene.draft.each_step(&mut |step| {
        let Some(current) = least_above_zero(scene, step).filter(|&current| current < floor) else {
            return;
        };
        findings.push(
            Finding::new(
                Rule::CurrentBelowFloor,
                action_key(step),
                format!("{current} is below the floor of the sink `{sink}`, {floor}"),
                format!(
                    "draw 0 A or at least {floor}, or take a sink with a larger sense resistor; {}",
                    in_codes(scene.facts, current)
                ),
            )
            .numbers(current, floor),
        );
    });
}

/// What a small current is in codes: whoever takes the one for the other measures several times
/// the current meant, and looks for a circuit error that is not there.
fn in_codes(facts: &Facts, current: Current) -> String {
    /// A code that is easily taken for a small current.
    const TAKEN: u32 = 16;
    let converter = &facts.converter;
    let code = converter.nearest_code(facts.correction.to_nominal_setpoint(current));
    let nominal = converter.current_of(code);
    let told = format!("its code is {code} ({nominal} nominal)");
    if code == TAKEN || TAKEN > converter.last_code() {
        return told;
    }
    format!(
        "{told}; a code counts the converter's steps and is no current: code {TAKEN}, say, draws \
         {}, and that is no error of the circuit",
        converter.current_of(TAKEN)
    )
}

pub(super) fn fine_enough(scene: &Scene<'_>, findings: &mut Findings) {
    /// Half a converter step may be this part of the current: 1/50 is 2 %.
    const PART: i128 = 50;
    let (resolution, sink) = (scene.facts.current_step, &scene.facts.name);
    scene.draft.each_step(&mut |step| {
        let Some(current) = least_above_zero(scene, step) else {
            return;
        };
        let half_step = resolution.base_units();
        if current >= scene.facts.current_floor && half_step * PART > 2 * current.base_units() {
            findings.push(
                Finding::new(
                    Rule::CoarseStep,
                    action_key(step),
                    format!(
                        "{current} is set in steps of {resolution} by the sink `{sink}`: \
                         off by up to half a step"
                    ),
                    format!(
                        "take a sink with a larger sense resistor where this current matters; {}",
                        in_codes(scene.facts, current)
                    ),
                )
                .numbers(current, resolution),
            );
        }
    });
}
