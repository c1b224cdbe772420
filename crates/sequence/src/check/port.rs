//! Rules on the line: readbacks and orders that the port can carry.

use std::collections::VecDeque;

use quantity::Span;

use super::order::in_order;
use super::{PlanScene, Scene};
use crate::finding::{Finding, Findings};
use crate::plan::{Plan, PlanStep};
use crate::rule::Rule;

/// The longest readback pair: two lines of at most 96 bytes each, as far as their fields can
/// fill them.
const PAIR_BYTES: u64 = 180;
/// An order for a step and its answer.
const STEP_BYTES: u64 = 96;
/// Bits on the line for a byte: start, eight, stop.
const BITS_PER_BYTE: u64 = 10;
/// Time for the host to see an edge and to send what comes next, beside the bytes themselves.
const TURNAROUND: Span = Span::from_millis(100);

/// Every readback interval that stands in the file, and the default where none does.
fn intervals(scene: &Scene<'_>) -> Vec<(Span, String)> {
    let whole = scene.readback();
    let mut intervals = vec![(whole, "/readback".to_owned())];
    scene.draft.each_step(&mut |step| {
        intervals.extend(
            step.readback
                .map(|interval| (interval, step.key("readback"))),
        );
    });
    intervals
}

pub(super) fn readback_within_sink(scene: &Scene<'_>, findings: &mut Findings) {
    let (fastest, sink) = (scene.facts.readback_fastest, &scene.facts.name);
    for (interval, pointer) in intervals(scene) {
        if interval < fastest && interval > Span::ZERO {
            findings.push(
                Finding::new(
                    Rule::ReadbackTooFast,
                    pointer,
                    format!(
                        "a readback every {interval} is faster than the sink `{sink}` can send, \
                         every {fastest}"
                    ),
                    format!(
                        "write {fastest} or longer; a `burst` captures every sample of an edge"
                    ),
                )
                .numbers(interval, fastest),
            );
        }
    }
}

pub(super) fn readback_not_too_slow(scene: &Scene<'_>, findings: &mut Findings) {
    let (slowest, sink) = (scene.facts.readback_slowest, &scene.facts.name);
    for (interval, pointer) in intervals(scene) {
        if interval > slowest {
            findings.push(
                Finding::new(
                    Rule::ReadbackTooSlow,
                    pointer,
                    format!(
                        "a readback every {interval} is slower than the sink `{sink}` is asked                          for on this bench, every {slowest}"
                    ),
                    format!("write {slowest} or shorter"),
                )
                .numbers(interval, slowest),
            );
        }
    }
}

/// The shortest interval at which readbacks fill two thirds of a port.
fn shortest_interval(baud: u32) -> Span {
    let numerator = PAIR_BYTES * BITS_PER_BYTE * 1_000_000 * 3;
    Span::from_micros(numerator.div_ceil(u64::from(baud.max(1)) * 2))
}

pub(super) fn readback_within_port(scene: &Scene<'_>, findings: &mut Findings) {
    let Some(baud) = scene.facts.baud else { return };
    let shortest = shortest_interval(baud);
    for (interval, pointer) in intervals(scene) {
        if interval < shortest && interval >= scene.facts.readback_fastest {
            findings.push(
                Finding::new(
                    Rule::ReadbackAbovePort,
                    pointer,
                    format!(
                        "a readback every {interval} takes more than two thirds of a port at \
                         {baud} baud, which carries one every {shortest}"
                    ),
                    format!("write {shortest} or longer, or give the port more baud on the bench"),
                )
                .numbers(interval, shortest),
            );
        }
    }
}

/// The last so many steps in the order in which the sink gets them.
struct Window<'a> {
    plan: &'a Plan,
    baud: Option<u32>,
    steps: VecDeque<&'a PlanStep>,
    /// How long they last in all, in microseconds.
    held: u128,
    worst: Option<Shortage<'a>>,
}

/// Steps that are over before the port has sent as many.
#[derive(Clone, Copy)]
struct Shortage<'a> {
    held: Span,
    needed: Span,
    first: &'a PlanStep,
}

impl<'a> Window<'a> {
    fn push(&mut self, step: &'a PlanStep) {
        let depth = usize::from(self.plan.queue.max(1));
        self.steps.push_back(step);
        self.held += u128::from(step.duration.micros());
        if self.steps.len() > depth
            && let Some(gone) = self.steps.pop_front()
        {
            self.held -= u128::from(gone.duration.micros());
        }
        let Some(&first) = self.steps.front().filter(|_| self.steps.len() == depth) else {
            return;
        };
        let readback = step.readback.unwrap_or(self.plan.readback);
        let needed = refill(self.plan.queue, self.baud, readback);
        let held = Span::from_micros(u64::try_from(self.held).unwrap_or(u64::MAX));
        if held < needed && self.worst.is_none_or(|worst| held < worst.held) {
            self.worst = Some(Shortage {
                held,
                needed,
                first,
            });
        }
    }
}

/// How long the port needs to send so many steps beside the readbacks.
fn refill(steps: u16, baud: Option<u32>, readback: Span) -> Span {
    let Some(baud) = baud else { return TURNAROUND };
    let micros_per_byte = |bytes: u64| bytes * BITS_PER_BYTE * 1_000_000 / u64::from(baud.max(1));
    let orders = micros_per_byte(STEP_BYTES * u64::from(steps));
    // Readbacks keep their share of the line; the orders have what is left of it.
    let pair = micros_per_byte(PAIR_BYTES);
    let left = readback.micros().saturating_sub(pair).max(1);
    let slowed = u128::from(orders) * u128::from(readback.micros().max(1)) / u128::from(left);
    Span::from_micros(u64::try_from(slowed).unwrap_or(u64::MAX)).saturating_add(TURNAROUND)
}

pub(super) fn queue_refilled(scene: &PlanScene<'_>, findings: &mut Findings) {
    let plan = scene.plan;
    let mut window = Window {
        plan,
        baud: scene.facts.baud,
        steps: VecDeque::new(),
        held: 0,
        worst: None,
    };
    in_order(plan, &mut |step| window.push(step));
    let Some(Shortage {
        held,
        needed,
        first,
    }) = window.worst
    else {
        return;
    };
    findings.push(
        Finding::new(
            Rule::QueueRunsDry,
            first.pointer.clone(),
            format!(
                "from here on {} steps last {held} in all, but the port needs {needed} to send \
                 as many to the sink `{}`",
                plan.queue, scene.facts.name
            ),
            "make the steps longer, the readbacks rarer or the port faster",
        )
        .numbers(held, needed),
    );
}
