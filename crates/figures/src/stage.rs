//! The steps of a run as they were carried out, from the findings in its record.

use journal::{Body, Entry};
use quantity::{SinkTime, Voltage};
use sequence::plan::{Action, Condition, Op, Plan, PlanStep};
use sequencer::event::{Finding, StepEnd};

/// One step as it was carried out.
#[derive(Debug, Clone)]
pub(crate) struct Stage<'a> {
    /// The step of the plan.
    pub(crate) step: &'a PlanStep,
    /// Its label.
    pub(crate) label: Option<&'a str>,
    /// When it began, by the sink's clock.
    pub(crate) begin: SinkTime,
    /// When it ended.
    pub(crate) end: SinkTime,
    /// Why; `None` while it runs, or if the record breaks off.
    pub(crate) ended_by: Option<StepEnd>,
}

impl Stage<'_> {
    /// Whether it draws a current on purpose.
    pub(crate) fn draws(&self) -> bool {
        match self.step.action {
            Action::Rest => false,
            Action::Current { target, .. } => target.microamperes() > 0,
            Action::Power { .. } | Action::Resistance { .. } => true,
        }
    }

    /// The cut-off: the voltage whose falling below ended the step.
    pub(crate) fn cut_off(&self) -> Option<Voltage> {
        let Some(StepEnd::Until(index)) = self.ended_by else {
            return None;
        };
        let until = self.step.until.get(usize::from(index))?;
        if let Condition::VoltageBelow(voltage) = until.condition {
            Some(voltage)
        } else {
            None
        }
    }
}

/// The stages in the order of time. The last one runs to `last` if the record breaks off in it.
pub(crate) fn stages<'a>(plan: &'a Plan, others: &[Entry], last: SinkTime) -> Vec<Stage<'a>> {
    let mut stages: Vec<Stage<'a>> = Vec::new();
    for entry in others {
        let Body::Finding(finding) = &entry.body else {
            continue;
        };
        if let Finding::StepBegan { op, time } = finding
            && let Some(step) = step_at(plan, *op)
        {
            stages.push(Stage {
                step,
                label: label_of(plan, step),
                begin: *time,
                end: last,
                ended_by: None,
            });
        }
        if let Finding::StepEnded { time, by, .. } = finding
            && let Some(stage) = stages.last_mut()
        {
            stage.end = *time;
            stage.ended_by = Some(*by);
        }
    }
    stages
}

fn step_at(plan: &Plan, op: u32) -> Option<&PlanStep> {
    match plan.ops.get(usize::try_from(op).ok()?)? {
        Op::Step(step) => Some(step),
        Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
    }
}

fn label_of<'a>(plan: &'a Plan, step: &PlanStep) -> Option<&'a str> {
    let index = usize::try_from(step.label?).ok()?;
    plan.labels.get(index).map(String::as_str)
}
