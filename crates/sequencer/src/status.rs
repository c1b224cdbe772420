//! A snapshot of a run for those who look on: the live page, a rehearsal, the demo.
//!
//! Nothing in it decides anything.

use quantity::{Charge, Current, Energy, HostTime, SinkTime, Span, Voltage};
use sequence::plan::{Action, OpIndex};

use crate::event::Ending;
use crate::guard::Margin;
use crate::phase::Phase;
use crate::sequencer::Sequencer;

/// Where a run stands, as told to those who look on.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Standing {
    /// No session yet.
    Waiting,
    /// The sink is being set up; the first step has not been ordered.
    Connecting,
    /// A step runs.
    Running {
        /// Its place in the plan.
        op: OpIndex,
        /// Its label.
        label: Option<String>,
        /// When it began, by the sink's clock.
        since: SinkTime,
    },
    /// Steps are ordered and the first has not begun.
    Starting,
    /// Held: off until continued.
    Held,
    /// The link is gone, since this host time.
    Interrupted {
        /// Since when.
        since: HostTime,
    },
    /// Over.
    Ended(Ending),
}

/// How far a loop has turned.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct LoopCount {
    /// Where its head is in the plan.
    pub op: OpIndex,
    /// Its label.
    pub label: Option<String>,
    /// The round that runs, from 1.
    pub round: u64,
    /// How many rounds at most; `None`: until a condition.
    pub times: Option<u64>,
}

/// A snapshot of a run.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Status {
    /// Where it stands.
    pub standing: Standing,
    /// What the running step holds.
    pub action: Option<Action>,
    /// The current asked for now, at the latest voltage; `None` where nothing runs.
    pub setpoint: Option<Current>,
    /// Voltage of the device under test in the latest reading, mean.
    pub voltage: Voltage,
    /// Sink time of the latest reading.
    pub sink_time: SinkTime,
    /// Charge delivered since the run began.
    pub charge: Charge,
    /// Energy delivered since the run began.
    pub energy: Energy,
    /// Charge delivered since the running step began.
    pub step_charge: Option<Charge>,
    /// Time under way, held included, interruptions not.
    pub elapsed: Span,
    /// Time until the end at most, if every condition waits as long as it may; `None` if nothing
    /// bounds it.
    pub left_at_most: Option<Span>,
    /// The loops around the running step, outermost first.
    pub loops: Vec<LoopCount>,
    /// How near every judged interlock is and came, in the table's order.
    pub margins: Vec<Margin>,
}

impl Sequencer {
    /// A snapshot for those who look on. Costs an allocation or two: not for every reading.
    pub fn status(&self) -> Status {
        let correction = &self.plan().correction;
        let sum = self.account.sum();
        let running = self
            .course
            .running
            .as_ref()
            .filter(|_| self.phase == Phase::Progress);
        Status {
            standing: self.standing(),
            action: running.map(|running| running.step.action),
            setpoint: running
                .filter(|running| self.latest < running.step.drawn_until)
                .and_then(|running| running.step.setpoint(self.latest, self.voltage)),
            voltage: self.voltage,
            sink_time: self.latest,
            charge: sum.charge(correction),
            energy: sum.energy(correction),
            step_charge: running.map(|running| sum.since(running.watch.base()).charge(correction)),
            elapsed: self.elapsed,
            left_at_most: self.left_at_most(),
            loops: self.loop_counts(),
            margins: self.guard.margins().collect(),
        }
    }

    /// How near every judged interlock is and came, in the table's order.
    pub fn margins(&self) -> impl Iterator<Item = Margin> {
        self.guard.margins()
    }

    fn standing(&self) -> Standing {
        match &self.phase {
            Phase::Waiting => Standing::Waiting,
            Phase::Preparation(_) => Standing::Connecting,
            Phase::Progress => match &self.course.running {
                Some(running) => {
                    let op = running.step.slot.op;
                    let label = self.program.step(op).and_then(|step| step.label);
                    Standing::Running {
                        op,
                        label: self.label(label),
                        since: running.since,
                    }
                }
                None => Standing::Starting,
            },
            Phase::Pause(_) => Standing::Held,
            Phase::Interruption { since } => Standing::Interrupted { since: *since },
            Phase::End(ending) => Standing::Ended(ending.clone()),
        }
    }

    fn label(&self, index: Option<u32>) -> Option<String> {
        self.plan()
            .labels
            .get(usize::try_from(index?).ok()?)
            .cloned()
    }

    fn loop_counts(&self) -> Vec<LoopCount> {
        let count = |watched: &crate::course::LoopWatch| {
            let head = self.program.head(watched.frame.head)?;
            Some(LoopCount {
                op: watched.frame.head,
                label: self.label(head.label),
                round: watched.frame.round,
                times: head.times,
            })
        };
        self.course.loops.iter().filter_map(count).collect()
    }

    fn left_at_most(&self) -> Option<Span> {
        if let Some(suspension) = &self.suspension {
            let slot = suspension.slot(self.latest, self.plan().tick);
            let whole = self
                .program
                .at_most_from(slot.op, &slot.frames, self.latest)?;
            let duration = self.program.step(slot.op)?.duration;
            return Some(whole.saturating_sub(duration.saturating_sub(suspension.left)));
        }
        match &self.phase {
            Phase::Waiting | Phase::Preparation(_) => {
                self.program.at_most_from(0, &[], SinkTime::ZERO)
            }
            Phase::Progress if self.plan().by_hand => {
                let last = self.course.last_ordered()?;
                Some(last.slot.end.saturating_since(self.latest))
            }
            Phase::Progress | Phase::Pause(_) | Phase::Interruption { .. } => {
                let step = self.course.steps().next()?;
                let slot = &step.slot;
                let whole = self
                    .program
                    .at_most_from(slot.op, &slot.frames, slot.start)?;
                let done = self.latest.saturating_since(slot.start);
                let early = slot.start.saturating_since(self.latest);
                Some(whole.saturating_sub(done).saturating_add(early))
            }
            Phase::End(_) => Some(Span::ZERO),
        }
    }
}
