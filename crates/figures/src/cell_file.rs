//! The cell model's file: the tables that a rehearsal runs on, and beside them, under `fit`, what
//! they were fitted from with every uncertainty.
//!
//! A file without `fit` (made by hand, or one of the invented types) is read as well: its tables
//! are then taken as they stand, without uncertainty, and a note says so.

use serde::Deserialize;
use serde_json::{Map, Value};

use crate::cell::{CellModel, CellPoint, Known, PairPoint};
use crate::cell_tables::FORMAT;
use crate::figure::Rows;

/// The key of the fit in the file.
const FIT: &str = "fit";

/// Why a cell model's file cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum CellFileError {
    /// No JSON.
    #[error("the cell model is no JSON: {0}")]
    NotJson(#[from] serde_json::Error),
    /// Another format.
    #[error(
        "the cell model's format is {found}, and `{FORMAT}` is read here; make one with \
         `sinkwarden figures RECORD --model FILE`"
    )]
    Format {
        /// What stands there.
        found: String,
    },
    /// A table that does not fit the others.
    #[error(
        "the cell model's `{table}` has not one finite number for each entry of `state_of_charge`"
    )]
    Table {
        /// Which.
        table: &'static str,
    },
    /// A capacity that is none.
    #[error("the cell model's capacity `{found}` is no charge above zero, such as `3.2 Ah`")]
    Capacity {
        /// What stands there.
        found: String,
    },
}

/// What of the file a prediction needs.
#[derive(Deserialize)]
struct Tables {
    capacity: String,
    origin: String,
    state_of_charge: Vec<f64>,
    open_circuit_voltage_v: Vec<f64>,
    series_resistance_ohm: Vec<f64>,
    #[serde(default)]
    pairs: Vec<PairTable>,
}

#[derive(Deserialize)]
struct PairTable {
    resistance_ohm: Vec<f64>,
    time_constant_s: Vec<f64>,
}

impl CellModel {
    /// The whole file: tables for a rehearsal, and the fit with its uncertainties.
    pub fn to_file(&self) -> Value {
        let mut file = self.file.clone();
        let bare = Self {
            file: Value::Null,
            ..self.clone()
        };
        // A model is finite numbers, lists and text: all have a JSON form.
        if let (Some(file), Ok(fit)) = (file.as_object_mut(), serde_json::to_value(&bare)) {
            file.insert(FIT.to_owned(), fit);
        }
        file
    }

    /// Reads a file.
    ///
    /// # Errors
    /// [`CellFileError`] for what is no cell model.
    pub fn from_file(text: &str) -> Result<Self, CellFileError> {
        let mut file: Map<String, Value> = serde_json::from_str(text)?;
        let format = file.get("format").and_then(Value::as_str);
        if format != Some(FORMAT) {
            let found = file
                .get("format")
                .map_or("missing".to_owned(), Value::to_string);
            return Err(CellFileError::Format { found });
        }
        match file.remove(FIT) {
            Some(fit) => {
                let fitted: Self = serde_json::from_value(fit)?;
                Ok(Self {
                    file: Value::Object(file),
                    ..fitted
                })
            }
            None => Self::from_tables(Value::Object(file)),
        }
    }

    fn from_tables(file: Value) -> Result<Self, CellFileError> {
        let tables = Tables::deserialize(&file)?;
        tables.check()?;
        let capacity_ah = ampere_hours(&tables.capacity)?;
        let points = (0..tables.state_of_charge.len())
            .rev()
            .filter_map(|row| tables.point(row, capacity_ah))
            .collect();
        Ok(Self {
            points,
            open_circuit: Vec::new(),
            capacity_ah,
            capacity_standard_uncertainty_ah: 0.0,
            capacity_from: format!("the cell model's file ({})", tables.origin),
            residual_rms_v: 0.0,
            notes: vec![
                "the cell model states no uncertainty: its tables are taken as they stand"
                    .to_owned(),
            ],
            method: "tables as given".to_owned(),
            file,
        })
    }
}

impl Tables {
    fn check(&self) -> Result<(), CellFileError> {
        let whole = |table: &[f64]| {
            table.len() == self.state_of_charge.len() && table.iter().all(|value| value.is_finite())
        };
        let given = [
            ("state_of_charge", &self.state_of_charge),
            ("open_circuit_voltage_v", &self.open_circuit_voltage_v),
            ("series_resistance_ohm", &self.series_resistance_ohm),
        ];
        let pairs = self.pairs.iter().flat_map(|pair| {
            [
                ("pairs: resistance_ohm", &pair.resistance_ohm),
                ("pairs: time_constant_s", &pair.time_constant_s),
            ]
        });
        match given
            .into_iter()
            .chain(pairs)
            .find(|(_, table)| !whole(table))
        {
            Some((table, _)) => Err(CellFileError::Table { table }),
            None => Ok(()),
        }
    }

    fn point(&self, row: usize, capacity_ah: f64) -> Option<CellPoint> {
        let state_of_charge = *self.state_of_charge.get(row)?;
        let exact = |table: &[f64]| {
            Some(Known {
                value: *table.get(row)?,
                standard_uncertainty: 0.0,
            })
        };
        let pairs = self
            .pairs
            .iter()
            .map(|pair| {
                Some(PairPoint {
                    resistance_ohm: exact(&pair.resistance_ohm)?,
                    time_constant_s: exact(&pair.time_constant_s)?,
                })
            })
            .collect::<Option<Vec<PairPoint>>>()?;
        Some(CellPoint {
            state_of_charge,
            delivered_ah: (1.0 - state_of_charge) * capacity_ah,
            open_circuit_voltage_v: exact(&self.open_circuit_voltage_v)?,
            series_resistance_ohm: exact(&self.series_resistance_ohm)?,
            pairs,
            correlations: Vec::new(),
            residual_rms_v: 0.0,
            no_second_pair: None,
            rows: Rows { first: 0, last: 0 },
        })
    }
}

fn ampere_hours(text: &str) -> Result<f64, CellFileError> {
    text.parse::<quantity::Charge>()
        .ok()
        .map(quantity::Charge::ampere_hours)
        .filter(|ah| *ah > 0.0)
        .ok_or_else(|| CellFileError::Capacity {
            found: text.to_owned(),
        })
}
