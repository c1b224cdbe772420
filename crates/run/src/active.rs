//! A run in progress: the sequencer, and the orders on their way to the disk.

use std::collections::VecDeque;

use journal::{Body, Entry, Note};
use quantity::{HostTime, Span};
use sequence::plan::OnInterruption;
use sequencer::Sequencer;
use sequencer::event::{Ending, Event, Happening, Output};
use sequencer::status::Status;
use wire::{Order, OrderId};

/// How long after its ending a run waits for the sink to say that it is off.
///
/// Longer than the longest deadman: whatever the link does, the sink is off by then.
const CLOSING_MAX: Span = Span::from_secs(11);

/// An order whose entry is not yet known to be durable.
struct Held {
    entry: u64,
    id: OrderId,
    order: Order,
}

/// What a run in progress asks of its keeper.
pub(crate) enum Demand {
    /// Record this.
    Append(Entry),
    /// Turn the sink off now.
    Off,
}

/// How far a run has come to its end.
enum Closing {
    /// It has not ended.
    Open,
    /// It has ended; the sink has yet to say that it is off.
    AwaitingOff { since: HostTime },
    /// The sink has said so; one more readback brings the last counters.
    AwaitingCounters { since: HostTime },
    /// Nothing more will be recorded.
    Closed,
}

/// A run in progress.
pub(crate) struct Active {
    sequencer: Sequencer,
    next_entry: u64,
    durable: u64,
    held: VecDeque<Held>,
    ending: Option<Ending>,
    closing: Closing,
    /// Readbacks come in this session.
    readbacks: bool,
}

impl Active {
    /// A run whose record already holds `recorded` entries.
    pub(crate) fn new(sequencer: Sequencer, recorded: u64) -> Self {
        Self {
            sequencer,
            next_entry: recorded + 1,
            durable: recorded,
            held: VecDeque::new(),
            ending: None,
            closing: Closing::Open,
            readbacks: true,
        }
    }

    /// Records a happening, lets the sequencer judge it, and records what it answers.
    pub(crate) fn happen(&mut self, at: HostTime, what: Happening, demands: &mut VecDeque<Demand>) {
        if matches!(self.closing, Closing::Closed) {
            return;
        }
        let is_off = matches!(what, Happening::OffAcknowledged);
        let is_reading = matches!(what, Happening::Reading(_));
        let event = Event { at, what };
        self.sequencer.handle(&event);
        self.append(at, Body::Event(event.what), demands);
        while let Some(output) = self.sequencer.poll_output() {
            self.take_output(at, output, demands);
        }
        self.advance_closing(is_off, is_reading);
    }

    /// Records something the sequencer does not see.
    pub(crate) fn note(&mut self, at: HostTime, note: Note, demands: &mut VecDeque<Demand>) {
        if !matches!(self.closing, Closing::Closed) {
            self.append(at, Body::Note(note), demands);
        }
    }

    /// Records what the session of a run that is over has left unanswered.
    pub(crate) fn note_at_the_close(
        &mut self,
        at: HostTime,
        note: Note,
        demands: &mut VecDeque<Demand>,
    ) {
        self.append(at, Body::Note(note), demands);
    }

    /// Takes the news that all entries up to `number` are durable; yields the orders that may
    /// now be sent.
    pub(crate) fn durable(&mut self, number: u64) -> impl Iterator<Item = (OrderId, Order)> + '_ {
        self.durable = self.durable.max(number);
        let ready = self.held.partition_point(|held| held.entry <= self.durable);
        self.held.drain(..ready).map(|held| (held.id, held.order))
    }

    /// Whether an order is waiting for the disk.
    pub(crate) fn waits_for_disk(&self) -> bool {
        !self.held.is_empty()
    }

    /// When the run wants to be told that time has passed.
    pub(crate) fn deadline(&self) -> Option<HostTime> {
        match self.closing {
            Closing::Open => self.sequencer.deadline().map(|(at, _)| at),
            Closing::AwaitingOff { since } | Closing::AwaitingCounters { since } => {
                Some(since + CLOSING_MAX)
            }
            Closing::Closed => None,
        }
    }

    /// Closes a run whose sink never said that it is off; by now its deadman has acted.
    pub(crate) fn give_up_closing(&mut self, now: HostTime) {
        if let Closing::AwaitingOff { since } | Closing::AwaitingCounters { since } = self.closing
            && now >= since + CLOSING_MAX
        {
            self.closing = Closing::Closed;
        }
    }

    /// How the run ended, once nothing more will be recorded.
    pub(crate) fn closed(&self) -> Option<&Ending> {
        match self.closing {
            Closing::Closed => self.ending.as_ref(),
            Closing::Open | Closing::AwaitingOff { .. } | Closing::AwaitingCounters { .. } => None,
        }
    }

    /// Whether the plan says to go on after an interruption.
    pub(crate) fn resumes(&self) -> bool {
        self.sequencer.plan().on_interruption == OnInterruption::Resume
    }

    /// Whether the run has ended, whatever is still to be recorded of it.
    pub(crate) fn has_ended(&self) -> bool {
        self.ending.is_some()
    }

    /// A new session begins: what was to be sent in the one before is not sent, and a run that
    /// has ended gets no readback any more, since nobody orders any.
    pub(crate) fn leave_session(&mut self, at: HostTime, demands: &mut VecDeque<Demand>) {
        while let Some(held) = self.held.pop_front() {
            self.note_unsent(at, held.id, "its session is over", demands);
        }
        if self.has_ended() {
            self.readbacks = false;
            if let Closing::AwaitingCounters { .. } = self.closing {
                self.closing = Closing::Closed;
            }
        }
    }

    /// How the run stands, for whoever looks on.
    pub(crate) fn status(&self) -> Status {
        self.sequencer.status()
    }

    fn take_output(&mut self, at: HostTime, output: Output, demands: &mut VecDeque<Demand>) {
        match output {
            Output::Order { id, order } => {
                let entry = self.append(at, Body::Order { id, order }, demands);
                self.held.push_back(Held { entry, id, order });
            }
            Output::Off => {
                // Off first, the record right after; and nothing from before it may follow it.
                let overtaken = std::mem::take(&mut self.held);
                demands.push_back(Demand::Off);
                self.append(at, Body::Off, demands);
                for held in overtaken {
                    self.note_unsent(at, held.id, "off overtook it", demands);
                }
            }
            Output::Finding(finding) => {
                self.append(at, Body::Finding(finding), demands);
            }
            Output::Ended(ending) => {
                self.append(at, Body::Ended(ending.clone()), demands);
                self.ending = Some(ending);
                self.closing = Closing::AwaitingOff { since: at };
            }
        }
    }

    fn note_unsent(
        &mut self,
        at: HostTime,
        id: OrderId,
        why: &str,
        demands: &mut VecDeque<Demand>,
    ) {
        let text = format!("order {} was not sent: {why}", id.0);
        self.append(at, Body::Note(Note::Text(text)), demands);
    }

    fn append(&mut self, at: HostTime, body: Body, demands: &mut VecDeque<Demand>) -> u64 {
        let number = self.next_entry;
        self.next_entry += 1;
        demands.push_back(Demand::Append(Entry { number, at, body }));
        number
    }

    /// Follows a run that has ended to its last entry: the sink's word that it is off, then one
    /// more readback, which brings the last counters.
    fn advance_closing(&mut self, is_off: bool, is_reading: bool) {
        self.closing = match self.closing {
            Closing::AwaitingOff { .. } if is_off && !self.readbacks => Closing::Closed,
            Closing::AwaitingOff { since } if is_off => Closing::AwaitingCounters { since },
            Closing::AwaitingCounters { .. } if is_reading => Closing::Closed,
            Closing::Open
            | Closing::AwaitingOff { .. }
            | Closing::AwaitingCounters { .. }
            | Closing::Closed => return,
        };
    }
}
