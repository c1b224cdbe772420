//! Nominal to true values and back: the one place that converts.
//!
//! The sink and the wire speak nominal values (codes times the figures of the
//! sink's description); everything above speaks true ones. Between them stands
//! a straight line per channel, from the sink's certificate:
//!
//! `true = offset + nominal * (10^9 + gain_ppb) / 10^9`
//!
//! Invariants:
//! - Integer arithmetic in `i128` throughout, so a replay gives the same order
//!   to the last microampere. Values round to the nearest micro-unit, half away
//!   from zero; limits round to the safe side and never to the other.
//! - The gain lies within ±50 %, so every line rises and can be inverted. A
//!   sink that is further off than that is broken, not uncalibrated.
//! - Results are held at the end of a quantity's range; no input panics.
//!
//! What it deliberately does not do: it knows no uncertainty (that is the
//! certificate's), no temperature and no leads.

use quantity::{Charge, Current, Energy, Power, Quantity, Span, Voltage};
use serde::{Deserialize, Serialize};

/// One in the gain's unit.
const UNITY: i128 = 1_000_000_000;
/// Largest gain error a line may have: half.
const GAIN_LIMIT_PPB: i64 = 500_000_000;

/// A straight line from nominal to true values of one quantity.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(try_from = "LineFields", into = "LineFields")]
pub struct Line {
    offset: i64,
    gain_ppb: i64,
}

/// The line as it stands in files.
#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct LineFields {
    /// True value at nominal zero, in micro-units (µA, µV).
    offset_micro: i64,
    /// Relative deviation of the slope from one, in parts in 10^9.
    gain_ppb: i64,
}

/// A line that no working sink has.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
#[error(
    "a gain error of {gain_ppb} ppb is beyond the {GAIN_LIMIT_PPB} ppb that a correction may be; \
     check the sense resistor and the calibration points"
)]
pub struct LineError {
    /// The refused gain error in parts in 10^9.
    pub gain_ppb: i64,
}

/// Which side of a limit is forbidden; it decides how the limit rounds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Bound {
    /// Values above are forbidden: the nominal limit rounds down.
    Upper,
    /// Values below are forbidden: the nominal limit rounds up.
    Lower,
}

impl Line {
    /// Nominal is true.
    pub const IDENTITY: Self = Self {
        offset: 0,
        gain_ppb: 0,
    };

    /// A line with its offset in micro-units and its gain error in parts in
    /// 10^9.
    ///
    /// # Errors
    /// [`LineError`] for a gain error beyond ±50 %.
    pub const fn new(offset: i64, gain_ppb: i64) -> Result<Self, LineError> {
        if gain_ppb > GAIN_LIMIT_PPB || gain_ppb < -GAIN_LIMIT_PPB {
            return Err(LineError { gain_ppb });
        }
        Ok(Self { offset, gain_ppb })
    }

    /// The true value at nominal zero, in micro-units.
    pub const fn offset(self) -> i64 {
        self.offset
    }

    /// The relative deviation of the slope from one, in parts in 10^9.
    pub const fn gain_ppb(self) -> i64 {
        self.gain_ppb
    }

    fn gain(self) -> i128 {
        UNITY + i128::from(self.gain_ppb)
    }

    /// The true value of a nominal one, to the nearest micro-unit, half away
    /// from zero.
    fn to_true(self, nominal: i64) -> i64 {
        let scaled = i128::from(self.offset) * UNITY + i128::from(nominal) * self.gain();
        held(divide(scaled, UNITY, Round::Nearest))
    }

    /// The nominal value whose true value is nearest to the given one, or the
    /// limit on the safe side of it.
    fn to_nominal(self, value: i64, round: Round) -> i64 {
        let scaled = (i128::from(value) - i128::from(self.offset)) * UNITY;
        held(divide(scaled, self.gain(), round))
    }
}

impl TryFrom<LineFields> for Line {
    type Error = LineError;

    fn try_from(fields: LineFields) -> Result<Self, LineError> {
        Self::new(fields.offset_micro, fields.gain_ppb)
    }
}

impl From<Line> for LineFields {
    fn from(line: Line) -> Self {
        Self {
            offset_micro: line.offset,
            gain_ppb: line.gain_ppb,
        }
    }
}

/// How a quotient becomes a whole number.
#[derive(Clone, Copy)]
enum Round {
    Nearest,
    Down,
    Up,
}

impl From<Bound> for Round {
    fn from(bound: Bound) -> Self {
        match bound {
            Bound::Upper => Self::Down,
            Bound::Lower => Self::Up,
        }
    }
}

/// The quotient for a positive divisor.
fn divide(numerator: i128, divisor: i128, round: Round) -> i128 {
    match round {
        Round::Down => numerator.div_euclid(divisor),
        Round::Up => -(-numerator).div_euclid(divisor),
        Round::Nearest => {
            let magnitude = (numerator.abs() + divisor / 2) / divisor;
            if numerator < 0 { -magnitude } else { magnitude }
        }
    }
}

/// The value as far as the type holds it.
fn held(value: i128) -> i64 {
    i64::try_from(value).unwrap_or(if value < 0 { i64::MIN } else { i64::MAX })
}

/// Everything that turns nominal values of one sink into true ones and back.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(deny_unknown_fields)]
pub struct Correction {
    /// The current that really flows for a nominal setpoint.
    pub current_set: Line,
    /// The current that really flows for a nominal current readback.
    pub current_read: Line,
    /// The voltage that is really there for a nominal voltage readback.
    pub voltage_read: Line,
}

impl Correction {
    /// The correction of an uncalibrated sink: nominal is taken for true.
    pub const IDENTITY: Self = Self {
        current_set: Line::IDENTITY,
        current_read: Line::IDENTITY,
        voltage_read: Line::IDENTITY,
    };

    /// The nominal setpoint for a wanted current, to the nearest microampere.
    ///
    /// Never below zero: a sink whose offset alone exceeds the wanted current
    /// gets its lowest setpoint, and the check tells about its floor.
    pub fn to_nominal_setpoint(&self, wanted: Current) -> Current {
        let nominal = self
            .current_set
            .to_nominal(wanted.microamperes(), Round::Nearest);
        Current::from_microamperes(nominal.max(0))
    }

    /// The current that really flows for a nominal setpoint.
    pub fn current_from_setpoint(&self, nominal: Current) -> Current {
        Current::from_microamperes(self.current_set.to_true(nominal.microamperes()))
    }

    /// The current that really flows for a nominal readback.
    pub fn current_from_readback(&self, nominal: Current) -> Current {
        Current::from_microamperes(self.current_read.to_true(nominal.microamperes()))
    }

    /// The voltage at the sink's sense terminals for a nominal readback.
    pub fn voltage_from_readback(&self, nominal: Voltage) -> Voltage {
        Voltage::from_microvolts(self.voltage_read.to_true(nominal.microvolts()))
    }

    /// The true power of a nominal current and voltage readback.
    pub fn power_from_readback(&self, voltage: Voltage, current: Current) -> Power {
        self.voltage_from_readback(voltage)
            .times(self.current_from_readback(current))
    }

    /// The nominal limit for current readbacks that stands for a true one.
    ///
    /// Every readback whose true current lies beyond the limit lies beyond the
    /// nominal limit, too; so the sink's own copy never trips later than the
    /// true limit demands.
    pub fn current_limit_to_nominal(&self, limit: Current, bound: Bound) -> Current {
        let nominal = self
            .current_read
            .to_nominal(limit.microamperes(), bound.into());
        Current::from_microamperes(nominal)
    }

    /// The nominal limit for voltage readbacks that stands for a true one, on
    /// the safe side as for [`Self::current_limit_to_nominal`].
    pub fn voltage_limit_to_nominal(&self, limit: Voltage, bound: Bound) -> Voltage {
        let nominal = self
            .voltage_read
            .to_nominal(limit.microvolts(), bound.into());
        Voltage::from_microvolts(nominal)
    }

    /// The largest nominal setpoint whose true current is not above a limit;
    /// never below zero.
    pub fn setpoint_limit_to_nominal(&self, limit: Current) -> Current {
        let nominal = self
            .current_set
            .to_nominal(limit.microamperes(), Round::Down);
        Current::from_microamperes(nominal.max(0))
    }

    /// The nominal power limit that stands for a true upper one.
    ///
    /// The true power of a nominal pair is a sum of four terms, of which only
    /// one is the nominal power; the other three are bounded by the largest
    /// nominal voltage and current (the sink's own limits for them, magnitudes)
    /// and taken off. So every pair within these whose true power lies above
    /// the limit lies above the nominal limit. Never below zero.
    pub fn power_limit_to_nominal(
        &self,
        limit: Power,
        voltage_max: Voltage,
        current_max: Current,
    ) -> Power {
        let (volts, amperes) = (self.voltage_read, self.current_read);
        let voltage_offset = i128::from(volts.offset);
        let current_offset = i128::from(amperes.offset);
        // In picowatts: µV times µA. A term is scaled by a gain in parts in
        // 10^9 first and rounded up, away from the unsafe side.
        let with_gain =
            |term: i128, gain: i128| divide(clamp_term(term) * gain, UNITY, Round::Up).max(0);
        let voltage_term = with_gain(
            voltage_max.abs().base_units() * current_offset,
            volts.gain(),
        );
        let current_term = with_gain(
            current_max.abs().base_units() * voltage_offset,
            amperes.gain(),
        );
        let constant = (voltage_offset * current_offset).max(0);
        let left = limit.base_units() * 1_000_000 - voltage_term - current_term - constant;
        if left <= 0 {
            return Power::ZERO;
        }
        // Both gains in turn, each time down; 1e6 from pW to µW.
        let by_one = divide(clamp_term(left) * UNITY, volts.gain(), Round::Down);
        let by_both = divide(clamp_term(by_one) * UNITY, amperes.gain(), Round::Down);
        Power::from_microwatts(held(by_both / 1_000_000))
    }

    /// The true charge for a nominal charge counted over a span.
    ///
    /// `Q = offset * T + gain * Q_nominal`: an offset error grows with time, a
    /// gain error with charge. To the nearest microcoulomb of each term.
    pub fn charge_from_counter(&self, nominal: Charge, over: Span) -> Charge {
        let line = self.current_read;
        let from_gain = divide(nominal.base_units() * line.gain(), UNITY, Round::Nearest);
        let from_offset = Current::from_microamperes(line.offset).times(over);
        Charge::from_microcoulombs(held(from_gain + from_offset.base_units()))
    }

    /// The true energy for a nominal energy and charge counted over a span at a
    /// (time-weighted) mean nominal voltage.
    ///
    /// `E = g_v g_i E_n + g_v o_i U_n T + o_v Q`, with the true charge `Q`: the
    /// integral of the product of two lines. To the nearest microjoule of each
    /// term.
    pub fn energy_from_counter(
        &self,
        nominal: Energy,
        charge: Charge,
        mean_voltage: Voltage,
        over: Span,
    ) -> Energy {
        let (volts, amperes) = (self.voltage_read, self.current_read);
        let by_current = divide(nominal.base_units() * amperes.gain(), UNITY, Round::Nearest);
        let offset_charge = Current::from_microamperes(amperes.offset).times(over);
        let offset_energy = offset_charge.times(mean_voltage);
        let by_voltage = divide(
            (by_current + offset_energy.base_units()) * volts.gain(),
            UNITY,
            Round::Nearest,
        );
        let true_charge = self.charge_from_counter(charge, over);
        let from_offset = true_charge.times(Voltage::from_microvolts(volts.offset));
        Energy::from_microjoules(held(by_voltage + from_offset.base_units()))
    }
}

/// Keeps a term (in picowatts) where its product with a gain still fits: 10^28
/// pW is 10 PW, beyond any bench.
fn clamp_term(term: i128) -> i128 {
    const LARGEST: i128 = 10_i128.pow(28);
    term.clamp(-LARGEST, LARGEST)
}

#[cfg(test)]
mod tests;
