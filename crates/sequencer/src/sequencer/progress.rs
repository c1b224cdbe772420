//! The run under way: queueing ahead, beginning and ending steps, conditions, hold and continue.

use std::collections::VecDeque;

use quantity::{Current, SinkTime, Span};
use sequence::plan::{Action, Next};
use wire::{Order, OrderId};

use super::{OFF_BY, REACTION, Sequencer};
use crate::account::Increment;
use crate::condition::Watch;
use crate::course::{LoopWatch, Queued, Running, Suspension, moved};
use crate::event::{Ending, Finding, Interlock, StepEnd};
use crate::expectation::Ordered;
use crate::observation::Observation;
use crate::orders::hold;
use crate::phase::{Pause, Phase};
use crate::program::{Cursor, Slot};

/// Time that the samples of a capture take on their way, for each sample: an 80-byte line of four
/// at 115 200 baud is 7 ms, and other lines share the port.
const BURST_SAMPLE: Span = Span::from_millis(4);

/// Captures that are wanted, and the one that is under way.
#[derive(Debug, Clone, Default)]
pub(crate) struct Bursts {
    wanted: VecDeque<Burst>,
    /// The latest ordered, until its samples have come.
    ordered: Option<(OrderId, u32)>,
    busy_until: SinkTime,
    refused: Option<u32>,
}

#[derive(Debug, Clone, Copy)]
struct Burst {
    op: u32,
    at: SinkTime,
    before: u16,
    after: u16,
    length: Span,
}

impl Bursts {
    pub(crate) fn clear(&mut self) {
        *self = Self::default();
    }

    /// Whether this order was a capture, which the sink has refused.
    pub(crate) fn refused(&mut self, order: OrderId) -> bool {
        match self.ordered {
            Some((ordered, op)) if ordered == order => {
                self.ordered = None;
                self.refused = Some(op);
                true
            }
            Some(_) | None => false,
        }
    }

    /// The step whose capture was refused last.
    pub(crate) fn missed(&mut self) -> Option<u32> {
        self.refused.take()
    }
}

impl Sequencer {
    /// A reading under way on which nothing crossed.
    pub(super) fn go_along(
        &mut self,
        seen: &Observation,
        increment: Option<&Increment>,
        gave_up: bool,
    ) {
        self.begin_due(seen.time, increment);
        if !self.judge_conditions(seen, gave_up) {
            self.finish_if_over(seen.time);
        }
        if self.phase == Phase::Progress {
            self.fill();
            self.keep_readback();
        }
    }

    /// Begins every step that was due by `time`, in the account and in the record.
    ///
    /// Steps begin here only with counters to share out (a pair without waits for the next), and
    /// only if the sink has said that it has them.
    pub(super) fn begin_due(&mut self, time: SinkTime, increment: Option<&Increment>) {
        let Some(increment) = increment else { return };
        let due = |next: &Queued| next.step.acknowledged && next.step.slot.start <= time;
        while self.course.queue.front().is_some_and(due) {
            let edge = self
                .course
                .queue
                .front()
                .map_or(time, |next| next.step.slot.start);
            let base = if edge < increment.from {
                self.account.sum()
            } else {
                let share = self
                    .course
                    .share(increment.from, edge, self.latest, self.voltage);
                increment.at_edge(edge, share)
            };
            let Some(next) = self.course.queue.pop_front() else {
                return;
            };
            self.course.forget_stragglers();
            self.end_running(edge);
            let valid_from = edge.saturating_add(self.plan().tick);
            self.enter_loops(&next.step.slot, valid_from, base);
            let op = next.step.slot.op;
            let since = next.edge.unwrap_or(edge);
            let untils = self.program.step(op).map_or(&[][..], |step| &step.until);
            let watch = if let Some(mut watch) = next.carried {
                watch.resume(untils, valid_from);
                watch
            } else {
                let watch = Watch::new(untils, valid_from, base);
                self.find(Finding::StepBegan { op, time: since });
                watch
            };
            if next.step.may_give_up {
                self.guard.forgive_following();
            }
            self.course.running = Some(Running {
                step: next.step,
                watch,
                ended: false,
                since,
            });
        }
    }

    fn end_running(&mut self, edge: SinkTime) {
        let Some(running) = self.course.running.take() else {
            return;
        };
        if running.ended {
            return;
        }
        let by = if running.step.slot.cut {
            StepEnd::Loop
        } else {
            StepEnd::Duration
        };
        let time = edge.min(running.step.slot.end);
        self.find(Finding::StepEnded {
            op: running.step.slot.op,
            time,
            by,
        });
    }

    /// Leaves the loops that the step is not in, and begins those that are new.
    fn enter_loops(&mut self, slot: &Slot, valid_from: SinkTime, base: crate::account::Counted) {
        let loops = &mut self.course.loops;
        loops.retain(|watched| {
            slot.frames
                .iter()
                .any(|frame| frame.serial == watched.frame.serial)
        });
        for (depth, frame) in slot.frames.iter().enumerate() {
            if let Some(watched) = loops.get_mut(depth) {
                watched.frame = *frame;
            } else {
                let untils = self
                    .program
                    .head(frame.head)
                    .map_or(&[][..], |head| &head.until);
                let watch = Watch::new(untils, valid_from, base);
                loops.push(LoopWatch {
                    frame: *frame,
                    watch,
                });
            }
        }
    }

    /// Asks the conditions, outermost loop first, the step last; returns whether one was met.
    fn judge_conditions(&mut self, seen: &Observation, gave_up: bool) -> bool {
        let plan = self.program.plan();
        let sum = self.account.sum();
        let mut met: Option<(usize, Next)> = None;
        for (depth, watched) in self.course.loops.iter_mut().enumerate() {
            let Some(head) = self.program.head(watched.frame.head) else {
                continue;
            };
            let found = watched.watch.met(&head.until, seen, sum, &plan.correction);
            if met.is_none() {
                met = found.map(|(_, until)| (depth, until.then));
            }
        }
        if let Some((depth, next)) = met {
            return self.leave_loop(depth, next, seen.time);
        }
        let Some(running) = &mut self.course.running else {
            return false;
        };
        let Some(step) = self.program.step(running.step.slot.op) else {
            return false;
        };
        let found = running.watch.met(&step.until, seen, sum, &plan.correction);
        // A reading that ends after the step speaks of what follows, too.
        if running.ended || seen.time > running.step.slot.end {
            return false;
        }
        let (by, next) = match found {
            Some((index, until)) => (StepEnd::Until(index), until.then),
            None if gave_up => (StepEnd::GaveUp, step.then),
            None => return false,
        };
        let slot = running.step.slot.clone();
        let as_planned = next == step.then && !slot.cut && next != Next::End;
        self.divert(slot.op, &slot.frames, next, by, seen.time, as_planned);
        true
    }

    fn leave_loop(&mut self, depth: usize, next: Next, time: SinkTime) -> bool {
        let Some(watched) = self.course.loops.get(depth) else {
            return false;
        };
        let head = watched.frame.head;
        // A step outside the loop may be on its way already.
        let serial = watched.frame.serial;
        let decided = self
            .course
            .running
            .as_ref()
            .is_some_and(|running| running.ended);
        let leaving = self.course.queue.front().is_some_and(|queued| {
            !queued
                .step
                .slot
                .frames
                .iter()
                .any(|frame| frame.serial == serial)
        });
        if decided && leaving {
            return false;
        }
        let outside: Vec<_> = self
            .course
            .loops
            .iter()
            .take(depth)
            .map(|watched| watched.frame)
            .collect();
        self.divert(head, &outside, next, StepEnd::Loop, time, false);
        true
    }

    /// Drops what is queued and goes where the condition says.
    ///
    /// `as_planned`: the same step would follow anyway; if it is due soon, it is left to begin
    /// at its time.
    fn divert(
        &mut self,
        op: u32,
        frames: &[crate::program::Frame],
        next: Next,
        by: StepEnd,
        time: SinkTime,
        as_planned: bool,
    ) {
        let start = self.sink_now().max(time).saturating_add(REACTION);
        let end = self
            .course
            .running
            .as_ref()
            .map(|running| running.step.slot.end);
        if as_planned && end.is_some_and(|end| end <= start) && !self.course.queue.is_empty() {
            self.tell_end(by, end.unwrap_or(start));
            return;
        }
        let dropped = !self.course.queue.is_empty();
        self.course.drop_from(0, start);
        let goes_on = match self.program.follow(op, frames, next) {
            Some(cursor) => self.course.set_out(&self.program, cursor, start),
            None => false,
        };
        if !goes_on {
            self.off();
            self.tell_end(by, time);
            self.end(Ending::Finished);
            return;
        }
        if dropped {
            self.order(Order::Clear {
                from: SinkTime::ZERO,
            });
        }
        self.bursts.wanted.clear();
        self.tell_end(by, start);
    }

    fn tell_end(&mut self, by: StepEnd, time: SinkTime) {
        if let Some(running) = &mut self.course.running
            && !running.ended
        {
            running.ended = true;
            let op = running.step.slot.op;
            self.find(Finding::StepEnded { op, time, by });
        }
    }

    fn finish_if_over(&mut self, time: SinkTime) {
        if !self.course.queue.is_empty() || !self.course.is_over() {
            return;
        }
        let Some(running) = &self.course.running else {
            return;
        };
        let end = running.step.slot.end;
        if time < end {
            return;
        }
        self.off();
        self.end_running(end);
        self.end(Ending::Finished);
    }

    /// Keeps the sink's queue filled.
    pub(super) fn fill(&mut self) {
        let capacity = self.capacity();
        while self.course.waiting(self.begun_through) < capacity {
            self.catch_up();
            let Some((slot, last)) = self.course.take(&self.program) else {
                break;
            };
            self.queue_step(slot, last, None);
        }
        self.order_burst();
    }

    /// If the next step's time is past or too near to be met, the rest of the schedule moves.
    fn catch_up(&mut self) {
        let Some(ahead) = self.course.ahead() else {
            return;
        };
        let (op, due) = (ahead.op, ahead.start);
        let nearest = self.sink_now().saturating_add(self.plan().tick);
        if due >= nearest {
            return;
        }
        let start = self.sink_now().saturating_add(REACTION);
        self.course.delay_ahead(start);
        self.draw_on(start);
        self.find(Finding::Rescheduled {
            op,
            by: start.saturating_since(due),
        });
    }

    /// The next step begins later than the last one ends: that one lasts until its hold runs out,
    /// or until `start` if the next is queued by then.
    fn draw_on(&mut self, start: SinkTime) {
        let last = match self.course.queue.back_mut() {
            Some(queued) => Some(&mut queued.step),
            None => self
                .course
                .running
                .as_mut()
                .map(|running| &mut running.step),
        };
        if let Some(last) = last {
            last.drawn_until = last.drawn_until.max(last.hold_end).max(start);
        }
    }

    /// A step was refused because its time had passed: the rest of the schedule moves.
    pub(super) fn reschedule_refused(&mut self, order: OrderId) {
        let place = self
            .course
            .queue
            .iter()
            .position(|queued| queued.step.order == order);
        let Some(place) = place else { return };
        let Some(late) = self.course.queue.get(place).cloned() else {
            return;
        };
        self.order(Order::Clear {
            from: SinkTime::ZERO,
        });
        let slot = late.step.slot;
        let start = self.sink_now().saturating_add(REACTION);
        self.course.drop_from(place, start);
        let by = start.saturating_since(slot.start);
        self.find(Finding::Rescheduled { op: slot.op, by });
        self.bursts.wanted.clear();
        self.course.set_out_from(moved(&slot, start));
        if let Some((slot, last)) = self.course.take(&self.program) {
            self.queue_step(slot, last, late.carried);
        }
        self.fill();
    }

    fn queue_step(&mut self, slot: Slot, last: bool, carried: Option<Watch>) {
        let Some(step) = self.program.step(slot.op) else {
            return;
        };
        let cap = self.program.plan().interlocks.over_current.threshold;
        let previous = self.course.last_ordered();
        let before = previous
            .filter(|previous| !previous.broken_off && previous.drawn_until >= slot.start)
            .map_or(Current::ZERO, |previous| {
                previous
                    .setpoint(slot.start, self.voltage)
                    .unwrap_or(cap)
                    .min(cap)
            });
        let (target, whole_ramp) = match step.action {
            Action::Current { target, ramp } => (target, ramp),
            Action::Rest | Action::Power { .. } | Action::Resistance { .. } => {
                (Current::ZERO, Span::ZERO)
            }
        };
        let ramp_from = self.course.ramp_from(slot.start, target);
        let before = before.max(ramp_from.1);
        let planned = step
            .duration
            .saturating_sub(slot.end.saturating_since(slot.start));
        let ramp = match carried {
            // What is left of a ramp that had begun.
            Some(_) => whole_ramp.saturating_sub(planned),
            None => whole_ramp,
        };
        let duration = slot.end.saturating_since(slot.start);
        let held = hold(duration, last);
        let order = Order::Step(wire::Step {
            mode: self
                .limits
                .mode(self.program.plan(), step.action, self.voltage),
            start: slot.start,
            ramp,
            hold: held,
        });
        let (action, may_give_up, burst) = (step.action, step.may_give_up, step.burst);
        let order = self.order(order);
        if let Some(burst) = burst.filter(|_| carried.is_none()) {
            self.want_burst(&slot, burst);
        }
        let step = Ordered {
            hold_end: slot.start.saturating_add(held),
            drawn_until: slot.end,
            slot,
            order,
            action,
            before,
            ramp_from,
            ramp,
            broken_off: false,
            acknowledged: false,
            may_give_up,
        };
        self.course.queue.push_back(Queued {
            step,
            carried,
            edge: None,
        });
    }

    fn want_burst(&mut self, slot: &Slot, request: sequence::plan::BurstRequest) {
        let tick = self.plan().tick.micros().max(1);
        let samples = |span: Span| u16::try_from(span.micros() / tick).unwrap_or(u16::MAX);
        let (before, after) = (samples(request.before), samples(request.after));
        let count = u64::from(before) + u64::from(after);
        let sending = Span::from_micros(BURST_SAMPLE.micros() * count);
        self.bursts.wanted.push_back(Burst {
            op: slot.op,
            at: slot.start,
            before,
            after,
            length: request.after.saturating_add(sending),
        });
    }

    /// Arms the next capture when the sink has sent the one before.
    fn order_burst(&mut self) {
        let now = self.sink_now();
        while let Some(burst) = self.bursts.wanted.front().copied() {
            let lead = Span::from_micros(self.plan().tick.micros() * u64::from(burst.before));
            if burst.at <= now.saturating_add(lead) {
                self.bursts.wanted.pop_front();
                self.find(Finding::BurstMissed { op: burst.op });
                continue;
            }
            if now < self.bursts.busy_until {
                return;
            }
            self.bursts.wanted.pop_front();
            self.bursts.busy_until = burst.at.saturating_add(burst.length);
            let order = self.order(Order::Burst {
                at: burst.at,
                before: burst.before,
                after: burst.after,
            });
            self.bursts.ordered = Some((order, burst.op));
        }
    }

    /// Orders the readback interval of the step that runs, early enough for a faster one.
    ///
    /// How far it looks ahead is the running step's own interval, not the one ordered last: else
    /// a faster one would be ordered and taken back in turns.
    fn keep_readback(&mut self) {
        let default = self.plan().readback;
        let interval_of = |step: &Ordered| {
            let step = self.program.step(step.slot.op);
            step.and_then(|step| step.readback).unwrap_or(default)
        };
        let mut running = default;
        let mut wanted = None;
        for step in self.course.steps() {
            if step.slot.start <= self.begun_through {
                running = interval_of(step);
                wanted = Some(running);
                continue;
            }
            let horizon = self.latest.saturating_add(running).saturating_add(REACTION);
            if step.slot.start > horizon {
                break;
            }
            let interval = interval_of(step).min(running);
            wanted = Some(wanted.map_or(interval, |wanted| interval.min(wanted)));
        }
        if let Some(interval) = wanted.filter(|interval| *interval != self.readback) {
            self.readback = interval;
            self.order(Order::Readback { interval });
        }
    }

    /// A step began, by the sink's own word: there is room in its queue.
    pub(super) fn on_edge(&mut self, time: SinkTime, order: OrderId) {
        let queued = self
            .course
            .queue
            .iter_mut()
            .find(|queued| queued.step.order == order);
        let Some(queued) = queued else { return };
        queued.edge = Some(time);
        queued.step.acknowledged = true;
        self.begun_through = self.begun_through.max(queued.step.slot.start);
        if self.phase == Phase::Progress {
            self.fill();
            self.keep_readback();
        }
    }

    /// The sink has turned off because nothing followed: as planned at the end, or in a gap that
    /// a late order has torn; anything else means that one side is wrong.
    pub(super) fn on_hold_expired(&mut self, time: SinkTime) {
        if self.phase != Phase::Progress {
            return;
        }
        let begun = self
            .course
            .queue
            .iter()
            .filter(|queued| queued.step.acknowledged && queued.step.slot.start <= time)
            .map(|queued| &queued.step)
            .next_back()
            .or(self.course.running.as_ref().map(|running| &running.step));
        let slack = Span::from_micros(self.plan().tick.micros().saturating_mul(2));
        let early = begun.is_none_or(|step| time.saturating_add(slack) < step.hold_end)
            && !self.course.straggler_expired(time.saturating_add(slack));
        if early {
            let due = begun.map_or(SinkTime::ZERO, |step| step.hold_end);
            let early_by = due.saturating_since(time);
            self.trip_by(Interlock::Refusal, crate::guard::micros(early_by), 0);
        }
    }

    /// Off for now.
    pub(super) fn hold(&mut self) {
        self.held = true;
        if self.phase != Phase::Progress {
            // Nothing runs; and nothing will begin until the run is continued.
            return;
        }
        let now = self.sink_now();
        self.off();
        // Whatever overtakes or follows `off` on its way must not be carried out later.
        self.order(Order::Clear {
            from: SinkTime::ZERO,
        });
        self.bursts.clear();
        self.suspension = self.course.break_off(now, now.saturating_add(OFF_BY));
        self.enter(Phase::Pause(Pause::default()));
        self.find(Finding::Held);
    }

    pub(super) fn ask_to_go_on(&mut self) {
        self.held = false;
        if let Phase::Pause(pause) = self.phase {
            self.enter(Phase::Pause(Pause {
                go_on: true,
                ..pause
            }));
            self.go_on_if_possible();
        }
    }

    pub(super) fn on_off_acknowledged(&mut self) {
        if let Phase::Pause(pause) = self.phase {
            self.enter(Phase::Pause(Pause { off: true, ..pause }));
            self.go_on_if_possible();
        }
    }

    /// Goes on once the sink has said that it is off and all that had begun is accounted for.
    pub(super) fn go_on_if_possible(&mut self) {
        let Phase::Pause(pause) = self.phase else {
            return;
        };
        if !pause.off || !pause.go_on || !self.course.queue.is_empty() {
            return;
        }
        self.find(Finding::Continued);
        self.set_going();
    }

    /// Begins, or goes on where the run was broken off.
    pub(super) fn set_going(&mut self) {
        let start = self.sink_now().max(self.latest).saturating_add(super::LEAD);
        self.begun_through = self.latest;
        self.enter(Phase::Progress);
        if let Some(suspension) = self.suspension.take() {
            self.take_up(&suspension, start);
        } else {
            self.course.set_out(&self.program, Cursor::default(), start);
        }
        self.fill();
    }

    /// Goes on with a step where it was broken off.
    pub(super) fn take_up(&mut self, suspension: &Suspension, start: SinkTime) {
        let tick = self.plan().tick;
        let slot = suspension.slot(start, tick);
        for watched in &mut self.course.loops {
            let untils = self
                .program
                .head(watched.frame.head)
                .map_or(&[][..], |head| &head.until);
            watched.watch.resume(untils, start.saturating_add(tick));
        }
        // The step that was broken off stays until this one begins: what it drew may still show
        // in the next reading.
        let carried = self.course.running.as_mut().and_then(|running| {
            running.ended = true;
            let same = suspension.begun && running.step.slot.op == slot.op;
            same.then(|| running.watch.clone())
        });
        self.course.set_out_from(slot);
        if let Some((slot, last)) = self.course.take(&self.program) {
            self.queue_step(slot, last, carried);
        }
    }
}
