//! How long a load runs on a cell of a fitted model, with an interval.
//!
//! The load is a cycle of steps that repeats for ever. It is short against the run, so at each
//! state of charge the pairs are taken to be where that cycle keeps them, and the run ends at
//! the state of charge at which the lowest voltage of the cycle meets the cut-off.
//!
//! The interval is JCGM 101's: many trials, each with a model drawn from the covariance of every
//! pulse's fit, an error of the voltages common to all, and a cell that differs from the one
//! measured by the spread between cells.
//!
//! What it deliberately does not do: temperature, ageing, self-discharge, rates beyond those that
//! were measured. A load whose sleep current is a leak of the cell's own size runs shorter.

use nalgebra::{DMatrix, DVector};
use serde::{Deserialize, Serialize};
use sink::montecarlo::{Outcome, OutcomeError, Random};

use crate::cell::{CellModel, CellPoint, PairPoint};
use crate::figure::PROBABILITY;

/// Halvings of the interval in which the end lies.
const HALVINGS: u32 = 40;

/// A step of the load's cycle.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LoadStep {
    /// How long, second.
    pub seconds: f64,
    /// Its current, ampere.
    pub amperes: f64,
}

/// How cells differ from the one measured, each as a share, standard deviation.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellSpread {
    /// Of the capacity.
    pub capacity: f64,
    /// Of all resistances together.
    pub resistance: f64,
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
    /// The trials tell nothing.
    #[error(transparent)]
    Trials(#[from] OutcomeError),
}

/// Predicts how long a load runs on a cell, from full to its cut-off.
///
/// # Errors
/// [`PredictError`] for a cycle that draws nothing, a model without pulses, or too few trials.
pub fn predict(
    model: &CellModel,
    load: &Load,
    spread: CellSpread,
    trials: usize,
    seed: u64,
) -> Result<RunTime, PredictError> {
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
    let best = Drawn::best(model).ok_or(PredictError::Model)?;
    let (hours, state_of_charge) = best.run(load);
    let factors: Vec<DMatrix<f64>> = model.points.iter().map(factor).collect();
    let mut random = Random::from_seed(seed);
    let values = (0..trials)
        .map(|_| {
            let drawn = Drawn::at_random(model, &best, &factors, spread, &mut random);
            drawn.run(load).0
        })
        .collect();
    let mut notes = Vec::new();
    let lowest = model
        .points
        .iter()
        .map(|point| point.state_of_charge)
        .fold(f64::INFINITY, f64::min);
    if state_of_charge < lowest {
        notes.push(format!(
            "the end lies at a state of charge of {state_of_charge:.3}, below the lowest pulse at \
             {lowest:.3}: the model is only carried on there"
        ));
    }
    Ok(RunTime {
        hours,
        state_of_charge,
        outcome: Outcome::from_trials(values, PROBABILITY)?,
        notes,
        method: "the load's lowest voltage in a steady cycle meets the cut-off, on the fitted \
                 model; interval by the Monte Carlo method, JCGM 101:2008, over the covariance of \
                 the fit and the spread between cells"
            .to_owned(),
    })
}

/// A model with numbers only, from empty to full.
struct Drawn {
    capacity_ah: f64,
    nodes: Vec<Node>,
}

#[derive(Clone)]
struct Node {
    state: f64,
    volts: f64,
    series: f64,
    /// Resistance and time constant.
    pairs: Vec<(f64, f64)>,
}

impl Drawn {
    fn best(model: &CellModel) -> Option<Self> {
        let node = |point: &CellPoint| Node {
            state: point.state_of_charge,
            volts: point.open_circuit_voltage_v.value,
            series: point.series_resistance_ohm.value,
            pairs: point.pairs.iter().map(values).collect(),
        };
        let mut nodes: Vec<Node> = model.points.iter().map(node).collect();
        nodes.sort_by(|one, other| one.state.total_cmp(&other.state));
        (!nodes.is_empty()).then_some(Self {
            capacity_ah: model.capacity_ah,
            nodes,
        })
    }

    fn at_random(
        model: &CellModel,
        best: &Self,
        factors: &[DMatrix<f64>],
        spread: CellSpread,
        random: &mut Random,
    ) -> Self {
        let capacity = model.capacity_standard_uncertainty_ah / model.capacity_ah;
        let capacity = 1.0 + capacity.hypot(spread.capacity) * random.normal();
        let resistance = 1.0 + spread.resistance * random.normal();
        // The voltages were all read by one channel.
        let common = random.normal();
        let mut nodes: Vec<Node> = model
            .points
            .iter()
            .zip(factors)
            .map(|(point, factor)| node(point, factor, (common, resistance), random))
            .collect();
        nodes.sort_by(|one, other| one.state.total_cmp(&other.state));
        Self {
            capacity_ah: best.capacity_ah * capacity,
            nodes,
        }
    }

    /// Hours to the cut-off, and the state of charge there.
    fn run(&self, load: &Load) -> (f64, f64) {
        let lasts = |state: f64| self.lowest(state, &load.cycle) >= load.cut_off_v;
        let seconds: f64 = load.cycle.iter().map(|step| step.seconds).sum();
        let charge: f64 = load
            .cycle
            .iter()
            .map(|step| step.seconds * step.amperes)
            .sum();
        let end = if lasts(1.0) {
            let (mut below, mut above) = (0.0, 1.0);
            for _ in 0..HALVINGS {
                let middle = f64::midpoint(below, above);
                if lasts(middle) {
                    above = middle;
                } else {
                    below = middle;
                }
            }
            above
        } else {
            1.0
        };
        (self.capacity_ah * (1.0 - end) * seconds / charge, end)
    }

    /// The lowest voltage of a cycle that has gone on for long.
    fn lowest(&self, state: f64, cycle: &[LoadStep]) -> f64 {
        let Some(node) = self.at(state) else {
            return f64::NAN;
        };
        let mut over: Vec<f64> = node
            .pairs
            .iter()
            .map(|&(resistance, tau)| {
                let whole: f64 = cycle.iter().map(|step| step.seconds).sum();
                let end = cycle
                    .iter()
                    .fold(0.0, |volts, step| after(volts, step, resistance, tau));
                end / -(-whole / tau).exp_m1()
            })
            .collect();
        let mut lowest = f64::INFINITY;
        for step in cycle {
            let level = node.volts - step.amperes * node.series;
            lowest = lowest.min(level - over.iter().sum::<f64>());
            for (volts, &(resistance, tau)) in over.iter_mut().zip(&node.pairs) {
                *volts = after(*volts, step, resistance, tau);
            }
            lowest = lowest.min(level - over.iter().sum::<f64>());
        }
        lowest
    }

    /// Straight between pulses; beyond them resistances stay and the voltage goes straight on.
    fn at(&self, state: f64) -> Option<Node> {
        let above = self.nodes.partition_point(|node| node.state < state);
        let last = self.nodes.len().checked_sub(1)?;
        let (low, high) = match above {
            0 => (0, 1.min(last)),
            above if above > last => (last.saturating_sub(1), last),
            above => (above - 1, above),
        };
        let (low, high) = (self.nodes.get(low)?, self.nodes.get(high)?);
        let apart = high.state - low.state;
        let share = if apart > 0.0 {
            (state - low.state) / apart
        } else {
            0.0
        };
        let held = share.clamp(0.0, 1.0);
        let between = |one: f64, other: f64, share: f64| one + share * (other - one);
        Some(Node {
            state,
            volts: between(low.volts, high.volts, share),
            series: between(low.series, high.series, held),
            pairs: low
                .pairs
                .iter()
                .zip(&high.pairs)
                .map(|(one, other)| (between(one.0, other.0, held), between(one.1, other.1, held)))
                .collect(),
        })
    }
}

/// A pair's voltage after a step.
fn after(volts: f64, step: &LoadStep, resistance: f64, tau: f64) -> f64 {
    let settled = step.amperes * resistance;
    settled + (volts - settled) * (-step.seconds / tau).exp()
}

fn values(pair: &PairPoint) -> (f64, f64) {
    (pair.resistance_ohm.value, pair.time_constant_s.value)
}

/// A root of the correlations of a pulse's parameters.
fn factor(point: &CellPoint) -> DMatrix<f64> {
    let size = point.correlations.len();
    if size == 0 {
        // A model stated without uncertainty, not fitted: nothing is drawn.
        return DMatrix::zeros(0, 0);
    }
    let correlation = DMatrix::from_fn(size, size, |row, column| {
        let found = point.correlations.get(row).and_then(|row| row.get(column));
        found
            .copied()
            .filter(|value| value.is_finite())
            .unwrap_or(if row == column { 1.0 } else { 0.0 })
    });
    // Eigenvectors, since parameters that hang together wholly leave a singular matrix.
    let eigen = correlation.symmetric_eigen();
    let roots = eigen.eigenvalues.map(|value| value.max(0.0).sqrt());
    eigen.eigenvectors * DMatrix::from_diagonal(&roots)
}

/// A pulse's parameters, drawn.
fn node(
    point: &CellPoint,
    factor: &DMatrix<f64>,
    (common, resistances): (f64, f64),
    random: &mut Random,
) -> Node {
    let normals = DVector::from_fn(factor.ncols(), |_, _| random.normal());
    let drawn = factor * normals;
    let by = |index: usize| drawn.get(index).copied().unwrap_or(0.0);
    let series = point.series_resistance_ohm;
    let voltage = point.open_circuit_voltage_v;
    let pairs = point
        .pairs
        .iter()
        .zip((1..).step_by(2))
        .map(|(pair, index)| {
            let (resistance, tau) = (pair.resistance_ohm, pair.time_constant_s);
            let ohms = resistance.value + resistance.standard_uncertainty * by(index);
            // A time constant is fitted as its logarithm.
            let log = tau.standard_uncertainty / tau.value * by(index + 1);
            ((ohms * resistances).max(0.0), tau.value * log.exp())
        })
        .collect();
    let ohms = series.value + series.standard_uncertainty * by(0);
    Node {
        state: point.state_of_charge,
        volts: voltage.value + voltage.standard_uncertainty * common,
        series: (ohms * resistances).max(0.0),
        pairs,
    }
}
