//! Records that were left open: what becomes of them when the daemon starts.
//!
//! The host that wrote them has died, or its disk was full; the sink has turned itself off. Each
//! is recovered and replayed into a fresh sequencer. A run that had ended is sealed. One whose
//! plan says so is taken up where its record stands, with the gap entered. Any other is ended as
//! interrupted. Where the record gives no sound ground to go on from, it is not gone on from.
//!
//! What it deliberately does not do: talk to the sink. That is the keeper's, once begun.

use std::collections::VecDeque;
use std::sync::Arc;

use journal::{Body, Entry, JournalError, Note, Options, Record, Recovery, Writer};
use quantity::{HostTime, Span};
use sequence::plan::{OnInterruption, Plan};
use sequencer::event::{Crossing, Ending, Event, Finding, Happening, Output};
use sequencer::{PlanError, Sequencer};
use uuid::Uuid;

use crate::context::Context;
use crate::figures_file;
use crate::records::Records;
use crate::view::{RunEvent, RunNews, RunState, rfc3339};
use crate::worker::{RunFacts, ended, ending_text, ending_view};

/// Least time between the last entry and going on, on a clock that may have run ahead.
const GAP_MIN: Span = Span::from_secs(1);

/// A run to be taken up.
pub(crate) struct Resumption {
    pub(crate) id: Uuid,
    pub(crate) sink: String,
    pub(crate) folder: String,
    pub(crate) started: String,
    pub(crate) plan: Arc<Plan>,
    pub(crate) sequencer: Sequencer,
    pub(crate) writer: Writer,
    /// The time at which it goes on; its sink's clock begins no earlier.
    pub(crate) at: HostTime,
}

/// Why a record could not be dealt with; it stays as it is.
#[derive(Debug, thiserror::Error)]
enum Trouble {
    #[error(transparent)]
    Journal(#[from] JournalError),
    #[error("its plan cannot be run: {0}")]
    Plan(#[from] PlanError),
}

/// Deals with every record that was left open; returns the runs to be taken up.
pub(crate) fn recover(
    records: &Records,
    is_ours: impl Fn(&str) -> bool,
    context: &Context,
    now: HostTime,
) -> Vec<Resumption> {
    let mut resumptions: Vec<Resumption> = Vec::new();
    let names = records.names().unwrap_or_default();
    for name in names {
        let Ok(summary) = records.summary(&name) else {
            continue;
        };
        if summary.sealed {
            continue;
        }
        if !is_ours(&summary.sink) {
            tracing::warn!(
                "record {name} is open and of sink `{}`, which is not on this bench; it is left",
                summary.sink
            );
            continue;
        }
        // Two open records of one sink cannot both go on.
        let may_resume = !resumptions.iter().any(|other| other.sink == summary.sink);
        match deal_with(records, &name, may_resume, context, now) {
            Ok(Some(resumption)) => resumptions.push(resumption),
            Ok(None) => {}
            Err(trouble) => tracing::error!("record {name} stays open: {trouble}"),
        }
    }
    resumptions
}

fn deal_with(
    records: &Records,
    name: &str,
    may_resume: bool,
    context: &Context,
    now: HostTime,
) -> Result<Option<Resumption>, Trouble> {
    let path = records.path(name);
    let (writer, recovery) = Writer::recover(&path, Options::default())?;
    if let Some(ended) = writer.manifest().ended.clone() {
        return seal(writer, ended, context).map(|()| None);
    }
    let record = Record::open(&path)?;
    let mut left = LeftOpen::replay(&record, writer, &recovery, now)?;
    left.append_due()?;
    if let Some(ending) = left.ended.clone() {
        return left.end(name, &ending, context).map(|()| None);
    }
    match left.reason_not_to_resume(&recovery, may_resume) {
        None => {
            left.go_on(&recovery)?;
            // The gap itself may have crossed an interlock.
            if let Some(ending) = left.ended.clone() {
                return left.end(name, &ending, context).map(|()| None);
            }
            let at = left.now;
            left.writer
                .update_manifest(|manifest| manifest.resumed.push(rfc3339(at)))?;
            tracing::warn!("record {name}: the run is taken up again");
            Ok(Some(left.resumption(name)))
        }
        Some(why) => {
            left.append(Body::Note(Note::Text(format!("the host had died: {why}"))))?;
            left.end(name, &Ending::Interrupted, context).map(|()| None)
        }
    }
}

/// A record that was left open, replayed.
struct LeftOpen {
    writer: Writer,
    plan: Arc<Plan>,
    sequencer: Sequencer,
    started: String,
    id: Uuid,
    sink: String,
    clock: journal::ClockKind,
    /// Outputs of the last event that are not in the record.
    due: VecDeque<Output>,
    differs: bool,
    ended: Option<Ending>,
    crossings: Vec<Crossing>,
    last_at: HostTime,
    now: HostTime,
}

impl LeftOpen {
    fn replay(
        record: &Record,
        writer: Writer,
        recovery: &Recovery,
        now: HostTime,
    ) -> Result<Self, Trouble> {
        let manifest = record.manifest();
        let plan = Arc::new(manifest.plan.clone());
        let last_at = recovery.last_at.unwrap_or(now);
        let mut left = Self {
            writer,
            sequencer: Sequencer::new(Arc::clone(&plan))?,
            plan,
            started: manifest.created.clone(),
            id: Uuid::parse_str(&manifest.record).unwrap_or_default(),
            sink: manifest.sink.clone(),
            clock: manifest.clock,
            due: VecDeque::new(),
            differs: false,
            ended: None,
            crossings: Vec::new(),
            last_at,
            now: now.max(last_at.saturating_add(GAP_MIN)),
        };
        for entry in record.entries() {
            left.take(&entry?);
        }
        Ok(left)
    }

    fn take(&mut self, entry: &Entry) {
        if let Some(event) = entry.event() {
            self.differs |= !self.due.is_empty();
            self.feed(&event);
        } else if let Some(output) = entry.output() {
            self.differs |= self.due.pop_front().as_ref() != Some(&output);
            self.note(&output);
        }
    }

    fn feed(&mut self, event: &Event) {
        self.sequencer.handle(event);
        self.due
            .extend(std::iter::from_fn(|| self.sequencer.poll_output()));
    }

    fn note(&mut self, output: &Output) {
        match output {
            Output::Ended(ending) => self.ended = Some(ending.clone()),
            Output::Finding(Finding::Crossed(crossing)) => self.crossings.push(*crossing),
            Output::Finding(_) | Output::Order { .. } | Output::Off => {}
        }
    }

    /// Enters what the sequencer had answered when the host died, so that the record replays.
    /// None of it is carried out: the sink is off, and its next session begins anew.
    fn append_due(&mut self) -> Result<(), Trouble> {
        if self.differs {
            return Ok(());
        }
        while let Some(output) = self.due.pop_front() {
            self.note(&output);
            let number = self.writer.next_number();
            self.writer
                .append(&Entry::of_output(number, self.last_at, output))?;
        }
        self.writer.commit()?;
        Ok(())
    }

    fn reason_not_to_resume(&self, recovery: &Recovery, may_resume: bool) -> Option<&'static str> {
        let lost = recovery
            .set_aside
            .as_ref()
            .is_some_and(|torn| torn.whole_lines > 0);
        if self.plan.on_interruption == OnInterruption::End {
            Some("the plan says to end the run then")
        } else if self.differs {
            Some("the record does not replay, so it cannot be gone on from")
        } else if lost {
            Some("the disk has lost entries, so the record cannot be gone on from")
        } else if !may_resume {
            Some("another run on the same sink is taken up")
        } else {
            None
        }
    }

    /// Enters the gap and lets the sequencer know that the link was gone.
    fn go_on(&mut self, recovery: &Recovery) -> Result<(), Trouble> {
        self.append(Body::Note(Note::Resumed {
            gap: self.now.saturating_since(self.last_at),
            last_number: recovery.last_number,
        }))?;
        let event = Event {
            at: self.now,
            what: Happening::LinkLost,
        };
        self.append(Body::Event(event.what.clone()))?;
        self.feed(&event);
        self.last_at = self.now;
        self.append_due()
    }

    fn append(&mut self, body: Body) -> Result<(), Trouble> {
        let entry = Entry {
            number: self.writer.next_number(),
            at: self.now,
            body,
        };
        self.writer.append(&entry)?;
        self.writer.commit()?;
        Ok(())
    }

    /// Ends the run with its record, and tells of it.
    fn end(self, name: &str, ending: &Ending, context: &Context) -> Result<(), Trouble> {
        let facts = RunFacts {
            id: self.id,
            sink: &self.sink,
            folder: name,
            plan: &self.plan,
            clock: self.clock.into(),
            started: &self.started,
            expected: self.plan.forecast().duration,
            crossings: &self.crossings,
        };
        let mut view = facts.view(&self.sequencer.status());
        view.state = RunState::Ended;
        let shown = ending_view(ending, &self.crossings, None, self.last_at);
        view.ending = Some(shown.clone());
        let manifest_ended = ended(ending, &self.crossings, None, self.last_at);
        seal(self.writer, manifest_ended, context)?;
        view.sealed = true;
        context.ended.push(view);
        context.tell(RunEvent {
            run: self.id,
            dut: self.plan.dut.label.clone(),
            at: rfc3339(self.last_at),
            message: format!(
                "{} on {}: {}",
                self.plan.dut.label,
                self.sink,
                ending_text(&shown)
            ),
            sink: self.sink,
            calls_for_person: false,
            news: RunNews::Ended(shown),
        });
        Ok(())
    }

    fn resumption(self, name: &str) -> Resumption {
        Resumption {
            id: self.id,
            sink: self.sink,
            folder: name.to_owned(),
            started: self.started,
            plan: self.plan,
            sequencer: self.sequencer,
            writer: self.writer,
            at: self.now,
        }
    }
}

fn seal(writer: Writer, ended: journal::Ended, context: &Context) -> Result<(), Trouble> {
    let folder = writer.folder().to_path_buf();
    writer.seal(ended)?;
    let figures = std::thread::Builder::new()
        .name("figures".into())
        .spawn(move || {
            if let Err(why) = figures_file::write(&folder) {
                tracing::warn!("{}: no figures: {why}", folder.display());
            }
        });
    match figures {
        Ok(thread) => context.finishing(thread),
        Err(error) => tracing::warn!("no thread to work figures out: {error}"),
    }
    Ok(())
}
