//! What a session is told before it begins: the sink that is expected, and its timing.

use quantity::{Current, Resistance, Span, Voltage};
use serde::{Deserialize, Serialize};
use wire::{Abilities, Description, LINE_BYTES_MAX, PROTOCOL_VERSION};

use crate::clock::ClockBounds;

/// The longest silence a sink bears when it has been told nothing (chapter 3 of the protocol).
pub(super) const DEADMAN_UNTOLD: Span = Span::from_secs(2);

/// The largest window: a sink keeps the answers of its last 16 orders.
const WINDOW_MAX: u8 = 15;

/// What of a sink's description must match; `None` matches anything.
///
/// Filled from the bench file. The protocol's version always must match.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct Expected {
    /// Serial number.
    pub serial: Option<u32>,
    /// Time between samples.
    pub tick: Option<Span>,
    /// At least this many steps in the queue.
    pub queue_at_least: Option<u16>,
    /// A readback interval that the sink must offer.
    pub readback: Option<Span>,
    /// At least this many burst samples.
    pub burst_at_least: Option<u16>,
    /// Abilities that it must have; others do not matter.
    pub abilities: Abilities,
    /// Bits of the converter that sets.
    pub drive_bits: Option<u8>,
    /// Full scale of the converter that sets.
    pub drive_full_scale: Option<Voltage>,
    /// Whether a code of that converter is full scale over 2^N - 1 instead of 2^N.
    pub drive_spans_full_scale: Option<bool>,
    /// Sense resistor.
    pub sense_resistor: Option<Resistance>,
    /// Bits of the converter that reads.
    pub sense_bits: Option<u8>,
    /// Current at full scale of the converter that reads.
    pub sense_current: Option<Current>,
    /// Voltage at full scale of the converter that reads.
    pub sense_voltage: Option<Voltage>,
}

/// A field of the description that is not as expected.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Mismatch {
    /// The field of [`Expected`].
    pub field: String,
    /// What the bench file says, with its unit.
    pub expected: String,
    /// What the sink says, with its unit.
    pub found: String,
}

/// `sense_resistor is 100 mohm, the bench file says 1 ohm`
impl std::fmt::Display for Mismatch {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let Self {
            field,
            expected,
            found,
        } = self;
        write!(f, "{field} is {found}, the bench file says {expected}")
    }
}

impl Mismatch {
    /// Another version of the protocol than this host's.
    pub(super) fn protocol(found: u16) -> Self {
        Self {
            field: "protocol".to_owned(),
            expected: plain(PROTOCOL_VERSION),
            found: plain(found),
        }
    }
}

impl Expected {
    /// Every field that is not as expected; empty if this is the sink. The protocol's version
    /// is judged while the description comes in.
    pub fn mismatches(&self, found: &Description) -> Vec<Mismatch> {
        let mut list = Mismatches(Vec::new());
        list.equal("serial", self.serial, found.serial, plain);
        list.equal("tick", self.tick, found.tick, plain);
        list.at_least("queue_at_least", self.queue_at_least, found.queue);
        if let Some(readback) = self.readback
            && readback < found.fastest_readback
        {
            list.push("readback", plain(readback), plain(found.fastest_readback));
        }
        list.at_least("burst_at_least", self.burst_at_least, found.burst);
        self.missing_abilities(found.abilities, &mut list);
        list.equal("drive_bits", self.drive_bits, found.drive_bits, plain);
        list.equal(
            "drive_full_scale",
            self.drive_full_scale,
            found.drive_full_scale,
            plain,
        );
        list.equal(
            "drive_spans_full_scale",
            self.drive_spans_full_scale,
            found.drive_spans_full_scale,
            plain,
        );
        list.equal(
            "sense_resistor",
            self.sense_resistor,
            found.sense_resistor,
            plain,
        );
        list.equal("sense_bits", self.sense_bits, found.sense_bits, plain);
        list.equal(
            "sense_current",
            self.sense_current,
            found.sense_current,
            plain,
        );
        list.equal(
            "sense_voltage",
            self.sense_voltage,
            found.sense_voltage,
            plain,
        );
        list.0
    }

    fn missing_abilities(&self, found: Abilities, list: &mut Mismatches) {
        for (field, wanted, has) in [
            ("abilities.power", self.abilities.power, found.power),
            (
                "abilities.resistance",
                self.abilities.resistance,
                found.resistance,
            ),
            ("abilities.burst", self.abilities.burst, found.burst),
            (
                "abilities.isolator",
                self.abilities.isolator,
                found.isolator,
            ),
        ] {
            if wanted && !has {
                list.push(field, plain(true), plain(false));
            }
        }
    }
}

fn plain(value: impl std::fmt::Display) -> String {
    value.to_string()
}

struct Mismatches(Vec<Mismatch>);

impl Mismatches {
    fn push(&mut self, field: &str, expected: String, found: String) {
        self.0.push(Mismatch {
            field: field.to_owned(),
            expected,
            found,
        });
    }

    fn equal<T: Copy + PartialEq>(
        &mut self,
        field: &str,
        expected: Option<T>,
        found: T,
        print: impl Fn(T) -> String,
    ) {
        if let Some(expected) = expected
            && expected != found
        {
            self.push(field, print(expected), print(found));
        }
    }

    fn at_least(&mut self, field: &str, expected: Option<u16>, found: u16) {
        if let Some(least) = expected
            && found < least
        {
            self.push(field, format!("at least {least}"), plain(found));
        }
    }
}

/// How a session behaves.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SessionConfig {
    /// The sink that must be on the port.
    pub expected: Expected,
    /// How long an order or `off` may go unanswered before it is sent again; doubles with each
    /// further attempt for orders, up to eight times.
    pub retransmit: Span,
    /// Orders under way at once, 1 to 15.
    pub window: u8,
    /// What the link carries in one direction; bounds what is listened to.
    pub bytes_per_second: u32,
    /// How far the sink's clock may be out.
    pub clock: ClockBounds,
}

impl SessionConfig {
    /// A sound configuration for a link that carries so many bytes a second in one direction:
    /// eight orders under way, and patience for all of them, and for a readback in between.
    pub fn for_link(bytes_per_second: u32, expected: Expected) -> Self {
        let window = 8;
        let lines = u64::from(window) + 4;
        let micros = lines * LINE_BYTES_MAX as u64 * 1_000_000 / u64::from(bytes_per_second.max(1));
        Self {
            expected,
            retransmit: Span::from_millis(100).saturating_add(Span::from_micros(micros)),
            window,
            bytes_per_second,
            clock: ClockBounds::default(),
        }
    }

    pub(super) fn window_len(&self) -> usize {
        usize::from(self.window.clamp(1, WINDOW_MAX))
    }
}
