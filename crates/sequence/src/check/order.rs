//! The steps of a plan in the order in which a sink gets them.

use crate::plan::{Op, Plan, PlanStep};

/// Most steps gone through: repeats inside repeats double each time.
const STEPS_MOST: usize = 400_000;

/// Goes through the steps as if no condition ended one early and none skipped; each repeat twice,
/// since what happens at its joint happens then.
pub(super) fn in_order<'a>(plan: &'a Plan, take: &mut impl FnMut(&'a PlanStep)) {
    let mut seen = 0;
    block(plan, 0, plan.ops.len(), &mut seen, take);
}

fn block<'a>(
    plan: &'a Plan,
    begin: usize,
    end: usize,
    seen: &mut usize,
    take: &mut impl FnMut(&'a PlanStep),
) {
    let mut at = begin;
    while at < end && *seen < STEPS_MOST {
        at = match plan.ops.get(at) {
            Some(Op::Step(step)) => {
                *seen += 1;
                take(step);
                at + 1
            }
            Some(Op::LoopBegin(head)) => {
                let foot = usize::try_from(head.end).unwrap_or(usize::MAX);
                block(plan, at + 1, foot, seen, take);
                if head.times != Some(1) {
                    block(plan, at + 1, foot, seen, take);
                }
                foot + 1
            }
            Some(Op::LoopEnd { .. }) => at + 1,
            None => return,
        };
    }
}
