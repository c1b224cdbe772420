//! Cells drawn at random from what is not known of a fitted model.

use nalgebra::{DMatrix, DVector};
use serde::Deserialize;
use sink::montecarlo::Random;

use crate::cell::{CellModel, CellPoint};
use crate::drawn::{Drawn, Node};
use crate::predict::Terms;

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
