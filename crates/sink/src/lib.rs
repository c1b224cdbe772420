//! The physics of one sink: front end, envelope, calibration with uncertainty.
//!
//! Everything is computed from the sink's entry in the bench file and from its
//! certificate. Decisions (corrections, limits, codes) are integer arithmetic on
//! the types of `quantity`; fits, envelopes and uncertainties are `f64` and are
//! turned into quantities by functions that refuse what is not finite.
//!
//! Invariants:
//! - [`correction`] is the one place that converts nominal to true values.
//! - Text and numbers in, values out: nothing here opens a file, a port or a
//!   socket, reads a clock or draws a random number that was not seeded by the
//!   caller.
//!
//! What this crate deliberately does not do: it does not drive a sink, and it
//! judges no run; interlocks are decided by the sequencer and by the sink.

pub mod bench;
pub mod calibration;
pub mod correction;

pub mod circuit;
pub mod converter;
pub mod envelope;
pub mod leads;
pub mod sensor;
pub mod thermal;

pub mod accumulate;
pub mod montecarlo;
pub mod regression;
pub mod uncertainty;
