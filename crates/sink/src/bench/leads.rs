//! What connects the device under test.

use quantity::{Area, Length, Resistance};
use serde::{Deserialize, Serialize};

/// The leads between the device under test and the sink.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Leads {
    /// Where the voltage is read.
    pub sensing: Sensing,
    /// What they are made of, or what was measured.
    pub conductor: Conductor,
}

/// Where the voltage is read.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Sensing {
    /// At the sink: the drop of the leads is in the reading.
    TwoWire,
    /// At the device under test, over leads of their own.
    FourWire,
}

/// The current-carrying leads.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Conductor {
    /// Measured, both leads and their contacts together.
    Measured {
        /// The resistance of the loop.
        #[serde(with = "quantity::text")]
        resistance: Resistance,
    },
    /// Copper by its cross-section, IEC 60228.
    Copper {
        /// Length of one lead; the loop is twice that.
        #[serde(with = "quantity::text")]
        length: Length,
        /// Nominal cross-section.
        #[serde(with = "quantity::text")]
        cross_section: Area,
        /// How it is stranded.
        strands: Strands,
    },
    /// Copper by its American wire gauge.
    Gauge {
        /// Length of one lead; the loop is twice that.
        #[serde(with = "quantity::text")]
        length: Length,
        /// The gauge number, such as 18.
        gauge: u8,
    },
}

/// The conductor's class in IEC 60228.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Strands {
    /// Class 1 or 2: solid or stranded, for fixed installation.
    Fixed,
    /// Class 5: flexible.
    Flexible,
}
