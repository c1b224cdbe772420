//! What a worker shows: the sink's view, and events.
//!
//! A view is a snapshot handed over whole; viewers read the last one and never the worker. With
//! fast readbacks, and in time-lapse, most are left out here: all are in the record.

use std::sync::Arc;

use quantity::{HostTime, Span};
use sequence::plan::{Op, Plan};
use sequencer::event::{Crossing, Ending, Finding, Happening, Interlock};
use sequencer::status::{Standing, Status};
use sink::bench::SinkEntry;
use uuid::Uuid;
use wire::{Description, SinkState};

use super::hand::{Hand, NOT_ASKED_FOR_AGAIN};
use super::record::RunRecord;
use super::{Reservation, Worker};
use crate::metrics::word;
use crate::view::{
    ClockWord, CrossingView, DescriptionView, EndingView, EndingWord, EventBody, LimitsView,
    LinkEvent, LinkKind, LinkState, LinkView, LoopView, MarginView, ReadingView, RunEvent, RunNews,
    RunState, RunView, SinkView, StepView, rfc3339,
};

/// Shortest time between two views of a sink in which nothing but a readback is new.
const VIEW_EVERY: Span = Span::from_millis(200);
/// Shortest time between two events that tell of a step.
const STEP_EVERY: Span = Span::from_millis(200);
/// Crossings of one run that are shown; the record has all.
const CROSSINGS_MAX: usize = 32;

/// What is known of a sink at one moment.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Snapshot {
    /// As it is shown.
    pub(crate) view: SinkView,
    /// What it says of itself, for those who compile for it.
    pub(crate) description: Option<Description>,
}

/// What of a sink does not change, and how its link stands.
#[derive(Debug, Clone)]
pub(crate) struct Face {
    pub(crate) name: String,
    pub(crate) link: LinkView,
    limits: LimitsView,
    calibrated: bool,
}

impl Face {
    /// A sink whose link is not open yet.
    pub(crate) fn new(entry: &SinkEntry, time_factor: Option<u32>, calibrated: bool) -> Self {
        Self {
            name: entry.name.clone(),
            link: LinkView::closed(&entry.link, time_factor),
            limits: LimitsView::from(entry),
            calibrated,
        }
    }

    /// The view of a sink of which nothing is known yet.
    pub(crate) fn view(&self, at: HostTime) -> SinkView {
        SinkView {
            name: self.name.clone(),
            at: rfc3339(at),
            link: self.link.clone(),
            description: None,
            limits: self.limits.clone(),
            calibrated: self.calibrated,
            reading: None,
            latched_by: None,
            run: None,
        }
    }
}

/// The run in progress, beside what the keeper knows of it.
pub(crate) struct RunInProgress {
    pub(crate) id: Uuid,
    pub(crate) folder: String,
    pub(crate) plan: Arc<Plan>,
    pub(crate) started: String,
    pub(crate) expected: Span,
    pub(crate) record: RunRecord,
    pub(crate) crossings: Vec<Crossing>,
    /// What is set and read back, in a run by hand.
    pub(crate) hand: Option<Hand>,
    /// Who or what stopped it, if anyone did.
    pub(crate) stopped_by: Option<&'static str>,
    pub(crate) ending: Option<EndingView>,
    /// Held until the run is over.
    pub(crate) reservation: Reservation,
}

/// What of a run does not come from its sequencer.
pub(crate) struct RunFacts<'a> {
    pub(crate) id: Uuid,
    pub(crate) sink: &'a str,
    pub(crate) folder: &'a str,
    pub(crate) plan: &'a Plan,
    pub(crate) clock: ClockWord,
    pub(crate) started: &'a str,
    pub(crate) expected: Span,
    pub(crate) crossings: &'a [Crossing],
}

impl RunFacts<'_> {
    /// The run as its sequencer has it.
    pub(crate) fn view(&self, status: &Status) -> RunView {
        let (state, step) = standing(status);
        let repeats = status.loops.iter().map(|one| LoopView {
            label: one.label.clone(),
            round: one.round,
            times: one.times,
        });
        RunView {
            id: self.id,
            sink: self.sink.to_owned(),
            dut: self.plan.dut.label.clone(),
            title: self.plan.title.clone(),
            state,
            clock: self.clock,
            started: self.started.to_owned(),
            elapsed_s: status.elapsed.seconds(),
            expected_s: match status.left_at_most {
                // Nobody knows how long a hand goes on; this long if it does not.
                Some(left) if self.plan.by_hand => status.elapsed.saturating_add(left).seconds(),
                Some(_) | None => self.expected.seconds(),
            },
            left_at_most_s: status.left_at_most.map(Span::seconds),
            step,
            repeats: repeats.collect(),
            setpoint_a: status.setpoint.map(quantity::Current::amperes),
            charge_ah: status.charge.ampere_hours(),
            energy_wh: status.energy.watt_hours(),
            reading: None,
            margins: MarginView::nearest_first(&status.margins),
            crossings: self.crossings.iter().map(CrossingView::new).collect(),
            ending: None,
            by_hand: None,
            record: self.folder.to_owned(),
            sealed: false,
        }
    }
}

impl Worker {
    /// Shows the sink, if there is something to show and it is time.
    pub(super) fn publish(&mut self) {
        let reading_at = self.keeper.presence().reading.map(|(at, _)| at);
        let reading_is_new = reading_at != self.last_reading;
        if !self.newsworthy && !reading_is_new {
            return;
        }
        let now = self.clock.now();
        if !self.newsworthy && now.saturating_since(self.published) < VIEW_EVERY {
            return;
        }
        self.newsworthy = false;
        self.published = now;
        self.last_reading = reading_at;
        let view = self.sink_view();
        self.metrics.stands(&view);
        self.context
            .events
            .push(&EventBody::Sink(Box::new(view.clone())));
        self.view.send_replace(Arc::new(Snapshot {
            view,
            description: self.keeper.presence().description,
        }));
    }

    fn sink_view(&self) -> SinkView {
        let presence = self.keeper.presence();
        SinkView {
            description: presence.description.as_ref().map(DescriptionView::from),
            reading: self.reading_view(),
            latched_by: self.latched_by(),
            run: self.run_view(),
            ..self.face.view(self.link.now())
        }
    }

    /// The interlock that tripped the last run, or else the cause of the sink's own latch.
    fn latched_by(&self) -> Option<String> {
        if let Some(interlock) = &self.tripped_by {
            return Some(word(interlock));
        }
        let (at, reading) = self.keeper.presence().reading?;
        if self.reset_at.is_some_and(|reset| at <= reset) {
            return None;
        }
        match reading.values.state {
            SinkState::Latched(cause) => Some(word(&cause)),
            SinkState::Off | SinkState::On | SinkState::Saturated => None,
        }
    }

    fn reading_view(&self) -> Option<ReadingView> {
        let (at, reading) = self.keeper.presence().reading?;
        Some(ReadingView::new(at, &reading, &self.correction))
    }

    /// The run in progress as it stands.
    pub(super) fn run_view(&self) -> Option<RunView> {
        let run = self.run.as_ref()?;
        let status = self.keeper.status()?;
        Some(self.view_of(run, &status))
    }

    pub(super) fn view_of(&self, run: &RunInProgress, status: &Status) -> RunView {
        let facts = RunFacts {
            id: run.id,
            sink: &self.face.name,
            folder: &run.folder,
            plan: &run.plan,
            clock: self.clock_word(),
            started: &run.started,
            expected: run.expected,
            crossings: &run.crossings,
        };
        RunView {
            reading: self.reading_view(),
            ending: run.ending.clone(),
            by_hand: run.hand.as_ref().map(Hand::view),
            ..facts.view(status)
        }
    }

    fn clock_word(&self) -> ClockWord {
        match self.face.link.kind {
            LinkKind::Serial | LinkKind::Tcp => ClockWord::Real,
            LinkKind::Simulated => ClockWord::TimeLapse,
        }
    }

    /// Notes how the link stands, and tells of it where that is news.
    pub(super) fn link_stands(&mut self, state: LinkState, reason: Option<String>, at: HostTime) {
        let link = &mut self.face.link;
        if link.state == state && link.reason == reason {
            return;
        }
        link.state = state;
        link.reason.clone_from(&reason);
        self.newsworthy = true;
        // Every run begins and ends with a greeting: that is no news.
        if state != LinkState::Greeting && self.told_link != (state, reason.clone()) {
            self.told_link = (state, reason.clone());
            self.context.events.push(&EventBody::Link(LinkEvent {
                sink: self.face.name.clone(),
                at: rfc3339(at),
                state,
                reason,
            }));
        }
    }

    /// Follows the session: whether the sink has described itself.
    pub(super) fn look_at_presence(&mut self) {
        let described = self.keeper.presence().description.is_some();
        let now = self.link.now();
        match (self.face.link.state, described) {
            (LinkState::Greeting | LinkState::Lost | LinkState::Refused, true) => {
                self.link_stands(LinkState::Connected, None, now);
            }
            (LinkState::Connected, false) => self.link_stands(LinkState::Greeting, None, now),
            (LinkState::Connected, true)
            | (LinkState::Greeting | LinkState::Lost | LinkState::Refused, false) => {}
        }
    }

    pub(super) fn observe_event(&mut self, happening: &Happening) {
        if let Happening::Reading(reading) = happening {
            self.metrics.readbacks.inc();
            if reading.lost > 0 {
                self.metrics.readbacks_lost.inc_by(u64::from(reading.lost));
            }
            if let Some(hand) = self.run.as_mut().and_then(|run| run.hand.as_mut()) {
                hand.read(reading);
            }
        }
    }

    pub(super) fn tell_finding(&mut self, finding: &Finding, at: HostTime) {
        let (message, news) = match finding {
            Finding::StepBegan { time, .. } if self.is_by_hand() => {
                let Some(setpoint) = self.hand_began(*time) else {
                    // The same once more.
                    return;
                };
                let news = RunNews::Step { op: 0, label: None };
                (format!("{setpoint} is held, set by hand"), news)
            }
            Finding::StepBegan { op, .. } => {
                let now = self.clock.now();
                if now.saturating_since(self.last_step_told) < STEP_EVERY {
                    return;
                }
                self.last_step_told = now;
                let label = self.run.as_ref().and_then(|run| label_of(&run.plan, *op));
                let message = match &label {
                    Some(label) => format!("step {op} ({label}) began"),
                    None => format!("step {op} began"),
                };
                (message, RunNews::Step { op: *op, label })
            }
            Finding::StepEnded { .. } => return,
            Finding::Crossed(crossing) => {
                self.metrics.crossed(crossing.interlock);
                if let Some(run) = &mut self.run
                    && run.crossings.len() < CROSSINGS_MAX
                {
                    run.crossings.push(*crossing);
                }
                let news = RunNews::Crossed(CrossingView::new(crossing));
                (crossing_text(crossing), news)
            }
            Finding::Held => ("held".to_owned(), RunNews::Held),
            Finding::Continued => ("continued".to_owned(), RunNews::Continued),
            Finding::ReadbacksLost { count } => {
                (format!("{count} readbacks were lost"), RunNews::Finding)
            }
            Finding::Rescheduled { op, by } => (
                format!("the schedule is later by {by} from step {op} on"),
                RunNews::Finding,
            ),
            Finding::BurstMissed { op } => (
                format!("the samples around the beginning of step {op} were not captured"),
                RunNews::Finding,
            ),
        };
        let calls_for_person = matches!(
            finding,
            Finding::Crossed(crossing) if crossing.interlock == Interlock::NotReleasing
        );
        self.newsworthy = true;
        self.tell(at, &message, calls_for_person, news);
    }

    pub(super) fn tell_ended(&mut self, ending: &Ending, at: HostTime) {
        let Some(run) = &mut self.run else { return };
        if let Ending::Tripped(interlock) = ending {
            self.tripped_by = Some(*interlock);
        }
        if run.hand.is_some() && *ending == Ending::Stopped {
            run.stopped_by.get_or_insert(NOT_ASKED_FOR_AGAIN);
        }
        let view = ending_view(ending, &run.crossings, run.stopped_by, at);
        let message = ending_text(&view);
        let calls_for_person = view.interlock == Some(Interlock::NotReleasing);
        self.metrics.ended(view.how);
        run.ending = Some(view.clone());
        self.newsworthy = true;
        self.tell(at, &message, calls_for_person, RunNews::Ended(view));
    }

    /// Tells everyone of something about the run in progress.
    pub(super) fn tell(&self, at: HostTime, message: &str, calls_for_person: bool, news: RunNews) {
        let Some(run) = &self.run else { return };
        self.context.tell(RunEvent {
            run: run.id,
            sink: self.face.name.clone(),
            dut: run.plan.dut.label.clone(),
            at: rfc3339(at),
            message: format!("{} on {}: {message}", run.plan.dut.label, self.face.name),
            calls_for_person,
            news,
        });
    }
}

fn standing(status: &Status) -> (RunState, Option<StepView>) {
    match &status.standing {
        Standing::Waiting | Standing::Connecting | Standing::Starting => (RunState::Starting, None),
        Standing::Running { op, label, since } => {
            let step = StepView {
                op: *op,
                label: label.clone(),
                since_s: Span::from_micros(since.micros()).seconds(),
                charge_ah: status.step_charge.map(quantity::Charge::ampere_hours),
            };
            (RunState::Running, Some(step))
        }
        Standing::Held => (RunState::Held, None),
        Standing::Interrupted { .. } => (RunState::Interrupted, None),
        Standing::Ended(_) => (RunState::Ending, None),
    }
}

/// The label of a step, by its place in the plan.
fn label_of(plan: &Plan, op: u32) -> Option<String> {
    let label = match plan.ops.get(usize::try_from(op).ok()?)? {
        Op::Step(step) => step.label,
        Op::LoopBegin(head) => head.label,
        Op::LoopEnd { .. } => None,
    };
    plan.labels.get(usize::try_from(label?).ok()?).cloned()
}

/// An ending as it is shown.
pub(crate) fn ending_view(
    ending: &Ending,
    crossings: &[Crossing],
    stopped_by: Option<&str>,
    at: HostTime,
) -> EndingView {
    EndingView {
        how: EndingWord::of(ending),
        interlock: match ending {
            Ending::Tripped(interlock) => Some(*interlock),
            Ending::Finished | Ending::Stopped | Ending::Interrupted => None,
        },
        at: rfc3339(at),
        reason: reason_of(ending, crossings, stopped_by),
    }
}

/// An ending in a few words.
pub(crate) fn ending_text(view: &EndingView) -> String {
    match &view.reason {
        Some(reason) => format!("{}: {reason}", view.how.text()),
        None => view.how.text().to_owned(),
    }
}

/// What a person should know of an ending, in a sentence.
pub(crate) fn reason_of(
    ending: &Ending,
    crossings: &[Crossing],
    stopped_by: Option<&str>,
) -> Option<String> {
    match ending {
        Ending::Finished => None,
        Ending::Stopped => stopped_by.map(str::to_owned),
        Ending::Interrupted => Some("the host or the link died".to_owned()),
        Ending::Tripped(interlock) => Some(
            crossings
                .iter()
                .find(|crossing| crossing.interlock == *interlock)
                .map_or_else(|| word(interlock).replace('_', " "), crossing_text),
        ),
    }
}

/// A crossing in a few words.
pub(crate) fn crossing_text(crossing: &Crossing) -> String {
    let view = CrossingView::new(crossing);
    let name = word(&crossing.interlock).replace('_', " ");
    let by = if view.by_sink {
        ", by the sink's own limit"
    } else {
        ""
    };
    let advice = if crossing.interlock == Interlock::NotReleasing {
        "; the sink does not let go: cut the circuit by hand"
    } else {
        ""
    };
    if view.unit.is_empty() {
        return format!("{name}{by}{advice}");
    }
    let CrossingView {
        value,
        threshold,
        unit,
        ..
    } = view;
    format!("{name}: {value} {unit}, the threshold is {threshold} {unit}{by}{advice}")
}
