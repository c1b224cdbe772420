//! Queueing ahead: the sink's queue is kept filled, with start times that follow from each other.
//!
//! A schedule that cannot be kept (a link or a disk that stalled) moves as a whole, and the
//! record says by how much.

use quantity::{Current, SinkTime, Span};
use sequence::plan::Action;
use wire::{Order, OrderId};

use super::{REACTION, Sequencer};
use crate::condition::Watch;
use crate::course::{Queued, moved};
use crate::event::{Finding, Interlock};
use crate::expectation::Ordered;
use crate::guard::micros;
use crate::orders::hold;
use crate::phase::Phase;
use crate::program::Slot;

/// Another readback interval on its way to the sink.
///
/// From the order on the sink gathers extremes anew (protocol, section 3): what it had gathered
/// since its last pair is in no pair. So the next reading speaks for less than its interval.
#[derive(Debug, Clone, Copy)]
pub(super) struct NewWindow {
    order: OrderId,
    /// The sink has taken it: the next reading is the one.
    pub(super) acknowledged: bool,
}

impl Sequencer {
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
        let start = self.sink_now().saturating_add(self.reaction());
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
        self.late = self.late.saturating_add(1);
        let start = self.sink_now().saturating_add(self.reaction());
        self.course.drop_from(place, start);
        let by = start.saturating_since(slot.start);
        self.find(Finding::Rescheduled { op: slot.op, by });
        self.bursts.forget_wanted();
        let mut later = moved(&slot, start);
        if self.plan().by_hand {
            // The interval counts from the command, however late the order came.
            later.end = slot.end.max(start.saturating_add(self.plan().tick));
        }
        self.course.set_out_from(later);
        if let Some((slot, last)) = self.course.take(&self.program) {
            self.queue_step(slot, last, late.carried);
        }
        self.fill();
    }

    pub(super) fn queue_step(&mut self, slot: Slot, last: bool, carried: Option<Watch>) {
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

    /// Orders the readback interval of the step that runs, early enough for a faster one.
    ///
    /// How far it looks ahead is the running step's own interval, not the one ordered last: else
    /// a faster one would be ordered and taken back in turns.
    pub(super) fn keep_readback(&mut self) {
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
            let order = self.order(Order::Readback { interval });
            self.new_window = Some(NewWindow {
                order,
                acknowledged: false,
            });
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
        self.late = 0;
        self.begun_through = self.begun_through.max(queued.step.slot.start);
        if self.phase == Phase::Progress {
            self.follow_the_hand();
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
            self.trip_by(Interlock::Refusal, micros(early_by), 0);
        }
    }

    pub(super) fn acknowledge_new_window(&mut self, order: OrderId) {
        if let Some(window) = &mut self.new_window
            && window.order == order
        {
            window.acknowledged = true;
        }
    }
}
