//! A length of time and two clocks that must not be mixed up.
//!
//! [`SinkTime`] is read off the sink's own counter, [`HostTime`] off the host's
//! calendar clock; only `transport` knows how one maps to the other. This
//! module reads no clock.

use core::fmt;
use core::ops::{Add, AddAssign, Sub, SubAssign};

use serde::{Deserialize, Serialize};

use crate::scalar::Quantity;
use crate::unit::Dimension;

/// A length of time in whole microseconds; never negative.
#[derive(
    Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(transparent)]
pub struct Span(u64);

/// An instant on a sink's own free-running clock: microseconds since the sink
/// started.
#[derive(
    Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(transparent)]
pub struct SinkTime(u64);

/// An instant on the host's calendar clock: microseconds since
/// 1970-01-01T00:00:00Z, without leap seconds.
#[derive(
    Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
)]
#[serde(transparent)]
pub struct HostTime(i64);

impl Span {
    /// No time at all.
    pub const ZERO: Self = Self(0);
    /// The longest span of the type.
    pub const MAX: Self = Self(u64::MAX);
    /// The shortest span: zero.
    pub const MIN: Self = Self(0);

    /// From a whole number of microseconds.
    pub const fn from_micros(value: u64) -> Self {
        Self(value)
    }

    /// From a whole number of milliseconds. Panics beyond the type's range.
    pub const fn from_millis(value: u64) -> Self {
        Self::scaled(value, 1_000)
    }

    /// From a whole number of seconds. Panics beyond the type's range.
    pub const fn from_secs(value: u64) -> Self {
        Self::scaled(value, 1_000_000)
    }

    const fn scaled(value: u64, factor: u64) -> Self {
        match value.checked_mul(factor) {
            Some(micros) => Self(micros),
            None => panic!("Span out of range"),
        }
    }

    /// The length in microseconds, exact.
    pub const fn micros(self) -> u64 {
        self.0
    }

    /// The sum, or `None` beyond the type's range.
    pub const fn checked_add(self, other: Self) -> Option<Self> {
        match self.0.checked_add(other.0) {
            Some(sum) => Some(Self(sum)),
            None => None,
        }
    }

    /// The difference, or `None` if it would be negative.
    pub const fn checked_sub(self, other: Self) -> Option<Self> {
        match self.0.checked_sub(other.0) {
            Some(difference) => Some(Self(difference)),
            None => None,
        }
    }

    /// The sum, held at the longest span.
    #[must_use]
    pub const fn saturating_add(self, other: Self) -> Self {
        Self(self.0.saturating_add(other.0))
    }

    /// The difference, held at zero.
    #[must_use]
    pub const fn saturating_sub(self, other: Self) -> Self {
        Self(self.0.saturating_sub(other.0))
    }

    /// The span times a whole number; `None` for a negative factor or beyond
    /// the type's range.
    pub const fn checked_mul_int(self, factor: i64) -> Option<Self> {
        if factor < 0 {
            return None;
        }
        match self.0.checked_mul(factor.unsigned_abs()) {
            Some(product) => Some(Self(product)),
            None => None,
        }
    }

    /// Itself: a span has no sign. Here so that generic code can ask.
    #[must_use]
    pub const fn abs(self) -> Self {
        self
    }
}

impl Quantity for Span {
    const DIMENSION: Dimension = Dimension::Time;
    const SMALLEST: i128 = 0;
    const LARGEST: i128 = u64::MAX as i128;

    fn base_units(self) -> i128 {
        i128::from(self.0)
    }

    fn from_base_units(units: i128) -> Option<Self> {
        u64::try_from(units).ok().map(Self)
    }
}

impl Add for Span {
    type Output = Self;
    fn add(self, other: Self) -> Self {
        self.checked_add(other).expect("sum of Span out of range")
    }
}

impl Sub for Span {
    type Output = Self;
    fn sub(self, other: Self) -> Self {
        self.checked_sub(other)
            .expect("difference of Span below zero")
    }
}

impl AddAssign for Span {
    fn add_assign(&mut self, other: Self) {
        *self = *self + other;
    }
}

impl SubAssign for Span {
    fn sub_assign(&mut self, other: Self) {
        *self = *self - other;
    }
}

impl SinkTime {
    /// The sink's start.
    pub const ZERO: Self = Self(0);
    /// The end of the sink's clock, half a million years on.
    pub const MAX: Self = Self(u64::MAX);
    /// The sink's start.
    pub const MIN: Self = Self(0);

    /// From microseconds since the sink's start.
    pub const fn from_micros(value: u64) -> Self {
        Self(value)
    }

    /// Microseconds since the sink's start.
    pub const fn micros(self) -> u64 {
        self.0
    }

    /// The instant a span later, or `None` beyond the clock's end.
    pub const fn checked_add(self, span: Span) -> Option<Self> {
        match self.0.checked_add(span.0) {
            Some(micros) => Some(Self(micros)),
            None => None,
        }
    }

    /// The instant a span earlier, or `None` before the sink's start.
    pub const fn checked_sub(self, span: Span) -> Option<Self> {
        match self.0.checked_sub(span.0) {
            Some(micros) => Some(Self(micros)),
            None => None,
        }
    }

    /// The instant a span later, held at the clock's end.
    #[must_use]
    pub const fn saturating_add(self, span: Span) -> Self {
        Self(self.0.saturating_add(span.0))
    }

    /// The instant a span earlier, held at the sink's start.
    #[must_use]
    pub const fn saturating_sub(self, span: Span) -> Self {
        Self(self.0.saturating_sub(span.0))
    }

    /// The span since an earlier instant; `None` if that one is later.
    pub const fn checked_since(self, earlier: Self) -> Option<Span> {
        match self.0.checked_sub(earlier.0) {
            Some(micros) => Some(Span(micros)),
            None => None,
        }
    }

    /// The span since an earlier instant; zero if that one is later.
    pub const fn saturating_since(self, earlier: Self) -> Span {
        Span(self.0.saturating_sub(earlier.0))
    }
}

impl HostTime {
    /// 1970-01-01T00:00:00Z.
    pub const ZERO: Self = Self(0);
    /// The end of the host's clock.
    pub const MAX: Self = Self(i64::MAX);
    /// The beginning of the host's clock.
    pub const MIN: Self = Self(i64::MIN);

    /// From microseconds since 1970-01-01T00:00:00Z.
    pub const fn from_micros(value: i64) -> Self {
        Self(value)
    }

    /// Microseconds since 1970-01-01T00:00:00Z.
    pub const fn micros(self) -> i64 {
        self.0
    }

    /// The instant a span later, or `None` beyond the clock's end.
    pub const fn checked_add(self, span: Span) -> Option<Self> {
        match self.0.checked_add_unsigned(span.0) {
            Some(micros) => Some(Self(micros)),
            None => None,
        }
    }

    /// The instant a span earlier, or `None` before the clock's beginning.
    pub const fn checked_sub(self, span: Span) -> Option<Self> {
        match self.0.checked_sub_unsigned(span.0) {
            Some(micros) => Some(Self(micros)),
            None => None,
        }
    }

    /// The instant a span later, held at the clock's end.
    #[must_use]
    pub const fn saturating_add(self, span: Span) -> Self {
        Self(self.0.saturating_add_unsigned(span.0))
    }

    /// The instant a span earlier, held at the clock's beginning.
    #[must_use]
    pub const fn saturating_sub(self, span: Span) -> Self {
        Self(self.0.saturating_sub_unsigned(span.0))
    }

    /// The span since an earlier instant; `None` if that one is later.
    pub const fn checked_since(self, earlier: Self) -> Option<Span> {
        if self.0 < earlier.0 {
            None
        } else {
            Some(Span(self.0.abs_diff(earlier.0)))
        }
    }

    /// The span since an earlier instant; zero if that one is later.
    pub const fn saturating_since(self, earlier: Self) -> Span {
        match self.checked_since(earlier) {
            Some(span) => span,
            None => Span::ZERO,
        }
    }
}

impl Add<Span> for SinkTime {
    type Output = Self;
    fn add(self, span: Span) -> Self {
        self.checked_add(span).expect("SinkTime out of range")
    }
}

impl Sub<Span> for SinkTime {
    type Output = Self;
    fn sub(self, span: Span) -> Self {
        self.checked_sub(span).expect("SinkTime out of range")
    }
}

impl AddAssign<Span> for SinkTime {
    fn add_assign(&mut self, span: Span) {
        *self = *self + span;
    }
}

impl Add<Span> for HostTime {
    type Output = Self;
    fn add(self, span: Span) -> Self {
        self.checked_add(span).expect("HostTime out of range")
    }
}

impl Sub<Span> for HostTime {
    type Output = Self;
    fn sub(self, span: Span) -> Self {
        self.checked_sub(span).expect("HostTime out of range")
    }
}

impl AddAssign<Span> for HostTime {
    fn add_assign(&mut self, span: Span) {
        *self = *self + span;
    }
}

/// Seconds with six decimals: `12.500000 s on the sink's clock`.
impl fmt::Display for SinkTime {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (whole, micros) = (self.0 / 1_000_000, self.0 % 1_000_000);
        write!(f, "{whole}.{micros:06} s on the sink's clock")
    }
}

/// Seconds with six decimals since 1970; a calendar belongs to the edges.
impl fmt::Display for HostTime {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let sign = if self.0 < 0 { "-" } else { "" };
        let magnitude = self.0.unsigned_abs();
        let (whole, micros) = (magnitude / 1_000_000, magnitude % 1_000_000);
        write!(f, "{sign}{whole}.{micros:06} s since 1970-01-01T00:00:00Z")
    }
}
