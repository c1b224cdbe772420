//! How the run went: its steps as they were carried out, and what happened to it.
//!
//! What it deliberately does not do: judge. Findings are told as the record has them.

use journal::{Body, Entry, Note};
use quantity::{Current, HostTime, SinkTime, Span};
use sequence::plan::{Action, Op, Plan, PlanStep};
use sequencer::event::{Command, Crossing, Ending, Finding, Happening, StepEnd};
use serde::Serialize;

use crate::wording::{crossing, duration, ending, words};

/// Events kept at most: a faulty link can make thousands.
const MARKS_MAX: usize = 200;

/// Steps and events.
#[derive(Debug)]
pub(crate) struct Course {
    plan: Plan,
    pub(crate) stages: Vec<Stage>,
    pub(crate) marks: Vec<Mark>,
    /// Events beyond those kept.
    pub(crate) marks_left_out: u64,
    pub(crate) crossings: Vec<Crossing>,
    /// When the link was gone, each time.
    pub(crate) losses: Vec<HostTime>,
    /// How the journal says that it ended.
    pub(crate) ended: Option<Ending>,
}

/// One step as it was carried out.
#[derive(Debug, Clone)]
pub(crate) struct Stage {
    /// Its place in the plan.
    pub(crate) op: u32,
    pub(crate) step: PlanStep,
    pub(crate) label: Option<String>,
    pub(crate) begin: HostTime,
    pub(crate) end: HostTime,
    /// By the sink's clock; `None` while it runs, or if the record breaks off.
    pub(crate) took: Option<Span>,
    pub(crate) ended_by: Option<StepEnd>,
    began: SinkTime,
    closed: bool,
}

/// Something that happened.
#[derive(Debug, Clone)]
pub(crate) struct Mark {
    pub(crate) at: HostTime,
    pub(crate) entry: u64,
    /// A word or two for the plot; `None`: only for the list.
    pub(crate) word: Option<&'static str>,
    pub(crate) sentence: String,
}

impl Course {
    pub(super) fn new(plan: &Plan) -> Self {
        Self {
            plan: plan.clone(),
            stages: Vec::new(),
            marks: Vec::new(),
            marks_left_out: 0,
            crossings: Vec::new(),
            losses: Vec::new(),
            ended: None,
        }
    }

    /// A setpoint by hand; the same asked for again is no news.
    fn set_by_hand(&mut self, entry: &Entry, setpoint: Current) {
        let Some(Op::Step(step)) = self.plan.ops.first_mut() else {
            return;
        };
        let action = if setpoint == Current::ZERO {
            Action::Rest
        } else {
            Action::Current {
                target: setpoint,
                ramp: Span::ZERO,
            }
        };
        if step.action != action {
            step.action = action;
            self.mark(entry, None, format!("{setpoint} was set by hand"));
        }
    }

    pub(super) fn take(&mut self, entry: &Entry) {
        match &entry.body {
            Body::Event(what) => self.happened(entry, what),
            Body::Finding(finding) => self.found(entry, finding),
            Body::Note(note) => self.noted(entry, note),
            Body::Ended(how) => {
                self.ended = Some(how.clone());
                let word = if matches!(how, Ending::Tripped(_)) {
                    None
                } else {
                    Some("end")
                };
                self.mark(entry, word, format!("the run ended: {}", ending(how)));
            }
            Body::Order { .. } | Body::Off => {}
        }
    }

    /// A step that was still running ends where the readbacks do.
    pub(super) fn finish(&mut self, last: Option<HostTime>) {
        if let Some(stage) = self.stages.last_mut()
            && !stage.closed
        {
            stage.end = last.unwrap_or(stage.begin).max(stage.begin);
        }
    }

    fn happened(&mut self, entry: &Entry, what: &Happening) {
        if matches!(what, Happening::LinkLost) {
            self.losses.push(entry.at);
            self.mark(entry, Some("link lost"), "the link to the sink was lost");
        } else if let Happening::SinkTripped { cause, .. } = what {
            let cause = words(cause);
            let sentence = format!("the sink turned itself off and latched: {cause}");
            self.mark(entry, None, sentence);
        } else if matches!(what, Happening::SinkRebooted) {
            self.losses.push(entry.at);
            self.mark(entry, Some("sink restarted"), "the sink started anew");
        } else if let Happening::ClockOff { by } = what {
            let sentence = format!("the sink’s clock was off by {}", duration(*by));
            self.mark(entry, Some("clock"), sentence);
        } else if let Happening::Refused { reason, .. } = what {
            let sentence = format!("the sink refused an order: {}", words(reason));
            self.mark(entry, Some("refused"), sentence);
        } else if matches!(what, Happening::RecordFailed) {
            self.mark(entry, Some("record"), "the record could not be written");
        } else if let Happening::Command(command) = what {
            let sentence = match command {
                Command::Stop => "a person or a script asked for the run to be stopped",
                Command::Hold => "a person or a script asked for a hold",
                Command::Continue => "a person or a script asked to go on",
                Command::Setpoint { setpoint, .. } => {
                    self.set_by_hand(entry, *setpoint);
                    return;
                }
            };
            self.mark(entry, None, sentence);
        } else if let Happening::Connected { .. } = what {
            self.mark(entry, None, "a session with the sink began");
        } else if is_plain_word(what) && !matches!(what, Happening::TimePassed) {
            // What later versions of the sequencer are told, by its word.
            if !matches!(what, Happening::OffAcknowledged) {
                self.mark(entry, None, words(what));
            }
        }
    }

    fn found(&mut self, entry: &Entry, finding: &Finding) {
        match finding {
            Finding::StepBegan { op, time } => self.begin(entry.at, *op, *time),
            Finding::StepEnded { time, by, .. } => self.end(entry.at, *time, *by),
            Finding::Crossed(crossed) => {
                self.crossings.push(*crossed);
                let word = (self.crossings.len() == 1).then_some("trip");
                self.mark(entry, word, format!("trip: {}", crossing(crossed)));
            }
            Finding::Held => self.mark(entry, Some("held"), "the run was held: off"),
            Finding::Continued => self.mark(entry, Some("on again"), "the run went on"),
            Finding::ReadbacksLost { count } => {
                let sentence = format!("{count} readbacks were lost; their charge was not");
                self.mark(entry, None, sentence);
            }
            Finding::Rescheduled { by, .. } => {
                let by = duration(*by);
                let sentence = format!("the schedule from here on is later by {by}");
                self.mark(entry, None, sentence);
            }
            Finding::BurstMissed { .. } => {
                let sentence = "the samples around a step’s beginning were not captured";
                self.mark(entry, None, sentence);
            }
        }
    }

    fn noted(&mut self, entry: &Entry, note: &Note) {
        if let Note::LinkLost { reason } = note {
            self.mark(entry, None, format!("the port said: {reason}"));
        } else if matches!(note, Note::LinkBack) {
            self.mark(entry, Some("link back"), "the link was back");
        } else if let Note::Resumed { gap, .. } = note {
            self.losses.push(entry.at);
            let sentence = format!(
                "the run was taken up again after the host had been away for {}",
                duration(*gap)
            );
            self.mark(entry, Some("resumed"), sentence);
        } else if let Note::Text(text) = note {
            self.mark(entry, None, text.clone());
        }
    }

    fn begin(&mut self, at: HostTime, op: u32, time: SinkTime) {
        let place = usize::try_from(op).ok();
        let Some(Op::Step(step)) = place.and_then(|place| self.plan.ops.get(place)) else {
            return;
        };
        let label = step.label.and_then(|label| {
            let index = usize::try_from(label).ok()?;
            self.plan.labels.get(index).cloned()
        });
        self.stages.push(Stage {
            op,
            step: step.clone(),
            label,
            begin: at,
            end: at,
            took: None,
            ended_by: None,
            began: time,
            closed: false,
        });
    }

    fn end(&mut self, at: HostTime, time: SinkTime, by: StepEnd) {
        if let Some(stage) = self.stages.last_mut() {
            stage.end = at;
            stage.took = time.checked_since(stage.began);
            stage.ended_by = Some(by);
            stage.closed = true;
        }
    }

    fn mark(&mut self, entry: &Entry, word: Option<&'static str>, sentence: impl Into<String>) {
        // How it ended is always kept.
        if self.marks.len() >= MARKS_MAX && !matches!(entry.body, Body::Ended(_)) {
            self.marks_left_out += 1;
            return;
        }
        self.marks.push(Mark {
            at: entry.at,
            entry: entry.number,
            word,
            sentence: sentence.into(),
        });
    }
}

fn is_plain_word(what: &impl Serialize) -> bool {
    matches!(serde_json::to_value(what), Ok(serde_json::Value::String(_)))
}
