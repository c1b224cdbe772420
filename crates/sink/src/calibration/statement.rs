//! What is stated beside the points: who, where, with which meters, for how long.

use quantity::{Current, Quantity, Temperature, Voltage};
use serde::{Deserialize, Serialize};

use super::{CurrentPoint, Measurements, ReferenceMeter, VoltagePoint};
use crate::bench::{Adc, Codes, SinkEntry};
use crate::converter::Converter;

/// Seconds in a day.
const DAY_S: i64 = 86_400;
/// Longest validity: a home-built sink drifts.
const VALID_FOR_DAYS_MAX: u32 = 3_660;
/// Most characters of an identity.
const IDENTITY_CHARS_MAX: usize = 80;

/// What is stated beside the points of a calibration.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Statement {
    /// Who does it.
    pub operator: String,
    /// Ambient temperature at the time.
    #[serde(with = "quantity::text")]
    pub ambient: Temperature,
    /// By how many kelvins the sense resistor may be warmer or cooler in use.
    pub temperature_spread_k: f64,
    /// How long the certificate holds.
    pub valid_for_days: u32,
    /// The meter that measures the current.
    pub current_meter: ReferenceMeter<Current>,
    /// The meter that measures the voltage; none is needed to calibrate the current alone.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub voltage_meter: Option<ReferenceMeter<Voltage>>,
}

/// Which certificate it will be.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Identity {
    /// Its name, such as `weir-left-2026-12-01`.
    pub name: String,
    /// The serial number that the firmware states.
    pub serial_number: Option<u32>,
    /// When it is issued, in seconds since 1970-01-01T00:00:00Z.
    pub issued_unix_s: i64,
    /// The record of the run in which the points were taken.
    pub record: Option<String>,
}

/// A statement that cannot be used.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum StatementError {
    /// No statement in TOML.
    #[error("{0}")]
    Toml(String),
    /// A validity that ends at once, or after a time in which any sink drifts.
    #[error("valid_for_days is {found}; 1 to {VALID_FOR_DAYS_MAX} can be stated, 365 is usual")]
    Validity {
        /// What is stated.
        found: u32,
    },
    /// An identity that is no plain name.
    #[error(
        "`{0}` is no identity of a certificate; use 1 to {IDENTITY_CHARS_MAX} letters, digits, `-`, `_` and `.`, and no `.` at the beginning"
    )]
    Identity(String),
}

impl Statement {
    /// A statement to start from, as TOML; its meters are invented.
    pub const EXAMPLE: &'static str = include_str!("meters.toml");

    /// Reads a statement from TOML.
    ///
    /// # Errors
    /// [`StatementError`] with the line.
    pub fn from_toml(text: &str) -> Result<Self, StatementError> {
        let statement: Self = toml::from_str(text)
            .map_err(|error| StatementError::Toml(error.to_string().trim_end().to_owned()))?;
        statement.check()?;
        Ok(statement)
    }

    /// Whether what it states can be; the meters are judged with the points.
    ///
    /// # Errors
    /// [`StatementError::Validity`].
    pub const fn check(&self) -> Result<(), StatementError> {
        match self.valid_for_days {
            1..=VALID_FOR_DAYS_MAX => Ok(()),
            found => Err(StatementError::Validity { found }),
        }
    }

    /// Everything that was measured and stated for a calibration of a sink.
    pub fn measurements(
        &self,
        entry: &SinkEntry,
        identity: Identity,
        current_points: Vec<CurrentPoint>,
        voltage_points: Vec<VoltagePoint>,
    ) -> Measurements {
        let adc = &entry.front_end.adc;
        let issued = identity.issued_unix_s;
        Measurements {
            identity: identity.name,
            sink: entry.name.clone(),
            serial_number: identity.serial_number.or(entry.serial_number),
            operator: self.operator.clone(),
            issued_unix_s: issued,
            valid_until_unix_s: issued
                .saturating_add(i64::from(self.valid_for_days).saturating_mul(DAY_S)),
            ambient: self.ambient,
            temperature_spread_k: self.temperature_spread_k,
            temperature_coefficient: entry.front_end.sense_resistor.temperature_coefficient,
            set_step: Converter::of(&entry.front_end).step(),
            current_step: current_step(adc),
            voltage_step: step(adc, adc.voltage_full_scale),
            current_meter: self.current_meter.clone(),
            voltage_meter: self.voltage_meter.clone(),
            record: identity.record,
            current_points,
            voltage_points,
        }
    }
}

impl Identity {
    /// Whether its name can stand as a file's.
    ///
    /// # Errors
    /// [`StatementError::Identity`].
    pub fn check(name: &str) -> Result<(), StatementError> {
        let plain = |byte: u8| byte.is_ascii_alphanumeric() || matches!(byte, b'-' | b'_' | b'.');
        let sound = (1..=IDENTITY_CHARS_MAX).contains(&name.len())
            && name.bytes().all(plain)
            && !name.starts_with('.');
        if sound {
            Ok(())
        } else {
            Err(StatementError::Identity(name.to_owned()))
        }
    }
}

/// One step of the current readback, to the nearest microampere.
pub fn current_step(adc: &Adc) -> Current {
    step(adc, adc.current_full_scale)
}

/// One step of a reading converter with this full scale.
fn step<T: Quantity>(adc: &Adc, full_scale: T) -> T {
    let codes = 1_i128 << adc.bits.min(31);
    let steps = match adc.codes {
        Codes::PowerOfTwo => codes,
        Codes::PowerOfTwoLessOne => codes - 1,
    };
    let nearest = (full_scale.base_units() + steps / 2) / steps;
    T::from_base_units(nearest.max(1)).unwrap_or(full_scale)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::bench::Bench;

    #[test]
    fn the_example_is_a_statement() {
        let statement = Statement::from_toml(Statement::EXAMPLE).unwrap();
        assert_eq!(statement.valid_for_days, 365);
    }

    #[test]
    fn a_statement_that_cannot_be_is_refused_with_its_line() {
        let bare = Statement::EXAMPLE.replace("range = \"3 A\"", "range = 3");
        let error = Statement::from_toml(&bare).unwrap_err().to_string();
        assert!(error.contains("line 13"), "{error}");
        let endless = Statement::EXAMPLE.replace("= 365", "= 100000");
        let error = Statement::from_toml(&endless).unwrap_err().to_string();
        assert!(error.contains("valid_for_days is 100000"), "{error}");
    }

    #[test]
    fn the_steps_come_from_the_front_end() {
        let bench = Bench::from_toml(include_str!("../bench/weir.toml")).unwrap();
        let left = bench.sink("left").unwrap();
        // 3.3 A over 4096 steps; 9.9 V over 4096.
        assert_eq!(current_step(&left.front_end.adc).microamperes(), 806);
        let step = step(&left.front_end.adc, left.front_end.adc.voltage_full_scale);
        assert_eq!(step.microvolts(), 2_417);
    }

    #[test]
    fn an_identity_is_a_plain_name() {
        assert!(Identity::check("weir-left-2026-12-01").is_ok());
        for wrong in ["", ".hidden", "../up", "a b", "a/b"] {
            assert!(Identity::check(wrong).is_err(), "{wrong}");
        }
    }
}
