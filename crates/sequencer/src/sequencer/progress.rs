//! The run under way: beginning and ending steps, conditions and where they lead.

use quantity::SinkTime;
use sequence::plan::Next;
use wire::Order;

use super::Sequencer;
use crate::account::{Counted, Increment};
use crate::condition::Watch;
use crate::course::{LoopWatch, Queued, Running};
use crate::event::{Ending, Finding, StepEnd};
use crate::observation::Observation;
use crate::phase::Phase;
use crate::program::{Frame, Slot};

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
            self.follow_the_hand();
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
    fn enter_loops(&mut self, slot: &Slot, valid_from: SinkTime, base: Counted) {
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
        frames: &[Frame],
        next: Next,
        by: StepEnd,
        time: SinkTime,
        as_planned: bool,
    ) {
        let start = self.sink_now().max(time).saturating_add(self.reaction());
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
        self.bursts.forget_wanted();
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
        self.end(if self.plan().by_hand {
            // Nobody asked for the setpoint again in time.
            Ending::Stopped
        } else {
            Ending::Finished
        });
    }
}
