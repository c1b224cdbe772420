//! The reference firmware's core behind a safe face.
//!
//! The core is the C of `firmware-protocol/reference/core`, compiled in by the build script: the
//! same files a microcontroller runs. So what a rehearsal shows is what the real firmware does.
//! What each call does, and when, is documented in `core.h`.
//!
//! Invariants:
//! - All of the core's state lies in one allocation owned by [`Firmware`]; the C keeps no state of
//!   its own, no pointer into it and none out of it, so a copy of the bytes is a copy of the core.
//! - Time comes in with every call and must not go back.
//!
//! What it deliberately does not do: simulate a front end (it takes and gives converter codes),
//! know a clock, or lose, delay or damage bytes: the link does.

mod ffi;

use quantity::{Current, Resistance, SinkTime, Span, Voltage};
use thiserror::Error;
use wire::{Abilities, Reset, TemperatureReading};

/// What the sink is: the figures the core states in its description and reckons with.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct FirmwareConfig {
    /// Serial number.
    pub serial: u32,
    /// Time between samples, 10 us to 100 ms.
    pub tick: Span,
    /// Steps the queue holds, 16 to 64.
    pub queue: u16,
    /// Shortest readback interval, not below the tick.
    pub fastest_readback: Span,
    /// Samples a burst can hold, up to 2048; zero without the ability.
    pub burst: u16,
    /// What it can do beyond constant current.
    pub abilities: Abilities,
    /// Bits of the converter that sets, 6 to 16.
    pub drive_bits: u8,
    /// Its full scale, below 100 V.
    pub drive_full_scale: Voltage,
    /// Whether a code is full scale over `2^N` (false) or over `2^N - 1` (true).
    pub drive_spans_full_scale: bool,
    /// Sense resistor, at most 999.999999 ohm.
    pub sense_resistor: Resistance,
    /// Bits of the converter that reads, 6 to 16.
    pub sense_bits: u8,
    /// Current at its full scale, below 1000 A.
    pub sense_current: Current,
    /// Voltage at its full scale, below 1000 V.
    pub sense_voltage: Voltage,
}

/// Why no core can be made.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[error(
    "the firmware core refuses the configuration {config:?}; bring each figure within the range \
     its field states"
)]
pub struct ConfigRefused {
    /// What was asked for.
    pub config: FirmwareConfig,
}

/// What the converters gave just before a tick.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Sample {
    /// Code of the current, full scale at `2^bits`.
    pub current_code: u16,
    /// Code of the voltage, likewise.
    pub voltage_code: u16,
    /// Heat sink temperature, or what is wrong with its sensor.
    pub temperature: TemperatureReading,
}

/// What the core puts out.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Drive {
    /// Code for the converter that sets; zero whenever the gate is off.
    pub code: u16,
    /// Whether the op-amp may drive the gate.
    pub gate: bool,
    /// Whether the isolator relay is closed.
    pub isolator_closed: bool,
}

/// One firmware core.
#[derive(Debug, Clone)]
pub struct Firmware {
    core: ffi::Core,
}

impl Firmware {
    /// A core as after a reset: off, isolator open, no session, time zero.
    ///
    /// # Errors
    /// [`ConfigRefused`] if a figure is outside the range the core can reckon with.
    pub fn new(config: FirmwareConfig, reset: Reset) -> Result<Self, ConfigRefused> {
        ffi::Core::new(&config, reset)
            .map(|core| Self { core })
            .ok_or(ConfigRefused { config })
    }

    /// Takes bytes from the host and acts on every line end among them.
    pub fn receive(&mut self, bytes: &[u8], now: SinkTime) {
        self.core.receive(bytes, now.micros());
    }

    /// Takes up to `capacity` bytes for the host off the transmit ring and appends them to `to`.
    pub fn transmit(&mut self, to: &mut Vec<u8>, capacity: usize) {
        self.core.transmit(to, capacity);
    }

    /// Bytes waiting for the host.
    pub fn transmit_waiting(&self) -> usize {
        self.core.transmit_waiting()
    }

    /// One tick. The sample measures the interval that just ended; what comes back must be put
    /// out at once.
    pub fn tick(&mut self, now: SinkTime, sample: Sample) -> Drive {
        self.core.tick(now.micros(), sample)
    }

    /// Exactly what `ticks` calls of [`Firmware::tick`] do from `first` on, one tick apart, with
    /// the same sample and nothing received or transmitted in between. Quick while nothing
    /// changes.
    pub fn tick_same(&mut self, first: SinkTime, ticks: u32, sample: Sample) -> Drive {
        self.core.tick_same(first.micros(), ticks, sample)
    }

    /// How many further ticks with the last sample would neither change the drive nor put a byte
    /// out.
    pub fn quiet_ticks(&self) -> u32 {
        self.core.quiet_ticks()
    }

    /// Off by the port's own decision, with the next tick.
    pub fn off(&mut self) {
        self.core.off();
    }
}
