//! What the check knows of a sink's certificate.

use quantity::{Current, Span, Voltage};
use sink::calibration::Certificate;

/// What stands behind a sink's readings when a run begins.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Calibration {
    /// Nobody asks.
    #[default]
    NotJudged,
    /// The sink has no certificate: every figure is nominal.
    Absent,
    /// The sink has one.
    Certificate {
        /// How long it still holds; zero if it does not.
        valid_for: Span,
        /// The true currents between which it was calibrated.
        current: [Current; 2],
        /// The true voltages between which it was calibrated; `None`: the voltage was not.
        voltage: Option<[Voltage; 2]>,
    },
}

impl Calibration {
    /// Of a sink's certificate, or of none, when it is `now`.
    pub fn of(certificate: Option<&Certificate>, now_unix_s: i64) -> Self {
        let Some(certificate) = certificate else {
            return Self::Absent;
        };
        let measurements = &certificate.measurements;
        let left = if now_unix_s < measurements.issued_unix_s {
            0
        } else {
            measurements.valid_until_unix_s.saturating_sub(now_unix_s)
        };
        let correction = &certificate.correction;
        Self::Certificate {
            valid_for: Span::from_secs(u64::try_from(left).unwrap_or(0)),
            current: certificate.current_set.range_micro.map(|micro| {
                let nominal = Current::from_amperes(micro / 1e6).unwrap_or_default();
                correction.current_from_setpoint(nominal)
            }),
            voltage: certificate.voltage_read.as_ref().map(|line| {
                line.range_micro.map(|micro| {
                    let nominal = Voltage::from_volts(micro / 1e6).unwrap_or_default();
                    correction.terminal_voltage(nominal)
                })
            }),
        }
    }
}
