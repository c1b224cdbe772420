//! Which steps are looked at more closely, decided from the findings before the walk.

use quantity::Span;
use sequence::plan::{DutKind, Plan};

use crate::pulse::is_pulse;
use crate::stage::Stage;
use crate::walk::Look;

/// Steps shorter than this say nothing about heat.
const HEAT_LEAST: Span = Span::from_secs(300);

/// Longest stretch of a relaxation that is kept.
const RELAXATION: Span = Span::from_secs(600);

/// Longest stretch of a sweep over a supply's limit that is kept.
const SWEEP: Span = Span::from_secs(3600);

/// A rest, a pulse and the relaxation after it, as a cell model is fitted to.
const REST_LEAST: Span = Span::from_secs(60);
const PULSE_LEAST: Span = Span::from_secs(1);
const PULSE_MOST: Span = Span::from_secs(120);
const RELAXATION_LEAST: Span = Span::from_secs(30);

/// How closely to look at a stage.
pub(crate) fn look(plan: &Plan, stages: &[Stage<'_>], index: usize) -> Look {
    let Some(stage) = stages.get(index) else {
        return Look::default();
    };
    let before = index.checked_sub(1).and_then(|before| stages.get(before));
    if plan.dut.kind == DutKind::Supply {
        return Look {
            around: false,
            curve: stage.step.may_give_up.then_some(SWEEP),
            heat: is_soak(stage),
            discharge: false,
        };
    }
    let of_model = is_model_pulse(stages, index)
        || index
            .checked_sub(1)
            .is_some_and(|before| is_model_pulse(stages, before));
    Look {
        around: before.is_some_and(|before| is_pulse(before, stage)),
        curve: of_model.then_some(RELAXATION),
        heat: is_soak(stage),
        discharge: is_discharge(stage),
    }
}

fn is_soak(stage: &Stage<'_>) -> bool {
    stage.draws() && stage.length() >= HEAT_LEAST && !stage.is_beyond_counting()
}

/// Whether a stage is a discharge at a constant current that the open-circuit voltage can be told
/// from, given the resistances.
fn is_discharge(stage: &Stage<'_>) -> bool {
    stage.held_current().is_some_and(|held| held > 0.0)
        && stage.length() > PULSE_MOST
        && !stage.is_beyond_counting()
}

/// Whether a stage is a pulse between a rest and a relaxation.
pub(crate) fn is_model_pulse(stages: &[Stage<'_>], index: usize) -> bool {
    let around = index
        .checked_sub(1)
        .and_then(|before| stages.get(before..=index + 1));
    let Some([rest, pulse, relaxation]) = around else {
        return false;
    };
    let current = |stage: &Stage<'_>| stage.held_current().unwrap_or(f64::NAN);
    current(rest).abs() <= 0.0
        && current(pulse) > 0.0
        && current(relaxation).abs() <= 0.0
        && pulse.follows(rest)
        && relaxation.follows(pulse)
        && rest.length() >= REST_LEAST
        && (PULSE_LEAST..=PULSE_MOST).contains(&pulse.length())
        && relaxation.length() >= RELAXATION_LEAST
        && !pulse.is_beyond_counting()
}
