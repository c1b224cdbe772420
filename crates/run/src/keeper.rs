//! The keeper of one sink: its session always, a run for as long as there is one.

use std::collections::VecDeque;

use journal::{Entry, Note};
use quantity::{HostTime, SinkTime, Span};
use sequencer::Sequencer;
use sequencer::event::{Command, Ending, Happening};
use sequencer::status::Status;
use transport::session::{Heard, Mismatch, RebootEvidence, Session, SessionConfig, Urgency};
use wire::{Description, Order, OrderId, Reading, ReasonRefused};

use crate::active::{Active, Demand};
use crate::notes::{another_sink, clock_fault, note_of, started_anew};

/// How often an idle sink is asked for a readback.
const IDLE_READBACK: Span = Span::from_secs(1);

/// An idle sink's deadman: the longest the protocol allows, since it drives nothing.
const IDLE_DEADMAN: Span = Span::from_secs(10);

/// Order numbers of an idle sink begin here, so that none is ever a run's.
const IDLE_ORDERS: u64 = 1 << 63;

/// What a keeper needs to know of its sink.
#[derive(Debug, Clone, Copy)]
pub struct KeeperConfig {
    /// How to hold the session.
    pub session: SessionConfig,
}

/// What a keeper asks of its driver.
#[derive(Debug, Clone, PartialEq)]
pub enum Effect {
    /// Put this entry on stable storage; report with [`Keeper::durable`].
    Append(Entry),
    /// The run is over and its record complete: seal it.
    Closed {
        /// How it ended.
        ending: Ending,
        /// How it stood then.
        status: Box<Status>,
    },
    /// The sink on this link is not the one the bench file describes.
    NotTheSinkDescribed(Vec<Mismatch>),
    /// The answer to [`Keeper::reset`].
    Reset(Result<(), ReasonRefused>),
    /// The answer to [`Keeper::off`]: the sink has said that it is off.
    OffAcknowledged,
}

/// What is known of the link and of the sink behind it.
#[derive(Debug, Clone, Default)]
pub struct Presence {
    /// The description of the sink, while a session stands.
    pub description: Option<Description>,
    /// The last readback and when it came.
    pub reading: Option<(HostTime, Reading)>,
    /// Why the sink on the link was refused, if it was.
    pub refused: Vec<Mismatch>,
}

/// Why a run could not begin.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum BeginError {
    /// Another run is in progress.
    #[error("a run is in progress on this sink; stop it first")]
    Busy,
}

/// The keeper of one sink. The crate's documentation states the contract.
pub struct Keeper {
    session: Session,
    session_number: u32,
    active: Option<Active>,
    presence: Presence,
    idle_orders: u64,
    reset: Option<OrderId>,
    effects: VecDeque<Effect>,
    demands: VecDeque<Demand>,
}

impl Keeper {
    /// A keeper that greets its sink with the session number `session_number` and counts on.
    pub fn new(config: KeeperConfig, session_number: u32) -> Self {
        Self {
            session: Session::new(config.session, session_number),
            session_number,
            active: None,
            presence: Presence::default(),
            idle_orders: IDLE_ORDERS,
            reset: None,
            effects: VecDeque::new(),
            demands: VecDeque::new(),
        }
    }

    /// Begins a run in a session of its own. The record already holds `recorded` entries, the
    /// same that `sequencer` has been fed with if the run is resumed.
    ///
    /// # Errors
    /// [`BeginError::Busy`] while another run is in progress.
    pub fn begin(
        &mut self,
        sequencer: Sequencer,
        recorded: u64,
        now: HostTime,
    ) -> Result<(), BeginError> {
        if self.active.is_some() {
            return Err(BeginError::Busy);
        }
        self.active = Some(Active::new(sequencer, recorded));
        self.greet(now);
        Ok(())
    }

    /// Takes bytes from the link.
    pub fn receive(&mut self, bytes: &[u8], now: HostTime) {
        self.session.receive(bytes, now);
        self.listen(now);
    }

    /// The link is gone, for the reason given.
    ///
    /// The session may outlive a short loss; whether the run does is for its silence interlock
    /// to say, unless its plan says to go on after an interruption.
    pub fn link_lost(&mut self, reason: &str, now: HostTime) {
        self.presence.description = None;
        self.session.link_lost(now);
        self.note(
            now,
            Note::LinkLost {
                reason: reason.to_owned(),
            },
        );
        self.interrupt(now);
        self.listen(now);
    }

    /// The link is back; the sink behind it may have been replaced or started anew.
    pub fn link_back(&mut self, now: HostTime) {
        self.note(now, Note::LinkBack);
        self.session.link_back(now);
        // A run that has ended keeps its session: the last counters are still to come in it.
        let takes_up = |active: &Active| active.resumes() && !active.has_ended();
        if self.active.as_ref().is_some_and(takes_up) {
            self.greet(now);
        } else {
            self.listen(now);
        }
    }

    /// Time has passed.
    pub fn tick(&mut self, now: HostTime) {
        self.session.tick(now);
        self.listen(now);
        let due = self
            .active
            .as_ref()
            .and_then(Active::deadline)
            .is_some_and(|deadline| now >= deadline);
        if due {
            self.happen(now, Happening::TimePassed);
            if let Some(active) = &mut self.active {
                active.give_up_closing(now);
            }
            self.close_if_complete(now);
        }
    }

    /// Entries up to `number` are on stable storage.
    pub fn durable(&mut self, number: u64, now: HostTime) {
        if let Some(active) = &mut self.active {
            for (id, order) in active.durable(number) {
                self.session.order(id, order, now);
            }
        }
        self.listen(now);
    }

    /// The record cannot be written.
    pub fn record_failed(&mut self, now: HostTime) {
        self.happen(now, Happening::RecordFailed);
        self.listen(now);
    }

    /// Passes a command on to the run; `false` if there is none.
    pub fn command(&mut self, command: Command, now: HostTime) -> bool {
        let running = self.active.is_some();
        self.happen(now, Happening::Command(command));
        self.listen(now);
        running
    }

    /// Turns the sink off, run or no run, and ends the run as stopped.
    pub fn off(&mut self, now: HostTime) {
        self.session.off(now);
        self.command(Command::Stop, now);
    }

    /// Asks an idle sink to clear its latch; [`Effect::Reset`] brings the answer. `false` while
    /// a run is in progress.
    pub fn reset(&mut self, now: HostTime) -> bool {
        if self.active.is_some() {
            return false;
        }
        self.reset = Some(self.idle_order(Order::Reset, now));
        self.listen(now);
        true
    }

    /// What is to be done next; see the crate's contract.
    pub fn poll_effect(&mut self) -> Option<Effect> {
        self.effects.pop_front()
    }

    /// Moves the bytes to be sent into `bytes`, `off` before all else; says whether they are to
    /// overtake what a link may still hold.
    pub fn take_transmit(&mut self, bytes: &mut Vec<u8>) -> Urgency {
        self.session.take_transmit(bytes)
    }

    /// When [`Keeper::tick`] must be called at the latest.
    pub fn deadline(&self) -> Option<HostTime> {
        let session = self.session.deadline().map(|(at, _)| at);
        let run = self.active.as_ref().and_then(Active::deadline);
        [session, run].into_iter().flatten().min()
    }

    /// Whether an order waits for the disk; virtual time must not pass meanwhile.
    pub fn waits_for_disk(&self) -> bool {
        self.active.as_ref().is_some_and(Active::waits_for_disk)
    }

    /// How the run stands, if there is one.
    pub fn status(&self) -> Option<Status> {
        self.active.as_ref().map(Active::status)
    }

    /// What is known of the link and the sink.
    pub fn presence(&self) -> &Presence {
        &self.presence
    }

    /// Begins a new session: whatever the sink was doing, it is off after it. Orders of the
    /// session before that still wait for the disk have no meaning in this one.
    fn greet(&mut self, now: HostTime) {
        if let Some(active) = &mut self.active {
            active.leave_session(now, &mut self.demands);
            self.meet_demands(now);
        }
        self.restart(now);
        self.note(
            now,
            Note::SessionBegun {
                session: self.session_number,
            },
        );
        self.listen(now);
    }

    fn restart(&mut self, now: HostTime) {
        self.session_number = self.session_number.checked_add(1).unwrap_or(1);
        self.presence.description = None;
        self.session.restart(self.session_number, now);
    }

    /// Takes everything the session has heard, in order.
    fn listen(&mut self, now: HostTime) {
        while let Some(heard) = self.session.poll_heard() {
            self.hear(heard, now);
        }
        self.close_if_complete(now);
    }

    fn hear(&mut self, heard: Heard, now: HostTime) {
        match heard {
            Heard::Connected {
                description,
                sink_time,
            } => {
                self.connected(description, sink_time, now);
            }
            Heard::DescriptionRefused { mismatches } => self.refuse(mismatches, now),
            Heard::Reading(reading) => {
                self.presence.reading = Some((now, reading));
                self.happen(now, Happening::Reading(reading));
            }
            Heard::Edge { time, order } => self.happen(now, Happening::Edge { time, order }),
            Heard::HoldExpired { time } => self.happen(now, Happening::HoldExpired { time }),
            Heard::SinkTripped { time, cause, value } => {
                self.happen(now, Happening::SinkTripped { time, cause, value });
            }
            Heard::Acknowledged { order } => self.acknowledged(order, now),
            Heard::Refused { order, reason } => self.refused(order, reason, now),
            Heard::OffAcknowledged => {
                self.happen(now, Happening::OffAcknowledged);
                self.effects.push_back(Effect::OffAcknowledged);
            }
            Heard::SinkRebooted { evidence } => self.rebooted(evidence, now),
            Heard::ClockOff { by, fault } => {
                self.note(now, clock_fault(&fault));
                self.happen(now, Happening::ClockOff { by });
            }
            Heard::Abandoned { order } if self.reset == Some(order) => {
                self.reset = None;
                self.effects
                    .push_back(Effect::Reset(Err(ReasonRefused::Session)));
            }
            Heard::Resumed { .. } => {
                self.presence.description = self.session.description().copied();
                self.note_heard(&heard, now);
            }
            Heard::StepSeen { .. }
            | Heard::EventsLost { .. }
            | Heard::Withdrawn { .. }
            | Heard::Abandoned { .. }
            | Heard::ClockEstimate(_)
            | Heard::Retransmitted { .. }
            | Heard::Damaged { .. }
            | Heard::Flood { .. }
            | Heard::BurstSamples { .. }
            | Heard::BurstDone { .. } => self.note_heard(&heard, now),
        }
    }

    fn rebooted(&mut self, evidence: RebootEvidence, now: HostTime) {
        self.presence.description = None;
        self.note(now, started_anew(&evidence));
        self.interrupt(now);
        self.happen(now, Happening::SinkRebooted);
        self.greet(now);
    }

    /// Tells a run that goes on after an interruption that there is one.
    fn interrupt(&mut self, now: HostTime) {
        if self.active.as_ref().is_some_and(Active::resumes) {
            self.happen(now, Happening::LinkLost);
        }
    }

    fn connected(&mut self, description: Description, sink_time: SinkTime, now: HostTime) {
        self.presence.description = Some(description);
        self.presence.refused.clear();
        self.note(now, Note::Described(description));
        if self.active.is_some() {
            self.happen(now, Happening::Connected { time: sink_time });
        } else {
            self.idle_order(
                Order::Deadman {
                    interval: IDLE_DEADMAN,
                },
                now,
            );
            self.idle_order(
                Order::Readback {
                    interval: IDLE_READBACK,
                },
                now,
            );
        }
    }

    /// A sink that is not the one described is never driven: a run on it cannot go on.
    fn refuse(&mut self, mismatches: Vec<Mismatch>, now: HostTime) {
        self.session.off(now);
        self.presence.refused.clone_from(&mismatches);
        self.note(now, another_sink(&mismatches));
        self.happen(now, Happening::AnotherSink);
        self.effects
            .push_back(Effect::NotTheSinkDescribed(mismatches));
    }

    fn acknowledged(&mut self, order: OrderId, now: HostTime) {
        if self.reset == Some(order) {
            self.reset = None;
            self.effects.push_back(Effect::Reset(Ok(())));
        } else if order.0 < IDLE_ORDERS {
            self.happen(now, Happening::Acknowledged { order });
        }
    }

    fn refused(&mut self, order: OrderId, reason: ReasonRefused, now: HostTime) {
        if self.reset == Some(order) {
            self.reset = None;
            self.effects.push_back(Effect::Reset(Err(reason)));
        } else if order.0 < IDLE_ORDERS {
            self.happen(now, Happening::Refused { order, reason });
        }
    }

    fn idle_order(&mut self, order: Order, now: HostTime) -> OrderId {
        let id = OrderId(self.idle_orders);
        self.idle_orders += 1;
        self.session.order(id, order, now);
        id
    }

    fn note_heard(&mut self, heard: &Heard, now: HostTime) {
        if let Some(note) = note_of(heard) {
            self.note(now, note);
        }
    }

    fn happen(&mut self, now: HostTime, what: Happening) {
        if let Some(active) = &mut self.active {
            active.happen(now, what, &mut self.demands);
            self.meet_demands(now);
        }
    }

    fn note(&mut self, now: HostTime, note: Note) {
        if let Some(active) = &mut self.active {
            active.note(now, note, &mut self.demands);
            self.meet_demands(now);
        }
    }

    fn meet_demands(&mut self, now: HostTime) {
        while let Some(demand) = self.demands.pop_front() {
            match demand {
                Demand::Append(entry) => self.effects.push_back(Effect::Append(entry)),
                Demand::Off => self.session.off(now),
            }
        }
    }

    /// Ends a run whose record is complete, and takes the sink into an idle session.
    fn close_if_complete(&mut self, now: HostTime) {
        let closed = |active: &Active| active.closed().is_some();
        let Some(mut active) = self.active.take_if(|active| closed(active)) else {
            return;
        };
        self.restart(now);
        // What the session leaves unanswered still belongs to this record.
        while let Some(heard) = self.session.poll_heard() {
            if let Some(note) = note_of(&heard) {
                active.note_at_the_close(now, note, &mut self.demands);
            }
        }
        self.meet_demands(now);
        if let Some(ending) = active.closed().cloned() {
            let status = Box::new(active.status());
            self.effects.push_back(Effect::Closed { ending, status });
        }
    }
}
