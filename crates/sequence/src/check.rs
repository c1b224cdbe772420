//! The rules: one function each, in two tables.
//!
//! Rules on the draft judge step by step and run even when other parts could not be read, so
//! that one answer has all findings. Rules on the plan need the whole of it and run only when
//! nothing has refused the sequence yet. A further rule is a function and a line in a
//! table.

mod burst;
mod calibration;
mod dut;
mod envelope;
mod flow;
mod import;
mod interlock;
mod leads;
mod order;
mod port;
mod record;
mod target;
mod time;
mod until;

use crate::compile::Options;
use crate::draft::Draft;
use crate::facts::{Facts, Thresholds};
use crate::finding::Findings;
use crate::plan::Plan;

pub(crate) use interlock::merge;

/// What a rule on the draft sees.
pub(crate) struct Scene<'a> {
    pub(crate) draft: &'a Draft,
    pub(crate) facts: &'a Facts,
    /// The bench's interlocks tightened by the sequence's.
    pub(crate) merged: &'a Thresholds,
    pub(crate) options: &'a Options,
}

impl Scene<'_> {
    /// The readback interval of steps that name none.
    fn readback(&self) -> quantity::Span {
        self.draft.readback.unwrap_or(self.facts.readback_usual)
    }
}

/// What a rule on the plan sees.
pub(crate) struct PlanScene<'a> {
    pub(crate) draft: &'a Draft,
    pub(crate) plan: &'a Plan,
    pub(crate) facts: &'a Facts,
    pub(crate) options: &'a Options,
}

type DraftRule = fn(&Scene<'_>, &mut Findings);
type PlanRule = fn(&PlanScene<'_>, &mut Findings);

const DRAFT_RULES: &[DraftRule] = &[
    dut::voltages,
    dut::current,
    dut::cell_count,
    dut::label,
    dut::voltage_range,
    flow::labels_unique,
    flow::skips,
    flow::repeats_end,
    flow::ramp_starts,
    import::losses,
    time::above_zero,
    time::not_below_tick,
    time::whole_ticks,
    target::not_negative,
    target::abilities,
    target::within_sink,
    target::within_dut,
    target::power_within_sink,
    envelope::holds,
    target::above_floor,
    target::fine_enough,
    burst::fits,
    interlock::there,
    interlock::not_loosened,
    interlock::can_act,
    interlock::not_at_once,
    interlock::guards_dut,
    interlock::silence_leaves_room,
    interlock::persistence_judgeable,
    until::elapsed_is_plain,
    until::before_interlock,
    until::persistence_judgeable,
    until::can_hold,
    port::readback_within_sink,
    port::readback_not_too_slow,
    port::readback_within_port,
];

const PLAN_RULES: &[PlanRule] = &[
    flow::reachable,
    port::queue_refilled,
    burst::apart,
    record::fits_disk,
    record::charge_within_rated,
    record::limits_within_reach,
    record::limits_leave_room,
    leads::trip_early,
    calibration::there,
    calibration::valid,
    calibration::covers,
];

/// Every finding of the rules on the draft.
pub(crate) fn judge_draft(scene: &Scene<'_>, findings: &mut Findings) {
    for rule in DRAFT_RULES {
        rule(scene, findings);
    }
}

/// Every finding of the rules on the plan.
pub(crate) fn judge_plan(scene: &PlanScene<'_>, findings: &mut Findings) {
    for rule in PLAN_RULES {
        rule(scene, findings);
    }
}

#[cfg(test)]
mod tests;
