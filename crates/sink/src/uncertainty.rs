//! Measurement uncertainty after JCGM 100:2008 (GUM).
//!
//! Standard uncertainties of type A (from repeated readings) and type B (from a
//! data sheet, with its distribution), their combination in a budget, effective
//! degrees of freedom and coverage factors, and propagation through a model.
//!
//! What it deliberately does not do: it decides nothing about a run, and it
//! reports a standard uncertainty of what it was told, not of what was left out.

mod budget;
mod coverage;
mod propagate;
mod quantisation;

use std::fmt;

use serde::{Deserialize, Serialize};

use crate::accumulate::{Moments, count};

pub use budget::{Budget, BudgetError, Combined, Contribution, Evaluation, Expanded, Shape};
pub use coverage::coverage_factor;
pub use propagate::{PropagateError, Propagated, propagate, second_order_variance};
pub use quantisation::{expected_range, noise_before_steps, noise_of_range, of_dithered_step};

/// A value with its standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Estimate {
    /// The value, in a unit the caller knows.
    pub value: f64,
    /// Its standard uncertainty, in the same unit.
    pub standard_uncertainty: f64,
    /// The degrees of freedom behind the standard uncertainty.
    pub degrees_of_freedom: DegreesOfFreedom,
}

/// How well a standard uncertainty is itself known: JCGM 100 G.3 and G.4.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct DegreesOfFreedom(f64);

impl DegreesOfFreedom {
    /// The standard uncertainty is taken as exactly known.
    pub const INFINITE: Self = Self(f64::INFINITY);

    /// A number of degrees of freedom; a negative one or NaN becomes 0.
    pub const fn finite(number: f64) -> Self {
        Self(number.max(0.0))
    }

    /// From how uncertain a standard uncertainty is, as a fraction of itself:
    /// 1/2 (du/u)^-2, JCGM 100 G.4.2 (equation G.3).
    pub fn from_relative(uncertainty_of_uncertainty: f64) -> Self {
        if uncertainty_of_uncertainty == 0.0 {
            return Self::INFINITE;
        }
        Self::finite(0.5 / uncertainty_of_uncertainty.powi(2))
    }

    /// The number, infinite if exactly known.
    pub const fn number(self) -> f64 {
        self.0
    }
}

/// In JSON a number or the word `infinite`: JSON has no infinity.
impl Serialize for DegreesOfFreedom {
    fn serialize<S: serde::Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        if self.0.is_finite() {
            serializer.serialize_f64(self.0)
        } else {
            serializer.serialize_str("infinite")
        }
    }
}

impl<'de> Deserialize<'de> for DegreesOfFreedom {
    fn deserialize<D: serde::Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        #[derive(Deserialize)]
        #[serde(untagged)]
        enum Form {
            Number(f64),
            Word(String),
        }
        match Form::deserialize(deserializer)? {
            Form::Number(number) if number >= 0.0 => Ok(Self(number)),
            Form::Word(word) if word == "infinite" => Ok(Self::INFINITE),
            Form::Number(_) | Form::Word(_) => Err(serde::de::Error::custom(
                "degrees of freedom are a number of zero or more, or the word `infinite`",
            )),
        }
    }
}

impl fmt::Display for DegreesOfFreedom {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.0.is_infinite() {
            f.pad("infinite")
        } else {
            f.pad(&format!("{:.1}", self.0))
        }
    }
}

impl Estimate {
    /// A value whose standard uncertainty is taken as exactly known.
    pub const fn known(value: f64, standard_uncertainty: f64) -> Self {
        Self {
            value,
            standard_uncertainty,
            degrees_of_freedom: DegreesOfFreedom::INFINITE,
        }
    }

    /// Type A: the mean of independent readings and its experimental standard
    /// deviation, JCGM 100 4.2; `None` for fewer than two readings.
    pub fn from_readings(readings: &[f64]) -> Option<Self> {
        let moments: Moments = readings.iter().copied().collect();
        Some(Self {
            value: moments.mean()?,
            standard_uncertainty: moments.standard_deviation()? / count(moments.number()).sqrt(),
            degrees_of_freedom: DegreesOfFreedom::finite(count(moments.number() - 1)),
        })
    }
}

/// What a stated bound means, for a type B standard uncertainty (JCGM 100 4.3).
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Stated {
    /// All values within ± the bound are equally likely: a / sqrt 3.
    Rectangular,
    /// Values near the middle are likelier: a / sqrt 6.
    Triangular,
    /// Values near the ends are likelier (a swinging quantity): a / sqrt 2.
    ArcSine,
    /// A normal distribution with this coverage factor: a / k.
    Normal {
        /// The coverage factor that the bound was stated with.
        coverage_factor: f64,
    },
}

impl Stated {
    /// Whether it says anything: a coverage factor must be above zero.
    pub fn is_sound(self) -> bool {
        match self {
            Self::Rectangular | Self::Triangular | Self::ArcSine => true,
            Self::Normal { coverage_factor } => {
                coverage_factor.is_finite() && coverage_factor > 0.0
            }
        }
    }

    /// The shape that a budget takes it for. A triangle is near enough to a normal distribution;
    /// taking an arc-sine for one claims too much rather than too little.
    pub const fn shape(self) -> Shape {
        match self {
            Self::Rectangular => Shape::Rectangular,
            Self::Triangular | Self::ArcSine | Self::Normal { .. } => Shape::Normal,
        }
    }

    /// The standard uncertainty of a bound ± `half_width`.
    pub fn standard_uncertainty(self, half_width: f64) -> f64 {
        let divisor = match self {
            Self::Rectangular => 3_f64.sqrt(),
            Self::Triangular => 6_f64.sqrt(),
            Self::ArcSine => 2_f64.sqrt(),
            Self::Normal { coverage_factor } => coverage_factor,
        };
        half_width.abs() / divisor
    }
}

/// The standard uncertainty of a reading shown in steps: a rectangle one step
/// wide, JCGM 100 F.2.2.1.
pub fn of_resolution(step: f64) -> f64 {
    Stated::Rectangular.standard_uncertainty(step / 2.0)
}

#[cfg(test)]
mod tests;
