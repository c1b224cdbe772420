//! A run by hand: its one step is set anew by commands, each for an interval.
//!
//! Every command becomes a step of its own on the sink, whose hold ends with the interval: the
//! sink goes off by itself if no further command comes, whatever has become of the script, this
//! host or the link. A command that comes while the step before is still on its way waits until
//! that one has begun; the latest wins, so that commands may come at any rate.

use quantity::{Current, SinkTime, Span};
use sequence::plan::Action;

use super::Sequencer;
use crate::event::Interlock;
use crate::phase::Phase;
use crate::program::Cursor;

/// What the hand wants and the sink has not been told yet.
#[derive(Debug, Clone, Copy)]
pub(super) struct Wanted {
    setpoint: Current,
    /// When it is over unless asked for again.
    until: SinkTime,
}

impl Sequencer {
    /// Takes a setpoint by hand.
    pub(super) fn set_by_hand(&mut self, setpoint: Current, interval: Span) {
        if !self.plan().by_hand {
            return;
        }
        if self.phase == Phase::Progress {
            self.hand = Some(Wanted {
                setpoint,
                until: self.sink_now().saturating_add(interval),
            });
            self.follow_the_hand();
            if self.phase == Phase::Progress {
                self.fill();
            }
        } else {
            // Nothing runs: the first step will be this one.
            self.replace_step(setpoint, interval);
        }
    }

    /// Orders what the hand wants, unless a step is on its way already.
    pub(super) fn follow_the_hand(&mut self) {
        if self.course.waiting(self.begun_through) > 0 {
            return;
        }
        let Some(Wanted { setpoint, until }) = self.hand.take() else {
            return;
        };
        let start = self.sink_now().saturating_add(self.reaction());
        let left = until.saturating_since(start);
        if left < self.plan().tick {
            // Over before it could begin.
            return;
        }
        if !self.replace_step(setpoint, left) {
            return;
        }
        let begun = self.course.queue.len();
        self.course.drop_from(begun, start);
        self.course
            .go_on_from(&self.program, Cursor::default(), start);
    }

    /// Whether the step is the one wanted now; one that no plan could have ends the run, since
    /// whoever passed it on has not checked it.
    fn replace_step(&mut self, setpoint: Current, duration: Span) -> bool {
        let action = if setpoint == Current::ZERO {
            Action::Rest
        } else {
            Action::Current {
                target: setpoint,
                ramp: Span::ZERO,
            }
        };
        let taken = self
            .program
            .set_by_hand(&self.limits, action, duration)
            .is_ok();
        if !taken {
            self.trip_by(Interlock::Refusal, setpoint.microamperes(), 0);
        }
        taken
    }
}
