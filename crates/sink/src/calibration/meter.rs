//! The reference meter and its stated accuracy.

use quantity::{Quantity, Ratio, Textual};
use serde::{Deserialize, Serialize};

use super::micro;
use crate::uncertainty::{Contribution, DegreesOfFreedom, Evaluation, Stated, of_resolution};

/// A reference meter on one range, as its own certificate or data sheet states
/// it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, bound = "T: Textual")]
pub struct ReferenceMeter<T> {
    /// Maker, model and serial number.
    pub identity: String,
    /// The range used.
    #[serde(with = "quantity::text")]
    pub range: T,
    /// Accuracy: this share of the reading...
    pub of_reading: quantity::Text<Ratio>,
    /// ...plus this share of the range.
    pub of_range: quantity::Text<Ratio>,
    /// What the stated accuracy means.
    pub stated: Stated,
    /// Its resolution on this range.
    #[serde(with = "quantity::text")]
    pub resolution: T,
}

impl<T: Textual + Quantity> ReferenceMeter<T> {
    /// The standard uncertainty of its stated accuracy at a reading, in
    /// micro-units. Common to all readings of one meter, so it belongs beside a
    /// fit and not into its weights.
    pub fn accuracy(&self, reading_micro: f64) -> f64 {
        let bound = self.of_reading.0.fraction() * reading_micro.abs()
            + self.of_range.0.fraction() * micro(self.range).abs();
        self.stated.standard_uncertainty(bound)
    }

    /// The standard uncertainty of its resolution, in micro-units.
    pub fn resolution_uncertainty(&self) -> f64 {
        of_resolution(micro(self.resolution))
    }

    /// Its stated accuracy at a reading as a line of a budget, in micro-units, with the
    /// distribution that it is stated with.
    pub fn contribution(&self, name: &str, reading_micro: f64) -> Contribution {
        let accuracy = self.accuracy(reading_micro);
        let infinite = DegreesOfFreedom::INFINITE;
        Contribution::new(name, Evaluation::TypeB, accuracy, infinite).shaped(self.stated.shape())
    }

    /// Whether the stated figures make sense.
    pub(super) fn is_sound(&self) -> bool {
        self.stated.is_sound()
            && self.of_reading.0.parts_per_million() >= 0
            && self.of_range.0.parts_per_million() >= 0
            && self.range.base_units() > 0
    }
}
