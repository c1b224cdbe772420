//! The numeric fields of the protocol, each with its name in the text and its range.
//!
//! Invariants: one constant per range, used by encoding and decoding alike, so the two cannot
//! disagree. The ranges are chosen so that the longest line of each kind fits the limit, which
//! the tests prove. Every range lies within a signed 64-bit integer.

/// A numeric field: its name in the protocol's text and the values it may take, both included.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Field {
    /// Name as the text writes it.
    pub name: &'static str,
    /// Least value, in the field's unit on the wire.
    pub least: i64,
    /// Largest value, in the field's unit on the wire.
    pub most: i64,
}

/// Nine characters with the sign: the longest measured value a readback has room for.
const MEASURED_LEAST: i64 = -99_999_999;
const MEASURED_MOST: i64 = 999_999_999;
const U16_MOST: i64 = 65_535;
const U32_MOST: i64 = 4_294_967_295;
/// 31 days in microseconds: longer steps are split by whoever needs them.
const STEP_SPAN_MOST: i64 = 2_678_400_000_000;
/// An hour in microseconds: a readback rarer than that says nothing in time.
const INTERVAL_MOST: i64 = 3_600_000_000;

impl Field {
    const fn new(name: &'static str, least: i64, most: i64) -> Self {
        Self { name, least, most }
    }

    const fn measured(name: &'static str) -> Self {
        Self::new(name, MEASURED_LEAST, MEASURED_MOST)
    }

    /// Whether the field may take this value.
    pub const fn holds(&self, value: i64) -> bool {
        self.least <= value && value <= self.most
    }
}

pub(crate) const TOKEN: Field = Field::new("TOKEN", 0, U16_MOST);
pub(crate) const SESSION: Field = Field::new("SESSION", 1, U32_MOST);
pub(crate) const NUMBER: Field = Field::new("N", 1, U16_MOST);
pub(crate) const NUMBER_REFUSED: Field = Field::new("N", 0, U16_MOST);
pub(crate) const EXPECTED: Field = Field::new("EXPECTED", 1, U16_MOST);
pub(crate) const COUNT: Field = Field::new("K", 1, U16_MOST);
pub(crate) const TIME: Field = Field::new("TIME", 0, i64::MAX);
pub(crate) const TIME_LOW: Field = Field::new("TIME32", 0, U32_MOST);

pub(crate) const LIMIT_CURRENT: Field = Field::new("VALUE", 0, MEASURED_MOST);
pub(crate) const LIMIT_POWER: Field = Field::new("VALUE", 0, MEASURED_MOST);
pub(crate) const LIMIT_VOLTAGE: Field = Field::measured("VALUE");
pub(crate) const LIMIT_TEMPERATURE: Field = Field::new("VALUE", -99_999, 999_999);
pub(crate) const PERSIST: Field = Field::new("PERSIST", 0, 60_000_000);
pub(crate) const DEADMAN: Field = Field::new("INTERVAL", 100_000, 10_000_000);
pub(crate) const READBACK: Field = Field::new("INTERVAL", 0, INTERVAL_MOST);
pub(crate) const START: Field = Field::new("START", 0, i64::MAX);
pub(crate) const TARGET_CURRENT: Field = Field::new("TARGET", 0, MEASURED_MOST);
pub(crate) const TARGET_POWER: Field = Field::new("TARGET", 0, MEASURED_MOST);
pub(crate) const TARGET_RESISTANCE: Field = Field::new("TARGET", 1, 2_147_483_647);
pub(crate) const RAMP: Field = Field::new("RAMP", 0, STEP_SPAN_MOST);
pub(crate) const HOLD: Field = Field::new("HOLD", 1, STEP_SPAN_MOST);
pub(crate) const FROM: Field = Field::new("FROM", 0, i64::MAX);
pub(crate) const STATE_ISOLATOR: Field = Field::new("STATE", 0, 1);
pub(crate) const AT: Field = Field::new("AT", 0, i64::MAX);
pub(crate) const BEFORE: Field = Field::new("BEFORE", 0, U16_MOST);
pub(crate) const AFTER: Field = Field::new("AFTER", 0, U16_MOST);

pub(crate) const CHARGE: Field = Field::new("CHARGE", i64::MIN, i64::MAX);
pub(crate) const ENERGY: Field = Field::new("ENERGY", i64::MIN, i64::MAX);
pub(crate) const STEP_LAST: Field = Field::new("STEP", 0, U16_MOST);
pub(crate) const STEP_BEGUN: Field = Field::new("STEP", 1, U16_MOST);
pub(crate) const QUEUED: Field = Field::new("QUEUED", 0, U16_MOST);
pub(crate) const DAMAGED: Field = Field::new("DAMAGED", 0, U16_MOST);
pub(crate) const CURRENT: Field = Field::measured("I");
pub(crate) const CURRENT_MIN: Field = Field::measured("IMIN");
pub(crate) const CURRENT_MAX: Field = Field::measured("IMAX");
pub(crate) const VOLTAGE: Field = Field::measured("V");
pub(crate) const VOLTAGE_MIN: Field = Field::measured("VMIN");
pub(crate) const VOLTAGE_MAX: Field = Field::measured("VMAX");
pub(crate) const TEMPERATURE: Field = Field::new("TEMP", -99_999, 999_999);
pub(crate) const STATE: Field = Field::new("STATE", 0, 25);
pub(crate) const TRIP_VALUE: Field = Field::new("VALUE", i64::MIN, i64::MAX);
pub(crate) const INDEX: Field = Field::new("INDEX", 0, U16_MOST);

pub(crate) const PROTOCOL: Field = Field::new("PROTOCOL", 1, U16_MOST);
pub(crate) const FIRMWARE: Field = Field::new("FIRMWARE", 0, U32_MOST);
pub(crate) const SERIAL: Field = Field::new("SERIAL", 0, U32_MOST);
pub(crate) const TICK: Field = Field::new("TICK", 1, 1_000_000);
pub(crate) const QUEUE: Field = Field::new("QUEUE", 16, U16_MOST);
pub(crate) const FASTEST: Field = Field::new("FASTEST", 1, INTERVAL_MOST);
pub(crate) const BURST: Field = Field::new("BURST", 0, U16_MOST);
pub(crate) const ABILITIES: Field = Field::new("ABILITIES", 0, 15);
pub(crate) const BITS: Field = Field::new("BITS", 1, 32);
pub(crate) const FULL_SCALE: Field = Field::new("FULLSCALE", 1, MEASURED_MOST);
pub(crate) const SPAN: Field = Field::new("SPAN", 0, 1);
pub(crate) const SENSE: Field = Field::new("SENSE", 1, MEASURED_MOST);
pub(crate) const SENSE_CURRENT: Field = Field::new("CURRENT", 1, MEASURED_MOST);
pub(crate) const SENSE_VOLTAGE: Field = Field::new("VOLTAGE", 1, MEASURED_MOST);
