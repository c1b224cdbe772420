//! Peukert's exponent from discharges at two or more rates: `t = C / I^n`, with t to the
//! cut-off and I the mean current.
//!
//! A straight line of the logarithms; n is its slope with the sign changed. The capacity's own
//! uncertainty is taken in where only two rates leave no residual; what all discharges by one
//! sink have in common cancels in n, so this is never too small.

use serde::{Deserialize, Serialize};
use sink::regression::{Form, Point, Weights, fit};
use sink::uncertainty::DegreesOfFreedom;

use crate::cell::Known;
use crate::figure::{Figures, Name};

/// Two currents nearer than this ratio do not tell an exponent.
const APART: f64 = 1.2;

/// Peukert's law as some discharges show it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Peukert {
    /// n in t = C / I^n, without unit.
    pub exponent: Known,
    /// C, the charge at one ampere, ampere hour.
    pub capacity_at_one_ampere_ah: f64,
    /// Degrees of freedom of the exponent's uncertainty.
    pub degrees_of_freedom: DegreesOfFreedom,
    /// Mean current and time to the cut-off of each discharge, ampere and hour.
    pub discharges: Vec<(f64, f64)>,
    /// How it was worked out.
    pub method: String,
}

/// Why no exponent can be given.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum PeukertError {
    /// A record that no cut-off ended.
    #[error("record {record} has no capacity to a cut-off; discharge to the cut-off")]
    NoCapacity {
        /// Which.
        record: String,
    },
    /// Too few rates, or too near to each other.
    #[error(
        "the currents reach from {least} A to {most} A; discharge at two rates that are farther apart"
    )]
    TooNear {
        /// Smallest mean current.
        least: f64,
        /// Largest.
        most: f64,
    },
    /// The straight line cannot be fitted.
    #[error(transparent)]
    Fit(#[from] sink::regression::RegressionError),
}

/// Works out Peukert's exponent from discharges of like DUTs at different rates.
///
/// # Errors
/// [`PeukertError`] for a record without a capacity or rates that are too near.
pub fn peukert(discharges: &[Figures]) -> Result<Peukert, PeukertError> {
    let points = discharges
        .iter()
        .map(|figures| point(figures).ok_or_else(|| no_capacity(figures)))
        .collect::<Result<Vec<Discharge>, _>>()?;
    let currents = || points.iter().map(|point| point.amperes);
    let least = currents().fold(f64::INFINITY, f64::min);
    let most = currents().fold(f64::NEG_INFINITY, f64::max);
    if points.len() < 2 || most < APART * least {
        return Err(PeukertError::TooNear { least, most });
    }
    let logs: Vec<Point> = points
        .iter()
        .map(|point| Point {
            x: point.amperes.ln(),
            y: point.hours.ln(),
            u: point.relative.max(1e-9),
        })
        .collect();
    let (slope, intercept, standard, degrees_of_freedom) = line(&logs)?;
    Ok(Peukert {
        exponent: Known {
            value: -slope,
            standard_uncertainty: standard,
        },
        capacity_at_one_ampere_ah: intercept.exp(),
        degrees_of_freedom,
        discharges: points
            .iter()
            .map(|point| (point.amperes, point.hours))
            .collect(),
        method: "Peukert's law t = C / I^n, straight line of the logarithms by weighted least \
                 squares; t the capacity to the cut-off over the mean current (Peukert, \
                 Elektrotechnische Zeitschrift 20 (1897), from memory)"
            .to_owned(),
    })
}

struct Discharge {
    amperes: f64,
    hours: f64,
    /// Relative standard uncertainty of the capacity.
    relative: f64,
}

fn point(figures: &Figures) -> Option<Discharge> {
    let whole = |name: Name| {
        figures
            .figures
            .iter()
            .find(|figure| figure.name == name && figure.label.is_none())
    };
    let capacity = whole(Name::Capacity)?;
    let amperes = whole(Name::DeliveredCharge)?.value * 3600.0 / whole(Name::Duration)?.value;
    let standard = capacity
        .uncertainty
        .map_or(0.0, |combined| combined.standard_uncertainty);
    (amperes > 0.0 && capacity.value > 0.0).then(|| Discharge {
        amperes,
        hours: capacity.value / amperes,
        relative: standard / capacity.value,
    })
}

fn no_capacity(figures: &Figures) -> PeukertError {
    PeukertError::NoCapacity {
        record: figures.record.clone(),
    }
}

/// Slope, intercept, the slope's standard uncertainty and its degrees of freedom.
fn line(points: &[Point]) -> Result<(f64, f64, f64, DegreesOfFreedom), PeukertError> {
    if let [one, other] = points {
        let apart = other.x - one.x;
        let slope = (other.y - one.y) / apart;
        let standard = one.u.hypot(other.u) / apart.abs();
        let intercept = one.y - slope * one.x;
        return Ok((slope, intercept, standard, DegreesOfFreedom::INFINITE));
    }
    let line = fit(points, Form::Polynomial(1), Weights::Known)?;
    let (coefficients, covariance) = line.coefficients_about(0.0);
    let at = |index: usize| coefficients.get(index).copied().unwrap_or(f64::NAN);
    let standard = covariance.get((1, 1)).copied().unwrap_or(f64::NAN).sqrt();
    Ok((at(1), at(0), standard, line.degrees_of_freedom()))
}
