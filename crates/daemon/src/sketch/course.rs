//! How a record went: which label held when, and what happened. Bounded, whatever the record.

use journal::{Body, Entry, Note};
use quantity::{HostTime, Span};
use sequence::plan::{Op, Plan};
use sequencer::event::{Ending, Finding};

use crate::metrics::word;
use crate::view::{CourseView, HappeningView, StretchView};
use crate::worker::crossing_text;

/// Stretches that are kept; what comes after them is counted.
const STRETCHES_MAX: usize = 2_000;
/// Happenings that are kept; what comes after them is counted.
const HAPPENINGS_MAX: usize = 200;

/// Takes a record's entries, bar its readbacks, in order.
#[derive(Debug, Clone)]
pub(super) struct Course {
    start: HostTime,
    view: CourseView,
    /// A stretch had no room: the last one that had is over.
    full: bool,
}

impl Course {
    pub(super) fn new(start: HostTime) -> Self {
        Self {
            start,
            view: CourseView::default(),
            full: false,
        }
    }

    pub(super) fn view(&self) -> &CourseView {
        &self.view
    }

    pub(super) fn take(&mut self, plan: &Plan, entry: &Entry) {
        let at_s = entry.at.saturating_since(self.start).seconds();
        match &entry.body {
            Body::Finding(Finding::StepBegan { op, .. }) => self.step(at_s, label_of(plan, *op)),
            Body::Finding(finding) => {
                if let Some((kind, message)) = told(finding) {
                    self.happening(at_s, kind, message);
                }
            }
            Body::Note(Note::LinkLost { reason }) => {
                self.happening(at_s, "link_lost", format!("the link was lost: {reason}"));
            }
            Body::Note(Note::LinkBack) => {
                self.happening(at_s, "link_back", "the link was back".to_owned());
            }
            Body::Note(Note::Resumed { gap, .. }) => {
                let message = format!("taken up again, {gap} after the last entry");
                self.happening(at_s, "resumed", message);
            }
            Body::Ended(ending) => {
                self.reaches(at_s);
                let message = match ending {
                    Ending::Tripped(interlock) => {
                        format!("tripped: {}", word(interlock).replace('_', " "))
                    }
                    Ending::Finished | Ending::Stopped | Ending::Interrupted => word(ending),
                };
                let kind = match ending {
                    Ending::Tripped(_) => "tripped",
                    Ending::Finished | Ending::Stopped | Ending::Interrupted => "ended",
                };
                self.happening(at_s, kind, message);
            }
            Body::Event(_) | Body::Order { .. } | Body::Off | Body::Note(_) => {}
        }
        self.reaches(at_s);
    }

    /// The run had come so far.
    pub(super) fn reaches(&mut self, at_s: f64) {
        if self.full {
            return;
        }
        if let Some(last) = self.view.stretches.last_mut() {
            last.to_s = last.to_s.max(at_s);
        }
    }

    fn step(&mut self, at_s: f64, label: Option<&str>) {
        self.reaches(at_s);
        let stretches = &mut self.view.stretches;
        if self.full || stretches.len() >= STRETCHES_MAX {
            self.full = true;
            self.view.left_out += 1;
            return;
        }
        match stretches.last_mut() {
            Some(last) if last.label.as_deref() == label => last.steps += 1,
            Some(_) | None => stretches.push(StretchView {
                from_s: at_s,
                to_s: at_s,
                label: label.map(str::to_owned),
                steps: 1,
            }),
        }
    }

    fn happening(&mut self, at_s: f64, kind: &str, message: String) {
        if self.view.happenings.len() >= HAPPENINGS_MAX {
            self.view.left_out += 1;
            return;
        }
        self.view.happenings.push(HappeningView {
            at_s,
            kind: kind.to_owned(),
            message,
        });
    }
}

/// The label of a step, by its place in the plan.
fn label_of(plan: &Plan, op: u32) -> Option<&str> {
    let label = match plan.ops.get(usize::try_from(op).ok()?)? {
        Op::Step(step) => step.label,
        Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
    };
    let label = plan.labels.get(usize::try_from(label?).ok()?)?;
    Some(label)
}

fn told(finding: &Finding) -> Option<(&'static str, String)> {
    let later = |op: &u32, by: &Span| format!("the schedule is later by {by} from step {op} on");
    match finding {
        Finding::Crossed(crossing) => Some(("crossed", crossing_text(crossing))),
        Finding::Held => Some(("held", "held".to_owned())),
        Finding::Continued => Some(("continued", "continued".to_owned())),
        Finding::ReadbacksLost { count } => {
            Some(("readbacks_lost", format!("{count} readbacks were lost")))
        }
        Finding::Rescheduled { op, by } => Some(("rescheduled", later(op, by))),
        Finding::BurstMissed { op } => {
            let message =
                format!("the samples around the beginning of step {op} were not captured");
            Some(("burst_missed", message))
        }
        Finding::StepBegan { .. } | Finding::StepEnded { .. } => None,
    }
}
