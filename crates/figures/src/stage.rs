//! The steps of a run as they were carried out, from the findings in its record.

use std::borrow::Cow;
use std::collections::BTreeMap;

use journal::{Body, Entry};
use quantity::{Current, SinkTime, Span, Voltage};
use sequence::plan::{Action, Op, Plan, PlanStep};
use sequencer::event::{Finding, Happening, StepEnd};
use wire::{Mode, Order, OrderId};

/// Of a label that is carried out more often than this, only the first have figures of their own.
pub(crate) const EACH_MAX: u32 = 100;

/// How long after a step's time the next may begin for the current to have gone on: a step that
/// is followed is held for so much longer than its time (`sequencer::orders`), and a run that was
/// held or interrupted takes longer to go on.
const AT_THE_NEXT_TICK: Span = Span::from_millis(50);

/// One step as it was carried out.
#[derive(Debug, Clone)]
pub(crate) struct Stage<'a> {
    /// The step of the plan; in a run by hand, with what was set.
    pub(crate) step: Cow<'a, PlanStep>,
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

    /// Whether it began where the other ended, and the sink was not off in between.
    ///
    /// A step ends on paper when its time is over, and the next begins at the sink's first tick
    /// from then on: a little later, with the current before it still flowing.
    pub(crate) fn follows(&self, before: &Self) -> bool {
        self.begin
            .checked_since(before.end)
            .is_some_and(|late| late <= AT_THE_NEXT_TICK)
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
        until.condition.cut_off()
    }
}

/// The stages in the order of time. The last one runs to `last` if the record breaks off in it.
pub(crate) fn stages<'a>(plan: &'a Plan, others: &[Entry], last: SinkTime) -> Vec<Stage<'a>> {
    let mut stages: Vec<Stage<'a>> = Vec::new();
    let mut hand = Hand::default();
    for entry in others {
        if plan.by_hand {
            hand.take(&entry.body);
        }
        let Body::Finding(finding) = &entry.body else {
            continue;
        };
        if let Finding::StepBegan { op, time } = finding
            && let Some(step) = step_at(plan, *op)
        {
            let set = hand.set_at(plan, *time);
            // The same setpoint asked for again goes on with the same stage.
            if let (Some(action), Some(before)) = (set, stages.last_mut())
                && before.step.action == action
                && time.saturating_since(before.end) <= plan.tick
            {
                before.end = last;
                before.ended_by = None;
                continue;
            }
            let label = label_of(plan, step);
            let step = match set {
                Some(action) => Cow::Owned(PlanStep {
                    action,
                    ..step.clone()
                }),
                None => Cow::Borrowed(step),
            };
            stages.push(Stage {
                step,
                label,
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

/// What a run by hand has ordered, and when it began.
#[derive(Debug, Default)]
struct Hand {
    ordered: BTreeMap<OrderId, Mode>,
    /// By the sink's own word.
    began: BTreeMap<SinkTime, OrderId>,
}

impl Hand {
    fn take(&mut self, body: &Body) {
        match body {
            Body::Order {
                id,
                order: Order::Step(step),
            } => {
                self.ordered.insert(*id, step.mode);
            }
            Body::Event(Happening::Edge { time, order }) => {
                self.began.insert(*time, *order);
            }
            Body::Event(_)
            | Body::Order { .. }
            | Body::Off
            | Body::Finding(_)
            | Body::Ended(_)
            | Body::Note(_) => {}
        }
    }

    /// What the step holds that began at this time; `None` in a run that is not by hand, or where
    /// the sink's word was lost.
    fn set_at(&self, plan: &Plan, time: SinkTime) -> Option<Action> {
        match self.ordered.get(self.began.get(&time)?)? {
            Mode::Current(nominal) if *nominal == Current::ZERO => Some(Action::Rest),
            Mode::Current(nominal) => Some(Action::Current {
                target: plan.correction.current_from_setpoint(*nominal),
                ramp: Span::ZERO,
            }),
            Mode::Power(_) | Mode::Resistance(_) => None,
        }
    }
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
