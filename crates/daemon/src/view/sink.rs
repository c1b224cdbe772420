//! A sink as it is shown.

use serde::{Deserialize, Serialize};
use sink::bench::{Link, SinkEntry};
use utoipa::ToSchema;
use wire::Description;

use super::{ReadingView, RunView};

/// How a sink is reached.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum LinkKind {
    /// A serial port.
    Serial,
    /// A TCP connection.
    Tcp,
    /// A simulated sink in the daemon.
    Simulated,
}

/// How the link stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum LinkState {
    /// Not open.
    Lost,
    /// Open; the sink has not described itself.
    Greeting,
    /// A session stands.
    Connected,
    /// The sink on the link is not the one the bench file describes.
    Refused,
}

/// A sink's link.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct LinkView {
    /// Of which kind.
    pub kind: LinkKind,
    /// The port or address; empty for a simulated sink.
    pub port: String,
    /// How it stands.
    pub state: LinkState,
    /// Why it is lost or refused.
    pub reason: Option<String>,
    /// How much faster than real time a simulated sink runs.
    pub time_factor: Option<u32>,
}

impl LinkView {
    /// A link that is not open yet.
    pub(crate) fn closed(link: &Link, time_factor: Option<u32>) -> Self {
        let (kind, port) = match link {
            Link::Serial { path, .. } => (LinkKind::Serial, path.display().to_string()),
            Link::Tcp { address } => (LinkKind::Tcp, address.clone()),
            Link::Simulated { .. } => (LinkKind::Simulated, String::new()),
        };
        Self {
            kind,
            port,
            state: LinkState::Lost,
            reason: None,
            time_factor,
        }
    }
}

/// What a sink says of itself.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct DescriptionView {
    /// The line protocol's version.
    pub protocol: u16,
    /// The firmware's version.
    pub firmware: String,
    /// The serial number.
    pub serial_number: u32,
    /// Time between samples.
    pub tick_s: f64,
    /// Steps its queue holds.
    pub queue: u16,
    /// Shortest readback interval.
    pub fastest_readback_s: f64,
    /// Samples a burst can hold.
    pub burst_samples: u16,
    /// Sense resistor.
    pub sense_resistor_ohm: f64,
    /// Current at full scale of the converter that reads.
    pub full_scale_current_a: f64,
    /// Voltage at full scale of the converter that reads.
    pub full_scale_voltage_v: f64,
}

impl From<&Description> for DescriptionView {
    fn from(found: &Description) -> Self {
        let firmware = found.firmware;
        Self {
            protocol: found.protocol,
            firmware: format!(
                "{}.{}.{}",
                firmware / 10_000,
                firmware / 100 % 100,
                firmware % 100
            ),
            serial_number: found.serial,
            tick_s: found.tick.seconds(),
            queue: found.queue,
            fastest_readback_s: found.fastest_readback.seconds(),
            burst_samples: found.burst,
            sense_resistor_ohm: found.sense_resistor.ohms(),
            full_scale_current_a: found.sense_current.amperes(),
            full_scale_voltage_v: found.sense_voltage.volts(),
        }
    }
}

/// What a sink as built must never exceed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct LimitsView {
    /// Largest current.
    pub current_a: f64,
    /// Largest power.
    pub power_w: f64,
    /// Highest voltage at its terminals.
    pub voltage_v: f64,
    /// Hottest heat sink.
    pub temperature_degc: f64,
}

impl From<&SinkEntry> for LimitsView {
    fn from(entry: &SinkEntry) -> Self {
        let limits = &entry.limits;
        Self {
            current_a: limits.current.amperes(),
            power_w: limits.power.watts(),
            voltage_v: limits.voltage.volts(),
            temperature_degc: limits.temperature.degrees_celsius(),
        }
    }
}

/// A sink.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct SinkView {
    /// Its name on the bench.
    pub name: String,
    /// When this was so (RFC 3339, on the link's clock).
    pub at: String,
    /// Its link.
    pub link: LinkView,
    /// What it says of itself, while a session stands.
    pub description: Option<DescriptionView>,
    /// What it must never exceed.
    pub limits: LimitsView,
    /// Whether its values are corrected by a calibration certificate.
    pub calibrated: bool,
    /// The latest readback.
    pub reading: Option<ReadingView>,
    /// Why nothing is started on it until it is reset: the interlock that tripped its last run, or
    /// the cause for which the sink itself has latched.
    #[serde(default)]
    pub latched_by: Option<String>,
    /// The run in progress.
    pub run: Option<RunView>,
}

/// The sinks of the bench.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct SinkList {
    /// The bench's name.
    pub bench: String,
    /// Its sinks, in the order of the bench file.
    pub sinks: Vec<SinkView>,
}

/// What became of `off`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct OffView {
    /// The sink's name.
    pub sink: String,
    /// Whether the sink has said that it is off.
    pub acknowledged: bool,
    /// How long that took.
    pub took_s: f64,
    /// What is known, in a sentence, where the sink has not said so.
    pub detail: Option<String>,
}

/// What became of `off` for every sink.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct OffList {
    /// Whether all have said that they are off.
    pub acknowledged: bool,
    /// One for each sink.
    pub sinks: Vec<OffView>,
}

/// The answer to a reset.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct ResetView {
    /// The sink's name.
    pub sink: String,
    /// Always true: a reset that was refused is a problem.
    pub reset: bool,
}

/// Whether the process lives, and whether it can work.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct HealthView {
    /// Whether all is well.
    pub ok: bool,
    /// What is not, one sentence each.
    pub troubles: Vec<String>,
}
