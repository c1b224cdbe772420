//! Rules on the sink's certificate: that there is one, that it holds for the whole run and covers
//! what the run reaches.

use std::fmt;

use quantity::{Current, Voltage};

use super::PlanScene;
use crate::calibration::Calibration;
use crate::finding::{Finding, Findings};
use crate::plan::{Action, Op};
use crate::rule::Rule;

pub(super) fn there(scene: &PlanScene<'_>, findings: &mut Findings) {
    if scene.options.calibration == Calibration::Absent {
        findings.push(Finding::new(
            Rule::CertificateAbsent,
            "",
            format!(
                "the sink `{}` has no certificate: every figure of this run will be nominal, \
                 uncalibrated",
                scene.facts.name
            ),
            "calibrate the sink before a run whose figures are to decide something",
        ));
    }
}

pub(super) fn valid(scene: &PlanScene<'_>, findings: &mut Findings) {
    let Calibration::Certificate { valid_for, .. } = scene.options.calibration else {
        return;
    };
    let longest = scene.plan.duration_at_most();
    if valid_for < longest {
        findings.push(
            Finding::new(
                Rule::CertificateExpires,
                "",
                format!(
                    "the certificate of the sink `{}` is valid for another {valid_for}, the run \
                     may take {longest}",
                    scene.facts.name
                ),
                "calibrate the sink before, or accept that the figures are nominal",
            )
            .numbers(valid_for, longest),
        );
    }
}

pub(super) fn covers(scene: &PlanScene<'_>, findings: &mut Findings) {
    let Calibration::Certificate {
        current, voltage, ..
    } = scene.options.calibration
    else {
        return;
    };
    for (target, pointer) in ends_of_currents(scene) {
        outside(target, current, "a current of", pointer, findings);
    }
    let Some(voltage) = voltage else {
        findings.push(Finding::new(
            Rule::BeyondCalibration,
            "/dut",
            format!(
                "the certificate of the sink `{}` is of its current alone: voltages, energies and \
                 resistances of this run will be nominal, uncalibrated, and so will a voltage that \
                 ends a step",
                scene.facts.name
            ),
            "calibrate the voltage as well if figures that need it are to decide something",
        ));
        return;
    };
    let dut = &scene.plan.dut;
    for (volts, key) in [
        (dut.voltage_min, "voltage_min"),
        (dut.voltage_max, "voltage_max"),
    ] {
        outside::<Voltage>(volts, voltage, "the DUT's", format!("/dut/{key}"), findings);
    }
}

/// The least and the largest constant current of the plan above zero, with their places.
fn ends_of_currents(scene: &PlanScene<'_>) -> Vec<(Current, String)> {
    let drawn = || {
        scene.plan.ops.iter().filter_map(|op| match op {
            Op::Step(step) => match step.action {
                Action::Current { target, .. } if target > Current::ZERO => {
                    Some((target, &step.pointer))
                }
                Action::Current { .. }
                | Action::Rest
                | Action::Power { .. }
                | Action::Resistance { .. } => None,
            },
            Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
        })
    };
    let least = drawn().min_by_key(|(target, _)| *target);
    let largest = drawn().max_by_key(|(target, _)| *target);
    let mut ends: Vec<(Current, String)> = least
        .into_iter()
        .chain(largest)
        .map(|(target, pointer)| (target, pointer.clone()))
        .collect();
    ends.dedup_by_key(|(target, _)| *target);
    ends
}

fn outside<T: Ord + Copy + fmt::Display>(
    value: T,
    [low, high]: [T; 2],
    what: &str,
    pointer: String,
    findings: &mut Findings,
) {
    let limit = if value < low {
        low
    } else if value > high {
        high
    } else {
        return;
    };
    findings.push(
        Finding::new(
            Rule::BeyondCalibration,
            pointer,
            format!(
                "{what} {value} lies outside the {low} to {high} that the sink's certificate was \
                 calibrated over: beyond, its correction is only carried on"
            ),
            "calibrate the sink over the whole range that is used",
        )
        .numbers(value, limit),
    );
}
