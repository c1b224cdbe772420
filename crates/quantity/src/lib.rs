//! Quantities of the bench as types.
//!
//! Every number that decides something carries its unit in its type: an
//! integer count of micro-units (milli-degrees for temperature), in the manner
//! of `core::time::Duration`. Integers have no NaN, compare exactly and replay
//! bit for bit; a float that is not a number would pass `reading > limit`
//! unnoticed.
//!
//! Invariants:
//! - Operators panic on overflow: within the range of a bench (9 TA, 292 000
//!   years) an overflow is a broken invariant of ours. What comes from outside
//!   goes through `checked_*`, the products (which say what they do at the end
//!   of the range) or [`FromStr`](core::str::FromStr).
//! - What [`Display`](core::fmt::Display) prints, `FromStr` reads back to the
//!   same value, to the last micro-unit.
//! - Floats enter and leave through `from_*`/`*` pairs that refuse what is not
//!   finite or does not fit.
//!
//! What this crate deliberately does not do: no compile-time algebra of
//! dimensions (only the products that a sink needs exist), no calendar, no
//! clock, no locale.
#![no_std]

extern crate alloc;
#[cfg(test)]
extern crate std;

mod edge;
mod parse;
mod print;
mod product;
mod rated;
mod scalar;
pub mod text;
mod time;
mod unit;

pub use edge::NotFinite;
pub use parse::{ParseError, ParseErrorKind};
pub use rated::CurrentSpec;
pub use scalar::{
    Area, Charge, Current, Energy, Length, Power, Quantity, Ratio, Resistance, SquareLawFactor,
    Temperature, TemperatureCoefficient, ThermalResistance, Voltage,
};
pub use text::{Text, Textual};
pub use time::{HostTime, SinkTime, Span};
pub use unit::Dimension;

#[cfg(test)]
mod tests;
