//! The bench file: what stands on one host's bench, as types.
//!
//! TOML; every quantity is text with its unit, since a bare number is a guess.
//! [`Bench::from_toml`] takes the text and gives either a bench whose entries
//! agree with themselves, or every disagreement at once, each with its line,
//! what is wrong and how to mend it.
//!
//! Invariants of a [`Bench`] that came from `from_toml`:
//! - at least one sink; names are unique, short and safe in a path or a URL;
//! - no figure that physics forbids (a resistance of zero, 0 bits);
//! - no interlock default beyond the sink's limits, no limit beyond what its
//!   converters can set or show.
//!
//! What it deliberately does not do: it opens no file (the caller reads the
//! text), it does not judge whether a limit is wise (that is the envelope's
//! warning), and it does not look inside a simulated source.

mod check;
mod front_end;
mod interlock;
mod leads;
mod link;
mod place;
mod power_stage;

use std::path::PathBuf;

use quantity::{Span, Temperature};
use serde::{Deserialize, Serialize};

pub use front_end::{
    Adc, Codes, Dac, Element, FrontEnd, ReadError, ResistancePoint, SenseResistor, SensorDivider,
    SensorSide, TemperatureSensor,
};
pub use interlock::{
    Above, AboveBy, Below, ClockOff, For, FreeSpace, InterlockDefaults, Limits, ShortBy,
};
pub use leads::{Conductor, Leads, Sensing, Strands};
pub use link::Link;
pub use place::{BenchError, Problem};
pub use power_stage::{FosterPair, GateDrive, GatePoint, HeatSink, Mosfet, SoaPoint, Transfer};

/// Longest interval a sink may hear nothing before it turns itself off.
pub const DEADMAN_MAX: Span = Span::from_secs(10);
/// Shortest such interval: below it an ordinary host would trip it.
pub const DEADMAN_MIN: Span = Span::from_millis(100);

/// The sinks of one host.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Bench {
    /// What the bench is called, such as `weir`.
    pub name: String,
    /// The folder that holds the records of its runs; relative to the bench
    /// file.
    pub records: PathBuf,
    /// Its sinks, in the order of the file.
    #[serde(rename = "sink")]
    pub sinks: Vec<SinkEntry>,
}

/// One current sink, with its link and its front end.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SinkEntry {
    /// What it is called on this bench, such as `left`.
    pub name: String,
    /// The serial number its firmware states; a sink that states another is
    /// refused. Without one, any sink with the right front end is taken.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub serial_number: Option<u32>,
    /// The certificate of its calibration; relative to the bench file.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub certificate: Option<PathBuf>,
    /// How it is reached.
    pub link: Link,
    /// The readback intervals it is asked for.
    pub readback: ReadbackRange,
    /// How long the sink may hear nothing before it turns itself off.
    #[serde(with = "quantity::text", default = "deadman_default")]
    pub deadman: Span,
    /// The warmest air it is expected to stand in.
    #[serde(with = "quantity::text")]
    pub ambient: Temperature,
    /// Whether it has a relay that cuts the circuit.
    #[serde(default)]
    pub isolator: bool,
    /// What sets and reads the current.
    pub front_end: FrontEnd,
    /// What drives the gate.
    pub gate_drive: GateDrive,
    /// What turns the power into heat.
    pub mosfet: Mosfet,
    /// What gets rid of the heat.
    pub heat_sink: HeatSink,
    /// What connects the device under test.
    pub leads: Leads,
    /// What the sink as built must never exceed.
    pub limits: Limits,
    /// The interlocks of a run that names none of its own.
    pub interlocks: InterlockDefaults,
}

/// The readback intervals of a sink.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ReadbackRange {
    /// Shortest interval the host asks for.
    #[serde(with = "quantity::text")]
    pub fastest: Span,
    /// Longest interval the host asks for.
    #[serde(with = "quantity::text")]
    pub slowest: Span,
    /// The interval of a sequence that names none.
    #[serde(with = "quantity::text")]
    pub usual: Span,
}

const fn deadman_default() -> Span {
    Span::from_secs(2)
}

impl Bench {
    /// Reads and checks a bench file.
    ///
    /// # Errors
    /// [`BenchError`] with every problem found: one if the text is no TOML or
    /// has a field of the wrong shape, else all that the check finds.
    pub fn from_toml(text: &str) -> Result<Self, BenchError> {
        let bench: Self =
            toml::from_str(text).map_err(|error| BenchError::from_toml(&error, text))?;
        let findings = check::check(&bench);
        if findings.is_empty() {
            return Ok(bench);
        }
        Err(BenchError::located(findings, text))
    }

    /// The sink of that name.
    pub fn sink(&self, name: &str) -> Option<&SinkEntry> {
        self.sinks.iter().find(|sink| sink.name == name)
    }
}

#[cfg(test)]
mod tests;
