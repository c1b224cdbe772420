//! A cell's model as a record tells it: open-circuit voltage, series resistance and one or two
//! resistor-capacitor pairs at several states of charge, each with its uncertainty, and the model
//! as a file that a rehearsal can be run on.
//!
//! What it deliberately does not do: tell it from a record (`cell_pulses`), or read its file
//! (`cell_file`).

use serde::{Deserialize, Serialize};
use serde_json::Value;

use crate::figure::Rows;

/// A cell's model as a record tells it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellModel {
    /// What was fitted at each pulse, from full to empty.
    pub points: Vec<CellPoint>,
    /// The open-circuit voltage between the pulses and beyond them, from full to empty: what was
    /// read in long steps of constant current, plus the current times what the pulses tell.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub open_circuit: Vec<OpenCircuit>,
    /// Charge from full to empty that the states of charge stand on, ampere hour.
    pub capacity_ah: f64,
    /// Its standard uncertainty; of a rated capacity none is known, and it is zero.
    pub capacity_standard_uncertainty_ah: f64,
    /// Where that charge comes from.
    pub capacity_from: String,
    /// Root of the mean squared residual of all pulses, volt.
    pub residual_rms_v: f64,
    /// The model's tables, for a rehearsal; [`CellModel::to_file`] makes the whole file of them.
    #[serde(default, skip_serializing_if = "Value::is_null")]
    pub file: Value,
    /// What a reader must know before trusting it.
    pub notes: Vec<String>,
    /// How it was fitted.
    pub method: String,
}

/// What one pulse tells.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellPoint {
    /// State of charge before the pulse, 1 full.
    pub state_of_charge: f64,
    /// Charge delivered before the pulse, ampere hour.
    pub delivered_ah: f64,
    /// Open-circuit voltage, volt: that of the rest before the pulse.
    pub open_circuit_voltage_v: Known,
    /// Series resistance, ohm.
    pub series_resistance_ohm: Known,
    /// The pairs, the faster first.
    pub pairs: Vec<PairPoint>,
    /// Correlation coefficients of series resistance, then resistance and time constant of each
    /// pair.
    pub correlations: Vec<Vec<f64>>,
    /// Root of the mean squared residual of one readback, volt.
    pub residual_rms_v: f64,
    /// Why there is no second pair.
    pub no_second_pair: Option<String>,
    /// The readbacks it came from.
    pub rows: Rows,
}

/// The open-circuit voltage at a state of charge that no pulse was at.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct OpenCircuit {
    /// State of charge, 1 full.
    pub state_of_charge: f64,
    /// The voltage, volt.
    pub voltage_v: Known,
}

/// A value with its standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Known {
    /// The value.
    pub value: f64,
    /// Its standard uncertainty.
    pub standard_uncertainty: f64,
}

/// A resistor-capacitor pair at one state of charge.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct PairPoint {
    /// Its resistance, ohm.
    pub resistance_ohm: Known,
    /// Its time constant, second.
    pub time_constant_s: Known,
}
