//! Nominal to true values and back: the one place that converts.
//!
//! The sink and the wire speak nominal values (codes times the figures of the
//! sink's description); everything above speaks true ones. Between them stands
//! a [`Curve`] per channel, from the sink's certificate: a straight line, or one
//! that is bent between two nominal values.
//!
//! Invariants:
//! - Integer arithmetic in `i128` throughout, so a replay gives the same order
//!   to the last microampere. Values round to the nearest micro-unit, half away
//!   from zero; limits round to the safe side and never to the other.
//! - Every curve rises and can be inverted.
//! - Results are held at the end of a quantity's range; no input panics.
//!
//! What it deliberately does not do: it knows no uncertainty (that is the
//! certificate's and the leads') and no temperature.

mod curve;

use quantity::{Charge, Current, Energy, Power, Quantity, Resistance, Span, Voltage};
use serde::{Deserialize, Serialize};

pub use curve::{Bend, Curve, CurveError};
use curve::{SCALE, Straight};

/// One in a gain's unit, parts in 10^9.
const UNITY: i128 = 1_000_000_000;

/// Which side of a limit is forbidden; it decides how the limit rounds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Bound {
    /// Values above are forbidden: the nominal limit rounds down.
    Upper,
    /// Values below are forbidden: the nominal limit rounds up.
    Lower,
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
    pub current_set: Curve,
    /// The current that really flows for a nominal current readback.
    pub current_read: Curve,
    /// The voltage at the sense terminals for a nominal voltage readback.
    pub voltage_read: Curve,
    /// The resistance of both leads where the voltage is read over them (two
    /// wires); zero for four wires.
    #[serde(
        default = "no_leads",
        skip_serializing_if = "is_no_leads",
        with = "quantity::text"
    )]
    pub leads: Resistance,
}

const fn no_leads() -> Resistance {
    Resistance::ZERO
}

#[expect(clippy::trivially_copy_pass_by_ref, reason = "serde asks for it")]
fn is_no_leads(leads: &Resistance) -> bool {
    *leads == Resistance::ZERO
}

impl Correction {
    /// The correction of an uncalibrated sink: nominal is taken for true.
    pub const IDENTITY: Self = Self {
        current_set: Curve::IDENTITY,
        current_read: Curve::IDENTITY,
        voltage_read: Curve::IDENTITY,
        leads: Resistance::ZERO,
    };

    /// The same over leads of a resistance (see
    /// [`two_wire_resistance`](crate::leads::two_wire_resistance)).
    #[must_use]
    pub const fn with_leads(self, leads: Resistance) -> Self {
        Self { leads, ..self }
    }

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
    pub fn terminal_voltage(&self, nominal: Voltage) -> Voltage {
        Voltage::from_microvolts(self.voltage_read.to_true(nominal.microvolts()))
    }

    /// The voltage at the device under test for a nominal readback of voltage
    /// and current: over two wires the drop of the leads is added.
    ///
    /// Of a least (or largest) voltage with the least (or largest) current it
    /// is a bound: which of both came together, a readback does not tell.
    pub fn voltage_from_readback(&self, voltage: Voltage, current: Current) -> Voltage {
        let terminals = self.terminal_voltage(voltage);
        if self.leads == Resistance::ZERO {
            return terminals;
        }
        terminals.saturating_add(
            self.current_from_readback(current)
                .times_resistance(self.leads),
        )
    }

    /// The true power in the sink of a nominal current and voltage readback.
    pub fn power_from_readback(&self, voltage: Voltage, current: Current) -> Power {
        self.terminal_voltage(voltage)
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

    /// The nominal limit for voltage readbacks that stands for a true one at the
    /// sense terminals, on the safe side as for
    /// [`Self::current_limit_to_nominal`]. Over two wires the terminals of a
    /// sink that draws lie below the device under test: its own limits judge
    /// the terminals, and the drop is not taken off: at a smaller current than
    /// it was taken for the device under test would go too low.
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
    /// the limit lies above the nominal limit. Never below zero. A bent curve
    /// is replaced by a straight line that is nowhere below it.
    pub fn power_limit_to_nominal(
        &self,
        limit: Power,
        voltage_max: Voltage,
        current_max: Current,
    ) -> Power {
        let volts = self.voltage_read.line_above(voltage_max.microvolts());
        let amperes = self.current_read.line_above(current_max.microamperes());
        let voltage_offset = i128::from(volts.offset());
        let current_offset = i128::from(amperes.offset());
        // In picowatts: µV times µA. A term is scaled by a gain in parts in
        // 10^9 first and rounded up, away from the unsafe side.
        let with_gain =
            |term: i128, gain: i128| divide(clamp_term(term) * gain, UNITY, Round::Up).max(0);
        let voltage_term = with_gain(
            voltage_max.abs().base_units() * current_offset,
            volts.gain_in_ppb(),
        );
        let current_term = with_gain(
            current_max.abs().base_units() * voltage_offset,
            amperes.gain_in_ppb(),
        );
        let constant = (voltage_offset * current_offset).max(0);
        let left = limit.base_units() * 1_000_000 - voltage_term - current_term - constant;
        if left <= 0 {
            return Power::ZERO;
        }
        // Both gains in turn, each time down; 1e6 from pW to µW.
        let by_one = divide(clamp_term(left) * UNITY, volts.gain_in_ppb(), Round::Down);
        let by_both = divide(
            clamp_term(by_one) * UNITY,
            amperes.gain_in_ppb(),
            Round::Down,
        );
        Power::from_microwatts(held(by_both / 1_000_000))
    }

    /// The true charge for a nominal charge counted over a span.
    ///
    /// `Q = offset * T + gain * Q_nominal`: an offset error grows with time, a
    /// gain error with charge. To the nearest microcoulomb of each term. Of a
    /// bent curve the tangent at the mean current is taken: exact while the
    /// current is steady over the span; else what the counter cannot tell is at
    /// most the [departure](Curve::departure_micro) between the least and the
    /// largest current, times the span.
    pub fn charge_from_counter(&self, nominal: Charge, over: Span) -> Charge {
        let line = self.current_read.tangent(mean(nominal.base_units(), over));
        Charge::from_microcoulombs(held(of_charge(line, nominal, over)))
    }

    /// The true energy for a nominal energy and charge counted over a span at a
    /// (time-weighted) mean nominal voltage.
    ///
    /// `E = g_v g_i E_n + g_v o_i U_n T + o_v Q`, with the true charge `Q`: the
    /// integral of the product of two lines, tangents at the means where the
    /// curves are bent. Over two wires `R Q^2 / T` is added, the leads' loss of
    /// a steady current; one that goes to and fro loses more. To the nearest
    /// microjoule of each term.
    pub fn energy_from_counter(
        &self,
        nominal: Energy,
        charge: Charge,
        mean_voltage: Voltage,
        over: Span,
    ) -> Energy {
        let volts = self.voltage_read.tangent(mean_voltage.microvolts());
        let amperes = self.current_read.tangent(mean(charge.base_units(), over));
        let by_current = divide(nominal.base_units() * amperes.slope, SCALE, Round::Nearest);
        let offset_charge = Charge::from_microcoulombs(held(amperes.intercept_times(over)));
        let offset_energy = offset_charge.times(mean_voltage);
        let by_voltage = divide(
            (by_current + offset_energy.base_units()).saturating_mul(volts.slope),
            SCALE,
            Round::Nearest,
        );
        let true_charge = Charge::from_microcoulombs(held(of_charge(amperes, charge, over)));
        let from_offset = true_charge.times(Voltage::from_microvolts(volts.intercept()));
        let in_leads = loss(self.leads, true_charge, over);
        Energy::from_microjoules(held(
            (by_voltage + from_offset.base_units()).saturating_add(in_leads),
        ))
    }
}

/// What a steady current loses in a resistance, in microjoules: R Q^2 / T.
fn loss(resistance: Resistance, charge: Charge, over: Span) -> i128 {
    if resistance == Resistance::ZERO || over == Span::ZERO {
        return 0;
    }
    let square = charge.base_units().saturating_mul(charge.base_units());
    let numerator = square.saturating_mul(resistance.base_units());
    let divisor = i128::from(over.micros()) * 1_000_000;
    // Not to the nearest: a product held at the end of its type has no half.
    numerator / divisor
}

/// What a line makes of a counted charge, in microcoulombs.
fn of_charge(line: Straight, nominal: Charge, over: Span) -> i128 {
    divide(nominal.base_units() * line.slope, SCALE, Round::Nearest) + line.intercept_times(over)
}

/// The mean over a span of what was counted in micro-units times seconds.
fn mean(counted: i128, over: Span) -> i64 {
    match i128::from(over.micros()) {
        0 => 0,
        micros => held(divide(counted * 1_000_000, micros, Round::Nearest)),
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
