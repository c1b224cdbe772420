//! From nominal to true values of one quantity: a straight line, or one that is
//! bent between two nominal values.
//!
//! ```text
//! true = offset + nominal * (1 + gain) + curvature * nominal^2
//! ```
//!
//! A bent curve is bent between the least and the largest nominal value of its
//! points and carried on by its tangents beyond: a second-order term that is
//! right between the points is soon absurd outside them.
//!
//! Invariant: the slope is within 50 % of one everywhere, so every curve rises
//! and can be inverted. A sink that is further off than that is broken, not
//! uncalibrated.

use quantity::{Charge, Current, Quantity, Span};
use serde::{Deserialize, Serialize};

use super::{Round, UNITY, divide, held};

/// One in the unit that curves are computed in: a part in 10^9 of a gain per
/// unit, times a micro-unit, is a part in 10^15.
pub(super) const SCALE: i128 = 1_000_000_000_000_000;
/// From parts in 10^9 to that unit.
const SCALE_PER_PPB: i128 = SCALE / UNITY;
/// Largest gain error a curve may have anywhere: half.
const GAIN_LIMIT_PPB: i64 = 500_000_000;
/// No bench measures beyond this many micro-units; it keeps products in range.
const RANGE_LIMIT_MICRO: i64 = 1_000_000_000_000;

/// From nominal to true values of one quantity.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(try_from = "CurveFields", into = "CurveFields")]
pub struct Curve {
    offset: i64,
    gain_ppb: i64,
    bend: Option<Bend>,
}

/// A second-order term and where it holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Bend {
    /// By how much the gain at a nominal value changes with it, in parts in
    /// 10^9 per ampere or volt: the coefficient of the nominal value's square.
    pub curvature_ppb_per_unit: i64,
    /// Least nominal value it holds from, micro-units.
    pub from_micro: i64,
    /// Largest nominal value it holds to, micro-units.
    pub to_micro: i64,
}

/// The curve as it stands in files.
#[derive(Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct CurveFields {
    /// True value at nominal zero, in micro-units (µA, µV).
    offset_micro: i64,
    /// Relative deviation of the slope at nominal zero from one, in parts in
    /// 10^9.
    gain_ppb: i64,
    /// Absent for a straight line.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    bend: Option<Bend>,
}

/// A curve that no working sink has.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum CurveError {
    /// Too steep or too flat somewhere.
    #[error(
        "a gain error of {gain_ppb} ppb is beyond the {GAIN_LIMIT_PPB} ppb that a correction may be; \
         check the sense resistor and the calibration points"
    )]
    Gain {
        /// The refused gain error in parts in 10^9.
        gain_ppb: i64,
    },
    /// A bend over no range, or over one beyond any bench.
    #[error(
        "a curve bent from {from_micro} to {to_micro} micro-units is none; \
         check the calibration points"
    )]
    Range {
        /// Where it would begin.
        from_micro: i64,
        /// Where it would end.
        to_micro: i64,
    },
}

impl Curve {
    /// Nominal is true.
    pub const IDENTITY: Self = Self {
        offset: 0,
        gain_ppb: 0,
        bend: None,
    };

    /// A straight line with its offset in micro-units and its gain error in
    /// parts in 10^9.
    ///
    /// # Errors
    /// [`CurveError`] for a gain error beyond ±50 %.
    pub const fn line(offset: i64, gain_ppb: i64) -> Result<Self, CurveError> {
        if gain_ppb > GAIN_LIMIT_PPB || gain_ppb < -GAIN_LIMIT_PPB {
            return Err(CurveError::Gain { gain_ppb });
        }
        Ok(Self {
            offset,
            gain_ppb,
            bend: None,
        })
    }

    /// A curve with a second-order term.
    ///
    /// # Errors
    /// [`CurveError`] where its slope, at either end of its range, is further
    /// from one than a sink's can be, or where the range is none.
    pub fn bent(offset: i64, gain_ppb: i64, bend: Bend) -> Result<Self, CurveError> {
        let Bend {
            from_micro,
            to_micro,
            ..
        } = bend;
        let reach = -RANGE_LIMIT_MICRO..=RANGE_LIMIT_MICRO;
        if from_micro >= to_micro || !reach.contains(&from_micro) || !reach.contains(&to_micro) {
            return Err(CurveError::Range {
                from_micro,
                to_micro,
            });
        }
        let curve = Self {
            offset,
            gain_ppb,
            bend: Some(bend),
        };
        for end in [from_micro, to_micro] {
            let gain = divide(curve.slope_at(end) - SCALE, SCALE_PER_PPB, Round::Nearest);
            if gain.abs() > i128::from(GAIN_LIMIT_PPB) {
                return Err(CurveError::Gain {
                    gain_ppb: held(gain),
                });
            }
        }
        Ok(curve)
    }

    /// The true value at nominal zero, in micro-units (of a bent curve, that of
    /// its formula).
    pub const fn offset(self) -> i64 {
        self.offset
    }

    /// The relative deviation of the slope at nominal zero from one, in parts
    /// in 10^9.
    pub const fn gain_ppb(self) -> i64 {
        self.gain_ppb
    }

    /// The second-order term; `None` for a straight line.
    pub const fn bend(self) -> Option<Bend> {
        self.bend
    }

    /// How far the curve departs, at most, from its chord between two nominal
    /// values; micro-units, zero for a straight line.
    ///
    /// For a second-order term `c` that is `|c| (b - a)^2 / 4`, and as much is
    /// the most by which the mean of the curve differs from the curve at the
    /// mean (Popoviciu's inequality on variances).
    pub fn departure_micro(self, between: i64, and: i64) -> i64 {
        let Some(bend) = self.bend else { return 0 };
        let inside = |value: i64| i128::from(value.clamp(bend.from_micro, bend.to_micro));
        let width = inside(and) - inside(between);
        let curvature = i128::from(bend.curvature_ppb_per_unit).abs();
        held(divide(curvature * width * width, 4 * SCALE, Round::Up))
    }

    fn gain(self) -> i128 {
        UNITY + i128::from(self.gain_ppb)
    }

    pub(super) fn gain_in_ppb(self) -> i128 {
        self.gain()
    }

    /// The slope at a nominal value, in [`SCALE`].
    fn slope_at(self, nominal: i64) -> i128 {
        let straight = self.gain() * SCALE_PER_PPB;
        match self.bend {
            None => straight,
            Some(bend) => {
                let within = nominal.clamp(bend.from_micro, bend.to_micro);
                straight + 2 * i128::from(bend.curvature_ppb_per_unit) * i128::from(within)
            }
        }
    }

    /// The tangent at a nominal value.
    pub(super) fn tangent(self, nominal: i64) -> Straight {
        let bent = match self.bend {
            None => 0,
            Some(bend) => {
                let within = i128::from(nominal.clamp(bend.from_micro, bend.to_micro));
                -i128::from(bend.curvature_ppb_per_unit) * within * within
            }
        };
        Straight {
            offset: self.offset,
            bent,
            slope: self.slope_at(nominal),
        }
    }

    /// The true value of a nominal one, in [`SCALE`] of a micro-unit.
    fn scaled(self, nominal: i64) -> i128 {
        self.tangent(nominal).scaled(nominal)
    }

    /// The true value of a nominal one, to the nearest micro-unit, half away
    /// from zero.
    pub(super) fn to_true(self, nominal: i64) -> i64 {
        held(divide(self.scaled(nominal), SCALE, Round::Nearest))
    }

    /// The nominal value whose true value is nearest to the given one, or the
    /// limit on the safe side of it.
    pub(super) fn to_nominal(self, value: i64, round: Round) -> i64 {
        let wanted = i128::from(value) * SCALE;
        let Some(bend) = self.bend else {
            return self.tangent(0).to_nominal(wanted, round);
        };
        if wanted <= self.scaled(bend.from_micro) {
            return self.tangent(bend.from_micro).to_nominal(wanted, round);
        }
        if wanted >= self.scaled(bend.to_micro) {
            return self.tangent(bend.to_micro).to_nominal(wanted, round);
        }
        // The curve rises: below `low` (and at it) it is not above the value
        // wanted, at `high` and beyond it is not below it.
        let (mut low, mut high) = (bend.from_micro, bend.to_micro);
        while high - low > 1 {
            let middle = low + (high - low) / 2;
            if self.scaled(middle) <= wanted {
                low = middle;
            } else {
                high = middle;
            }
        }
        let (below, above) = (wanted - self.scaled(low), self.scaled(high) - wanted);
        match round {
            Round::Down => low,
            Round::Up if below == 0 => low,
            Round::Nearest if below < above => low,
            Round::Up | Round::Nearest => high,
        }
    }

    /// A straight line that is nowhere below the curve from nominal zero to a
    /// nominal value. Below zero, where no converter of a sink reads, it says
    /// nothing.
    ///
    /// A curve that bends upwards lies below its chord, one that bends
    /// downwards below its tangents.
    pub(super) fn line_above(self, largest: i64) -> Self {
        let Some(bend) = self.bend else { return self };
        let largest = largest.saturating_abs().clamp(1, RANGE_LIMIT_MICRO);
        let line = if bend.curvature_ppb_per_unit < 0 {
            self.tangent(largest)
        } else {
            let (zero, top) = (self.scaled(0), self.scaled(largest));
            Straight {
                offset: 0,
                bent: zero,
                slope: divide(top - zero, largest.into(), Round::Up),
            }
        };
        let whole = i128::from(line.offset) * SCALE + line.bent;
        Self {
            offset: held(divide(whole, SCALE, Round::Up)),
            gain_ppb: held(divide(line.slope - SCALE, SCALE_PER_PPB, Round::Up)),
            bend: None,
        }
    }
}

/// A straight line: of a curve without a bend the curve itself, else a tangent.
#[derive(Debug, Clone, Copy)]
pub(super) struct Straight {
    /// The curve's offset, micro-units.
    offset: i64,
    /// What a bend adds to it, in [`SCALE`] of a micro-unit.
    bent: i128,
    /// In [`SCALE`].
    pub(super) slope: i128,
}

impl Straight {
    fn scaled(self, nominal: i64) -> i128 {
        i128::from(self.offset) * SCALE + self.bent + i128::from(nominal) * self.slope
    }

    fn to_nominal(self, wanted: i128, round: Round) -> i64 {
        let left = wanted - i128::from(self.offset) * SCALE - self.bent;
        held(divide(left, self.slope, round))
    }

    /// The true value at nominal zero, to the nearest micro-unit.
    pub(super) fn intercept(self) -> i64 {
        let bent = divide(self.bent, SCALE, Round::Nearest);
        held(i128::from(self.offset) + bent)
    }

    /// The true value at nominal zero over a span, micro-units times seconds.
    pub(super) fn intercept_times(self, over: Span) -> i128 {
        let from_offset: Charge = Current::from_microamperes(self.offset).times(over);
        // Twice rounded, the first time to a part in 10^9 of a micro-unit: the
        // product of both would not fit for a span of many years.
        let nano = divide(self.bent, SCALE_PER_PPB, Round::Nearest);
        let from_bend = nano.saturating_mul(i128::from(over.micros()));
        from_offset.base_units() + divide(from_bend, UNITY * 1_000_000, Round::Nearest)
    }
}

impl TryFrom<CurveFields> for Curve {
    type Error = CurveError;

    fn try_from(fields: CurveFields) -> Result<Self, CurveError> {
        match fields.bend {
            None => Self::line(fields.offset_micro, fields.gain_ppb),
            Some(bend) => Self::bent(fields.offset_micro, fields.gain_ppb, bend),
        }
    }
}

impl From<Curve> for CurveFields {
    fn from(curve: Curve) -> Self {
        Self {
            offset_micro: curve.offset,
            gain_ppb: curve.gain_ppb,
            bend: curve.bend,
        }
    }
}
