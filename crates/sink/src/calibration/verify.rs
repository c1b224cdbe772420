//! Verification: a few points measured again, each judged against both
//! uncertainties.
//!
//! E_n = (x - x_ref) / sqrt(U^2 + U_ref^2), satisfactory for |E_n| <= 1 (ISO/IEC
//! 17043). The formula takes the two as independent; with the meter of the
//! calibration itself they are not, and a common error of that meter stays
//! hidden: use another one where it matters.

use quantity::{Quantity, Text, Textual};
use serde::{Deserialize, Serialize};

use super::{Channel, ReferenceMeter, micro};
use crate::uncertainty::{Budget, BudgetError, Contribution, DegreesOfFreedom, Evaluation};

/// The probability of the expanded uncertainties.
const PROBABILITY: f64 = 0.95;

/// A point measured again.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, bound = "T: Textual")]
pub struct VerificationPoint<T> {
    /// The sink's nominal value: readback or setpoint.
    pub nominal: Text<T>,
    /// The true value that the correction makes of it.
    pub corrected: Text<T>,
    /// What the reference meter read.
    pub reference: Text<T>,
}

/// The verdict on one point; micro-units.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Verification {
    /// Corrected less reference.
    pub error_micro: f64,
    /// Expanded uncertainty (95 %) of the corrected value.
    pub expanded_micro: f64,
    /// Expanded uncertainty (95 %) of the reference.
    pub reference_expanded_micro: f64,
    /// E_n.
    pub normalised_error: f64,
    /// Whether |E_n| <= 1.
    pub passed: bool,
}

/// Judges points of one channel.
///
/// # Errors
/// [`BudgetError`] for a budget that cannot be combined; none from a
/// certificate's channel.
pub fn verify<T: Textual + Quantity>(
    channel: &Channel,
    meter: &ReferenceMeter<T>,
    points: &[VerificationPoint<T>],
) -> Result<Vec<Verification>, BudgetError> {
    points
        .iter()
        .map(|point| {
            let own = expanded(&channel.budget(micro(point.nominal.0)))?;
            let reference = micro(point.reference.0);
            let meters = expanded(&Budget::new(vec![
                meter.contribution("accuracy", reference),
                Contribution::new(
                    "resolution",
                    Evaluation::TypeB,
                    meter.resolution_uncertainty(),
                    DegreesOfFreedom::INFINITE,
                )
                .rectangular(),
            ]))?;
            let error = micro(point.corrected.0) - reference;
            let normalised = error / own.hypot(meters);
            Ok(Verification {
                error_micro: error,
                expanded_micro: own,
                reference_expanded_micro: meters,
                normalised_error: normalised,
                passed: normalised.abs() <= 1.0,
            })
        })
        .collect()
}

/// The expanded uncertainty; without a coverage factor (fewer than one degree
/// of freedom) it is infinite, and nothing is disproved by it.
pub(super) fn expanded(budget: &Budget) -> Result<f64, BudgetError> {
    budget.combined()?;
    Ok(budget
        .expanded(PROBABILITY)
        .map_or(f64::INFINITY, |expanded| expanded.half_width))
}
