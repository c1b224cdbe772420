//! A readback as it is shown: true values.

use quantity::HostTime;
use serde::{Deserialize, Serialize};
use sink::correction::Correction;
use utoipa::ToSchema;
use wire::{Cause, Reading, SinkState, TemperatureReading};

use super::rfc3339;

/// What a sink is doing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum StateWord {
    /// Off.
    Off,
    /// Drawing, and following its setpoint.
    On,
    /// Drawing, out of headroom.
    Saturated,
    /// Off by its own decision, until reset.
    Latched,
}

/// A readback: true values since the readback before.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct ReadingView {
    /// When it came (RFC 3339).
    pub at: String,
    /// The sink's own clock then.
    pub sink_time_s: f64,
    /// Mean voltage.
    pub voltage_v: f64,
    /// Least voltage.
    pub voltage_min_v: f64,
    /// Largest voltage.
    pub voltage_max_v: f64,
    /// Mean current.
    pub current_a: f64,
    /// Least current.
    pub current_min_a: f64,
    /// Largest current.
    pub current_max_a: f64,
    /// Mean voltage at the sink's terminals times mean current.
    pub power_w: f64,
    /// Heat sink temperature; absent if its sensor fails.
    pub temperature_degc: Option<f64>,
    /// What is wrong with the temperature sensor: `open` or `short`.
    pub sensor_fault: Option<String>,
    /// What the sink is doing.
    pub state: StateWord,
    /// Why it has latched, if it has.
    #[schema(value_type = Option<String>)]
    pub latched_by: Option<Cause>,
}

impl ReadingView {
    /// A readback as it came, corrected.
    pub(crate) fn new(at: HostTime, reading: &Reading, correction: &Correction) -> Self {
        let values = &reading.values;
        let voltage = |nominal, current| correction.voltage_from_readback(nominal, current).volts();
        let current = |nominal| correction.current_from_readback(nominal).amperes();
        let (temperature_degc, sensor_fault) = match values.temperature {
            TemperatureReading::Value(value) => (Some(value.degrees_celsius()), None),
            TemperatureReading::Open => (None, Some("open".to_owned())),
            TemperatureReading::Short => (None, Some("short".to_owned())),
        };
        let (state, latched_by) = match values.state {
            SinkState::Off => (StateWord::Off, None),
            SinkState::On => (StateWord::On, None),
            SinkState::Saturated => (StateWord::Saturated, None),
            SinkState::Latched(cause) => (StateWord::Latched, Some(cause)),
        };
        Self {
            at: rfc3339(at),
            sink_time_s: super::margin::scaled(
                i64::try_from(reading.time.micros()).unwrap_or(i64::MAX),
                1e6,
            ),
            voltage_v: voltage(values.voltage, values.current),
            voltage_min_v: voltage(values.voltage_min, values.current_min),
            voltage_max_v: voltage(values.voltage_max, values.current_max),
            current_a: current(values.current),
            current_min_a: current(values.current_min),
            current_max_a: current(values.current_max),
            power_w: correction
                .power_from_readback(values.voltage, values.current)
                .watts(),
            temperature_degc,
            sensor_fault,
            state,
            latched_by,
        }
    }
}
