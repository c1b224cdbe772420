//! The steps of a run as they were carried out, from the findings in its record.

use std::collections::BTreeMap;

use journal::{Body, Entry};
use quantity::{SinkTime, Span, Voltage};
use sequence::plan::{Action, Condition, Op, Plan, PlanStep};
use sequencer::event::{Finding, StepEnd};

/// Of a label that is carried out more often than this, only the first have figures of their own.
pub(crate) const EACH_MAX: u32 = 100;

/// One step as it was carried out.
#[derive(Debug, Clone)]
pub(crate) struct Stage<'a> {
    /// The step of the plan.
    pub(crate) step: &'a PlanStep,
    /// Its label.
    pub(crate) label: Option<&'a str>,
    /// Which of the steps with this label it is, from 1; `None` if it is the only one.
    pub(crate) occurrence: Option<u32>,
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

    /// The current of a step that holds one from its first instant, ampere; zero for a rest.
    pub(crate) fn held_current(&self) -> Option<f64> {
        match self.step.action {
            Action::Rest => Some(0.0),
            Action::Current { target, ramp } if ramp.micros() == 0 => Some(target.amperes()),
            Action::Current { .. } | Action::Power { .. } | Action::Resistance { .. } => None,
        }
    }

    /// How long it took, by the sink's clock.
    pub(crate) fn length(&self) -> Span {
        self.end.saturating_since(self.begin)
    }

    /// Whether it began where the other ended.
    pub(crate) fn follows(&self, before: &Self) -> bool {
        self.begin == before.end
    }

    /// Whether it is the first of its label.
    pub(crate) fn is_first(&self) -> bool {
        self.occurrence.is_none_or(|nth| nth == 1)
    }

    /// Whether it is one of so many of its label that figures for each would say nothing.
    pub(crate) fn is_beyond_counting(&self) -> bool {
        self.occurrence.is_some_and(|nth| nth > EACH_MAX)
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
                occurrence: None,
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
    count_occurrences(&mut stages);
    stages
}

fn count_occurrences(stages: &mut [Stage<'_>]) {
    let mut total: BTreeMap<Option<&str>, u32> = BTreeMap::new();
    for stage in stages.iter() {
        *total.entry(stage.label).or_default() += 1;
    }
    let mut seen: BTreeMap<Option<&str>, u32> = BTreeMap::new();
    for stage in stages.iter_mut() {
        let nth = seen.entry(stage.label).or_default();
        *nth += 1;
        let several = total.get(&stage.label).is_some_and(|total| *total > 1);
        stage.occurrence = several.then_some(*nth);
    }
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
