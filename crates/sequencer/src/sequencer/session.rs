//! Sessions: setting the sink up, beginning, losing the link, taking the run up again.

use quantity::{Charge, SinkTime};
use sequence::plan::OnInterruption;
use wire::{Cause, Order, OrderId};

use super::{REACTION, Sequencer};
use crate::account::Increment;
use crate::event::{Ending, Finding, Interlock};
use crate::phase::{Pause, Phase, Preparation};

impl Sequencer {
    pub(super) fn on_connected(&mut self, time: SinkTime) {
        if self.phase.is_under_way() {
            // A new session has turned the sink off, whether or not the loss was noticed.
            self.on_link_lost();
        }
        let (again, rebooted) = match &self.phase {
            Phase::Preparation(preparation) => (preparation.again, preparation.rebooted),
            // A clock that shows less than it did belongs to a sink that has started anew.
            Phase::Interruption { .. } => (self.has_begun(), self.rebooted || time < self.latest),
            Phase::Waiting | Phase::Progress | Phase::Pause(_) | Phase::End(_) => (false, false),
        };
        if again && self.plan().on_interruption == OnInterruption::End {
            self.off();
            self.end(Ending::Interrupted);
            return;
        }
        self.previous = None;
        self.alignment.restart();
        self.guard.restart();
        self.readback = self.plan().readback;
        self.new_window = None;
        let setup = self.limits.setup(self.plan());
        let mut awaited = None;
        for order in setup {
            awaited = Some(self.order(order));
        }
        self.enter(Phase::Preparation(Preparation {
            since: self.now,
            connected: time,
            awaited,
            reset: None,
            again,
            rebooted,
        }));
    }

    /// Whether a step had been ordered before.
    fn has_begun(&self) -> bool {
        self.suspension.is_some() || self.course.running.is_some() || !self.course.queue.is_empty()
    }

    pub(super) fn on_acknowledged(&mut self, order: OrderId) {
        self.acknowledge_new_window(order);
        if let Phase::Preparation(preparation) = &mut self.phase {
            if preparation.awaited == Some(order) {
                preparation.awaited = None;
            }
            if preparation.reset == Some(order) {
                preparation.reset = None;
            }
            return;
        }
        let queued = self
            .course
            .queue
            .iter_mut()
            .find(|queued| queued.step.order == order);
        if let Some(queued) = queued {
            queued.step.acknowledged = true;
        }
    }

    pub(super) fn on_link_lost(&mut self) {
        match &self.phase {
            Phase::Waiting | Phase::Interruption { .. } | Phase::End(_) => {}
            Phase::Preparation(_) | Phase::Progress | Phase::Pause(_) => {
                self.bursts.clear();
                self.rebooted = false;
                self.enter(Phase::Interruption { since: self.now });
            }
        }
    }

    pub(super) fn on_rebooted(&mut self) {
        match &mut self.phase {
            Phase::Waiting | Phase::End(_) => {}
            Phase::Interruption { .. } => self.rebooted = true,
            Phase::Preparation(preparation) => preparation.rebooted = true,
            // A sink that starts anew in the middle of a run is broken, or its supply is.
            Phase::Progress | Phase::Pause(_) => self.trip_by(Interlock::Clock, 0, 0),
        }
    }

    /// A reading of a session that has not begun to run, and on which nothing crossed.
    pub(super) fn prepare(&mut self, preparation: Preparation, latched: Option<Cause>) {
        if let Some(cause) = latched {
            self.meet_latch(preparation, cause);
            return;
        }
        if preparation.awaited.is_some() || preparation.reset.is_some() {
            return;
        }
        if let Some(running) = &mut self.course.running {
            // Its times may be of a clock that is no more, and it draws nothing now.
            running.step.forget_times();
        }
        if self.held {
            let pause = Pause {
                off: true,
                go_on: false,
            };
            self.enter(Phase::Pause(pause));
            self.find(Finding::Held);
            return;
        }
        if self.suspension.is_some() {
            self.find(Finding::Continued);
        }
        self.set_going();
    }

    /// The sink is latched before the run begins.
    ///
    /// Only the latch that the host's own silence causes is reset, and only for a run that is
    /// taken up again: any other is a person's to look at.
    fn meet_latch(&mut self, preparation: Preparation, cause: Cause) {
        if preparation.again && cause == Cause::Deadman {
            if preparation.awaited.is_none() && preparation.reset.is_none() {
                let reset = Some(self.order(Order::Reset));
                self.enter(Phase::Preparation(Preparation {
                    reset,
                    ..preparation
                }));
            }
            return;
        }
        if preparation.again {
            self.trip_by_sink(cause, 0);
        } else {
            self.trip_by(Interlock::Refusal, 0, 0);
        }
    }

    /// The first reading after an interruption: closes the gap in the account.
    ///
    /// When the sink went off is not known, only that it went on by its queue until its deadman
    /// or the new session turned it off. A step of known current tells it by the charge counted
    /// since; otherwise the latest time possible is taken, so that no step is held longer than
    /// the plan says.
    pub(super) fn close_gap(
        &mut self,
        preparation: Preparation,
        last: SinkTime,
        increment: Option<&Increment>,
    ) {
        if self.suspension.is_some() {
            return;
        }
        let off = if preparation.rebooted {
            last
        } else {
            let latest = last
                .saturating_add(self.plan().deadman)
                .saturating_add(REACTION)
                .min(preparation.connected)
                .max(last);
            let counted = increment.map(Increment::charge);
            self.off_by_charge(last, counted)
                .map_or(latest, |off| off.clamp(last, latest))
        };
        self.suspension = self.course.break_off(off, off);
        let nothing = Increment::nothing(last, self.account.sum());
        self.begin_due(off, Some(increment.unwrap_or(&nothing)));
    }

    /// When the running step's current has moved the charge counted; `None` if that cannot tell.
    fn off_by_charge(&self, last: SinkTime, counted: Option<Charge>) -> Option<SinkTime> {
        let running = self.course.running.as_ref()?;
        let current = running.step.setpoint(last, self.voltage)?;
        let took = counted?.over_current(current)?;
        let off = last.saturating_add(took);
        (off < running.step.slot.end).then_some(off)
    }
}
