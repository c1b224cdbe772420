//! The worker of one sink: the one thread that drives its keeper.
//!
//! It waits in one place for bytes, commands and the keeper's deadline, and does nothing that
//! could wait for anything else: entries go to the journal's own thread, views and events are
//! handed over without waiting, records are sealed by others.
//!
//! Invariants:
//! - `off` is on the line before anything else is done about it.
//! - Virtual time does not pass while an order waits for the disk.
//! - One run at a time; who begins one holds the sink's [`Reservation`].
//! - What a viewer does, or how many there are, changes nothing here.
//!
//! What it deliberately does not do: decide anything about a run. That is the keeper's.

mod finish;
mod hand;
mod link;
mod publish;
mod record;

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicI64, Ordering};

use journal::{Body, Entry, Note, Writer};
use quantity::{Current, HostTime, Span};
use run::keeper::{Effect, Keeper};
use sequence::plan::Plan;
use sequencer::Sequencer;
use sequencer::event::{Command, Interlock};
use sink::correction::Correction;
use tokio::sync::{oneshot, watch};
use transport::port::{HostClock, Inbox, Link, LinkError};
use uuid::Uuid;
use wire::ReasonRefused;

use crate::context::Context;
use crate::metrics::SinkMetrics;
use crate::view::{LinkState, RunView};

pub(crate) use finish::ended;
pub(crate) use hand::Readbacks;
pub(crate) use link::{LinkParts, open};
pub(crate) use publish::{Face, RunFacts, Snapshot, crossing_text, ending_text, ending_view};

use publish::RunInProgress;

/// The longest wait without looking around.
const WAIT_MAX: Span = Span::from_secs(1);
/// The same while the daemon is ending.
const WAIT_ENDING: Span = Span::from_millis(20);
/// How long an ending daemon waits for a sink's last words.
const LAST_WORDS_MAX: Span = Span::from_millis(2_500);

/// The way back to whoever asked.
pub(crate) type Answer<T> = oneshot::Sender<T>;

/// What can be asked of a worker.
#[derive(Debug)]
pub(crate) enum Ask {
    /// Off, now. Answered when the sink has said so.
    Off(Answer<()>),
    /// Begin a run.
    Begin(Box<Begin>),
    /// A command to the run in progress.
    Run {
        /// Which run is meant.
        id: Uuid,
        /// What is asked.
        command: Command,
        /// The run after it, or `None` if this run is not in progress.
        answer: Answer<Option<RunView>>,
    },
    /// A setpoint for the run by hand in progress, or the same again.
    Setpoint {
        /// Which run is meant.
        id: Uuid,
        /// The true current; `None`: as before.
        setpoint: Option<Current>,
        /// For how long; `None`: as before.
        interval: Option<Span>,
        /// The run after it, or `None` if this run is not in progress.
        answer: Answer<Option<RunView>>,
    },
    /// What has been read back since the setpoint of the run by hand was last changed.
    Readbacks {
        /// Which run is meant.
        id: Uuid,
        /// The readbacks, or `None` if this run is not in progress.
        answer: Answer<Option<Readbacks>>,
    },
    /// Clear the latch.
    Reset(Answer<Result<(), NotReset>>),
    /// The journal has news.
    Journal,
    /// Off, end the run as stopped, and end.
    End,
}

/// A run to begin.
pub(crate) struct Begin {
    /// Its identity.
    pub(crate) id: Uuid,
    /// Its record's folder in the records folder.
    pub(crate) folder: String,
    /// Its plan.
    pub(crate) plan: Arc<Plan>,
    /// The sequencer; fed with the record if the run is resumed.
    pub(crate) sequencer: Sequencer,
    /// The writer of its record.
    pub(crate) writer: Writer,
    /// When it was started (RFC 3339), as its manifest has it.
    pub(crate) started: String,
    /// Whether it is taken up again.
    pub(crate) resumed: bool,
    /// The right to run on this sink.
    pub(crate) reservation: Reservation,
    /// The run as it began, or why it could not.
    pub(crate) answer: Option<Answer<Result<RunView, String>>>,
}

impl std::fmt::Debug for Begin {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "run {} of {}", self.id, self.plan.title)
    }
}

/// Why a latch was not cleared.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum NotReset {
    /// A run is in progress.
    Busy,
    /// No session stands.
    NotConnected,
    /// The sink refuses.
    Refused(ReasonRefused),
}

/// The right to run on a sink, for one at a time; given back when dropped.
#[derive(Debug)]
pub(crate) struct Reservation(Arc<AtomicBool>);

impl Reservation {
    /// Takes the right, if nobody has it.
    pub(crate) fn take(reserved: &Arc<AtomicBool>) -> Option<Self> {
        let free = !reserved.swap(true, Ordering::AcqRel);
        free.then(|| Self(Arc::clone(reserved)))
    }
}

impl Drop for Reservation {
    fn drop(&mut self) {
        self.0.store(false, Ordering::Release);
    }
}

/// What a worker is made of.
pub(crate) struct WorkerParts {
    /// What is shown of the sink.
    pub(crate) face: Face,
    /// The keeper, new.
    pub(crate) keeper: Keeper,
    /// The link, not yet open.
    pub(crate) link: LinkParts,
    /// The sink's calibration.
    pub(crate) correction: Correction,
    /// Free space below which a run trips.
    pub(crate) free_bytes_min: u64,
    /// The interlock that tripped the last run and has not been reset since.
    pub(crate) tripped_by: Option<Interlock>,
    /// Where the view goes.
    pub(crate) view: watch::Sender<Arc<Snapshot>>,
    /// The link's time, for those who stamp with it.
    pub(crate) time: Arc<AtomicI64>,
    /// What all share.
    pub(crate) context: Arc<Context>,
}

/// The worker of one sink.
pub(crate) struct Worker {
    face: Face,
    keeper: Keeper,
    link: Box<dyn Link<Ask> + Send>,
    commands: transport::port::Commands<Ask>,
    correction: Correction,
    free_bytes_min: u64,
    view: watch::Sender<Arc<Snapshot>>,
    time: Arc<AtomicI64>,
    context: Arc<Context>,
    metrics: SinkMetrics,
    /// The host's own clock, for what viewers see and how long disks take.
    clock: HostClock,
    run: Option<RunInProgress>,
    entries: Vec<Entry>,
    outbound: Vec<u8>,
    offs: Vec<Answer<()>>,
    reset: Option<Answer<Result<(), NotReset>>>,
    /// The interlock that tripped the last run; latched until reset.
    tripped_by: Option<Interlock>,
    /// When the sink was last reset: what it had said before of a latch holds no more.
    reset_at: Option<HostTime>,
    /// When an ending daemon stops waiting for the sink, on the host's own clock.
    ending: Option<HostTime>,
    off_acknowledged: bool,
    /// Something that viewers should see at once.
    newsworthy: bool,
    /// How the link stood when viewers were last told.
    told_link: (LinkState, Option<String>),
    last_reading: Option<HostTime>,
    published: HostTime,
    last_step_told: HostTime,
}

impl Worker {
    /// A worker that has not begun.
    pub(crate) fn new(parts: WorkerParts) -> Self {
        let metrics = parts.context.metrics.of_sink(&parts.face.name);
        Self {
            face: parts.face,
            keeper: parts.keeper,
            link: parts.link.link,
            commands: parts.link.commands,
            correction: parts.correction,
            free_bytes_min: parts.free_bytes_min,
            view: parts.view,
            time: parts.time,
            context: parts.context,
            metrics,
            clock: HostClock::start(),
            run: None,
            entries: Vec::new(),
            outbound: Vec::with_capacity(4096),
            offs: Vec::new(),
            reset: None,
            reset_at: None,
            tripped_by: parts.tripped_by,
            ending: None,
            off_acknowledged: false,
            newsworthy: true,
            told_link: (LinkState::Lost, None),
            last_reading: None,
            published: HostTime::MIN,
            last_step_told: HostTime::MIN,
        }
    }

    /// Works until told to end.
    pub(crate) fn run(mut self) {
        let now = self.link.now();
        self.keeper.link_lost("the link is not open yet", now);
        loop {
            self.settle();
            self.publish();
            if self.is_over() {
                break;
            }
            self.wait();
        }
        self.abandon_run();
        self.newsworthy = true;
        self.publish();
    }

    /// Waits for whatever comes first, and lets the keeper know of it.
    fn wait(&mut self) {
        self.link.hold_time(self.keeper.waits_for_disk());
        let most = if self.ending.is_some() {
            WAIT_ENDING
        } else {
            WAIT_MAX
        };
        let latest = self.link.now().saturating_add(most);
        let until = self.keeper.deadline().map_or(latest, |at| at.min(latest));
        let arrived = self.link.wait(until);
        let now = self.link.now();
        self.time.store(now.micros(), Ordering::Relaxed);
        match arrived {
            Some(Inbox::Command(ask)) => self.take(ask, now),
            Some(Inbox::Bytes(bytes)) => self.keeper.receive(&bytes, now),
            Some(Inbox::LinkBack) => self.link_back(now),
            Some(Inbox::LinkLost(reason)) => self.link_lost(&reason, now),
            None => {}
        }
        if self.keeper.deadline().is_some_and(|at| at <= now) {
            self.keeper.tick(now);
        }
    }

    fn take(&mut self, ask: Ask, now: HostTime) {
        match ask {
            Ask::Off(answer) => {
                self.off(now, "off was asked for");
                self.offs.push(answer);
            }
            Ask::Begin(begin) => self.begin(*begin, now),
            Ask::Run {
                id,
                command,
                answer,
            } => self.command(id, command, answer, now),
            Ask::Setpoint {
                id,
                setpoint,
                interval,
                answer,
            } => self.set_by_hand(id, setpoint, interval, answer, now),
            Ask::Readbacks { id, answer } => {
                // Whoever asked may be gone.
                let _ = answer.send(self.readbacks(id));
            }
            Ask::Reset(answer) => self.reset(answer, now),
            Ask::Journal => self.journal_news(now),
            Ask::End => {
                self.off(now, "the daemon was ended");
                self.ending = Some(self.clock.now().saturating_add(LAST_WORDS_MAX));
            }
        }
    }

    /// Off: onto the line first, everything else after.
    fn off(&mut self, now: HostTime, why: &'static str) {
        if let Some(run) = &mut self.run {
            run.stopped_by.get_or_insert(why);
        }
        self.off_acknowledged = false;
        self.keeper.off(now);
        self.transmit();
    }

    fn command(
        &mut self,
        id: Uuid,
        command: Command,
        answer: Answer<Option<RunView>>,
        now: HostTime,
    ) {
        let meant = self.run.as_mut().filter(|run| run.id == id);
        let Some(run) = meant else {
            // Whoever asked may be gone.
            let _ = answer.send(None);
            return;
        };
        if command == Command::Stop {
            run.stopped_by.get_or_insert("a stop was asked for");
        }
        self.keeper.command(command, now);
        self.transmit();
        self.settle();
        self.newsworthy = true;
        self.publish();
        let view = self.run_view().or_else(|| self.context.ended.get(id));
        let _ = answer.send(view);
    }

    fn reset(&mut self, answer: Answer<Result<(), NotReset>>, now: HostTime) {
        let refused = if self.keeper.presence().description.is_none() {
            NotReset::NotConnected
        } else if self.keeper.reset(now) {
            self.reset = Some(answer);
            return;
        } else {
            NotReset::Busy
        };
        let _ = answer.send(Err(refused));
    }

    fn link_back(&mut self, now: HostTime) {
        self.keeper.link_back(now);
        self.link_stands(LinkState::Greeting, None, now);
    }

    fn link_lost(&mut self, reason: &LinkError, now: HostTime) {
        let reason = reason.to_string();
        self.keeper.link_lost(&reason, now);
        self.metrics.link_losses.inc();
        self.link_stands(LinkState::Lost, Some(reason), now);
    }

    /// Does all that the keeper asks for, then sends what is to be sent.
    fn settle(&mut self) {
        loop {
            while let Some(effect) = self.keeper.poll_effect() {
                self.meet(effect);
            }
            if !self.submit() {
                break;
            }
        }
        self.transmit();
        self.look_at_presence();
    }

    fn transmit(&mut self) {
        let urgency = self.keeper.take_transmit(&mut self.outbound);
        if !self.outbound.is_empty() {
            self.link.send(&self.outbound, urgency);
            self.outbound.clear();
        }
    }

    fn meet(&mut self, effect: Effect) {
        match effect {
            Effect::Append(entry) => {
                self.observe(&entry);
                self.entries.push(entry);
            }
            Effect::Closed { ending, status } => {
                self.submit();
                self.close(&ending, &status);
            }
            Effect::NotTheSinkDescribed(mismatches) => {
                let differences: Vec<String> = mismatches.iter().map(ToString::to_string).collect();
                let now = self.link.now();
                self.link_stands(LinkState::Refused, Some(differences.join("; ")), now);
            }
            Effect::Reset(result) => {
                if result.is_ok() {
                    self.tripped_by = None;
                    self.reset_at = Some(self.link.now());
                    self.newsworthy = true;
                    // Shown before it is answered: whoever starts a run next may.
                    self.publish();
                }
                if let Some(answer) = self.reset.take() {
                    let _ = answer.send(result.map_err(NotReset::Refused));
                }
            }
            Effect::OffAcknowledged => {
                self.off_acknowledged = true;
                for answer in self.offs.drain(..) {
                    let _ = answer.send(());
                }
            }
        }
    }

    /// Hands the entries to the journal. Whether the keeper has to hear that it takes no more.
    fn submit(&mut self) -> bool {
        if self.entries.is_empty() {
            return false;
        }
        let entries = std::mem::take(&mut self.entries);
        let Some(run) = &mut self.run else {
            return false;
        };
        let now = self.clock.now();
        if run.record.submit(entries, now) {
            return false;
        }
        self.keeper.record_failed(self.link.now());
        true
    }

    /// What the journal's thread has told.
    fn journal_news(&mut self, now: HostTime) {
        let Some(run) = &mut self.run else { return };
        let news = run.record.news(self.clock.now(), &self.metrics);
        if let Some(number) = news.durable {
            self.keeper.durable(number, now);
        }
        if let Some(trouble) = news.trouble {
            tracing::error!(run = %run.id, "the record: {trouble}");
            self.keeper.record_failed(now);
        }
    }

    /// What an entry means for viewers and metrics.
    fn observe(&mut self, entry: &Entry) {
        match &entry.body {
            Body::Event(happening) => self.observe_event(happening),
            Body::Finding(finding) => self.tell_finding(finding, entry.at),
            Body::Ended(ending) => self.tell_ended(ending, entry.at),
            Body::Note(Note::Described(description)) => {
                if let Some(run) = &self.run {
                    run.record.described(*description);
                }
            }
            Body::Note(Note::Retransmitted { orders, .. }) => {
                self.metrics.retransmissions.inc_by(u64::from(*orders));
            }
            Body::Note(Note::DamagedLines { lines, .. }) => {
                self.metrics.damaged_lines.inc_by(u64::from(*lines));
            }
            Body::Order { .. } | Body::Off | Body::Note(_) => {}
        }
    }

    /// Whether the worker's work is done.
    fn is_over(&mut self) -> bool {
        let Some(latest) = self.ending else {
            return false;
        };
        let quiet = self.run.is_none() && self.off_acknowledged;
        quiet || self.clock.now() >= latest
    }
}
