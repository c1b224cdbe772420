//! How long a plan may take and how many readbacks it may give, at most.
//!
//! A skip can only go forward, so the longest way through a plan is found from its end back to
//! its beginning, loop by loop.

use quantity::Span;

use super::{LoopHead, Next, Op, OpIndex, Plan};

/// What adds up along a way through the plan.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Measure {
    Time,
    Readbacks,
}

fn index(place: OpIndex) -> usize {
    usize::try_from(place).unwrap_or(usize::MAX)
}

impl Plan {
    /// The longest time that the plan can take, held at the longest span of the type.
    pub fn duration_at_most(&self) -> Span {
        Span::from_micros(self.longest(Measure::Time))
    }

    /// The most readbacks that the plan can give.
    pub fn readbacks_at_most(&self) -> u64 {
        self.longest(Measure::Readbacks)
    }

    fn longest(&self, measure: Measure) -> u64 {
        // What is still to come from each instruction on; one more for the end.
        let mut to_come = vec![0_u64; self.ops.len() + 1];
        self.block(0, self.ops.len(), measure, &mut to_come);
        to_come.first().copied().unwrap_or(0)
    }

    /// Fills in `to_come` for the instructions of a block, last first. What lies beyond the
    /// block counts nothing here: inside a loop, time is counted to the loop's foot.
    fn block(&self, begin: usize, end: usize, measure: Measure, to_come: &mut [u64]) {
        let mut at = end;
        while at > begin {
            at -= 1;
            let get = |to_come: &[u64], at: usize| match to_come.get(at) {
                Some(&value) if at < end => value,
                Some(_) | None => 0,
            };
            let value = match self.ops.get(at) {
                Some(Op::Step(step)) => {
                    let nexts = step.until.iter().map(|until| until.then);
                    let best = nexts
                        .chain([step.then])
                        .map(|next| match next {
                            Next::GoOn => get(to_come, at + 1),
                            Next::SkipTo(place) => get(to_come, index(place)),
                            Next::End => 0,
                        })
                        .max()
                        .unwrap_or(0);
                    let given_up = if step.may_give_up {
                        get(to_come, at + 1)
                    } else {
                        0
                    };
                    let own = match measure {
                        Measure::Time => step.duration.micros(),
                        Measure::Readbacks => self.readbacks(step.duration, step.readback),
                    };
                    own.saturating_add(best.max(given_up))
                }
                Some(Op::LoopEnd { begin: head }) => {
                    let head = index(*head);
                    let after = get(to_come, at + 1);
                    let value = self
                        .looped(head, at, end, measure, to_come)
                        .saturating_add(after);
                    if let Some(slot) = to_come.get_mut(head) {
                        *slot = value;
                    }
                    at = head;
                    continue;
                }
                Some(Op::LoopBegin(_)) | None => 0,
            };
            if let Some(slot) = to_come.get_mut(at) {
                *slot = value;
            }
        }
    }

    /// What a loop takes at most, and what may come after it along a skip out of it.
    fn looped(
        &self,
        head: usize,
        foot: usize,
        end: usize,
        measure: Measure,
        to_come: &mut [u64],
    ) -> u64 {
        let Some(Op::LoopBegin(loop_head)) = self.ops.get(head) else {
            return 0;
        };
        let after = to_come.get(foot + 1).copied().unwrap_or(0);
        // Ways out other than the foot: their worth beyond that of simply going on.
        let beyond = self
            .ways_out(head, foot)
            .filter(|&place| place < end)
            .map(|place| to_come.get(place).copied().unwrap_or(0))
            .map(|worth| worth.saturating_sub(after))
            .max()
            .unwrap_or(0);
        self.block(head + 1, foot, measure, to_come);
        let once = to_come.get(head + 1).copied().unwrap_or(0);
        self.turns(loop_head, once, measure).saturating_add(beyond)
    }

    fn turns(&self, head: &LoopHead, once: u64, measure: Measure) -> u64 {
        let by_times = head
            .times
            .map_or(u64::MAX, |times| once.saturating_mul(times));
        let by_time = head.at_most.map_or(u64::MAX, |at_most| match measure {
            Measure::Time => at_most.micros(),
            Measure::Readbacks => self.readbacks(at_most, self.fastest()),
        });
        by_times.min(by_time)
    }

    /// Where skips out of a loop lead.
    fn ways_out(&self, head: usize, foot: usize) -> impl Iterator<Item = usize> {
        let body = self.ops.get(head..foot).unwrap_or(&[]);
        body.iter().flat_map(move |op| {
            let (until, then) = match op {
                Op::Step(step) => (&step.until[..], Some(step.then)),
                Op::LoopBegin(head) => (&head.until[..], None),
                Op::LoopEnd { .. } => (&[][..], None),
            };
            until
                .iter()
                .map(|until| until.then)
                .chain(then)
                .filter_map(move |next| match next {
                    Next::SkipTo(place) if index(place) > foot => Some(index(place)),
                    Next::SkipTo(_) | Next::GoOn | Next::End => None,
                })
        })
    }

    fn readbacks(&self, over: Span, interval: Option<Span>) -> u64 {
        let interval = interval.unwrap_or(self.readback).micros().max(1);
        over.micros().div_ceil(interval)
    }

    /// The shortest readback interval of the plan.
    fn fastest(&self) -> Option<Span> {
        self.ops
            .iter()
            .filter_map(|op| match op {
                Op::Step(step) => step.readback,
                Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
            })
            .chain([self.readback])
            .min()
    }
}
