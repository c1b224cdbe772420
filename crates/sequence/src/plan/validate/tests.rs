use quantity::{Current, Span, Voltage};
use sink::bench::Bench;

use crate::plan::{Action, LoopHead, Next, Op, Plan};
use crate::{Files, Options, compile};

fn plan() -> Plan {
    let bench = Bench::from_toml(include_str!("../../../../sink/src/bench/weir.toml")).unwrap();
    let text = include_str!("../../check/tests/base.json");
    let sink = bench.sink("left").unwrap();
    compile(text, sink, &Files::new(), &Options::default())
        .unwrap()
        .plan
}

fn step(plan: &mut Plan, at: usize) -> &mut crate::plan::PlanStep {
    match &mut plan.ops[at] {
        Op::Step(step) => step,
        Op::LoopBegin(_) | Op::LoopEnd { .. } => panic!("no step at {at}"),
    }
}

fn head(end: u32, times: Option<u64>) -> Op {
    Op::LoopBegin(LoopHead {
        times,
        until: Vec::new(),
        at_most: None,
        end,
        label: None,
        pointer: String::new(),
    })
}

/// The place of the invariant that a change breaks.
fn broken(change: impl FnOnce(&mut Plan)) -> String {
    let mut plan = plan();
    change(&mut plan);
    plan.validate().unwrap_err().place
}

#[test]
fn a_plan_that_was_tampered_with_is_not_valid() {
    assert_eq!(plan().validate(), Ok(()));
    assert_eq!(broken(|plan| plan.ops.clear()), "ops");
    assert_eq!(broken(|plan| plan.tick = Span::ZERO), "tick");
    assert_eq!(broken(|plan| plan.queue = 0), "queue");
    assert_eq!(broken(|plan| step(plan, 0).duration = Span::ZERO), "ops/0");
    assert_eq!(broken(|plan| step(plan, 1).label = Some(7)), "ops/1");
    assert_eq!(broken(|plan| step(plan, 1).then = Next::SkipTo(1)), "ops/1");
    assert_eq!(broken(|plan| step(plan, 1).then = Next::SkipTo(9)), "ops/1");
    let backwards = Action::Current {
        target: Current::from_microamperes(-1),
        ramp: Span::ZERO,
    };
    assert_eq!(broken(|plan| step(plan, 1).action = backwards), "ops/1");
    let undervoltage = |plan: &mut Plan| plan.interlocks.undervoltage.threshold = Voltage::MAX;
    assert_eq!(broken(undervoltage), "interlocks/undervoltage");
    assert_eq!(
        broken(|plan| plan.interlocks.silence = Span::ZERO),
        "interlocks/silence"
    );
}

#[test]
fn loops_must_match_nest_and_end() {
    assert_eq!(
        broken(|plan| plan.ops.push(Op::LoopEnd { begin: 0 })),
        "ops/3"
    );
    assert_eq!(broken(|plan| plan.ops.insert(0, head(3, Some(2)))), "ops/0");
    let looped = |times| {
        move |plan: &mut Plan| {
            plan.ops.insert(0, head(4, times));
            plan.ops.push(Op::LoopEnd { begin: 0 });
        }
    };
    let mut valid = plan();
    looped(Some(2))(&mut valid);
    assert_eq!(valid.validate(), Ok(()));
    assert_eq!(broken(looped(Some(0))), "ops/0");
    assert_eq!(broken(looped(None)), "ops/0");
    assert_eq!(
        broken(|plan| {
            plan.ops.insert(1, head(3, Some(2)));
            plan.ops.insert(3, Op::LoopEnd { begin: 1 });
            step(plan, 0).then = Next::SkipTo(2);
        }),
        "ops/0"
    );
}
