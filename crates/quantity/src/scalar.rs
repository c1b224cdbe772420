//! The seven signed quantities: newtypes over an `i64` count of micro-units.
//!
//! They know their own arithmetic only; products between them are in
//! `product`, times in `time`.

use core::ops::{Add, AddAssign, Neg, Sub, SubAssign};

use serde::{Deserialize, Serialize};

use crate::unit::Dimension;

/// What every quantity of this crate offers to generic code: its dimension and
/// its exact integer value in the base unit of its type.
pub trait Quantity: Copy + Sized {
    /// The dimension, which also lists the units it may be written in.
    const DIMENSION: Dimension;
    /// The smallest value of the type, in its base unit.
    const SMALLEST: i128;
    /// The largest value of the type, in its base unit.
    const LARGEST: i128;

    /// The value in the base unit of the type (µA, µV, m°C, µs...).
    fn base_units(self) -> i128;

    /// A quantity from a count of base units; `None` if it does not fit.
    fn from_base_units(units: i128) -> Option<Self>;
}

macro_rules! scalar {
    (
        $(#[$doc:meta])*
        $name:ident, $dimension:ident, $base:literal, $from_base:ident, $base_fn:ident
        , thousand: $thousand:literal $from_thousand:ident
    ) => {
        $(#[$doc])*
        #[derive(
            Copy, Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default, Serialize, Deserialize,
        )]
        #[serde(transparent)]
        pub struct $name(i64);

        impl $name {
            /// Zero.
            pub const ZERO: Self = Self(0);
            /// The largest value of the type; nothing on a bench comes near it.
            pub const MAX: Self = Self(i64::MAX);
            /// The smallest (most negative) value of the type.
            pub const MIN: Self = Self(i64::MIN);

            #[doc = concat!("From a whole number of ", $base, ".")]
            pub const fn $from_base(value: i64) -> Self {
                Self(value)
            }

            #[doc = concat!("The value in ", $base, ", exact.")]
            pub const fn $base_fn(self) -> i64 {
                self.0
            }

            #[doc = concat!("From a whole number of ", $thousand, ". Panics beyond the type's range.")]
            pub const fn $from_thousand(value: i64) -> Self {
                match value.checked_mul(1_000) {
                    Some(scaled) => Self(scaled),
                    None => panic!(concat!(stringify!($name), " out of range")),
                }
            }

            /// The sum, or `None` beyond the type's range.
            pub const fn checked_add(self, other: Self) -> Option<Self> {
                match self.0.checked_add(other.0) {
                    Some(sum) => Some(Self(sum)),
                    None => None,
                }
            }

            /// The difference, or `None` beyond the type's range.
            pub const fn checked_sub(self, other: Self) -> Option<Self> {
                match self.0.checked_sub(other.0) {
                    Some(difference) => Some(Self(difference)),
                    None => None,
                }
            }

            /// The sum, held at the end of the type's range.
            #[must_use]
            pub const fn saturating_add(self, other: Self) -> Self {
                Self(self.0.saturating_add(other.0))
            }

            /// The difference, held at the end of the type's range.
            #[must_use]
            pub const fn saturating_sub(self, other: Self) -> Self {
                Self(self.0.saturating_sub(other.0))
            }

            /// The magnitude; that of `MIN`, which does not fit, is `MAX`.
            #[must_use]
            pub const fn abs(self) -> Self {
                Self(self.0.saturating_abs())
            }

            /// The value times a whole number, or `None` beyond the type's range.
            pub const fn checked_mul_int(self, factor: i64) -> Option<Self> {
                match self.0.checked_mul(factor) {
                    Some(product) => Some(Self(product)),
                    None => None,
                }
            }

            /// Whether the value is below zero.
            pub const fn is_negative(self) -> bool {
                self.0 < 0
            }
        }

        impl Quantity for $name {
            const DIMENSION: Dimension = Dimension::$dimension;
            const SMALLEST: i128 = i64::MIN as i128;
            const LARGEST: i128 = i64::MAX as i128;

            fn base_units(self) -> i128 {
                i128::from(self.0)
            }

            fn from_base_units(units: i128) -> Option<Self> {
                i64::try_from(units).ok().map(Self)
            }
        }

        impl Add for $name {
            type Output = Self;
            fn add(self, other: Self) -> Self {
                self.checked_add(other)
                    .expect(concat!("sum of ", stringify!($name), " out of range"))
            }
        }

        impl Sub for $name {
            type Output = Self;
            fn sub(self, other: Self) -> Self {
                self.checked_sub(other)
                    .expect(concat!("difference of ", stringify!($name), " out of range"))
            }
        }

        impl Neg for $name {
            type Output = Self;
            fn neg(self) -> Self {
                Self(
                    self.0
                        .checked_neg()
                        .expect(concat!("negative of ", stringify!($name), " out of range")),
                )
            }
        }

        impl AddAssign for $name {
            fn add_assign(&mut self, other: Self) {
                *self = *self + other;
            }
        }

        impl SubAssign for $name {
            fn sub_assign(&mut self, other: Self) {
                *self = *self - other;
            }
        }
    };
}

scalar!(
    /// An electric current, in whole microamperes.
    ///
    /// Positive is out of the device under test, into the sink.
    Current, Current, "microamperes", from_microamperes, microamperes,
    thousand: "milliamperes" from_milliamperes
);
scalar!(
    /// A voltage, in whole microvolts.
    Voltage, Voltage, "microvolts", from_microvolts, microvolts,
    thousand: "millivolts" from_millivolts
);
scalar!(
    /// A power, in whole microwatts.
    Power, Power, "microwatts", from_microwatts, microwatts,
    thousand: "milliwatts" from_milliwatts
);
scalar!(
    /// A resistance, in whole micro-ohms.
    Resistance, Resistance, "micro-ohms", from_microohms, microohms,
    thousand: "milliohms" from_milliohms
);
scalar!(
    /// An electric charge, in whole microcoulombs (1 Ah is 3600 C).
    Charge, Charge, "microcoulombs", from_microcoulombs, microcoulombs,
    thousand: "millicoulombs" from_millicoulombs
);
scalar!(
    /// An energy, in whole microjoules (1 Wh is 3600 J).
    Energy, Energy, "microjoules", from_microjoules, microjoules,
    thousand: "millijoules" from_millijoules
);
scalar!(
    /// A temperature on the Celsius scale, in whole thousandths of a degree.
    ///
    /// Thousandths, not millionths: no sensor on a heat sink resolves better
    /// than a few millikelvin, the line protocol carries m°C, and a finer count
    /// would only print digits that nobody measured.
    Temperature, Temperature, "thousandths of a degree Celsius",
    from_millidegrees_celsius, millidegrees_celsius,
    thousand: "degrees Celsius" from_whole_degrees_celsius
);
scalar!(
    /// A thermal resistance, in millionths of a kelvin per watt.
    ThermalResistance, ThermalResistance, "microkelvins per watt",
    from_microkelvins_per_watt, microkelvins_per_watt,
    thousand: "millikelvins per watt" from_millikelvins_per_watt
);
scalar!(
    /// A ratio, such as a tolerance, in parts per million (1 % is 10 000 ppm).
    Ratio, Ratio, "parts per million", from_parts_per_million, parts_per_million,
    thousand: "thousandths" from_thousandths
);
scalar!(
    /// A relative change per kelvin, such as a resistor's temperature
    /// coefficient, in parts in 10^9 per kelvin.
    TemperatureCoefficient, TemperatureCoefficient, "parts in 10^9 per kelvin",
    from_parts_per_billion_per_kelvin, parts_per_billion_per_kelvin,
    thousand: "ppm per kelvin" from_ppm_per_kelvin
);
scalar!(
    /// The factor k of a MOSFET's square law I = k/2 (V_gs - V_th)^2, in
    /// microamperes per square volt.
    SquareLawFactor, SquareLawFactor, "microamperes per square volt",
    from_microamperes_per_square_volt, microamperes_per_square_volt,
    thousand: "milliamperes per square volt" from_milliamperes_per_square_volt
);
scalar!(
    /// A length, such as a lead's, in micrometres.
    Length, Length, "micrometres", from_micrometres, micrometres,
    thousand: "millimetres" from_millimetres
);
scalar!(
    /// An area, such as a lead's cross-section, in square micrometres.
    Area, Area, "square micrometres", from_square_micrometres, square_micrometres,
    thousand: "thousand square micrometres" from_thousand_square_micrometres
);
