//! Rules on the whole run: its record fits the disk, its charge the cell, its limits the run.

use std::fmt;

use quantity::Current;

use super::PlanScene;
use crate::finding::{Finding, Findings};
use crate::plan::{Action, Op};
use crate::rule::Rule;

/// Bytes as a person reads them.
fn bytes(count: u64) -> String {
    let (unit, divisor) = match count {
        0..1_000_000 => ("kB", 1_000),
        1_000_000..1_000_000_000 => ("MB", 1_000_000),
        1_000_000_000.. => ("GB", 1_000_000_000),
    };
    format!(
        "{}.{} {unit}",
        count / divisor,
        count % divisor * 10 / divisor
    )
}

pub(super) fn fits_disk(scene: &PlanScene<'_>, findings: &mut Findings) {
    let Some(free) = scene.options.disk_free_bytes else {
        return;
    };
    let readbacks = scene.plan.readbacks_at_most();
    let needed = readbacks.saturating_mul(scene.options.bytes_per_readback);
    let (rule, hint) = if needed > free {
        (
            Rule::DiskSpace,
            "read back less often, shorten the `at_most`, or free disk space",
        )
    } else if needed > free / 2 {
        (
            Rule::RecordLarge,
            "keep an eye on the disk, or read back less often",
        )
    } else {
        return;
    };
    findings.push(
        Finding::new(
            rule,
            "/readback",
            format!(
                "the record may take {} for {readbacks} readbacks, of {} free on the disk",
                bytes(needed),
                bytes(free)
            ),
            hint,
        )
        .numbers(bytes(needed), bytes(free)),
    );
}

pub(super) fn charge_within_rated(scene: &PlanScene<'_>, findings: &mut Findings) {
    let Some(rated) = scene.plan.dut.rated_capacity else {
        return;
    };
    for op in &scene.plan.ops {
        let Op::Step(step) = op else { continue };
        let Action::Current { target, .. } = step.action else {
            continue;
        };
        let charge = target.times(step.duration);
        if step.until.is_empty() && target > Current::ZERO && charge > rated {
            findings.push(
                Finding::new(
                    Rule::ChargeAboveRated,
                    step.pointer.clone(),
                    format!(
                        "{target} for {} is {charge}, more than the rated capacity of {rated}",
                        step.duration
                    ),
                    "add an `until` with the cut-off voltage",
                )
                .numbers(charge, rated),
            );
        }
    }
}

pub(super) fn limits_within_reach(scene: &PlanScene<'_>, findings: &mut Findings) {
    let longest = scene.plan.duration_at_most();
    // A bench's own limit stands for every run on it, and may well be beyond a short one.
    let written = scene.draft.interlocks.time;
    if let Some(limit) = written.filter(|&limit| limit >= longest) {
        findings.push(
            Finding::new(
                Rule::LimitOutOfReach,
                "/interlocks/time",
                format!("`time` at {limit} lies beyond the {longest} that the run takes at most"),
                format!("write less than {longest}, or leave it out"),
            )
            .numbers(limit, longest),
        );
    }
}

pub(super) fn limits_leave_room(scene: &PlanScene<'_>, findings: &mut Findings) {
    fn room<T: Ord + fmt::Display>(
        key: &str,
        expected: T,
        limit: Option<T>,
        findings: &mut Findings,
    ) {
        let Some(limit) = limit.filter(|limit| *limit < expected) else {
            return;
        };
        findings.push(
            Finding::new(
                Rule::LimitBeforeEnd,
                format!("/interlocks/{key}"),
                format!(
                    "the run will probably take {expected}, but the interlock `{key}` trips at \
                     {limit}"
                ),
                "shorten the sequence, or raise the interlock as far as the bench lets you",
            )
            .numbers(expected, limit),
        );
    }
    let (forecast, interlocks) = (scene.plan.forecast(), &scene.plan.interlocks);
    room("charge", forecast.charge, interlocks.charge, findings);
    room("energy", forecast.energy, interlocks.energy, findings);
    room("time", forecast.duration, interlocks.time, findings);
}
