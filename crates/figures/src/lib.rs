//! Figures from a record: each with unit, uncertainty, method, source, and the rows it came from.
//!
//! Everything here is worked out from the record alone, never from a daemon's memory, so that a
//! figure can be recomputed a year later and on another machine. Nothing here decides anything:
//! floats are welcome, but every one of them comes from the record's integers.
//!
//! Invariants:
//! - A figure that the data cannot support is not a number but a reason ([`Missing`]).
//! - Sums over a record are compensated, or exact in integers where the sink counted them.
//! - A record without a certificate gives figures that say "nominal, uncalibrated".
//!
//! What it deliberately does not do: print tables (the command line and the report do), judge
//! whether a cell is good.

mod charge;
mod contribution;
mod figure;
mod number;
mod resistance;
mod stage;
mod time_base;
mod walk;
mod work;

pub use figure::{Figure, Figures, Method, Missing, Name, Rows, Standing, Unit};
pub use number::with_uncertainty;
pub use work::{FiguresError, work_out};

#[cfg(test)]
mod tests;
