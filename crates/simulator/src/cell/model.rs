//! The cell model file: JSON, one object, loaded here and written by whoever fits a model.
//!
//! Quantities that stand alone are text with their unit; tables are plain numbers under names
//! that carry the unit. All tables have one entry for each `state_of_charge`, which rises from
//! 0 to 1. Between entries everything is a straight line.
//!
//! ```json
//! { "format": "sinkwarden cell model 1",
//!   "name": "type X", "origin": "invented",
//!   "rated_capacity": "1 Ah", "capacity": "1.02 Ah",
//!   "largest_voltage": "4.2 V", "cut_off_voltage": "2.5 V",
//!   "reference_temperature": "25 degC",
//!   "state_of_charge": [0, 1],
//!   "open_circuit_voltage_v": [3.0, 4.2],
//!   "series_resistance_ohm": [0.05, 0.05],
//!   "pairs": [{"resistance_ohm": [0.01, 0.01], "time_constant_s": [2, 2]}],
//!   "temperature_effect": {
//!     "series_activation_k": 1500, "pair_activation_k": [3000],
//!     "capacity": [{"temperature_degc": -20, "fraction": 0.8},
//!                  {"temperature_degc": 25, "fraction": 1}]},
//!   "heat": {"capacity_j_per_k": 40, "to_ambient_k_per_w": 10},
//!   "specimens": {"X-01": {"capacity_factor": 1.01, "resistance_factor": 0.98}} }
//! ```
//!
//! Temperature acts as `R(T) = R * exp(activation * (1 / T - 1 / T_reference))` with T in kelvin
//! (Arrhenius; the activation is `E_a / R_gas`, in kelvin), and as a fraction of `capacity`,
//! straight between its entries and level beyond them. `temperature_effect`, `heat`, `pairs` and
//! `specimens` may be left out: no effect, no self-heating, no pairs, no named specimens. Under
//! `fit` may stand whatever the tables were fitted from; nothing here reads it.

use std::collections::BTreeMap;

use quantity::{Charge, Temperature, Voltage};
use serde::{Deserialize, Serialize};

use crate::ladder::PAIRS;

/// What stands under `format` in a file this module reads.
pub const MODEL_FORMAT: &str = "sinkwarden cell model 1";

/// A cell type: everything about it but its state.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Model {
    /// Always [`MODEL_FORMAT`].
    pub format: String,
    /// What the type is called.
    pub name: String,
    /// Where the figures come from: invented, fitted to which record, published where.
    pub origin: String,
    /// The maker's rated capacity.
    #[serde(with = "quantity::text")]
    pub rated_capacity: Charge,
    /// Charge from a state of charge of 1 to 0, at the reference temperature.
    #[serde(with = "quantity::text")]
    pub capacity: Charge,
    /// Largest voltage the maker allows.
    #[serde(with = "quantity::text")]
    pub largest_voltage: Voltage,
    /// The maker's end-of-discharge voltage.
    #[serde(with = "quantity::text")]
    pub cut_off_voltage: Voltage,
    /// The temperature the tables hold for.
    #[serde(with = "quantity::text")]
    pub reference_temperature: Temperature,
    /// States of charge of the tables, rising from 0 to 1.
    pub state_of_charge: Vec<f64>,
    /// Open-circuit voltage, volt; never falling.
    pub open_circuit_voltage_v: Vec<f64>,
    /// Series resistance, ohm.
    pub series_resistance_ohm: Vec<f64>,
    /// Up to two resistor-capacitor pairs.
    #[serde(default)]
    pub pairs: Vec<PairTable>,
    /// What temperature does.
    #[serde(default)]
    pub temperature_effect: TemperatureEffect,
    /// The cell as one lump of heat.
    #[serde(default)]
    pub heat: Heat,
    /// Named specimens, each a little off the type.
    #[serde(default)]
    pub specimens: BTreeMap<String, Spread>,
    /// What the tables were fitted from, with its uncertainties, as the one who fitted them wrote
    /// it down; the simulation makes no use of it.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub fit: Option<serde_json::Value>,
}

/// A resistor-capacitor pair over the state of charge.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct PairTable {
    /// Resistance, ohm.
    pub resistance_ohm: Vec<f64>,
    /// Resistance times capacitance, second.
    pub time_constant_s: Vec<f64>,
}

/// What temperature does to resistances and capacity.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct TemperatureEffect {
    /// Activation of the series resistance, kelvin.
    #[serde(default)]
    pub series_activation_k: f64,
    /// Activation of each pair's resistance, kelvin; a missing one is 0.
    #[serde(default)]
    pub pair_activation_k: Vec<f64>,
    /// Share of the capacity that there is at a temperature; none: all of it at any.
    #[serde(default)]
    pub capacity: Vec<CapacityAt>,
}

/// The share of the capacity at one temperature.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CapacityAt {
    /// Temperature, degrees Celsius.
    pub temperature_degc: f64,
    /// Share of the capacity at the reference temperature.
    pub fraction: f64,
}

/// The cell as one lump of heat towards what is around it; zeros: it stays as warm as it is.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Heat {
    /// Heat capacity, joule per kelvin.
    pub capacity_j_per_k: f64,
    /// Thermal resistance to the ambient, kelvin per watt.
    pub to_ambient_k_per_w: f64,
}

/// How far one specimen is off its type.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Spread {
    /// Its capacity over the type's.
    pub capacity_factor: f64,
    /// Its resistances over the type's.
    pub resistance_factor: f64,
}

impl Default for Spread {
    fn default() -> Self {
        Self {
            capacity_factor: 1.0,
            resistance_factor: 1.0,
        }
    }
}

/// Why a cell model cannot be used.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum ModelError {
    /// The text is no JSON of the wanted shape.
    #[error(
        "the cell model is not well formed: {text}; see the example in the documentation of the cell model file"
    )]
    Shape {
        /// What the parser says, with line and column.
        text: String,
    },
    /// Another format.
    #[error("the cell model's format is `{given}`; `{MODEL_FORMAT}` is read here")]
    Format {
        /// The format as given.
        given: String,
    },
    /// Table of the wrong length.
    #[error(
        "`{table}` has {found} entries; give {wanted}, one for each entry of `state_of_charge`"
    )]
    Length {
        /// The table.
        table: String,
        /// Its length.
        found: usize,
        /// The length it must have.
        wanted: usize,
    },
    /// An entry that cannot be.
    #[error("`{table}` has {value} at entry {index}; {mend}")]
    Entry {
        /// The table.
        table: String,
        /// Which entry, from 0.
        index: usize,
        /// What stands there.
        value: f64,
        /// What would do.
        mend: &'static str,
    },
    /// A single value that cannot be.
    #[error("`{name}` is {value}; {mend}")]
    Value {
        /// The key.
        name: &'static str,
        /// What it is.
        value: f64,
        /// What would do.
        mend: &'static str,
    },
    /// Too many pairs.
    #[error("the cell model has {found} pairs; at most {PAIRS} are simulated")]
    Pairs {
        /// How many.
        found: usize,
    },
    /// Start outside 0 to 1.
    #[error("a state of charge of {given} is none; give 0 (empty) to 1 (full)")]
    StateOfCharge {
        /// What was given.
        given: f64,
    },
    /// A temperature no cell has.
    #[error("a temperature of {given} degC is beyond the model; give -100 degC to 200 degC")]
    StartTemperature {
        /// What was given.
        given: f64,
    },
    /// No such specimen.
    #[error("there is no cell `{label}`; known are {known}")]
    Specimen {
        /// The label asked for.
        label: String,
        /// The labels there are.
        known: String,
    },
}

impl Model {
    /// Reads a model from the text of its file and checks it.
    ///
    /// # Errors
    /// [`ModelError`] with the place and the mend.
    pub fn from_json(text: &str) -> Result<Self, ModelError> {
        let model: Self = serde_json::from_str(text).map_err(|error| ModelError::Shape {
            text: error.to_string(),
        })?;
        model.check()?;
        Ok(model)
    }

    /// The text of the model's file.
    pub fn to_json(&self) -> String {
        // A model holds only text, finite or not finite floats and lists: all have a JSON form.
        serde_json::to_string_pretty(self)
            .unwrap_or_else(|error| unreachable!("a cell model always has a JSON form: {error}"))
    }

    /// A named specimen's spread.
    ///
    /// # Errors
    /// [`ModelError::Specimen`] if the model names no such specimen.
    pub fn spread(&self, label: &str) -> Result<Spread, ModelError> {
        self.specimens
            .get(label)
            .copied()
            .ok_or_else(|| ModelError::Specimen {
                label: label.to_owned(),
                known: self
                    .specimens
                    .keys()
                    .map(String::as_str)
                    .collect::<Vec<_>>()
                    .join(", "),
            })
    }

    /// Checks all that stepping relies on.
    pub(crate) fn check(&self) -> Result<(), ModelError> {
        if self.format != MODEL_FORMAT {
            return Err(ModelError::Format {
                given: self.format.clone(),
            });
        }
        if self.pairs.len() > PAIRS {
            return Err(ModelError::Pairs {
                found: self.pairs.len(),
            });
        }
        above_zero("capacity", self.capacity.coulombs())?;
        self.check_charges()?;
        self.check_table("open_circuit_voltage_v", &self.open_circuit_voltage_v, 0.0)?;
        rising(
            "open_circuit_voltage_v",
            &self.open_circuit_voltage_v,
            |before, after| after >= before,
            "make it no lower than the entry before",
        )?;
        self.check_table("series_resistance_ohm", &self.series_resistance_ohm, 0.0)?;
        for (index, pair) in self.pairs.iter().enumerate() {
            let name = format!("pairs[{index}].resistance_ohm");
            self.check_table(&name, &pair.resistance_ohm, 0.0)?;
            let name = format!("pairs[{index}].time_constant_s");
            self.check_table(&name, &pair.time_constant_s, 1e-6)?;
        }
        self.temperature_effect.check()?;
        not_negative("heat.capacity_j_per_k", self.heat.capacity_j_per_k)?;
        not_negative("heat.to_ambient_k_per_w", self.heat.to_ambient_k_per_w)?;
        self.specimens.values().try_for_each(Spread::check)
    }

    fn check_charges(&self) -> Result<(), ModelError> {
        let charges = &self.state_of_charge;
        if charges.len() < 2 {
            return Err(ModelError::Length {
                table: "state_of_charge".to_owned(),
                found: charges.len(),
                wanted: 2,
            });
        }
        let ends = [(0, 0.0), (charges.len() - 1, 1.0)];
        for (index, wanted) in ends {
            let value = charges.get(index).copied().unwrap_or(f64::NAN);
            if value.is_nan() || (value - wanted).abs() > 0.0 {
                return Err(ModelError::Entry {
                    table: "state_of_charge".to_owned(),
                    index,
                    value,
                    mend: "begin at 0 and end at 1",
                });
            }
        }
        rising(
            "state_of_charge",
            charges,
            |before, after| after > before,
            "make it larger than the entry before",
        )
    }

    fn check_table(&self, table: &str, values: &[f64], least: f64) -> Result<(), ModelError> {
        let wanted = self.state_of_charge.len();
        if values.len() != wanted {
            return Err(ModelError::Length {
                table: table.to_owned(),
                found: values.len(),
                wanted,
            });
        }
        let unsound = |value: &f64| !(value.is_finite() && *value >= least);
        match values.iter().position(unsound) {
            None => Ok(()),
            Some(index) => Err(ModelError::Entry {
                table: table.to_owned(),
                index,
                value: values.get(index).copied().unwrap_or(f64::NAN),
                mend: if least > 0.0 {
                    "give a time constant of at least 0.000001 s"
                } else {
                    "give a finite number that is not below zero"
                },
            }),
        }
    }
}

impl Spread {
    pub(super) fn check(&self) -> Result<(), ModelError> {
        above_zero("capacity_factor", self.capacity_factor)?;
        above_zero("resistance_factor", self.resistance_factor)
    }
}

impl TemperatureEffect {
    fn check(&self) -> Result<(), ModelError> {
        let activations = self.pair_activation_k.iter();
        for activation in activations.chain([&self.series_activation_k]) {
            if !(-20_000.0..=20_000.0).contains(activation) {
                return Err(ModelError::Value {
                    name: "temperature_effect",
                    value: *activation,
                    mend: "give an activation of at most 20000 K",
                });
            }
        }
        for row in &self.capacity {
            above_zero("temperature_effect.capacity.fraction", row.fraction)?;
        }
        let temperatures: Vec<f64> = self
            .capacity
            .iter()
            .map(|row| row.temperature_degc)
            .collect();
        rising(
            "temperature_effect.capacity",
            &temperatures,
            |before, after| after > before,
            "list the temperatures from cold to warm",
        )
    }

    /// The share of the capacity that there is at a temperature.
    pub fn capacity_fraction(&self, temperature_degc: f64) -> f64 {
        let mut before: Option<&CapacityAt> = None;
        for row in &self.capacity {
            if temperature_degc <= row.temperature_degc {
                return match before {
                    None => row.fraction,
                    Some(cold) => {
                        let along = (temperature_degc - cold.temperature_degc)
                            / (row.temperature_degc - cold.temperature_degc);
                        cold.fraction + along * (row.fraction - cold.fraction)
                    }
                };
            }
            before = Some(row);
        }
        before.map_or(1.0, |warmest| warmest.fraction)
    }
}

fn above_zero(name: &'static str, value: f64) -> Result<(), ModelError> {
    if value.is_finite() && value > 0.0 {
        return Ok(());
    }
    Err(ModelError::Value {
        name,
        value,
        mend: "give a finite number above zero",
    })
}

fn not_negative(name: &'static str, value: f64) -> Result<(), ModelError> {
    if value.is_finite() && value >= 0.0 {
        return Ok(());
    }
    Err(ModelError::Value {
        name,
        value,
        mend: "give a finite number that is not below zero",
    })
}

fn rising(
    table: &str,
    values: &[f64],
    ordered: fn(f64, f64) -> bool,
    mend: &'static str,
) -> Result<(), ModelError> {
    for (index, window) in values.windows(2).enumerate() {
        if let &[before, after] = window
            && !ordered(before, after)
        {
            return Err(ModelError::Entry {
                table: table.to_owned(),
                index: index + 1,
                value: after,
                mend,
            });
        }
    }
    Ok(())
}
