//! The sink's limits and the interlock defaults of a bench.
//!
//! The limits are the hardware's and hold for everything; the interlock
//! defaults stand for a run that names none of its own, and a sequence may
//! tighten but not loosen them.

use quantity::{Charge, Current, Energy, Power, Span, Temperature, Textual, Voltage};
use serde::{Deserialize, Serialize};

/// What the sink as built must never exceed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Limits {
    /// Largest current.
    #[serde(with = "quantity::text")]
    pub current: Current,
    /// Largest power.
    #[serde(with = "quantity::text")]
    pub power: Power,
    /// Highest voltage at its terminals.
    #[serde(with = "quantity::text")]
    pub voltage: Voltage,
    /// Hottest heat sink.
    #[serde(with = "quantity::text")]
    pub temperature: Temperature,
}

/// Crossed by a value above a threshold.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, bound = "T: Textual")]
pub struct Above<T> {
    /// The threshold.
    #[serde(rename = "above", with = "quantity::text")]
    pub threshold: T,
    /// For how long it must be crossed; zero: one sample is enough.
    #[serde(rename = "for", with = "quantity::text")]
    pub persistence: Span,
}

/// Crossed by a value below a threshold.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, bound = "T: Textual")]
pub struct Below<T> {
    /// The threshold.
    #[serde(rename = "below", with = "quantity::text")]
    pub threshold: T,
    /// For how long it must be crossed; zero: one sample is enough.
    #[serde(rename = "for", with = "quantity::text")]
    pub persistence: Span,
}

/// Crossed by a readback that falls short of the setpoint.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ShortBy {
    /// By how much.
    #[serde(rename = "short_by", with = "quantity::text")]
    pub threshold: Current,
    /// For how long.
    #[serde(rename = "for", with = "quantity::text")]
    pub persistence: Span,
}

/// Crossed by a readback above the setpoint.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct AboveBy {
    /// By how much.
    #[serde(rename = "above_by", with = "quantity::text")]
    pub threshold: Current,
    /// For how long.
    #[serde(rename = "for", with = "quantity::text")]
    pub persistence: Span,
}

/// Crossed by a state that lasts.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct For {
    /// For how long.
    #[serde(rename = "for", with = "quantity::text")]
    pub persistence: Span,
}

/// Crossed by a disk that runs out.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FreeSpace {
    /// Least free space on the disk of the records, in megabytes (10^6 bytes).
    pub free_space_mb: u64,
}

/// Crossed by a sink clock that jumps or drifts.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ClockOff {
    /// By how much against the host's clock.
    #[serde(rename = "off_by", with = "quantity::text")]
    pub threshold: Span,
}

/// The interlocks of a run that names none of its own.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct InterlockDefaults {
    /// Heat sink too hot.
    pub over_temperature: Above<Temperature>,
    /// Too much power in the sink.
    pub over_power: Above<Power>,
    /// Voltage of the device under test too low.
    pub undervoltage: Below<Voltage>,
    /// Voltage too high.
    pub over_voltage: Above<Voltage>,
    /// Leads reversed: a voltage below a threshold at or under zero.
    pub reversed_polarity: Below<Voltage>,
    /// Too much current.
    pub over_current: Above<Current>,
    /// Readback short of the setpoint.
    pub not_following: ShortBy,
    /// Readback above the setpoint.
    pub not_releasing: AboveBy,
    /// Temperature sensor open or shorted, a reading frozen or impossible.
    pub sensor_fault: For,
    /// No valid readback.
    pub silence: For,
    /// The record's disk runs out.
    pub record: FreeSpace,
    /// The sink's clock is out of bounds.
    pub clock: ClockOff,
    /// Most charge of a run.
    #[serde(
        default,
        with = "quantity::text::option",
        skip_serializing_if = "Option::is_none"
    )]
    pub charge: Option<Charge>,
    /// Most energy of a run.
    #[serde(
        default,
        with = "quantity::text::option",
        skip_serializing_if = "Option::is_none"
    )]
    pub energy: Option<Energy>,
    /// Longest run.
    #[serde(
        default,
        with = "quantity::text::option",
        skip_serializing_if = "Option::is_none"
    )]
    pub time: Option<Span>,
}
