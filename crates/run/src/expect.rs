//! What the bench file says of a sink, as what its keeper expects to find on the link.

use simulator::bench_source::{BenchSourceError, figures};
use sink::bench::{Link, SinkEntry};
use transport::session::{Expected, SessionConfig};
use wire::Abilities;

use crate::keeper::KeeperConfig;

/// Bits on a serial line for a byte: start, eight, stop.
const BITS_PER_BYTE: u32 = 10;

/// What a link without a bit rate is taken to carry, bytes per second; bounds what is listened
/// to, so that a flood cannot keep a keeper busy.
const UNPACED_BYTES_PER_SECOND: u32 = 2_000_000;

impl KeeperConfig {
    /// The keeper's configuration for a sink of the bench file: whatever the entry states of
    /// its front end, the sink on the link must state too.
    ///
    /// # Errors
    /// [`BenchSourceError`] for a full scale beyond the range of its type.
    pub fn for_sink(entry: &SinkEntry) -> Result<Self, BenchSourceError> {
        let stated = figures(entry)?;
        let expected = Expected {
            serial: entry.serial_number,
            tick: Some(stated.tick),
            queue_at_least: None,
            readback: Some(entry.readback.fastest),
            burst_at_least: None,
            abilities: Abilities {
                isolator: entry.isolator,
                ..Abilities::default()
            },
            drive_bits: Some(stated.drive_bits),
            drive_full_scale: Some(stated.drive_full_scale),
            drive_spans_full_scale: Some(stated.drive_spans_full_scale),
            sense_resistor: Some(stated.sense_resistor),
            sense_bits: Some(stated.sense_bits),
            sense_current: Some(stated.sense_current),
            sense_voltage: Some(stated.sense_voltage),
        };
        let bytes_per_second = match &entry.link {
            Link::Serial { baud, .. } => baud / BITS_PER_BYTE,
            Link::Tcp { .. } | Link::Simulated { .. } => UNPACED_BYTES_PER_SECOND,
        };
        Ok(Self {
            session: SessionConfig::for_link(bytes_per_second, expected),
        })
    }
}
