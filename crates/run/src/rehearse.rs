//! A run in virtual time against the simulator: the same keeper, session and sequencer as at
//! night, the firmware's own logic, a simulated source.
//!
//! Nothing waits: time jumps to whatever comes next, and the disk is taken to be instant. What
//! would be recorded is handed to an observer, so a rehearsal can keep a record, draw a curve
//! or count, and costs nothing where it does none of that.

use journal::Entry;
use quantity::{HostTime, Span};
use sequencer::event::{Command, Ending};
use sequencer::status::Status;
use sequencer::{PlanError, Sequencer};
use simulator::device::SimulatedSink;

use crate::keeper::{Effect, Keeper, KeeperConfig};

/// Without any deadline, how far time is moved on to hear what the sink has to say.
const IDLE_STRIDE: Span = Span::from_secs(1);

/// Effects at one instant beyond which keeper and session are going round in circles.
const EFFECTS_AT_ONCE_MAX: u32 = 1_000_000;

/// How a rehearsal went.
#[derive(Debug, Clone, PartialEq)]
pub struct Rehearsal {
    /// How the run ended.
    pub ending: Ending,
    /// How it stood at its end: charge, energy, elapsed time, margins with the worst so far.
    pub status: Status,
    /// Entries that a record would hold.
    pub entries: u64,
    /// Virtual time from the greeting to the last entry.
    pub took: Span,
}

/// Why a rehearsal could not come to an end.
#[derive(Debug, thiserror::Error)]
pub enum RehearseError {
    /// The plan is not sound.
    #[error(transparent)]
    Plan(#[from] PlanError),
    /// The sink refused to be greeted: its description does not match.
    #[error("the simulated sink is not the one the bench file describes: {0}")]
    NotTheSinkDescribed(String),
    /// The run had not ended when the time allowed was over.
    #[error("the run had not ended after {0}; bound its steps with `at_most`")]
    Endless(Span),
}

/// What may be asked of a rehearsal while it goes on.
pub trait Observer {
    /// Sees every entry as it would be recorded.
    fn entry(&mut self, entry: &Entry);

    /// Asked from time to time, with the virtual time passed; an answer is given to the run.
    fn intervene(&mut self, passed: Span, device: &mut SimulatedSink) -> Option<Command> {
        let _ = (passed, device);
        None
    }
}

impl<F: FnMut(&Entry)> Observer for F {
    fn entry(&mut self, entry: &Entry) {
        self(entry);
    }
}

/// Rehearses a plan on a simulated sink, beginning at the host time `start`, for no longer than
/// `at_most` of virtual time.
///
/// # Errors
/// [`RehearseError`] for an unsound plan, another sink than described, or a run without end.
pub fn rehearse(
    sequencer: Sequencer,
    config: KeeperConfig,
    device: &mut SimulatedSink,
    start: HostTime,
    at_most: Span,
    observer: &mut dyn Observer,
) -> Result<Rehearsal, RehearseError> {
    let begun = device.now();
    let mut rehearsal = InVirtualTime {
        keeper: Keeper::new(config, 0),
        device,
        observer,
        start,
        begun,
        entries: 0,
        inbound: Vec::with_capacity(4096),
        outbound: Vec::with_capacity(4096),
        closed: None,
    };
    let begun = rehearsal.keeper.begin(sequencer, 0, start);
    debug_assert!(begun.is_ok(), "a new keeper has no run");
    loop {
        rehearsal.settle()?;
        if let Some((ending, status)) = rehearsal.closed.take() {
            return Ok(Rehearsal {
                ending,
                status,
                entries: rehearsal.entries,
                took: rehearsal.passed(),
            });
        }
        if rehearsal.passed() > at_most {
            return Err(RehearseError::Endless(at_most));
        }
        rehearsal.move_on();
    }
}

struct InVirtualTime<'a> {
    keeper: Keeper,
    device: &'a mut SimulatedSink,
    observer: &'a mut dyn Observer,
    start: HostTime,
    /// The device's own time when the rehearsal began.
    begun: Span,
    entries: u64,
    inbound: Vec<u8>,
    outbound: Vec<u8>,
    closed: Option<(Ending, Status)>,
}

impl InVirtualTime<'_> {
    fn passed(&self) -> Span {
        self.device.now().saturating_sub(self.begun)
    }

    fn now(&self) -> HostTime {
        self.start.saturating_add(self.passed())
    }

    /// Does all that is to be done at this instant.
    fn settle(&mut self) -> Result<(), RehearseError> {
        let now = self.now();
        for _ in 0..EFFECTS_AT_ONCE_MAX {
            let Some(effect) = self.keeper.poll_effect() else {
                self.outbound.clear();
                self.keeper.take_transmit(&mut self.outbound);
                self.device.receive(&self.outbound);
                return Ok(());
            };
            match effect {
                Effect::Append(entry) => {
                    self.observer.entry(&entry);
                    self.entries = entry.number;
                    self.keeper.durable(entry.number, now);
                }
                Effect::Closed { ending, status } => self.closed = Some((ending, *status)),
                Effect::NotTheSinkDescribed(mismatches) => {
                    let fields: Vec<_> = mismatches
                        .iter()
                        .map(|one| format!("{} is {}, not {}", one.field, one.found, one.expected))
                        .collect();
                    return Err(RehearseError::NotTheSinkDescribed(fields.join("; ")));
                }
                Effect::Reset(_) | Effect::OffAcknowledged => {}
            }
        }
        panic!(
            "more than {EFFECTS_AT_ONCE_MAX} effects at one instant: a broken invariant of ours"
        );
    }

    /// Moves time on to whatever comes next: bytes from the sink or a deadline of the keeper.
    fn move_on(&mut self) {
        let passed = self.passed();
        if let Some(command) = self.observer.intervene(passed, self.device) {
            let now = self.now();
            self.keeper.command(command, now);
            return;
        }
        let until = match self.keeper.deadline() {
            Some(deadline) => deadline.saturating_since(self.start),
            None => passed.saturating_add(IDLE_STRIDE),
        };
        self.inbound.clear();
        let until = self.begun.saturating_add(until);
        self.device.advance_to_output(until, &mut self.inbound);
        let now = self.now();
        if self.inbound.is_empty() {
            self.keeper.tick(now);
        } else {
            self.keeper.receive(&self.inbound, now);
        }
    }
}
