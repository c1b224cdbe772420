//! One cell of many: a fitted model with numbers only, and how long it carries a load.
//!
//! At each state of charge the pairs are taken to be where the load's cycle keeps them; the run
//! ends where the lowest voltage of the cycle meets the cut-off.

use crate::cell_tables::straight;
use crate::predict::{Load, LoadStep};

/// Halvings of the interval in which the end lies.
const HALVINGS: u32 = 40;

/// How far the model is carried on beyond the state of charge that was measured as empty: a load
/// smaller than that of the measurement gets a little more out of a cell.
const BEYOND_EMPTY: f64 = -0.05;

/// A model with numbers only, from empty to full.
pub(crate) struct Drawn<'a> {
    pub(crate) capacity_ah: f64,
    /// Resistances at the pulses, from empty to full.
    pub(crate) nodes: Vec<Node>,
    /// State of charge and open-circuit voltage.
    pub(crate) curve: &'a [(f64, f64)],
    /// State of charge, and what the voltage there is doubted by for want of a rest.
    pub(crate) doubt: &'a [(f64, f64)],
    /// How far all voltages are off, volt.
    pub(crate) off: f64,
    /// How many times that doubt.
    pub(crate) doubts: f64,
}

/// Resistances at a state of charge.
#[derive(Clone)]
pub(crate) struct Node {
    pub(crate) state: f64,
    pub(crate) series: f64,
    /// Resistance and time constant.
    pub(crate) pairs: Vec<(f64, f64)>,
}

impl Drawn<'_> {
    /// Hours to the cut-off, and the state of charge there.
    pub(crate) fn run(&self, load: &Load) -> (f64, f64) {
        let lasts = |state: f64| self.lowest(state, &load.cycle) >= load.cut_off_v;
        let seconds: f64 = load.cycle.iter().map(|step| step.seconds).sum();
        let charge: f64 = load
            .cycle
            .iter()
            .map(|step| step.seconds * step.amperes)
            .sum();
        let end = if lasts(1.0) {
            let (mut below, mut above) = (BEYOND_EMPTY, 1.0);
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
    pub(crate) fn lowest(&self, state: f64, cycle: &[LoadStep]) -> f64 {
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
        let open_circuit = self.open_circuit(state);
        let mut lowest = f64::INFINITY;
        for step in cycle {
            let level = open_circuit - step.amperes * node.series;
            lowest = lowest.min(level - over.iter().sum::<f64>());
            for (volts, &(resistance, tau)) in over.iter_mut().zip(&node.pairs) {
                *volts = after(*volts, step, resistance, tau);
            }
            lowest = lowest.min(level - over.iter().sum::<f64>());
        }
        lowest
    }

    /// Straight on beyond the first and the last entry.
    fn open_circuit(&self, state: f64) -> f64 {
        let doubt = if self.doubt.is_empty() {
            0.0
        } else {
            self.doubts * straight(self.doubt, state, true)
        };
        straight(self.curve, state, false) + self.off + doubt
    }

    /// Straight between pulses, level beyond them.
    pub(crate) fn at(&self, state: f64) -> Option<Node> {
        let above = self.nodes.partition_point(|node| node.state < state);
        let last = self.nodes.len().checked_sub(1)?;
        let (low, high) = (above.saturating_sub(1), above.min(last));
        let (low, high) = (self.nodes.get(low)?, self.nodes.get(high)?);
        let apart = high.state - low.state;
        let share = if apart > 0.0 {
            ((state - low.state) / apart).clamp(0.0, 1.0)
        } else {
            0.0
        };
        let between = |one: f64, other: f64| one + share * (other - one);
        Some(Node {
            state,
            series: between(low.series, high.series),
            pairs: low
                .pairs
                .iter()
                .zip(&high.pairs)
                .map(|(one, other)| (between(one.0, other.0), between(one.1, other.1)))
                .collect(),
        })
    }
}

/// A pair's voltage after a step.
fn after(volts: f64, step: &LoadStep, resistance: f64, tau: f64) -> f64 {
    let settled = step.amperes * resistance;
    settled + (volts - settled) * (-step.seconds / tau).exp()
}
