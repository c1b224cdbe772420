//! The border to the C core: the only place where the simulator leaves safe Rust.
//!
//! Invariants:
//! - The memory handed to the core is as large as `sink_core_size` asks and aligned for the widest
//!   field the core has (64 bits).
//! - The core is `init`ed before any other call, and every call borrows it exclusively unless the
//!   C takes it as `const`.
//! - Every struct here has the layout of its namesake in `core.h`.

#![expect(
    unsafe_code,
    reason = "calling C is unsafe by nature; each call states why it is sound"
)]

use core::ffi::c_uint;

use super::{Drive, FirmwareConfig, Sample};
use wire::{Abilities, Reset, TemperatureReading};

#[repr(C)]
struct CConfig {
    serial: u32,
    tick_us: u32,
    queue_depth: u16,
    fastest_readback_us: u32,
    burst_samples: u16,
    abilities: u8,
    drive_bits: u8,
    drive_full_scale_uv: u32,
    drive_span: u8,
    sense_resistor_uohm: u32,
    sense_bits: u8,
    sense_current_ua: u32,
    sense_voltage_uv: u32,
}

#[repr(C)]
struct CSample {
    current_code: u16,
    voltage_code: u16,
    temperature_mc: i32,
    sensor: u8,
}

#[repr(C)]
#[derive(Default)]
struct CDrive {
    code: u16,
    gate: bool,
    isolator: bool,
}

unsafe extern "C" {
    fn sink_core_size() -> usize;
    fn sink_core_init(core: *mut u64, config: *const CConfig, reset: c_uint) -> bool;
    fn sink_core_receive(core: *mut u64, bytes: *const u8, length: usize, now_us: u64);
    fn sink_core_transmit(core: *mut u64, bytes: *mut u8, capacity: usize) -> usize;
    fn sink_core_transmit_waiting(core: *const u64) -> usize;
    fn sink_core_tick(core: *mut u64, now_us: u64, sample: *const CSample, drive: *mut CDrive);
    fn sink_core_tick_same(
        core: *mut u64,
        first_us: u64,
        ticks: u32,
        sample: *const CSample,
        drive: *mut CDrive,
    );
    fn sink_core_quiet_ticks(core: *const u64) -> u32;
    fn sink_core_off(core: *mut u64);
}

/// The core's memory. It holds no pointers, so it may be moved, copied and sent.
#[derive(Debug, Clone)]
pub(super) struct Core(Box<[u64]>);

impl Core {
    pub(super) fn new(config: &FirmwareConfig, reset: Reset) -> Option<Self> {
        let config = c_config(config)?;
        // SAFETY: takes nothing and returns a constant.
        let bytes = unsafe { sink_core_size() };
        let mut memory = vec![0_u64; bytes.div_ceil(size_of::<u64>())].into_boxed_slice();
        // SAFETY: the memory is at least as large as the struct and aligned to 64 bits; the
        // configuration outlives the call, which copies it.
        let accepted =
            unsafe { sink_core_init(memory.as_mut_ptr(), &raw const config, c_reset(reset)) };
        accepted.then_some(Self(memory))
    }

    pub(super) fn receive(&mut self, bytes: &[u8], now_us: u64) {
        // SAFETY: `self` is an initialised core, borrowed exclusively; the C reads `len` bytes.
        unsafe { sink_core_receive(self.0.as_mut_ptr(), bytes.as_ptr(), bytes.len(), now_us) }
    }

    pub(super) fn transmit(&mut self, to: &mut Vec<u8>, capacity: usize) {
        let wanted = capacity.min(self.transmit_waiting());
        let start = to.len();
        to.resize(start + wanted, 0);
        let room = to.get_mut(start..).unwrap_or_default();
        // SAFETY: `self` is an initialised core, borrowed exclusively; the C writes at most
        // `room.len()` bytes to `room`.
        let written =
            unsafe { sink_core_transmit(self.0.as_mut_ptr(), room.as_mut_ptr(), room.len()) };
        to.truncate(start + written);
    }

    pub(super) fn transmit_waiting(&self) -> usize {
        // SAFETY: `self` is an initialised core; the C only reads it.
        unsafe { sink_core_transmit_waiting(self.0.as_ptr()) }
    }

    pub(super) fn tick(&mut self, now_us: u64, sample: Sample) -> Drive {
        let sample = c_sample(sample);
        let mut drive = CDrive::default();
        // SAFETY: `self` is an initialised core, borrowed exclusively; sample and drive outlive
        // the call.
        unsafe {
            sink_core_tick(
                self.0.as_mut_ptr(),
                now_us,
                &raw const sample,
                &raw mut drive,
            );
        }
        rust_drive(&drive)
    }

    pub(super) fn tick_same(&mut self, first_us: u64, ticks: u32, sample: Sample) -> Drive {
        let sample = c_sample(sample);
        let mut drive = CDrive::default();
        // SAFETY: as for `tick`.
        unsafe {
            sink_core_tick_same(
                self.0.as_mut_ptr(),
                first_us,
                ticks,
                &raw const sample,
                &raw mut drive,
            );
        }
        rust_drive(&drive)
    }

    pub(super) fn quiet_ticks(&self) -> u32 {
        // SAFETY: `self` is an initialised core; the C only reads it.
        unsafe { sink_core_quiet_ticks(self.0.as_ptr()) }
    }

    pub(super) fn off(&mut self) {
        // SAFETY: `self` is an initialised core, borrowed exclusively.
        unsafe { sink_core_off(self.0.as_mut_ptr()) }
    }
}

fn c_config(config: &FirmwareConfig) -> Option<CConfig> {
    Some(CConfig {
        serial: config.serial,
        tick_us: u32::try_from(config.tick.micros()).ok()?,
        queue_depth: config.queue,
        fastest_readback_us: u32::try_from(config.fastest_readback.micros()).ok()?,
        burst_samples: config.burst,
        abilities: c_abilities(config.abilities),
        drive_bits: config.drive_bits,
        drive_full_scale_uv: u32::try_from(config.drive_full_scale.microvolts()).ok()?,
        drive_span: u8::from(config.drive_spans_full_scale),
        sense_resistor_uohm: u32::try_from(config.sense_resistor.microohms()).ok()?,
        sense_bits: config.sense_bits,
        sense_current_ua: u32::try_from(config.sense_current.microamperes()).ok()?,
        sense_voltage_uv: u32::try_from(config.sense_voltage.microvolts()).ok()?,
    })
}

fn c_abilities(abilities: Abilities) -> u8 {
    u8::from(abilities.power)
        | u8::from(abilities.resistance) << 1
        | u8::from(abilities.burst) << 2
        | u8::from(abilities.isolator) << 3
}

/// The numbers of `enum sink_reset`.
const fn c_reset(reset: Reset) -> c_uint {
    match reset {
        Reset::Power => 0,
        Reset::Pin => 1,
        Reset::Watchdog => 2,
        Reset::Software => 3,
        Reset::Unknown => 4,
    }
}

/// A temperature beyond what 32 bits hold is that of a sensor that has failed.
fn c_sample(sample: Sample) -> CSample {
    const GOOD: u8 = 0;
    const OPEN: u8 = 1;
    const SHORT: u8 = 2;
    let (temperature_mc, sensor) = match sample.temperature {
        TemperatureReading::Value(value) => match i32::try_from(value.millidegrees_celsius()) {
            Ok(value) => (value, GOOD),
            Err(_) => (0, OPEN),
        },
        TemperatureReading::Open => (0, OPEN),
        TemperatureReading::Short => (0, SHORT),
    };
    CSample {
        current_code: sample.current_code,
        voltage_code: sample.voltage_code,
        temperature_mc,
        sensor,
    }
}

const fn rust_drive(drive: &CDrive) -> Drive {
    Drive {
        code: drive.code,
        gate: drive.gate,
        isolator_closed: drive.isolator,
    }
}
