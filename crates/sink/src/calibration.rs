//! Calibration: from points against a reference meter to a certificate.
//!
//! Three curves are fitted (current set, current read, and, where voltages were
//! measured, voltage read) by weighted least squares: straight lines, and second-order curves only where an F-test
//! says that the residuals demand them.
//!
//! Invariants:
//! - A certificate holds every input it was computed from. Reading one computes
//!   it again and refuses it if the corrections do not follow from its points.
//! - No point is dropped. One that lies far off is named.
//!
//! What it deliberately does not do: it reads no clock (dates are inputs) and
//! drives no sink.

mod channel;
mod drift;
mod meter;
mod settling;
mod spread;
mod statement;
mod table;
mod verify;

use quantity::{Current, Temperature, TemperatureCoefficient, Text, Textual, Voltage};
use serde::{Deserialize, Serialize};

use crate::correction::{Correction, Curve, CurveError};
use crate::regression::RegressionError;

pub use channel::{Channel, ChannelSummary, CurvatureSummary, SecondOrder};
use channel::{Readings, Stated, Steps};
pub use drift::{Drift, DriftError, drift};
pub use meter::ReferenceMeter;
pub use settling::{Unsettled, settled};
pub use spread::Spread;
pub use statement::{Identity, Statement, StatementError, current_step};
pub use table::{Table, TableError};
pub use verify::{Verification, VerificationPoint, verify};

/// Fewest points of a channel: two make a line, on the stated word of the meters alone. It takes
/// a third before anything shows a wrong point, and a fourth before anything shows a bend.
pub const POINTS_MIN: usize = 2;
/// The version of the certificate's form that is written.
///
/// In form 1 the converter's step counts whole in the weights of the points; from form 2 on as far
/// as the noise of the readbacks leaves it. A certificate of form 1 is computed again as it was.
pub const FORM: u32 = 2;
/// The versions that can be read.
const FORMS: std::ops::RangeInclusive<u32> = 1..=FORM;

/// Everything that was measured and stated for a calibration.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Measurements {
    /// The certificate's identity, such as `weir-left-2026-12`.
    pub identity: String,
    /// The sink's name on its bench.
    pub sink: String,
    /// The serial number its firmware states.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub serial_number: Option<u32>,
    /// Who did it.
    pub operator: String,
    /// When it was done, in seconds since 1970-01-01T00:00:00Z.
    pub issued_unix_s: i64,
    /// Until when it holds, likewise.
    pub valid_until_unix_s: i64,
    /// Ambient temperature at the time.
    #[serde(with = "quantity::text")]
    pub ambient: Temperature,
    /// By how many kelvins the sense resistor may be warmer or cooler in use
    /// than at the calibration.
    pub temperature_spread_k: f64,
    /// The sense resistor's temperature coefficient.
    #[serde(with = "quantity::text")]
    pub temperature_coefficient: TemperatureCoefficient,
    /// The step of the converter that sets.
    #[serde(with = "quantity::text")]
    pub set_step: Current,
    /// The step of the current readback.
    #[serde(with = "quantity::text")]
    pub current_step: Current,
    /// The step of the voltage readback.
    #[serde(with = "quantity::text")]
    pub voltage_step: Voltage,
    /// The meter that measured the current.
    pub current_meter: ReferenceMeter<Current>,
    /// The meter that measured the voltage; none is needed where only the current is calibrated.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub voltage_meter: Option<ReferenceMeter<Voltage>>,
    /// The record of the run in which the points were taken, if there is one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub record: Option<String>,
    /// The current points.
    pub current_points: Vec<CurrentPoint>,
    /// The voltage points; none where only the current is calibrated.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub voltage_points: Vec<VoltagePoint>,
}

/// One setpoint, what the meter read and what the sink read.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CurrentPoint {
    /// The nominal setpoint.
    #[serde(with = "quantity::text")]
    pub setpoint: Current,
    /// The reference meter's readings.
    pub reference: Vec<Text<Current>>,
    /// The sink's nominal readbacks.
    pub readback: Vec<Text<Current>>,
    /// How far the samples behind them lay apart, if that is known.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub spread: Option<Spread<Current>>,
}

/// One voltage, what the meter read and what the sink read.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct VoltagePoint {
    /// The reference meter's readings.
    pub reference: Vec<Text<Voltage>>,
    /// The sink's nominal readbacks.
    pub readback: Vec<Text<Voltage>>,
    /// How far the samples behind them lay apart, if that is known.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub spread: Option<Spread<Voltage>>,
}

/// A calibration certificate.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Certificate {
    /// The version of this form.
    pub form: u32,
    /// What it was computed from.
    pub measurements: Measurements,
    /// What it corrects.
    pub correction: Correction,
    /// The curve of the current that is set, micro-units.
    pub current_set: ChannelSummary,
    /// The curve of the current readback, micro-units.
    pub current_read: ChannelSummary,
    /// The curve of the voltage readback, micro-units; absent where it is not calibrated and its
    /// nominal values stand.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub voltage_read: Option<ChannelSummary>,
}

/// The fitted channels of a certificate, for budgets at any reading.
#[derive(Debug, Clone, PartialEq)]
pub struct Channels {
    /// The current that is set.
    pub current_set: Channel,
    /// The current readback.
    pub current_read: Channel,
    /// The voltage readback, if it is calibrated.
    pub voltage_read: Option<Channel>,
}

/// A calibration that gives no certificate.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum CalibrationError {
    /// Fewer points than a line and its residuals need.
    #[error(
        "{channel}: {points} points; two make a line, and five or more, spread over the range, \
         show whether it is one"
    )]
    TooFewPoints {
        /// Which line.
        channel: &'static str,
        /// Points given.
        points: usize,
    },
    /// A point without a reading.
    #[error("{channel}: point {index} has no reading; measure it or leave it out")]
    NoReading {
        /// Which line.
        channel: &'static str,
        /// Which point, from 1.
        index: usize,
    },
    /// A point above the meter's range.
    #[error(
        "{channel}: point {index} reads {reading}, above the meter's range of {range}; use a higher range"
    )]
    BeyondRange {
        /// Which line.
        channel: &'static str,
        /// Which point, from 1.
        index: usize,
        /// What the meter read.
        reading: String,
        /// Its range.
        range: String,
    },
    /// A stated figure that cannot be.
    #[error("{what} is not a finite number of zero or more; correct it")]
    Stated {
        /// Which figure.
        what: &'static str,
    },
    /// Voltage points of a meter that nothing is stated of.
    #[error(
        "there are voltage points and no statement of the meter that read them; state it as \
         `voltage_meter`, or leave the voltages out to calibrate the current alone"
    )]
    NoVoltageMeter,
    /// A step or resolution of zero.
    #[error(
        "{channel}: the converter's step and the meter's resolution are not above zero; state them"
    )]
    NoResolution {
        /// Which line.
        channel: &'static str,
    },
    /// A validity that ends before it begins.
    #[error("the certificate would end before it begins; correct its dates")]
    Dates,
    /// A curve that cannot be fitted.
    #[error("{channel}: {cause}")]
    Fit {
        /// Which line.
        channel: &'static str,
        /// Why.
        cause: RegressionError,
    },
    /// A curve that no working sink has.
    #[error("{channel}: {cause}")]
    Curve {
        /// Which curve.
        channel: &'static str,
        /// Why.
        cause: CurveError,
    },
}

/// A certificate file that cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum CertificateError {
    /// No certificate in JSON.
    #[error("no certificate: {0}; calibrate the sink or restore the file")]
    Json(#[from] serde_json::Error),
    /// A form of another version.
    #[error(
        "the certificate has form {found}, and forms up to {FORM} are known; use the version that wrote it"
    )]
    Form {
        /// The form found.
        found: u32,
    },
    /// Its own measurements give no certificate.
    #[error("the certificate cannot be computed again: {0}")]
    Measurements(#[from] CalibrationError),
    /// Its corrections are not those that follow from its measurements.
    #[error(
        "the certificate's corrections do not follow from its points: the file was altered; \
         restore it or calibrate again"
    )]
    Altered,
}

/// Whether a certificate holds at a time.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Validity {
    /// It was issued later.
    NotYet,
    /// It holds.
    Valid,
    /// It has ended.
    Expired,
}

/// Computes a certificate.
///
/// # Errors
/// [`CalibrationError`] with the point or figure that prevents it.
pub fn calibrate(measurements: Measurements) -> Result<Certificate, CalibrationError> {
    computed(FORM, measurements)
}

fn computed(form: u32, measurements: Measurements) -> Result<Certificate, CalibrationError> {
    if measurements.valid_until_unix_s <= measurements.issued_unix_s {
        return Err(CalibrationError::Dates);
    }
    let channels = Channels::of(form, &measurements)?;
    Ok(Certificate {
        form,
        correction: Correction {
            current_set: channels.current_set.curve()?,
            current_read: channels.current_read.curve()?,
            voltage_read: match &channels.voltage_read {
                Some(channel) => channel.curve()?,
                None => Curve::IDENTITY,
            },
            // The leads are the bench's, not the certificate's.
            ..Correction::IDENTITY
        },
        current_set: channels.current_set.summary(),
        current_read: channels.current_read.summary(),
        voltage_read: channels.voltage_read.as_ref().map(Channel::summary),
        measurements,
    })
}

impl Channels {
    /// Fits the three curves.
    ///
    /// # Errors
    /// As [`calibrate`].
    fn of(form: u32, measurements: &Measurements) -> Result<Self, CalibrationError> {
        let spread = measurements.temperature_spread_k;
        if !(spread.is_finite() && spread >= 0.0) {
            return Err(CalibrationError::Stated {
                what: "temperature_spread_k",
            });
        }
        let drift = spread
            * measurements
                .temperature_coefficient
                .fraction_per_kelvin()
                .abs();
        let setpoints: Vec<[Text<Current>; 1]> = measurements
            .current_points
            .iter()
            .map(|point| [Text(point.setpoint)])
            .collect();
        let set = setpoints
            .iter()
            .zip(&measurements.current_points)
            .map(|(setpoint, point)| Readings {
                nominal: setpoint,
                reference: &point.reference,
                spread: None,
            });
        let read = measurements.current_points.iter().map(|point| Readings {
            nominal: &point.readback,
            reference: &point.reference,
            spread: point.spread.as_ref(),
        });
        let voltage = measurements.voltage_points.iter().map(|point| Readings {
            nominal: &point.readback,
            reference: &point.reference,
            spread: point.spread.as_ref(),
        });
        let of_current = |step, steps| Stated {
            meter: &measurements.current_meter,
            step,
            steps,
            drift,
        };
        let read_steps = if form == 1 {
            Steps::Whole
        } else {
            Steps::Dithered
        };
        Ok(Self {
            // A setpoint has no noise that could spread the codes it is rounded to.
            current_set: Channel::fit(
                "current set",
                &set.collect::<Vec<_>>(),
                &of_current(measurements.set_step, Steps::Whole),
            )?,
            current_read: Channel::fit(
                "current read",
                &read.collect::<Vec<_>>(),
                &of_current(measurements.current_step, read_steps),
            )?,
            voltage_read: if measurements.voltage_points.is_empty() {
                None
            } else {
                let meter = measurements.voltage_meter.as_ref();
                Some(Channel::fit(
                    "voltage read",
                    &voltage.collect::<Vec<_>>(),
                    &Stated {
                        meter: meter.ok_or(CalibrationError::NoVoltageMeter)?,
                        step: measurements.voltage_step,
                        steps: read_steps,
                        // The voltage does not pass through the sense resistor.
                        drift: 0.0,
                    },
                )?)
            },
        })
    }
}

impl Certificate {
    /// Reads a certificate and computes it again from its own points.
    ///
    /// # Errors
    /// [`CertificateError`] for what is no certificate, or one whose
    /// corrections do not follow from its points.
    pub fn from_json(text: &str) -> Result<Self, CertificateError> {
        let certificate: Self = serde_json::from_str(text)?;
        if !FORMS.contains(&certificate.form) {
            return Err(CertificateError::Form {
                found: certificate.form,
            });
        }
        let again = computed(certificate.form, certificate.measurements.clone())?;
        if !same_but_for_rounding(&again.correction, &certificate.correction) {
            return Err(CertificateError::Altered);
        }
        // The summaries are printed and not decided on, and their last digit
        // may differ between machines: they are computed anew. The correction
        // is the file's own, so that a replay elsewhere gives the same orders.
        Ok(Self {
            correction: certificate.correction,
            ..again
        })
    }

    /// The certificate as it is written to its file.
    ///
    /// # Errors
    /// Those of the serialiser: none for a certificate of [`calibrate`].
    pub fn to_json(&self) -> Result<String, serde_json::Error> {
        serde_json::to_string_pretty(self)
    }

    /// The fitted channels, for budgets.
    ///
    /// # Errors
    /// As [`calibrate`]; none for a certificate that came from it.
    pub fn channels(&self) -> Result<Channels, CalibrationError> {
        Channels::of(self.form, &self.measurements)
    }

    /// Whether it holds at a time.
    pub const fn validity(&self, at_unix_s: i64) -> Validity {
        if at_unix_s < self.measurements.issued_unix_s {
            Validity::NotYet
        } else if at_unix_s > self.measurements.valid_until_unix_s {
            Validity::Expired
        } else {
            Validity::Valid
        }
    }

    /// Whether it holds for the whole of a run.
    pub fn covers(&self, from_unix_s: i64, to_unix_s: i64) -> bool {
        self.validity(from_unix_s) == Validity::Valid && self.validity(to_unix_s) == Validity::Valid
    }
}

/// Whether two corrections differ by no more than the rounding of a float's
/// last digit on another machine could make: one unit.
fn same_but_for_rounding(one: &Correction, other: &Correction) -> bool {
    let pairs = [
        (one.current_set, other.current_set),
        (one.current_read, other.current_read),
        (one.voltage_read, other.voltage_read),
    ];
    pairs.iter().all(|(one, other)| alike(*one, *other))
}

fn alike(one: Curve, other: Curve) -> bool {
    let bends = match (one.bend(), other.bend()) {
        (None, None) => true,
        (Some(one), Some(other)) => {
            let apart = one
                .curvature_ppb_per_unit
                .abs_diff(other.curvature_ppb_per_unit);
            apart <= 1 && one.from_micro == other.from_micro && one.to_micro == other.to_micro
        }
        (Some(_), None) | (None, Some(_)) => false,
    };
    bends
        && one.offset().abs_diff(other.offset()) <= 1
        && one.gain_ppb().abs_diff(other.gain_ppb()) <= 1
}

/// A quantity counted in micro-units (µA, µV) as a float.
#[expect(
    clippy::cast_precision_loss,
    reason = "readings are below 2^53 micro-units"
)]
fn micro<T: Textual + quantity::Quantity>(value: T) -> f64 {
    value.base_units() as f64
}

#[cfg(test)]
mod tests;
