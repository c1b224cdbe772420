//! How long a load runs on a cell of a fitted model, with an interval.
//!
//! The load is a cycle of steps that repeats for ever. It is short against the run, so at each
//! state of charge the pairs are taken to be where that cycle keeps them, and the run ends at
//! the state of charge at which the lowest voltage of the cycle meets the cut-off.
//!
//! The interval is JCGM 101's: many trials, each with a model drawn from the covariance of every
//! pulse's fit, an error of the voltages common to all, and a cell that differs from the one
//! measured by the spread between cells. What dominates is told by trials in which one cause
//! alone is drawn.
//!
//! What it deliberately does not do: ageing, self-discharge, rates beyond those that were
//! measured. A load whose sleep current is a leak of the cell's own size runs shorter.

use serde::{Deserialize, Serialize};
use sink::accumulate::Moments;
use sink::montecarlo::{Outcome, OutcomeError, Random};
use sink::uncertainty::{Budget, Contribution, DegreesOfFreedom, Evaluation};

use crate::cell::CellModel;
use crate::draw::{Causes, Factors};
use crate::figure::PROBABILITY;

/// Trials in which one cause alone is drawn, at most.
const TRIALS_ALONE: usize = 2_000;

/// A step of the load's cycle.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LoadStep {
    /// How long, second.
    pub seconds: f64,
    /// Its current, ampere.
    pub amperes: f64,
}

/// How the cell that will run differs from the one that was measured, each as a share, standard
/// deviation.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellSpread {
    /// Of the capacity.
    pub capacity: f64,
    /// Of all resistances together.
    pub resistance: f64,
    /// Degrees of freedom behind both, where they come from a few cells; `None`: well known.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub degrees_of_freedom: Option<u32>,
}

impl CellSpread {
    /// From cells measured alike, of which one was fitted: the next cell differs from that one by
    /// the root of two standard deviations. Student's distribution with one degree of freedom
    /// less than cells (JCGM 101:2008, 6.4.9).
    pub fn of_cells(capacity: f64, resistance: f64, cells: u32) -> Self {
        let two = 2_f64.sqrt();
        Self {
            capacity: two * capacity,
            resistance: two * resistance,
            degrees_of_freedom: Some(cells.saturating_sub(1).max(1)),
        }
    }
}

/// How warm the cell will be.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Warmth {
    /// Expected, degrees Celsius.
    pub degc: f64,
    /// Standard deviation, kelvin.
    pub standard_k: f64,
}

/// What is asked of a prediction.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Load {
    /// One cycle.
    pub cycle: Vec<LoadStep>,
    /// The voltage below which it runs no longer, volt.
    pub cut_off_v: f64,
}

/// On which cells, how warm, and how hard to try.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Terms {
    /// How cells differ.
    pub spread: CellSpread,
    /// How warm the cell will be; `None`: as warm as when it was measured.
    pub warmth: Option<Warmth>,
    /// Trials.
    pub trials: usize,
    /// Seed of the trials.
    pub seed: u64,
}

impl Terms {
    /// The very cell that was measured, as warm as it was then.
    pub const EXPECTED: Self = Self {
        spread: CellSpread {
            capacity: 0.0,
            resistance: 0.0,
            degrees_of_freedom: None,
        },
        warmth: None,
        trials: 10_000,
        seed: 1,
    };

    /// The same with the spread between cells taken as well known.
    const fn well_known(mut self) -> Self {
        self.spread.degrees_of_freedom = None;
        self
    }
}

/// A run-time.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct RunTime {
    /// On the model as it was fitted, hour.
    pub hours: f64,
    /// State of charge at the end.
    pub state_of_charge: f64,
    /// Mean, standard uncertainty and intervals of the trials, hour.
    pub outcome: Outcome,
    /// Each cause's standard deviation of the run-time by itself, hour.
    pub budget: Budget,
    /// The largest of them.
    pub dominated_by: Option<String>,
    /// What a reader must know before trusting it.
    pub notes: Vec<String>,
    /// How it was worked out.
    pub method: String,
}

/// Why there is no prediction.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum PredictError {
    /// A cycle that draws nothing or makes no sense.
    #[error("the cycle has no step of a finite length that draws; give its steps and currents")]
    Cycle,
    /// A model without points.
    #[error("the cell model has no pulse; fit one to a record with pulses between rests")]
    Model,
    /// A full cell that does not carry the cycle.
    #[error(
        "a full cell's voltage falls to {lowest_v:.3} V in the cycle, below the cut-off of \
         {cut_off_v:.3} V: it never runs"
    )]
    NeverRuns {
        /// The lowest voltage of a full cell in the cycle.
        lowest_v: f64,
        /// The cut-off.
        cut_off_v: f64,
    },
    /// The trials tell nothing.
    #[error(transparent)]
    Trials(#[from] OutcomeError),
}

/// Predicts how long a load runs on a cell, from full to its cut-off.
///
/// # Errors
/// [`PredictError`] for a cycle that draws nothing, a model without pulses, a cell that does not
/// carry the load, or too few trials.
pub fn predict(model: &CellModel, load: &Load, terms: Terms) -> Result<RunTime, PredictError> {
    let sound = |step: &LoadStep| {
        step.seconds.is_finite() && step.seconds > 0.0 && step.amperes.is_finite()
    };
    let charge: f64 = load
        .cycle
        .iter()
        .map(|step| step.seconds * step.amperes)
        .sum();
    if !load.cycle.iter().all(sound) || charge.is_nan() || charge <= 0.0 {
        return Err(PredictError::Cycle);
    }
    let factors = Factors::of(model, terms);
    let best = factors.expected().ok_or(PredictError::Model)?;
    let lowest_v = best.lowest(1.0, &load.cycle);
    if lowest_v < load.cut_off_v {
        return Err(PredictError::NeverRuns {
            lowest_v,
            cut_off_v: load.cut_off_v,
        });
    }
    let (hours, state_of_charge) = best.run(load);
    let trials = |causes: Causes, count: usize, seed: u64| -> Vec<f64> {
        let mut random = Random::from_seed(seed);
        (0..count)
            .map(|_| factors.draw(causes, &mut random).run(load).0)
            .collect()
    };
    let outcome = Outcome::from_trials(trials(Causes::ALL, terms.trials, terms.seed), PROBABILITY)?;
    let alone = terms.trials.min(TRIALS_ALONE);
    // Student's distribution of few degrees of freedom has no standard deviation to compare.
    let factors = Factors::of(model, terms.well_known());
    let trials = |causes: Causes, count: usize, seed: u64| -> Moments {
        let mut random = Random::from_seed(seed);
        (0..count)
            .map(|_| factors.draw(causes, &mut random).run(load).0)
            .collect()
    };
    let lines = Causes::EACH
        .iter()
        .filter_map(|&(name, causes)| {
            let moments = trials(causes, alone, terms.seed);
            let standard = moments.standard_deviation().filter(|u| *u > 1e-9 * hours)?;
            let infinite = DegreesOfFreedom::INFINITE;
            Some(Contribution::new(
                name,
                Evaluation::TypeB,
                standard,
                infinite,
            ))
        })
        .collect();
    let budget = Budget::new(lines);
    Ok(RunTime {
        hours,
        state_of_charge,
        outcome,
        dominated_by: budget.dominant().map(|line| line.name.clone()),
        budget,
        notes: notes(model, &factors, state_of_charge),
        method: "the load's lowest voltage in a steady cycle meets the cut-off, on the fitted \
                 model; interval by the Monte Carlo method, JCGM 101:2008, over the covariance of \
                 the fit, the voltage channel, the capacity, the spread between cells and the \
                 temperature"
            .to_owned(),
    })
}

fn notes(model: &CellModel, factors: &Factors<'_>, end: f64) -> Vec<String> {
    let mut notes = model.notes.clone();
    let lowest = model
        .points
        .iter()
        .map(|point| point.state_of_charge)
        .fold(f64::INFINITY, f64::min);
    if end < lowest {
        notes.push(format!(
            "the end lies at a state of charge of {end:.3}, below the lowest pulse at \
             {lowest:.3}: the model is only carried on there"
        ));
    }
    if factors.terms.spread == CellSpread::default() {
        notes.push(
            "no spread between cells was given: this is the run-time of the very cell that was \
             measured"
                .to_owned(),
        );
    }
    if factors
        .terms
        .spread
        .degrees_of_freedom
        .is_some_and(|few| few < 3)
    {
        notes.push(
            "the spread stands on so few cells that the run-time has no standard uncertainty to \
             speak of: go by the interval"
                .to_owned(),
        );
    }
    if factors.terms.warmth.is_some() && !factors.knows_temperature() {
        notes.push(
            "the cell model knows no effect of temperature, so the temperature given changes \
             nothing: measure the cell at that temperature"
                .to_owned(),
        );
    }
    notes
}
