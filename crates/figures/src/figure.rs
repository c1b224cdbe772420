//! What a figure is.

use serde::{Deserialize, Serialize};
use sink::uncertainty::{Budget, Combined, Expanded};

use crate::cell::CellModel;
use crate::stage::Stage;

/// The probability that an expanded uncertainty covers.
pub(crate) const PROBABILITY: f64 = 0.95;

/// The source of what no standard says.
pub(crate) const COMMON: &str = "common practice, no source";

/// All figures of one record.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Figures {
    /// The record they were worked out from.
    pub record: String,
    /// The program that did it.
    pub software: String,
    /// Whether a valid certificate stands behind them.
    pub standing: Standing,
    /// The figures.
    pub figures: Vec<Figure>,
    /// Figures one might expect and the data cannot support, each with the reason.
    pub missing: Vec<Missing>,
    /// What a reader must know before trusting them.
    pub warnings: Vec<String>,
    /// The cell's model, where pulses between rests tell one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub cell_model: Option<CellModel>,
}

/// What stands behind a figure.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Standing {
    /// A valid certificate of the sink.
    Calibrated,
    /// A valid certificate of the sink's current; the voltage is nominal, uncalibrated.
    CurrentCalibrated,
    /// Nothing but the front end's nominal values and stated tolerances.
    NominalUncalibrated,
}

/// What a figure is of.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Name {
    /// From the first step that draws to its last.
    Duration,
    /// Charge delivered to the cut-off.
    Capacity,
    /// Energy delivered to the cut-off.
    Energy,
    /// Energy over charge.
    MeanVoltage,
    /// Charge delivered, cut-off or not.
    DeliveredCharge,
    /// Energy delivered, cut-off or not.
    DeliveredEnergy,
    /// Charge delivered, by trapezoid from the readbacks.
    ChargeByTrapezoid,
    /// D.c. internal resistance from two currents.
    DcResistance,
    /// D.c. resistance 10 ms after an edge.
    #[serde(rename = "resistance_at_10_ms")]
    ResistanceAt10Ms,
    /// D.c. resistance 100 ms after an edge.
    #[serde(rename = "resistance_at_100_ms")]
    ResistanceAt100Ms,
    /// D.c. resistance 1 s after an edge.
    #[serde(rename = "resistance_at_1_s")]
    ResistanceAt1S,
    /// D.c. resistance 10 s after an edge.
    #[serde(rename = "resistance_at_10_s")]
    ResistanceAt10S,
    /// Largest fall of the voltage after a rise of the current.
    Droop,
    /// Largest rise of the voltage after a fall of the current.
    Overshoot,
    /// From an edge until the voltage stays in a band about where it settles.
    RecoveryTime,
    /// Change of a supply's voltage from the smallest to the largest current of a sweep.
    LoadRegulation,
    /// Slope of a supply's voltage over its current.
    OutputResistance,
    /// The largest current a supply gave before its voltage gave way.
    CurrentLimitKnee,
    /// The current that a supply fell back to beyond its knee.
    FoldBackCurrent,
    /// Heat sink temperature that a steady power would have led to.
    SettledTemperature,
    /// From the heat sink to the air around it.
    ThermalResistance,
    /// What was left to the MOSFET's largest junction temperature.
    JunctionMargin,
    /// Hottest heat sink.
    PeakTemperature,
    /// Power delivered to the sink over power taken in.
    Efficiency,
}

/// A figure's unit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Unit {
    /// Ampere hours.
    #[serde(rename = "Ah")]
    AmpereHour,
    /// Watt hours.
    #[serde(rename = "Wh")]
    WattHour,
    /// Volts.
    #[serde(rename = "V")]
    Volt,
    /// Ohms.
    #[serde(rename = "ohm")]
    Ohm,
    /// Seconds.
    #[serde(rename = "s")]
    Second,
    /// Degrees Celsius.
    #[serde(rename = "degC")]
    DegreeCelsius,
    /// Amperes.
    #[serde(rename = "A")]
    Ampere,
    /// Kelvins, of a difference of temperatures.
    #[serde(rename = "K")]
    Kelvin,
    /// Kelvins per watt.
    #[serde(rename = "K/W")]
    KelvinPerWatt,
    /// Nothing: a ratio or an exponent.
    #[serde(rename = "1")]
    One,
}

impl Standing {
    /// As it is written beside figures.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Calibrated => "calibrated",
            Self::CurrentCalibrated => "current calibrated; voltage nominal, uncalibrated",
            Self::NominalUncalibrated => "nominal, uncalibrated",
        }
    }
}

impl Unit {
    /// The unit as it is written behind a number.
    pub const fn symbol(self) -> &'static str {
        match self {
            Self::AmpereHour => "Ah",
            Self::WattHour => "Wh",
            Self::Volt => "V",
            Self::Ohm => "ohm",
            Self::Second => "s",
            Self::DegreeCelsius => "degC",
            Self::Ampere => "A",
            Self::Kelvin => "K",
            Self::KelvinPerWatt => "K/W",
            Self::One => "1",
        }
    }
}

/// One figure.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Figure {
    /// What it is of.
    pub name: Name,
    /// The label of the steps it is of; `None`: the whole run.
    pub label: Option<String>,
    /// Which of the steps with that label, from 1; `None`: the only one, or all together.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub occurrence: Option<u32>,
    /// The value, in `unit`.
    pub value: f64,
    /// Its unit.
    pub unit: Unit,
    /// Combined standard uncertainty and its degrees of freedom; `None` where none is claimed.
    pub uncertainty: Option<Combined>,
    /// Expanded uncertainty at 95 %, where a coverage factor can be stated.
    pub expanded: Option<Expanded>,
    /// The largest contribution to it.
    pub dominated_by: Option<String>,
    /// All contributions.
    pub budget: Budget,
    /// How it was worked out.
    pub method: Method,
    /// The readbacks it came from.
    pub rows: Rows,
}

/// How a figure was worked out, and who says so.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Method {
    /// In a sentence.
    pub how: String,
    /// The published source, or `common practice, no source`.
    pub source: String,
}

/// The entries of the journal that a figure came from, first and last.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Rows {
    /// First entry.
    pub first: u64,
    /// Last entry.
    pub last: u64,
}

/// A figure that the data cannot support.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Missing {
    /// What it would be of.
    pub name: Name,
    /// The label it would be of.
    pub label: Option<String>,
    /// Why there is no number.
    pub reason: String,
}

impl Figure {
    /// A figure with its budget combined; without contributions no uncertainty is claimed.
    pub(crate) fn new(
        name: Name,
        label: Option<String>,
        (value, unit): (f64, Unit),
        budget: Budget,
        (how, source): (&str, &str),
        rows: Rows,
    ) -> Self {
        let combined = if budget.contributions.is_empty() {
            None
        } else {
            budget.combined().ok()
        };
        Self {
            name,
            label,
            occurrence: None,
            value,
            unit,
            uncertainty: combined,
            expanded: combined.and_then(|_| budget.expanded(PROBABILITY)),
            dominated_by: budget.dominant().map(|line| line.name.clone()),
            budget,
            method: Method {
                how: how.to_owned(),
                source: source.to_owned(),
            },
            rows,
        }
    }

    /// The figure of one step, with its label and which of those it is.
    pub(crate) fn of_stage(
        name: Name,
        stage: &Stage<'_>,
        value: (f64, Unit),
        budget: Budget,
        method: (&str, &str),
        rows: Rows,
    ) -> Self {
        let label = stage.label.map(str::to_owned);
        Self {
            occurrence: stage.occurrence,
            ..Self::new(name, label, value, budget, method, rows)
        }
    }
}

impl Missing {
    /// A figure of the whole run that cannot be given.
    pub(crate) fn new(name: Name, reason: impl Into<String>) -> Self {
        Self {
            name,
            label: None,
            reason: reason.into(),
        }
    }

    /// The same, of a label.
    pub(crate) fn of(name: Name, label: Option<&str>, reason: impl Into<String>) -> Self {
        Self {
            label: label.map(str::to_owned),
            ..Self::new(name, reason)
        }
    }
}
