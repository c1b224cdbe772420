//! The edge to floating point: fits, figures, simulated sources and JSON.
//!
//! In: rounded to the nearest base unit, half away from zero; what is NaN,
//! infinite or out of the type's range is refused. Out: the nearest `f64`, which
//! comes back in as the same value below 2^50 base units (a billion units).

use crate::{
    Area, Charge, Current, Energy, Length, Power, Quantity, Ratio, Resistance, Span,
    SquareLawFactor, Temperature, TemperatureCoefficient, ThermalResistance, Voltage,
};

/// A float that is no quantity: NaN, infinite, or beyond the type's range.
#[derive(Copy, Clone, Debug, PartialEq, thiserror::Error)]
#[error("{value} {unit} is no {name} that can be held; give a finite number within the range")]
pub struct NotFinite {
    /// The refused value, in `unit`.
    pub value: f64,
    /// The unit the value was given in.
    pub unit: &'static str,
    /// What was wanted: "current", "voltage"...
    pub name: &'static str,
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_precision_loss,
    reason = "the range is checked before the cast, and the remainder of a truncation is exact"
)]
fn to_base<Q: Quantity>(value: f64, scale: f64, unit: &'static str) -> Result<Q, NotFinite> {
    let refused = NotFinite {
        value,
        unit,
        name: Q::DIMENSION.name(),
    };
    let scaled = value * scale;
    // Far beyond every type, and still exact as an `i128`.
    if scaled.is_nan() || scaled.abs() > 1e30 {
        return Err(refused);
    }
    let truncated = scaled as i128;
    let remainder = scaled - truncated as f64;
    let rounded = if remainder >= 0.5 {
        truncated + 1
    } else if remainder <= -0.5 {
        truncated - 1
    } else {
        truncated
    };
    Q::from_base_units(rounded).ok_or(refused)
}

#[expect(
    clippy::cast_precision_loss,
    reason = "the nearest float is what the edge promises"
)]
fn from_base<Q: Quantity>(quantity: Q, scale: f64) -> f64 {
    quantity.base_units() as f64 / scale
}

macro_rules! edge {
    ($($name:ident: $from:ident, $to:ident, $unit:literal, $words:literal, $scale:literal;)*) => {
        $(
            impl $name {
                #[doc = concat!("From ", $words, ", rounded to the nearest base unit, half away from zero.")]
                ///
                /// # Errors
                /// [`NotFinite`] for NaN, an infinity or a value out of the type's range.
                pub fn $from(value: f64) -> Result<Self, NotFinite> {
                    to_base(value, $scale, $unit)
                }

                #[doc = concat!("The value in ", $words, ", as the nearest float.")]
                pub fn $to(self) -> f64 {
                    from_base(self, $scale)
                }
            }
        )*
    };
}

edge! {
    Current: from_amperes, amperes, "A", "amperes", 1e6;
    Voltage: from_volts, volts, "V", "volts", 1e6;
    Power: from_watts, watts, "W", "watts", 1e6;
    Resistance: from_ohms, ohms, "ohm", "ohms", 1e6;
    Charge: from_coulombs, coulombs, "C", "coulombs", 1e6;
    Charge: from_ampere_hours, ampere_hours, "Ah", "ampere-hours", 3.6e9;
    Energy: from_joules, joules, "J", "joules", 1e6;
    Energy: from_watt_hours, watt_hours, "Wh", "watt-hours", 3.6e9;
    Temperature: from_degrees_celsius, degrees_celsius, "degC", "degrees Celsius", 1e3;
    Span: from_seconds, seconds, "s", "seconds", 1e6;
    ThermalResistance: from_kelvins_per_watt, kelvins_per_watt, "K/W", "kelvins per watt", 1e6;
    Ratio: from_fraction, fraction, "(of one)", "a fraction of one", 1e6;
    TemperatureCoefficient: from_fraction_per_kelvin, fraction_per_kelvin, "1/K", "a fraction per kelvin", 1e9;
    SquareLawFactor: from_amperes_per_square_volt, amperes_per_square_volt, "A/V2", "amperes per square volt", 1e6;
    Length: from_metres, metres, "m", "metres", 1e6;
    Area: from_square_millimetres, square_millimetres, "mm2", "square millimetres", 1e6;
}
