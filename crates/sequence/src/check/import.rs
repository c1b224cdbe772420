//! What the import of a recording lost, each with its numbers.

use quantity::{Charge, Current};

use super::Scene;
use crate::draft::StepDraft;
use crate::finding::{Finding, Findings};
use crate::import::ImportReport;
use crate::rule::Rule;

pub(super) fn losses(scene: &Scene<'_>, findings: &mut Findings) {
    scene.draft.each_step(&mut |step| {
        if let Some(imported) = step.imported {
            let report = imported.report;
            below_floor(scene, step, &report, findings);
            edges(scene, step, &report, findings);
            clipped(step, &report, findings);
            cycles(step, &report, findings);
            charge(scene, step, &report, findings);
        }
    });
}

fn below_floor(scene: &Scene<'_>, step: &StepDraft, report: &ImportReport, out: &mut Findings) {
    let (below, floor) = (report.below_floor, scene.facts.current_floor);
    if below.charge == Charge::ZERO {
        return;
    }
    out.push(
        Finding::new(
            Rule::ImportBelowFloor,
            step.key("profile"),
            format!(
                "the recording lies below the floor of the sink `{}`, {floor}, for {}: it rests \
                 there, and the charge of {} is drawn at other settings of the same cycle",
                scene.facts.name, below.time, below.charge
            ),
            "take a sink with a larger sense resistor where the sleep current itself matters",
        )
        .numbers(below.largest, floor),
    );
}

fn edges(scene: &Scene<'_>, step: &StepDraft, report: &ImportReport, out: &mut Findings) {
    if report.ticks_averaged == 0 {
        return;
    }
    let tick = scene.facts.tick;
    out.push(
        Finding::new(
            Rule::ImportEdges,
            step.key("profile"),
            format!(
                "{} ticks of {tick} hold changes faster than the sink `{}`: their mean is drawn, \
                 up to {} from what was recorded",
                report.ticks_averaged, scene.facts.name, report.tick_departure
            ),
            "nothing is lost of the charge; take a sink with a shorter tick where the peak matters",
        )
        .numbers(report.ticks_averaged, 0),
    );
}

fn clipped(step: &StepDraft, report: &ImportReport, out: &mut Findings) {
    let clipped = report.clipped;
    if clipped.rows == 0 {
        return;
    }
    out.push(
        Finding::new(
            Rule::ImportClipped,
            step.key("profile/import/clip_above"),
            format!(
                "peaks of up to {} are cut in {} rows: {} of {} are not drawn",
                clipped.largest,
                clipped.rows,
                clipped.charge,
                report.measured.saturating_add(clipped.charge)
            ),
            "take a larger sink where the peaks matter",
        )
        .numbers(clipped.charge, Charge::ZERO),
    );
}

fn cycles(step: &StepDraft, report: &ImportReport, out: &mut Findings) {
    let pointer = step.key("profile/import/period");
    if let Some(cycle) = report.departing_cycle {
        out.push(
            Finding::new(
                Rule::ImportCycles,
                pointer.clone(),
                format!(
                    "cycle {cycle} of {} departs from the first by more than the error: all of \
                     them are drawn one after the other, in {} steps",
                    report.cycles, report.steps
                ),
                "check the period, allow a larger error, or leave it so",
            )
            .numbers(cycle, report.cycles),
        );
    }
    if report.tail.micros() > 0 {
        out.push(
            Finding::new(
                Rule::ImportCycles,
                pointer,
                format!(
                    "the last {} of the recording are no whole cycle and are left out",
                    report.tail
                ),
                "end the recording with a whole cycle, or leave `period` out",
            )
            .numbers(report.tail, 0),
        );
    }
}

fn charge(scene: &Scene<'_>, step: &StepDraft, report: &ImportReport, out: &mut Findings) {
    // The microcoulomb is the rounding of the report itself.
    let microcoulomb = Charge::from_microcoulombs(1);
    let rounding = scene
        .facts
        .current_step
        .max(if report.below_floor.charge > Charge::ZERO {
            scene.facts.current_floor
        } else {
            Current::ZERO
        });
    let limit = rounding
        .times(scene.facts.tick)
        .saturating_add(microcoulomb);
    if report.charge_error <= limit {
        return;
    }
    out.push(
        Finding::new(
            Rule::ImportCharge,
            step.key("profile"),
            format!(
                "the charge of a cycle is off by {}, of {} in the whole recording",
                report.charge_error, report.measured
            ),
            "allow a larger error, so that the lines can take it up",
        )
        .numbers(report.charge_error, limit),
    );
}
