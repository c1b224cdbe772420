//! Drift: what has changed between two certificates of one sink.
//!
//! For each channel the two corrections are compared at both ends and in the middle of the range
//! that both vouch for, and the change is put against the uncertainties of both, as in a
//! verification: E_n = change / sqrt(U1^2 + U2^2). The formula takes the two as independent;
//! where the same meter was used its error is common to both and falls out of the change, so a
//! real drift may then stay below 1.

use serde::{Deserialize, Serialize};

use super::verify::expanded;
use super::{CalibrationError, Certificate, Channel};
use crate::uncertainty::BudgetError;

/// The change of one channel, where it is largest against its uncertainty; micro-units.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Drift {
    /// Which channel: `current set`, `current read` or `voltage read`.
    pub channel: String,
    /// The nominal value at which it is told.
    pub at_micro: f64,
    /// The later true value less the earlier one.
    pub change_micro: f64,
    /// The expanded uncertainty (95 %) of the change.
    pub expanded_micro: f64,
    /// E_n.
    pub normalised_change: f64,
    /// Whether |E_n| > 1: more than the uncertainties explain.
    pub significant: bool,
}

/// Why two certificates cannot be compared.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum DriftError {
    /// They are of different sinks.
    #[error("certificate `{earlier}` is of sink `{of_earlier}` and `{later}` of `{of_later}`")]
    OtherSink {
        /// The one certificate.
        earlier: String,
        /// Its sink.
        of_earlier: String,
        /// The other.
        later: String,
        /// Its sink.
        of_later: String,
    },
    /// One of them cannot be computed again.
    #[error(transparent)]
    Calibration(#[from] CalibrationError),
    /// A budget that cannot be combined.
    #[error(transparent)]
    Budget(#[from] BudgetError),
}

/// What has changed from one certificate to a later one of the same sink; a channel that one of
/// them lacks, or whose ranges do not meet, is left out.
///
/// # Errors
/// [`DriftError`] for certificates of different sinks.
pub fn drift(earlier: &Certificate, later: &Certificate) -> Result<Vec<Drift>, DriftError> {
    let (before, after) = (&earlier.measurements, &later.measurements);
    if before.sink != after.sink {
        return Err(DriftError::OtherSink {
            earlier: before.identity.clone(),
            of_earlier: before.sink.clone(),
            later: after.identity.clone(),
            of_later: after.sink.clone(),
        });
    }
    let (one, other) = (earlier.channels()?, later.channels()?);
    let pairs = [
        ("current set", Some((&one.current_set, &other.current_set))),
        (
            "current read",
            Some((&one.current_read, &other.current_read)),
        ),
        (
            "voltage read",
            one.voltage_read.as_ref().zip(other.voltage_read.as_ref()),
        ),
    ];
    let mut drifts = Vec::new();
    for (name, pair) in pairs {
        let Some((one, other)) = pair else { continue };
        drifts.extend(of_channel(name, one, other)?);
    }
    Ok(drifts)
}

fn of_channel(name: &str, one: &Channel, other: &Channel) -> Result<Option<Drift>, BudgetError> {
    let (low, high) = (
        one.range().0.max(other.range().0),
        one.range().1.min(other.range().1),
    );
    if low > high {
        return Ok(None);
    }
    let mut worst: Option<Drift> = None;
    for at in [low, f64::midpoint(low, high), high] {
        let change = other.predict(at).value - one.predict(at).value;
        let both = expanded(&one.budget(at))?.hypot(expanded(&other.budget(at))?);
        let normalised = change / both;
        let larger = |worst: &Drift| normalised.abs() > worst.normalised_change.abs();
        if worst.as_ref().is_none_or(larger) {
            worst = Some(Drift {
                channel: name.to_owned(),
                at_micro: at,
                change_micro: change,
                expanded_micro: both,
                normalised_change: normalised,
                significant: normalised.abs() > 1.0,
            });
        }
    }
    Ok(worst)
}
