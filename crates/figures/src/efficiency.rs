//! Efficiency of a supply: the power that the sink drew over the power that the supply took in,
//! as an input meter's readings beside the record have it.
//!
//! The record knows nothing of the input; its readings are given, one for each label, with the
//! meter's accuracy. What they are combined with comes from the record alone.

use std::collections::BTreeMap;

use sequence::plan::DutKind;
use serde::{Deserialize, Serialize};
use sink::uncertainty::Budget;

use crate::contribution::{End, bounded};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, Unit};
use crate::work::Workbench;

const HOW: &str = "mean power of the label's steps by the sink's counters, over the input meter's \
                   voltage times current";

/// The header of a file of readings.
const HEADER: [&str; 3] = ["label", "input_voltage_v", "input_current_a"];

/// What an input meter showed while the steps of a label drew.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct InputReading {
    /// The label.
    pub label: String,
    /// Volt.
    pub input_voltage_v: f64,
    /// Ampere.
    pub input_current_a: f64,
}

/// An input meter's readings.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct InputMeter {
    /// One for each label.
    pub readings: Vec<InputReading>,
    /// Bound of its error of a power, as a share of it: what its data sheet states for voltage
    /// and current together.
    pub accuracy: f64,
}

/// Why readings cannot be used.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum InputError {
    /// Another header.
    #[error("the input meter's file begins with `{found}`; it begins with `{}`", HEADER.join(","))]
    Header {
        /// The first line.
        found: String,
    },
    /// A line that is none.
    #[error(
        "line {line} of the input meter's file is `{found}`; give a label, a voltage in volts and \
         a current in amperes above zero, such as `100 mA,5.02,0.0715`"
    )]
    Line {
        /// Which, from 1.
        line: usize,
        /// What stands there.
        found: String,
    },
    /// A label twice.
    #[error("line {line} of the input meter's file has the label `{label}` once more")]
    Twice {
        /// Which line, from 1.
        line: usize,
        /// The label.
        label: String,
    },
}

impl InputMeter {
    /// Reads a file of readings: the header `label,input_voltage_v,input_current_a`, then a line
    /// for each label; lines that begin with `#` are passed over.
    ///
    /// # Errors
    /// [`InputError`] for the first line that is none.
    pub fn from_csv(text: &str, accuracy: f64) -> Result<Self, InputError> {
        let mut lines = text
            .lines()
            .enumerate()
            .map(|(index, line)| (index + 1, line.trim()))
            .filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
        let header = lines.next().map_or("", |(_, line)| line);
        if header.split(',').map(str::trim).ne(HEADER) {
            let found = header.to_owned();
            return Err(InputError::Header { found });
        }
        let mut readings: BTreeMap<String, InputReading> = BTreeMap::new();
        for (line, found) in lines {
            let reading = reading(found).ok_or_else(|| InputError::Line {
                line,
                found: found.to_owned(),
            })?;
            let label = reading.label.clone();
            if readings.insert(label.clone(), reading).is_some() {
                return Err(InputError::Twice { line, label });
            }
        }
        Ok(Self {
            readings: readings.into_values().collect(),
            accuracy,
        })
    }
}

/// A label may hold commas: the last two fields are the numbers.
fn reading(line: &str) -> Option<InputReading> {
    let (rest, amperes) = line.rsplit_once(',')?;
    let (label, volts) = rest.rsplit_once(',')?;
    let number = |text: &str| {
        let value: f64 = text.trim().parse().ok()?;
        (value.is_finite() && value > 0.0).then_some(value)
    };
    let label = label.trim().trim_matches('"').to_owned();
    (!label.is_empty()).then_some(())?;
    Some(InputReading {
        label,
        input_voltage_v: number(volts)?,
        input_current_a: number(amperes)?,
    })
}

impl Workbench<'_> {
    /// Efficiency at every label that the meter was read at.
    pub(crate) fn efficiency(&self, figures: &mut Figures, input: Option<&InputMeter>) {
        if self.plan.dut.kind != DutKind::Supply {
            return;
        }
        let Some(input) = input else {
            figures.missing.push(Missing::new(
                Name::Efficiency,
                "no input meter's readings were given: `figures --input-meter FILE`",
            ));
            return;
        };
        for reading in &input.readings {
            match self.efficiency_at(reading, input.accuracy) {
                Ok(figure) => figures.figures.push(figure),
                Err(reason) => figures.missing.push(Missing::of(
                    Name::Efficiency,
                    Some(&reading.label),
                    reason,
                )),
            }
        }
    }

    fn efficiency_at(&self, reading: &InputReading, accuracy: f64) -> Result<Figure, String> {
        let label = reading.label.as_str();
        let together = self.together_of(|_, stage| stage.label == Some(label) && stage.draws());
        let amount = together.amount;
        let rows = together
            .rows
            .filter(|_| amount.seconds > 0.0 && amount.energy_wh > 0.0)
            .ok_or("no step of this label drew anything")?;
        let watts_in = reading.input_voltage_v * reading.input_current_a;
        let value = amount.energy_wh * 3600.0 / amount.seconds / watts_in;
        if value > 1.0 + accuracy + 0.05 {
            return Err(format!(
                "more came out ({:.4} W) than the meter saw go in ({watts_in:.4} W): was it read \
                 at this label, and in volts and amperes?",
                value * watts_in
            ));
        }
        let mut lines: Vec<_> = self
            .energy_budget(&together, End::default())
            .contributions
            .into_iter()
            .map(|line| line.scaled(value / amount.energy_wh))
            .collect();
        lines.push(bounded("input meter", value * accuracy));
        Ok(Figure::new(
            Name::Efficiency,
            Some(label.to_owned()),
            (value, Unit::One),
            Budget::new(lines),
            (HOW, COMMON),
            rows,
        ))
    }
}
