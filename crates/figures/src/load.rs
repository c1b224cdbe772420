//! The load that a plan puts on a cell, as a cycle of steps, for a prediction of its run-time.
//!
//! What it deliberately does not do: powers and resistances, whose current depends on the cell,
//! and loads that change from cycle to cycle.

use quantity::Voltage;
use sequence::plan::{Action, LoopHead, Op, Plan, PlanStep, Until};

use crate::predict::{Load, LoadStep};

/// Pieces that a slope of the current is cut into.
const PIECES: u32 = 16;

/// Steps of a cycle at most.
const STEPS_MAX: usize = 200_000;

/// Length of the cycle of a load that does not repeat, seconds: no more than a grain.
const STEADY_S: f64 = 1.0;

/// Why a plan is no load for a prediction.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum LoadError {
    /// Nothing repeats until a voltage is met, and nothing is drawn until one.
    #[error(
        "the sequence has no repeat, and no step, that goes on until a voltage; a run-time is \
         predicted for what is repeated, or held, until the cut-off"
    )]
    NoCycle,
    /// A step whose current is not set.
    #[error("{pointer}: {what} has no current of its own; a cycle for a prediction has currents")]
    NotACurrent {
        /// Where it stands.
        pointer: String,
        /// What it holds.
        what: &'static str,
    },
    /// A cycle too long to go through.
    #[error("{pointer}: a cycle of more than {STEPS_MAX} steps; give a shorter one")]
    TooLong {
        /// Where it stands.
        pointer: String,
    },
    /// No cut-off.
    #[error("{pointer}: nothing says at which voltage it ends; give the cut-off voltage")]
    NoCutOff {
        /// Where it stands.
        pointer: String,
    },
}

impl Load {
    /// The load of a plan: its outermost repeat that is not counted, or else the step that goes
    /// on until a voltage. The cut-off is that voltage, unless another is given.
    ///
    /// # Errors
    /// [`LoadError`] where there is none, or one whose currents depend on the cell.
    pub fn of_plan(plan: &Plan, cut_off_v: Option<f64>) -> Result<Self, LoadError> {
        let repeats = plan.ops.iter().enumerate().find_map(|(index, op)| {
            let Op::LoopBegin(head) = op else { return None };
            (head.times.is_none()).then_some((index, head))
        });
        if let Some((index, head)) = repeats {
            return repeated(plan, index, head, cut_off_v);
        }
        let steps = plan.ops.iter().filter_map(|op| match op {
            Op::Step(step) => Some(step),
            Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
        });
        let mut held = steps.filter(|step| voltage(&step.until).is_some());
        let step = held.next().ok_or(LoadError::NoCycle)?;
        let mut cycle = Vec::new();
        pieces(step, 0.0, &mut cycle)?;
        let amperes = cycle.last().map_or(0.0, |last| last.amperes);
        Ok(Self {
            cycle: vec![LoadStep {
                seconds: STEADY_S,
                amperes,
            }],
            cut_off_v: cut_off_v
                .or_else(|| voltage(&step.until))
                .ok_or(LoadError::NoCycle)?,
        })
    }

    /// Mean current of the cycle, ampere.
    pub fn mean_amperes(&self) -> f64 {
        let seconds: f64 = self.cycle.iter().map(|step| step.seconds).sum();
        let charge: f64 = self
            .cycle
            .iter()
            .map(|step| step.seconds * step.amperes)
            .sum();
        charge / seconds
    }
}

fn repeated(
    plan: &Plan,
    begin: usize,
    head: &LoopHead,
    cut_off_v: Option<f64>,
) -> Result<Load, LoadError> {
    let end = usize::try_from(head.end).unwrap_or(usize::MAX);
    let mut cycle = Vec::new();
    walk(plan, begin + 1, end, &mut cycle)?;
    let within = || {
        let body = plan.ops.get(begin + 1..end).unwrap_or_default();
        body.iter().find_map(|op| match op {
            Op::Step(step) => voltage(&step.until),
            Op::LoopBegin(head) => voltage(&head.until),
            Op::LoopEnd { .. } => None,
        })
    };
    let cut_off_v = cut_off_v
        .or_else(|| voltage(&head.until))
        .or_else(within)
        .ok_or_else(|| LoadError::NoCutOff {
            pointer: head.pointer.clone(),
        })?;
    Ok(Load { cycle, cut_off_v })
}

/// Writes out the instructions from one place to another, counted repeats and all.
fn walk(plan: &Plan, from: usize, to: usize, cycle: &mut Vec<LoadStep>) -> Result<(), LoadError> {
    let mut place = from;
    while place < to {
        match plan.ops.get(place) {
            Some(Op::Step(step)) => {
                let before = cycle.last().map_or(0.0, |last| last.amperes);
                pieces(step, before, cycle)?;
            }
            Some(Op::LoopBegin(head)) => {
                let foot = usize::try_from(head.end).unwrap_or(usize::MAX);
                let times = head.times.unwrap_or(1);
                for _ in 0..times {
                    walk(plan, place + 1, foot, cycle)?;
                    if cycle.len() > STEPS_MAX {
                        let pointer = head.pointer.clone();
                        return Err(LoadError::TooLong { pointer });
                    }
                }
                place = foot;
            }
            Some(Op::LoopEnd { .. }) | None => {}
        }
        place += 1;
    }
    Ok(())
}

fn pieces(step: &PlanStep, before: f64, cycle: &mut Vec<LoadStep>) -> Result<(), LoadError> {
    let refused = |what: &'static str| LoadError::NotACurrent {
        pointer: step.pointer.clone(),
        what,
    };
    let (target, ramp_s) = match step.action {
        Action::Rest => (0.0, 0.0),
        Action::Current { target, ramp } => (target.amperes(), ramp.seconds()),
        Action::Power { .. } => return Err(refused("a step of constant power")),
        Action::Resistance { .. } => return Err(refused("a step of constant resistance")),
    };
    let seconds = step.duration.seconds();
    let ramp_s = ramp_s.min(seconds);
    if ramp_s > 0.0 {
        for piece in 0..PIECES {
            let share = (f64::from(piece) + 0.5) / f64::from(PIECES);
            cycle.push(LoadStep {
                seconds: ramp_s / f64::from(PIECES),
                amperes: before + (target - before) * share,
            });
        }
    }
    if seconds > ramp_s {
        cycle.push(LoadStep {
            seconds: seconds - ramp_s,
            amperes: target,
        });
    }
    Ok(())
}

fn voltage(until: &[Until]) -> Option<f64> {
    let mut conditions = until.iter();
    let cut_off = conditions.find_map(|until| until.condition.cut_off());
    cut_off.map(Voltage::volts)
}
