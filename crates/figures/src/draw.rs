//! One cell of many: a fitted model with numbers only, drawn at random from what is not known.

use nalgebra::{DMatrix, DVector};
use serde::Deserialize;
use sink::montecarlo::Random;

use crate::cell::{CellModel, CellPoint};
use crate::cell_tables::straight;
use crate::predict::{Load, LoadStep, Terms};

/// Halvings of the interval in which the end lies.
const HALVINGS: u32 = 40;

/// How far the model is carried on beyond the state of charge that was measured as empty: a load
/// smaller than that of the measurement gets a little more out of a cell.
const BEYOND_EMPTY: f64 = -0.05;

const ZERO_CELSIUS_K: f64 = 273.15;

/// Which causes are drawn; the others stay at what is expected.
#[derive(Debug, Clone, Copy, Default)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "each cause is drawn or not, independently of the others"
)]
pub(crate) struct Causes {
    spread: bool,
    fit: bool,
    voltage: bool,
    capacity: bool,
    warmth: bool,
}

impl Causes {
    const NONE: Self = Self {
        spread: false,
        fit: false,
        voltage: false,
        capacity: false,
        warmth: false,
    };
    pub(crate) const ALL: Self = Self {
        spread: true,
        fit: true,
        voltage: true,
        capacity: true,
        warmth: true,
    };
    /// Each by itself, by its name in a budget.
    pub(crate) const EACH: [(&'static str, Self); 5] = [
        (
            "spread between cells",
            Self {
                spread: true,
                ..Self::NONE
            },
        ),
        (
            "cell model: fit of resistances and time constants",
            Self {
                fit: true,
                ..Self::NONE
            },
        ),
        (
            "calibration: voltage",
            Self {
                voltage: true,
                ..Self::NONE
            },
        ),
        (
            "calibration: charge, hence capacity",
            Self {
                capacity: true,
                ..Self::NONE
            },
        ),
        (
            "temperature",
            Self {
                warmth: true,
                ..Self::NONE
            },
        ),
    ];
}

/// What a model's file may say of temperature, in its words.
#[derive(Debug, Clone, Default, Deserialize)]
#[serde(default)]
struct Effect {
    series_activation_k: f64,
    pair_activation_k: Vec<f64>,
    capacity: Vec<Fraction>,
}

#[derive(Debug, Clone, Copy, Deserialize)]
struct Fraction {
    temperature_degc: f64,
    fraction: f64,
}

/// A model, and what it takes to draw cells from it.
pub(crate) struct Factors<'a> {
    model: &'a CellModel,
    roots: Vec<DMatrix<f64>>,
    curve: Vec<(f64, f64)>,
    doubt: Vec<(f64, f64)>,
    volts_u: f64,
    effect: Effect,
    reference_degc: f64,
    pub(crate) terms: Terms,
}

impl<'a> Factors<'a> {
    pub(crate) fn of(model: &'a CellModel, terms: Terms) -> Self {
        let effect = model.file.get("temperature_effect");
        let reference = model.file.get("reference_temperature");
        // One channel read them all; what it is off by is nearly the same over the narrow range
        // of a cell's voltages.
        let volts_u = model
            .points
            .iter()
            .map(|point| point.open_circuit_voltage_v.standard_uncertainty)
            .fold(0.0, f64::max);
        Self {
            model,
            roots: model.points.iter().map(factor).collect(),
            curve: model.curve(),
            doubt: doubt(model, volts_u),
            volts_u,
            effect: effect
                .and_then(|effect| Effect::deserialize(effect).ok())
                .unwrap_or_default(),
            reference_degc: reference
                .and_then(|text| text.as_str()?.parse::<quantity::Temperature>().ok())
                .map_or(23.0, quantity::Temperature::degrees_celsius),
            terms,
        }
    }

    pub(crate) fn knows_temperature(&self) -> bool {
        let effect = &self.effect;
        let activations = effect.pair_activation_k.iter();
        let sum: f64 = activations.map(|activation| activation.abs()).sum();
        sum + effect.series_activation_k.abs() > 0.0 || !effect.capacity.is_empty()
    }

    /// The cell as it is expected; `None` for a model without points.
    pub(crate) fn expected(&self) -> Option<Drawn<'_>> {
        let drawn = self.draw(Causes::NONE, &mut Random::from_seed(0));
        (!drawn.nodes.is_empty()).then_some(drawn)
    }

    /// A cell at random.
    pub(crate) fn draw(&self, causes: Causes, random: &mut Random) -> Drawn<'_> {
        let model = self.model;
        let on = |cause: bool| if cause { 1.0 } else { 0.0 };
        // All is drawn whatever counts, so that one seed gives the same cell for each cause.
        let measured = on(causes.capacity) * model.capacity_standard_uncertainty_ah
            / model.capacity_ah
            * random.normal();
        let spread = self.terms.spread;
        let heavy = on(causes.spread) * heaviness(spread.degrees_of_freedom, random);
        let capacity = 1.0 + measured + heavy * spread.capacity * random.normal();
        let resistance = 1.0 + heavy * spread.resistance * random.normal();
        // The voltages were all read by one channel.
        let common = on(causes.voltage) * random.normal();
        let degc = self
            .terms
            .warmth
            .map(|warmth| warmth.degc + on(causes.warmth) * warmth.standard_k * random.normal());
        let warm = Warm::at(self, degc);
        let fit = on(causes.fit);
        let doubts = fit * random.normal();
        let mut nodes: Vec<Node> = model
            .points
            .iter()
            .zip(&self.roots)
            .map(|(point, root)| {
                let normals = DVector::from_fn(root.ncols(), |_, _| fit * random.normal());
                node(point, &(root * normals), resistance, &warm)
            })
            .collect();
        nodes.sort_by(|one, other| one.state.total_cmp(&other.state));
        Drawn {
            capacity_ah: model.capacity_ah * capacity * warm.capacity,
            nodes,
            curve: &self.curve,
            doubt: &self.doubt,
            off: self.volts_u * common,
            doubts,
        }
    }
}

/// What the open-circuit voltages between pulses are doubted by beyond the channel's own errors.
fn doubt(model: &CellModel, volts_u: f64) -> Vec<(f64, f64)> {
    let mut doubt: Vec<(f64, f64)> = model
        .open_circuit
        .iter()
        .map(|seen| {
            let u = seen.voltage_v.standard_uncertainty;
            (
                seen.state_of_charge,
                (u * u - volts_u * volts_u).max(0.0).sqrt(),
            )
        })
        .collect();
    doubt.sort_by(|one, other| one.0.total_cmp(&other.0));
    doubt
}

/// What makes a normal distribution Student's with so many degrees of freedom: the root of those
/// over a chi-squared draw.
fn heaviness(freedom: Option<u32>, random: &mut Random) -> f64 {
    let Some(freedom) = freedom else { return 1.0 };
    let squares: f64 = (0..freedom).map(|_| random.normal().powi(2)).sum();
    (f64::from(freedom) / squares).sqrt()
}

/// Factors by which temperature changes a cell; all 1 where nothing is known or asked.
struct Warm {
    capacity: f64,
    series: f64,
    pairs: Vec<f64>,
}

impl Warm {
    fn at(factors: &Factors<'_>, degc: Option<f64>) -> Self {
        let effect = &factors.effect;
        let Some(degc) = degc else {
            return Self {
                capacity: 1.0,
                series: 1.0,
                pairs: Vec::new(),
            };
        };
        let inverse =
            1.0 / (degc + ZERO_CELSIUS_K) - 1.0 / (factors.reference_degc + ZERO_CELSIUS_K);
        let arrhenius = |activation: f64| (activation * inverse).exp();
        Self {
            capacity: fraction(&effect.capacity, degc)
                / fraction(&effect.capacity, factors.reference_degc),
            series: arrhenius(effect.series_activation_k),
            pairs: effect
                .pair_activation_k
                .iter()
                .map(|activation| arrhenius(*activation))
                .collect(),
        }
    }
}

/// Straight between the entries, level beyond them; 1 without any.
fn fraction(table: &[Fraction], degc: f64) -> f64 {
    let above = table.partition_point(|row| row.temperature_degc < degc);
    let before = above.checked_sub(1).and_then(|before| table.get(before));
    match (before, table.get(above)) {
        (Some(cold), Some(warm)) => {
            let span = warm.temperature_degc - cold.temperature_degc;
            let share = (degc - cold.temperature_degc) / span;
            cold.fraction + share * (warm.fraction - cold.fraction)
        }
        (Some(only), None) | (None, Some(only)) => only.fraction,
        (None, None) => 1.0,
    }
}

/// A model with numbers only, from empty to full.
pub(crate) struct Drawn<'a> {
    capacity_ah: f64,
    /// Resistances at the pulses, from empty to full.
    nodes: Vec<Node>,
    /// State of charge and open-circuit voltage.
    curve: &'a [(f64, f64)],
    /// State of charge, and what the voltage there is doubted by for want of a rest.
    doubt: &'a [(f64, f64)],
    /// How far all voltages are off, volt.
    off: f64,
    /// How many times that doubt.
    doubts: f64,
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

/// A pulse's parameters; `drawn` are the fit's deviations in standard uncertainties.
fn node(point: &CellPoint, drawn: &DVector<f64>, resistances: f64, warm: &Warm) -> Node {
    let by = |index: usize| drawn.get(index).copied().unwrap_or(0.0);
    let series = point.series_resistance_ohm;
    let pairs = point
        .pairs
        .iter()
        .zip((1..).step_by(2))
        .enumerate()
        .map(|(place, (pair, index))| {
            let (resistance, tau) = (pair.resistance_ohm, pair.time_constant_s);
            let ohms = resistance.value + resistance.standard_uncertainty * by(index);
            // A time constant is fitted as its logarithm.
            let log = tau.standard_uncertainty / tau.value * by(index + 1);
            let warm = warm.pairs.get(place).copied().unwrap_or(1.0);
            ((ohms * resistances * warm).max(0.0), tau.value * log.exp())
        })
        .collect();
    let ohms = series.value + series.standard_uncertainty * by(0);
    Node {
        state: point.state_of_charge,
        series: (ohms * resistances * warm.series).max(0.0),
        pairs,
    }
}
