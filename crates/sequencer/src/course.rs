//! The course of a run: what runs, what is queued, and where the program goes next.
//!
//! Invariants:
//! - Steps follow each other by the schedule: each begins exactly when the one before ends, so
//!   that nothing accumulates however often a loop turns.
//! - What is queued is always what the program does if no condition is met; meeting one drops
//!   it and sets the cursor anew.

use std::collections::VecDeque;

use quantity::{Current, Quantity, SinkTime, Span, Voltage};
use sequence::plan::{Action, OpIndex};

use crate::account::Share;
use crate::condition::Watch;
use crate::expectation::Ordered;
use crate::program::{Cursor, Frame, Program, Slot};

/// A step that has been ordered and has not begun.
#[derive(Debug, Clone)]
pub(crate) struct Queued {
    pub(crate) step: Ordered,
    /// The conditions of a step that goes on after a hold or an interruption.
    pub(crate) carried: Option<Watch>,
    /// When it began by the sink's own word.
    pub(crate) edge: Option<SinkTime>,
}

/// The step that runs, or that was running when the run was suspended.
#[derive(Debug, Clone)]
pub(crate) struct Running {
    pub(crate) step: Ordered,
    pub(crate) watch: Watch,
    /// Its end has been decided and told; it lasts until the next one begins.
    pub(crate) ended: bool,
    /// When it began, by the sink's own word if that came.
    pub(crate) since: SinkTime,
}

/// The conditions of a loop that the running step is in.
#[derive(Debug, Clone)]
pub(crate) struct LoopWatch {
    pub(crate) frame: Frame,
    pub(crate) watch: Watch,
}

/// A step that was broken off, to be taken up again.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Suspension {
    pub(crate) op: OpIndex,
    /// How much of it is left, and how much is done.
    pub(crate) left: Span,
    pub(crate) done: Span,
    /// A loop's `at_most` would have ended it.
    pub(crate) cut: bool,
    /// It had begun: its conditions go on from what they have seen.
    pub(crate) begun: bool,
    /// The loops around it, with what is left of their `at_most`.
    pub(crate) frames: Vec<(Frame, Option<Span>)>,
}

/// What runs, what is queued, and where the program goes next.
#[derive(Debug, Clone, Default)]
pub(crate) struct Course {
    pub(crate) running: Option<Running>,
    pub(crate) queue: VecDeque<Queued>,
    pub(crate) loops: Vec<LoopWatch>,
    /// Dropped steps that may begin before the sink hears of it.
    stragglers: Vec<Ordered>,
    /// The step after the last one queued.
    ahead: Option<Slot>,
    serials: u64,
}

impl Course {
    /// Sets out from a place in the program; what was queued is forgotten.
    ///
    /// Returns whether there is a step to go to.
    pub(crate) fn set_out(
        &mut self,
        program: &Program,
        mut cursor: Cursor,
        start: SinkTime,
    ) -> bool {
        self.queue.clear();
        self.ahead = program.walk(&mut cursor, start, &mut self.serials);
        self.ahead.is_some()
    }

    /// Forgets the queue from this place on, for something that begins at `start`.
    ///
    /// What is due before may still begin, since the order to drop it is on its way: it bounds
    /// what may flow, and the running step surely lasts no longer than to it.
    pub(crate) fn drop_from(&mut self, place: usize, start: SinkTime) {
        self.stragglers.clear();
        for queued in self.queue.drain(place..) {
            if queued.step.slot.start < start {
                let drawn_until = queued.step.drawn_until.max(start);
                self.stragglers.push(Ordered {
                    acknowledged: false,
                    drawn_until,
                    ..queued.step
                });
            }
        }
        let first = self.stragglers.first().map(|step| step.slot.start);
        let last = match self.queue.back_mut() {
            Some(queued) => Some(&mut queued.step),
            None => self.running.as_mut().map(|running| &mut running.step),
        };
        if let Some(last) = last {
            // It surely lasts to its hold; beyond that only if the next one is queued by then.
            let surely = start.min(last.hold_end);
            last.slot.end = first.map_or(surely, |first| first.min(surely));
            last.drawn_until = last.drawn_until.max(last.hold_end).max(start);
        }
    }

    /// Another step runs: what was dropped cannot begin any more.
    pub(crate) fn forget_stragglers(&mut self) {
        self.stragglers.clear();
    }

    /// Whether a dropped step's own hold may have run out at this time.
    pub(crate) fn straggler_expired(&self, time: SinkTime) -> bool {
        self.stragglers.iter().any(|step| step.hold_end <= time)
    }

    /// Goes on from a place in the program after what is queued.
    pub(crate) fn go_on_from(&mut self, program: &Program, mut cursor: Cursor, start: SinkTime) {
        self.ahead = program.walk(&mut cursor, start, &mut self.serials);
    }

    /// Sets out from exactly this slot.
    pub(crate) fn set_out_from(&mut self, slot: Slot) {
        self.queue.clear();
        self.ahead = Some(slot);
    }

    /// Takes the next step off the program; also tells whether it is the last.
    pub(crate) fn take(&mut self, program: &Program) -> Option<(Slot, bool)> {
        let slot = self.ahead.take()?;
        if let Some(step) = program.step(slot.op) {
            let after = program.follow(slot.op, &slot.frames, step.then);
            self.ahead =
                after.and_then(|mut cursor| program.walk(&mut cursor, slot.end, &mut self.serials));
        }
        let last = self.ahead.is_none();
        Some((slot, last))
    }

    /// The step that would be queued next.
    pub(crate) fn ahead(&self) -> Option<&Slot> {
        self.ahead.as_ref()
    }

    /// Moves what has not been queued yet to a later start.
    pub(crate) fn delay_ahead(&mut self, start: SinkTime) {
        if let Some(slot) = &mut self.ahead {
            *slot = moved(slot, start);
        }
    }

    /// Whether the program has no step after those queued.
    pub(crate) fn is_over(&self) -> bool {
        self.ahead.is_none()
    }

    /// The step before whatever is queued next.
    pub(crate) fn last_ordered(&self) -> Option<&Ordered> {
        self.queue
            .back()
            .map(|queued| &queued.step)
            .or(self.running.as_ref().map(|running| &running.step))
    }

    /// The next step is due by `time`, and whether the sink has it is not known yet: until it is,
    /// the running one may go on to the end of its hold.
    pub(crate) fn doubt(&mut self, time: SinkTime) {
        let next = self.queue.front().map(|queued| &queued.step);
        if next.is_some_and(|next| !next.acknowledged && next.slot.start <= time)
            && let Some(running) = &mut self.running
        {
            running.step.drawn_until = running.step.drawn_until.max(running.step.hold_end);
        }
    }

    /// What may be set just before a step that begins at `start`, at least and at most; from there
    /// a ramp begins.
    ///
    /// The sink ramps from where it is in the same mode, from the target itself on a change of
    /// mode, from zero when off (line protocol, section 3).
    pub(crate) fn ramp_from(&self, start: SinkTime, target: Current) -> (Current, Current) {
        let Some(last) = self.last_ordered().filter(|last| !last.broken_off) else {
            return (Current::ZERO, Current::ZERO);
        };
        let level = |step: &Ordered| match step.action {
            Action::Rest | Action::Current { .. } => step.levels(start).unwrap_or((target, target)),
            Action::Power { .. } | Action::Resistance { .. } => (target, target),
        };
        let first = level(last);
        let off = (last.hold_end < start).then_some((Current::ZERO, Current::ZERO));
        // Stragglers lie before the first step of the queue only.
        let between = if self.queue.is_empty() {
            &self.stragglers[..]
        } else {
            &[]
        };
        let others = between.iter().map(level).chain(off);
        others.fold(first, |a, b| (a.0.min(b.0), a.1.max(b.1)))
    }

    /// How many queued steps have not begun at this time.
    pub(crate) fn waiting(&self, now: SinkTime) -> usize {
        self.queue.len()
            - self
                .queue
                .partition_point(|queued| queued.step.slot.start <= now)
    }

    /// The steps that run or are queued, in their order.
    pub(crate) fn steps(&self) -> impl Iterator<Item = &Ordered> {
        let running = self.running.iter().map(|running| &running.step);
        running.chain(self.queue.iter().map(|queued| &queued.step))
    }

    /// The same with those that have been dropped and may begin nevertheless.
    pub(crate) fn possible_steps(&self) -> impl Iterator<Item = &Ordered> {
        let running = self.running.iter().map(|running| &running.step);
        let queued = self.queue.iter().map(|queued| &queued.step);
        running.chain(&self.stragglers).chain(queued)
    }

    /// The charge that the steps ask for between two instants, in uA us.
    fn asked(&self, from: SinkTime, to: SinkTime, voltage: Voltage) -> i128 {
        let mut total = 0_i128;
        for step in self.steps() {
            if step.slot.start >= to {
                break;
            }
            let knee = step.slot.start.saturating_add(step.ramp);
            let (start, end) = (from.max(step.slot.start), to.min(step.slot.end));
            for (a, b) in [(start, end.min(knee)), (start.max(knee), end)] {
                let Some(span) = b.checked_since(a) else {
                    continue;
                };
                let level = |time| step.setpoint(time, voltage).map_or(0, Quantity::base_units);
                total += (level(a) + level(b)) * i128::from(span.micros()) / 2;
            }
        }
        total
    }

    /// How much of the charge counted between `from` and `to` belongs before an edge.
    pub(crate) fn share(
        &self,
        from: SinkTime,
        edge: SinkTime,
        to: SinkTime,
        voltage: Voltage,
    ) -> Share {
        let whole = self.asked(from, to, voltage);
        if whole > 0 {
            return Share {
                part: self.asked(from, edge, voltage),
                whole,
            };
        }
        Share {
            part: i128::from(edge.saturating_since(from).micros()),
            whole: i128::from(to.saturating_since(from).micros()),
        }
    }

    /// Breaks off at an instant: what had not begun then is forgotten, what had begun ends then.
    ///
    /// `drawn_until` is when current surely has stopped. Returns what is to be taken up again;
    /// `None` if nothing had been ordered.
    pub(crate) fn break_off(
        &mut self,
        time: SinkTime,
        drawn_until: SinkTime,
    ) -> Option<Suspension> {
        // What the sink has not acknowledged it may never have got: it counts as not begun.
        let has_begun =
            |queued: &&Queued| queued.step.acknowledged && queued.step.slot.start <= time;
        let begun = self.queue.iter().take_while(has_begun).count();
        let next = self.queue.get(begun).map(|queued| queued.step.slot.clone());
        self.queue.truncate(begun);
        let decided = begun == 0 && self.running.as_ref().is_some_and(|running| running.ended);
        let current = match self.queue.back_mut() {
            Some(queued) => Some(&mut queued.step),
            None => self.running.as_mut().map(|running| &mut running.step),
        };
        let (slot, begun) = match (&current, next.or_else(|| self.ahead.clone())) {
            // A step whose end had been decided is not taken up again: the next one is.
            (_, Some(next)) if decided || current.is_none() => (next, false),
            (Some(step), _) => (step.slot.clone(), true),
            (None, Some(next)) => (next, false),
            (None, None) => return None,
        };
        if let Some(step) = current {
            step.slot.end = step.slot.end.min(time);
            step.drawn_until = drawn_until;
            step.broken_off = true;
        }
        self.ahead = None;
        let reached = time.max(slot.start);
        Some(Suspension {
            op: slot.op,
            left: slot.end.saturating_since(reached),
            done: reached.saturating_since(slot.start),
            cut: slot.cut,
            begun,
            frames: slot
                .frames
                .iter()
                .map(|frame| {
                    let left = frame
                        .deadline
                        .map(|deadline| deadline.saturating_since(reached));
                    (*frame, left)
                })
                .collect(),
        })
    }
}

impl Suspension {
    /// The slot that takes it up again.
    pub(crate) fn slot(&self, start: SinkTime, tick: Span) -> Slot {
        Slot {
            op: self.op,
            start,
            end: start.saturating_add(self.left.max(tick)),
            cut: self.cut,
            frames: self
                .frames
                .iter()
                .map(|(frame, left)| Frame {
                    deadline: left.map(|left| start.saturating_add(left)),
                    ..*frame
                })
                .collect(),
        }
    }
}

/// The same slot with another start; its loops' times move along.
pub(crate) fn moved(slot: &Slot, start: SinkTime) -> Slot {
    let by = start.saturating_since(slot.start);
    Slot {
        op: slot.op,
        start,
        end: slot.end.saturating_add(by),
        cut: slot.cut,
        frames: slot
            .frames
            .iter()
            .map(|frame| Frame {
                deadline: frame.deadline.map(|deadline| deadline.saturating_add(by)),
                ..*frame
            })
            .collect(),
    }
}
