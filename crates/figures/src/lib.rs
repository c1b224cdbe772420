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

mod against;
mod capture;
mod cell;
mod cell_file;
mod cell_fit;
mod cell_pulses;
mod cell_tables;
mod channel;
mod charge;
mod compare;
mod contribution;
mod cut_off;
mod delivery;
mod draw;
mod drawn;
mod droop;
mod efficiency;
mod figure;
mod heat;
mod knee;
mod least_squares;
mod load;
mod look;
mod noise;
mod number;
mod peukert;
mod predict;
mod pulse;
mod recovery;
mod resistance;
mod spread;
mod stage;
mod supply;
mod time_base;
mod track;
mod trust;
mod walk;
mod work;

pub use against::{Against, LabelDifference, against};
pub use cell::{CellModel, CellPoint, Known, OpenCircuit, PairPoint};
pub use cell_file::CellFileError;
pub use compare::{Compared, Comparison, Difference, Group, compare};
pub use efficiency::{InputError, InputMeter, InputReading};
pub use figure::{Figure, Figures, Method, Missing, Name, Rows, Standing, Unit};
pub use load::LoadError;
pub use number::with_uncertainty;
pub use peukert::{Peukert, PeukertError, peukert};
pub use predict::{CellSpread, Load, LoadStep, PredictError, RunTime, Terms, Warmth, predict};
pub use work::{FiguresError, work_out, work_out_with_input};

#[cfg(test)]
mod tests;
