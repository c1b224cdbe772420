//! A run by hand, as its worker sees it: what was asked for last, and what was read back since.
//!
//! What it deliberately does not do: check a setpoint (whoever gives the command has), or watch
//! the interval (the sequencer does, and the sink itself).

use std::collections::VecDeque;

use quantity::{Current, HostTime, SinkTime, Span};
use sequence::plan::{Action, Op, Plan};
use sequencer::event::Command;
use uuid::Uuid;
use wire::Reading;

use super::publish::RunInProgress;
use super::{Answer, Worker};
use crate::view::{HandView, RunView};

/// Why a run by hand has stopped, if nothing else has stopped it.
pub(crate) const NOT_ASKED_FOR_AGAIN: &str =
    "the setpoint was not asked for again within its interval";

/// Readbacks that are kept for one setpoint.
const READBACKS_MAX: usize = 512;

/// What is set by hand, and what was read back.
#[derive(Debug)]
pub(crate) struct Hand {
    setpoint: Current,
    interval: Span,
    /// When the sink began to hold it; `None` while that is on its way.
    since: Option<SinkTime>,
    previous: SinkTime,
    readbacks: VecDeque<Reading>,
}

/// What was read back while one setpoint was held.
#[derive(Debug, Clone)]
pub(crate) struct Readbacks {
    /// How long the sink had held it at the last of them.
    pub(crate) held: Span,
    /// Those wholly within that time, nominal, the oldest first.
    pub(crate) readings: Vec<Reading>,
}

impl Hand {
    /// Of a plan that is driven by hand.
    pub(super) fn of(plan: &Plan) -> Option<Self> {
        let Some(Op::Step(step)) = plan.ops.first().filter(|_| plan.by_hand) else {
            return None;
        };
        let setpoint = match step.action {
            Action::Current { target, .. } => target,
            Action::Rest | Action::Power { .. } | Action::Resistance { .. } => Current::ZERO,
        };
        Some(Self {
            setpoint,
            interval: step.duration,
            since: None,
            previous: SinkTime::ZERO,
            readbacks: VecDeque::new(),
        })
    }

    /// As it is shown.
    pub(super) fn view(&self) -> HandView {
        HandView {
            setpoint_a: self.setpoint.amperes(),
            interval_s: self.interval.seconds(),
        }
    }

    /// A step of this current began on the sink: the setpoint, if it is a new one.
    fn began(&mut self, time: SinkTime, current: Current) -> Option<Current> {
        // One that was ordered before the setpoint was changed may still come in between.
        if self.since.is_some() || current != self.setpoint {
            return None;
        }
        self.since = Some(time);
        Some(self.setpoint)
    }

    /// A readback came.
    pub(super) fn read(&mut self, reading: &Reading) {
        if self.since.is_some_and(|since| since <= self.previous) {
            if self.readbacks.len() == READBACKS_MAX {
                self.readbacks.pop_front();
            }
            self.readbacks.push_back(*reading);
        }
        self.previous = reading.time;
    }

    fn set(&mut self, setpoint: Option<Current>, interval: Option<Span>) -> Command {
        if let Some(setpoint) = setpoint
            && setpoint != self.setpoint
        {
            self.setpoint = setpoint;
            self.since = None;
            self.readbacks.clear();
        }
        self.interval = interval.unwrap_or(self.interval);
        Command::Setpoint {
            setpoint: self.setpoint,
            interval: self.interval,
        }
    }

    fn readbacks(&self) -> Readbacks {
        let held = self
            .since
            .map_or(Span::ZERO, |since| self.previous.saturating_since(since));
        Readbacks {
            held,
            readings: self.readbacks.iter().copied().collect(),
        }
    }
}

impl Worker {
    /// Passes a setpoint on to the run by hand that is meant.
    pub(super) fn set_by_hand(
        &mut self,
        id: Uuid,
        setpoint: Option<Current>,
        interval: Option<Span>,
        answer: Answer<Option<RunView>>,
        now: HostTime,
    ) {
        // A run that is ending is over, whatever of it is still awaited.
        let meant = self
            .run
            .as_mut()
            .filter(|run| run.id == id && run.ending.is_none());
        let Some(hand) = meant.and_then(|run| run.hand.as_mut()) else {
            // Whoever asked may be gone.
            let _ = answer.send(None);
            return;
        };
        let command = hand.set(setpoint, interval);
        self.command(id, command, answer, now);
    }

    /// Whether the run in progress is one by hand.
    pub(super) fn is_by_hand(&self) -> bool {
        self.run.as_ref().is_some_and(|run| run.hand.is_some())
    }

    /// A step of the run by hand began: its setpoint, if it is a new one.
    pub(super) fn hand_began(&mut self, time: SinkTime) -> Option<Current> {
        let current = match self.keeper.status()?.action? {
            Action::Current { target, .. } => target,
            Action::Rest | Action::Power { .. } | Action::Resistance { .. } => Current::ZERO,
        };
        self.run.as_mut()?.hand.as_mut()?.began(time, current)
    }

    /// What was read back in the run by hand that is meant.
    pub(super) fn readbacks(&self, id: Uuid) -> Option<Readbacks> {
        let in_progress = |run: &&RunInProgress| run.id == id && run.ending.is_none();
        let run = self.run.as_ref().filter(in_progress)?;
        Some(run.hand.as_ref()?.readbacks())
    }
}
