//! How near an interlock is.

use sequencer::Margin;
use sequencer::event::Interlock;
use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

/// How near an interlock is, and has been.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct MarginView {
    /// Which interlock, such as `undervoltage`.
    #[schema(value_type = String)]
    pub interlock: Interlock,
    /// The unit of the three values.
    pub unit: String,
    /// The value now, the extreme nearest to the threshold.
    pub value: f64,
    /// The value nearest to the threshold so far.
    pub worst_value: f64,
    /// What must not be crossed.
    pub threshold: f64,
    /// How near the value is now: 0 far away, 1 at the threshold, more beyond it.
    pub nearness: f64,
    /// How near it has been so far.
    pub worst_nearness: f64,
}

impl MarginView {
    /// A margin with its unit.
    pub fn new(margin: &Margin) -> Self {
        let (unit, per_unit) = unit_of(margin.interlock);
        Self {
            interlock: margin.interlock,
            unit: unit.to_owned(),
            value: scaled(margin.value, per_unit),
            worst_value: scaled(margin.worst_value, per_unit),
            threshold: scaled(margin.threshold, per_unit),
            nearness: f64::from(margin.permille) / 1000.0,
            worst_nearness: f64::from(margin.worst_permille) / 1000.0,
        }
    }

    /// All margins of a run, the nearest first.
    pub fn nearest_first(margins: &[Margin]) -> Vec<Self> {
        let mut sorted: Vec<&Margin> = margins.iter().collect();
        sorted.sort_by_key(|margin| std::cmp::Reverse((margin.permille, margin.worst_permille)));
        sorted.into_iter().map(Self::new).collect()
    }
}

/// The unit in which an interlock's values are shown, and how many of its base units make one.
pub(crate) fn unit_of(interlock: Interlock) -> (&'static str, f64) {
    match interlock {
        Interlock::OverTemperature => ("degC", 1e3),
        Interlock::OverPower => ("W", 1e6),
        Interlock::Undervoltage | Interlock::OverVoltage | Interlock::ReversedPolarity => {
            ("V", 1e6)
        }
        Interlock::OverCurrent | Interlock::NotFollowing | Interlock::NotReleasing => ("A", 1e6),
        Interlock::SensorFault | Interlock::Silence | Interlock::Time | Interlock::Clock => {
            ("s", 1e6)
        }
        Interlock::Charge => ("Ah", 3.6e9),
        Interlock::Energy => ("Wh", 3.6e9),
        Interlock::Record | Interlock::Refusal => ("", 1.0),
    }
}

#[expect(
    clippy::cast_precision_loss,
    reason = "a view is as exact as a double; 2^53 micro-units are nine billion units"
)]
pub(crate) fn scaled(value: i64, per_unit: f64) -> f64 {
    value as f64 / per_unit
}
