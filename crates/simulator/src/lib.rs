//! Simulated sources, thermal model and the firmware core behind a port, in virtual time.
//!
//! - [`cell`], [`supply`]: what a sink draws from, exact for constant current.
//! - [`front_end`], [`mosfet`], [`thermal`]: what stands between the firmware and the source.
//! - [`firmware`]: the reference firmware's own core.
//! - [`device`]: all of it together as one sink in virtual time; [`bench_source`] makes one from a
//!   bench file's entry.
//! - [`link`]: what can happen to the bytes on their way.
//!
//! Invariants: no clock, no thread, no file, no randomness but from a given seed. The same
//! configuration and the same bytes in give the same bytes out.
//!
//! What it deliberately does not do: it is no second opinion about the firmware, the protocol or
//! the sequencer; those are the real ones.

pub mod bench_source;
pub mod cell;
mod decay;
pub mod device;
pub mod fault;
pub mod firmware;
pub mod front_end;
mod ladder;
pub mod link;
pub mod mosfet;
pub mod noise;
mod oscillator;
mod plant;
pub mod source;
mod sum;
pub mod supply;
pub mod thermal;

pub use bench_source::{BenchSourceError, simulated_sink};
pub use cell::{Cell, Model, ModelError, Spread, Start};
pub use device::{DeviceError, SimulatedSink, SinkParts};
pub use fault::{Fault, Happening};
pub use firmware::{Firmware, FirmwareConfig};
pub use front_end::Errors;
pub use ladder::Flow;
pub use link::{FaultyDevice, Link, LinkFaults};
pub use source::{Source, Truth};
pub use sum::Compensated;
pub use supply::{Supply, SupplySpec};
