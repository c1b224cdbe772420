//! What turns the power into heat, and what gets rid of it.

use quantity::{
    Current, Resistance, Span, SquareLawFactor, Temperature, ThermalResistance, Voltage,
};
use serde::{Deserialize, Serialize};

/// What drives the gate.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct GateDrive {
    /// Highest voltage the op-amp can bring to the gate, from ground.
    #[serde(with = "quantity::text")]
    pub voltage_max: Voltage,
    /// D.c. open-loop gain of the op-amp; without one it is taken as infinite.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub open_loop_gain: Option<f64>,
}

/// The power MOSFET, as its data sheet has it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Mosfet {
    /// Gate voltage against current.
    pub transfer: Transfer,
    /// Resistance when fully on, at operating temperature.
    #[serde(with = "quantity::text")]
    pub on_resistance: Resistance,
    /// Highest drain-to-source voltage.
    #[serde(with = "quantity::text")]
    pub voltage_max: Voltage,
    /// Largest continuous drain current.
    #[serde(with = "quantity::text")]
    pub current_max: Current,
    /// Thermal resistance from junction to case.
    #[serde(with = "quantity::text")]
    pub junction_to_case: ThermalResistance,
    /// Highest junction temperature.
    #[serde(with = "quantity::text")]
    pub junction_max: Temperature,
    /// The d.c. line of the safe operating area, by rising voltage, at a case
    /// of 25 degC. Without one a conservative limit applies and is named.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub soa_dc: Vec<SoaPoint>,
    /// The transient thermal impedance from junction to case as a Foster
    /// network; its resistances add up to `junction_to_case`.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub foster: Vec<FosterPair>,
}

/// The MOSFET's transfer characteristic.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Transfer {
    /// I = k/2 (V_gs - V_th)^2 in saturation.
    SquareLaw {
        /// V_th.
        #[serde(with = "quantity::text")]
        threshold: Voltage,
        /// k.
        #[serde(with = "quantity::text")]
        factor: SquareLawFactor,
    },
    /// Points of the data sheet's curve, by rising current; straight between.
    Table(Vec<GatePoint>),
}

/// A point of the transfer characteristic.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct GatePoint {
    /// Gate-to-source voltage.
    #[serde(with = "quantity::text")]
    pub gate: Voltage,
    /// Drain current at it.
    #[serde(with = "quantity::text")]
    pub current: Current,
}

/// A corner of the safe operating area's d.c. line.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SoaPoint {
    /// Drain-to-source voltage.
    #[serde(with = "quantity::text")]
    pub voltage: Voltage,
    /// Drain current allowed there.
    #[serde(with = "quantity::text")]
    pub current: Current,
}

/// One pair of a Foster network.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FosterPair {
    /// Its thermal resistance.
    #[serde(with = "quantity::text")]
    pub resistance: ThermalResistance,
    /// Its time constant.
    #[serde(with = "quantity::text")]
    pub time_constant: Span,
}

/// The heat sink.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct HeatSink {
    /// Thermal resistance from the MOSFET's case to the heat sink, with its
    /// pad or paste.
    #[serde(with = "quantity::text")]
    pub from_case: ThermalResistance,
    /// Thermal resistance from the heat sink to the air.
    #[serde(with = "quantity::text")]
    pub to_ambient: ThermalResistance,
    /// Time in which it covers 63 % of the way to its settled temperature.
    #[serde(with = "quantity::text")]
    pub time_constant: Span,
    /// Hottest it may get.
    #[serde(with = "quantity::text")]
    pub limit: Temperature,
}
