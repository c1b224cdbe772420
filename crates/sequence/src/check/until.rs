//! Rules on conditions: reachable before the interlock, within the time, judgeable.

use std::fmt;

use quantity::Span;

use super::Scene;
use crate::draft::{ActionDraft, ConditionDraft, NextDraft, StepDraft, UntilDraft};
use crate::finding::{Finding, Findings};
use crate::plan::Condition;
use crate::rule::Rule;

fn each_until<'a>(scene: &'a Scene<'_>, visit: &mut dyn FnMut(&'a StepDraft, &'a UntilDraft)) {
    scene.draft.each_step(&mut |step| {
        for until in &step.until {
            visit(step, until);
        }
    });
}

fn behind(
    until: &UntilDraft,
    (key, interlock, side): (&str, &str, &str),
    value: impl fmt::Display,
    trip: impl fmt::Display,
    findings: &mut Findings,
) {
    findings.push(
        Finding::new(
            Rule::UntilBehindInterlock,
            format!("{}/{key}", until.pointer),
            format!("the interlock `{interlock}` at {trip} trips before {value} is reached"),
            format!("write {side} {trip}, or move the interlock"),
        )
        .numbers(value, trip),
    );
}

pub(super) fn before_interlock(scene: &Scene<'_>, findings: &mut Findings) {
    let merged = scene.merged;
    each_until(scene, &mut |_, until| {
        let Some(ConditionDraft::Watch(condition)) = until.condition else {
            return;
        };
        match condition {
            Condition::VoltageBelow(value) => {
                let trip = merged.undervoltage.map(|armed| armed.threshold);
                if let Some(trip) = trip.filter(|&trip| trip >= value) {
                    behind(
                        until,
                        ("voltage_below", "undervoltage", "more than"),
                        value,
                        trip,
                        findings,
                    );
                }
            }
            Condition::VoltageAbove(value) => {
                let trip = merged.over_voltage.map(|armed| armed.threshold);
                if let Some(trip) = trip.filter(|&trip| trip <= value) {
                    behind(
                        until,
                        ("voltage_above", "over_voltage", "less than"),
                        value,
                        trip,
                        findings,
                    );
                }
            }
            Condition::CurrentAbove(value) => {
                let trip = merged.over_current.map(|armed| armed.threshold);
                if let Some(trip) = trip.filter(|&trip| trip <= value) {
                    behind(
                        until,
                        ("current_above", "over_current", "less than"),
                        value,
                        trip,
                        findings,
                    );
                }
            }
            Condition::TemperatureAbove(value) => {
                let trip = merged.over_temperature.map(|armed| armed.threshold);
                if let Some(trip) = trip.filter(|&trip| trip <= value) {
                    behind(
                        until,
                        ("temperature_above", "over_temperature", "less than"),
                        value,
                        trip,
                        findings,
                    );
                }
            }
            Condition::Charge(value) => {
                if let Some(trip) = merged.charge.filter(|&trip| trip <= value) {
                    behind(
                        until,
                        ("charge", "charge", "less than"),
                        value,
                        trip,
                        findings,
                    );
                }
            }
            Condition::Energy(value) => {
                if let Some(trip) = merged.energy.filter(|&trip| trip <= value) {
                    behind(
                        until,
                        ("energy", "energy", "less than"),
                        value,
                        trip,
                        findings,
                    );
                }
            }
            Condition::CurrentBelow(_)
            | Condition::TemperatureBelow(_)
            | Condition::VoltageSettled { .. }
            | Condition::TemperatureSettled { .. } => {}
        }
    });
}

/// What an elapsed time cannot have beside it.
pub(super) fn elapsed_is_plain(scene: &Scene<'_>, findings: &mut Findings) {
    each_until(scene, &mut |step, until| {
        if !matches!(until.condition, Some(ConditionDraft::Elapsed(_))) {
            return;
        }
        if until.persistence.is_some() {
            findings.push(Finding::new(
                Rule::ClashingKeys,
                format!("{}/for", until.pointer),
                "an elapsed time has no `for`: once over, it stays over",
                "leave `for` out",
            ));
        }
        let whole = matches!(
            step.action,
            Some(ActionDraft::Repeat(_) | ActionDraft::Profile(_))
        );
        if whole && until.then != NextDraft::GoOn {
            findings.push(Finding::new(
                Rule::ClashingKeys,
                format!("{}/then", until.pointer),
                "a repeat or profile whose time is over goes on with the next step",
                "leave `then` out, and say what follows at the next step",
            ));
        }
    });
}

/// The longest readback interval during a step: those of the steps inside a repeat count.
fn interval(scene: &Scene<'_>, step: &StepDraft) -> Span {
    let whole = scene.readback();
    match &step.action {
        Some(ActionDraft::Repeat(repeat)) => repeat
            .steps
            .iter()
            .map(|inner| interval(scene, inner))
            .max()
            .unwrap_or(whole),
        Some(_) | None => step.readback.unwrap_or(whole),
    }
}

pub(super) fn persistence_judgeable(scene: &Scene<'_>, findings: &mut Findings) {
    each_until(scene, &mut |step, until| {
        let Some(persistence) = until.persistence.filter(|&span| span > Span::ZERO) else {
            return;
        };
        let interval = interval(scene, step);
        if persistence < interval {
            findings.push(
                Finding::new(
                    Rule::PersistenceBelowReadback,
                    format!("{}/for", until.pointer),
                    format!(
                        "a condition for {persistence} is met only by a whole readback interval \
                         of {interval}"
                    ),
                    format!(
                        "read back at least every {persistence}, or accept that it waits longer"
                    ),
                )
                .numbers(persistence, interval),
            );
        }
    });
}

pub(super) fn can_hold(scene: &Scene<'_>, findings: &mut Findings) {
    each_until(scene, &mut |step, until| {
        let (Some(time), Some(condition)) = (step.time, until.condition) else {
            return;
        };
        let (needed, key) = match condition {
            ConditionDraft::Elapsed(span) => (span, "elapsed"),
            ConditionDraft::Watch(Condition::VoltageSettled { window, .. }) => {
                (window, "voltage_settled/over")
            }
            ConditionDraft::Watch(Condition::TemperatureSettled { window, .. }) => {
                (window, "temperature_settled/over")
            }
            ConditionDraft::Watch(Condition::Charge(charge)) => match step.action {
                Some(ActionDraft::Draw(Some(current))) => {
                    let Some(needed) = charge.over_current(current) else {
                        return;
                    };
                    (needed, "charge")
                }
                _ => return,
            },
            ConditionDraft::Watch(_) => match until.persistence {
                Some(persistence) => (persistence, "for"),
                None => return,
            },
        };
        if needed >= time {
            findings.push(
                Finding::new(
                    Rule::UntilNeverHolds,
                    format!("{}/{key}", until.pointer),
                    format!("the condition needs {needed}, but the step ends after {time}"),
                    "lengthen the step or leave the condition out",
                )
                .numbers(needed, time),
            );
        }
    });
}
