//! Hold and continue, and taking a step up again where it was broken off.

use quantity::SinkTime;
use wire::Order;

use super::{LEAD, OFF_BY, Sequencer};
use crate::course::Suspension;
use crate::event::Finding;
use crate::phase::{Pause, Phase};
use crate::program::Cursor;

impl Sequencer {
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
        let start = self.sink_now().max(self.latest).saturating_add(LEAD);
        self.begun_through = self.latest;
        self.enter(Phase::Progress);
        if self.plan().isolator {
            // Not with the setup: while a latch stands, closing is refused.
            self.order(Order::Isolator { closed: true });
        }
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
