//! A whole sink in virtual time: the firmware core, its front end, what it draws from, its heat.
//!
//! The firmware is the real one (see [`firmware`](crate::firmware)); everything around it is
//! simulated. Nothing here reads a clock: time is moved on by [`SimulatedSink::advance`], in
//! true microseconds since the sink was made.
//!
//! Invariants:
//! - The bytes that come out hang only on the configuration, the seed, and the bytes that went
//!   in with their times; not on the pieces in which time is moved on, and not on whether
//!   stretches without change are skipped.
//! - Ticks fall where the sink's own oscillator puts them.
//!
//! What it deliberately does not do: lose or damage bytes. That belongs to the link.

#[cfg(test)]
mod tests;

use transport::port::VirtualDevice;

use quantity::{SinkTime, Span};
use wire::{Reset, TemperatureReading};

use crate::fault::{Fault, Happening};
use crate::firmware::{ConfigRefused, Drive, Firmware, FirmwareConfig};
use crate::front_end::{Errors, FrontEnd};
use crate::mosfet::{Channel, Mosfet, Path};
use crate::oscillator::Oscillator;
use crate::plant::{Broken, Parts, Plant, true_tick_s};
use crate::source::{Crossing, Source, Truth};
use crate::thermal::{HeatPath, HeatPathError, Thermal};

/// Bytes a serial transmitter may have saved up for while its line was idle.
const IDLE_CREDIT_BYTES: u64 = 16;

/// What a simulated sink is made of.
#[derive(Debug, Clone)]
pub struct SinkParts {
    /// The figures the firmware is given, and reckons with.
    pub figures: FirmwareConfig,
    /// Why the processor started.
    pub reset: Reset,
    /// What is connected.
    pub source: Source,
    /// Leads, MOSFET, sense resistor.
    pub path: Path,
    /// Whether the voltage is sensed at the source's terminals, not at the sink's.
    pub four_wire: bool,
    /// Where the heat goes.
    pub heat_path: HeatPath,
    /// Temperature of the air at the start, degrees Celsius.
    pub ambient_degc: f64,
    /// How the converters depart from the figures.
    pub errors: Errors,
    /// What breaks, and when.
    pub faults: Vec<Fault>,
    /// What the serial line carries towards the host; `None`: anything at once.
    pub bytes_per_second: Option<u32>,
    /// Seed of all noise.
    pub seed: u64,
}

impl SinkParts {
    /// A sink without any error, with leads of no resistance and a MOSFET and heat sink that
    /// suit a few amperes: the start for tests and for what a bench file leaves open.
    pub fn error_free(figures: FirmwareConfig, source: Source) -> Self {
        Self {
            reset: Reset::Power,
            source,
            path: Path {
                mosfet: Mosfet {
                    threshold_v: 2.5,
                    transconductance_a_per_v2: 30.0,
                    drain_ohm: 0.008,
                    gate_drive_v: 10.0,
                },
                lead_ohm: 0.0,
                sense_ohm: figures.sense_resistor.ohms(),
            },
            four_wire: true,
            heat_path: HeatPath {
                mosfet_j_per_k: 1.2,
                to_heat_sink_k_per_w: 1.3,
                heat_sink_j_per_k: 110.0,
                to_ambient_k_per_w: 3.2,
            },
            ambient_degc: 23.0,
            errors: Errors::default(),
            faults: Vec::new(),
            bytes_per_second: None,
            seed: 1,
            figures,
        }
    }
}

/// Why a simulated sink cannot be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum DeviceError {
    /// The firmware refuses the figures.
    #[error(transparent)]
    Figures(#[from] ConfigRefused),
    /// The heat path is unsound.
    #[error(transparent)]
    Heat(#[from] HeatPathError),
    /// A value of the current path or of the errors is unsound.
    #[error("`{name}` of the simulated sink is {value}; {mend}")]
    Value {
        /// Its name.
        name: &'static str,
        /// What it is.
        value: f64,
        /// What would do.
        mend: &'static str,
    },
}

/// A sink in virtual time.
#[derive(Debug, Clone)]
pub struct SimulatedSink {
    figures: FirmwareConfig,
    firmware: Firmware,
    hung: bool,
    plant: Plant,
    drive: Drive,
    oscillator: Oscillator,
    now_ns: u64,
    tick: u64,
    /// Sink time of the last tick, since the processor started.
    sink_us: u64,
    faults: Vec<Fault>,
    next_fault: usize,
    line: Option<Line>,
    skips: bool,
}

/// A serial line of limited rate, towards the host.
#[derive(Debug, Clone, Copy)]
struct Line {
    bytes_per_second: u64,
    /// Byte-nanoseconds saved up.
    credit: u64,
}

impl SimulatedSink {
    /// A sink that has just been powered, at true time zero.
    ///
    /// # Errors
    /// [`DeviceError`] for figures the firmware refuses or values that cannot be.
    pub fn new(parts: SinkParts) -> Result<Self, DeviceError> {
        check(&parts)?;
        let firmware = Firmware::new(parts.figures, parts.reset)?;
        let ppb = parts.errors.oscillator_ppb;
        let tick_s = true_tick_s(parts.figures.tick, ppb);
        let plant = Plant::new(
            Parts {
                source: parts.source,
                path: parts.path,
                front_end: FrontEnd::new(&parts.figures, parts.errors),
                thermal: Thermal::new(parts.heat_path, parts.ambient_degc)?,
                four_wire: parts.four_wire,
                has_isolator: parts.figures.abilities.isolator,
                seed: parts.seed,
            },
            tick_s,
        );
        let mut faults = parts.faults;
        faults.sort_by_key(|fault| fault.at);
        Ok(Self {
            oscillator: Oscillator::new(parts.figures.tick, ppb),
            figures: parts.figures,
            firmware,
            hung: false,
            plant,
            drive: Drive::default(),
            now_ns: 0,
            tick: 0,
            sink_us: 0,
            faults,
            next_fault: 0,
            line: parts.bytes_per_second.map(|rate| Line {
                bytes_per_second: u64::from(rate),
                credit: 0,
            }),
            skips: true,
        })
    }

    /// Whether stretches whose codes cannot change are passed in one go. They are unless told
    /// otherwise; the bytes that come out are the same.
    pub fn set_skipping(&mut self, skips: bool) {
        self.skips = skips;
    }

    /// True time since the sink was made.
    pub fn now(&self) -> Span {
        Span::from_micros(self.now_ns / 1_000)
    }

    /// Moves true time on; what the sink sends meanwhile is appended to `out`. A time that has
    /// passed already changes nothing.
    pub fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        let until_ns = until.micros().saturating_mul(1_000).max(self.now_ns);
        while self.run_to(until_ns, out, false) {}
        self.now_ns = until_ns;
    }

    /// Moves true time on until the sink has sent something or the time is reached; returns the
    /// time it is then.
    pub fn advance_to_output(&mut self, until: Span, out: &mut Vec<u8>) -> Span {
        let until_ns = until.micros().saturating_mul(1_000).max(self.now_ns);
        let before = out.len();
        self.drain(out);
        while out.len() == before {
            if !self.run_to(until_ns, out, true) {
                self.now_ns = until_ns;
                break;
            }
        }
        self.now()
    }

    /// Bytes from the host, now. What is answered at once comes out with the next advance.
    pub fn receive(&mut self, bytes: &[u8]) {
        if !self.hung {
            let now = SinkTime::from_micros(self.sink_now_us());
            self.firmware.receive(bytes, now);
        }
    }

    /// Starts the processor anew, now: current off, clock at zero, nothing remembered.
    pub fn restart(&mut self, reset: Reset) {
        // The same figures were accepted when the sink was made.
        if let Ok(firmware) = Firmware::new(self.figures, reset) {
            self.firmware = firmware;
            self.hung = false;
            self.sink_us = 0;
            self.drive = Drive::default();
            self.plant.set_drive(self.drive);
        }
    }

    /// What truly flowed so far.
    pub fn truth(&self) -> Truth {
        self.plant.truth()
    }

    /// Notes the instant at which the voltage at the source's terminals first falls below a
    /// value, to the tick.
    pub fn watch_voltage(&mut self, below_v: f64) {
        self.plant.watch(below_v);
    }

    /// The watched voltages and when they were crossed.
    pub fn crossings(&self) -> Vec<Crossing> {
        self.plant.crossings()
    }

    /// The source as it is now.
    pub fn source(&self) -> Source {
        self.plant.source()
    }

    /// Temperature of the heat sink at the last refresh, degrees Celsius.
    pub fn heat_sink_degc(&self) -> f64 {
        self.plant.thermal().heat_sink_degc()
    }

    /// Junction temperature of the MOSFET at the last refresh, degrees Celsius.
    pub fn mosfet_degc(&self) -> f64 {
        self.plant.thermal().mosfet_degc()
    }

    /// The true current of the last tick, ampere.
    pub fn current_a(&self) -> f64 {
        self.plant.current_a()
    }

    /// The sink's own clock, now.
    pub fn sink_time(&self) -> SinkTime {
        SinkTime::from_micros(self.sink_now_us())
    }

    fn sink_now_us(&self) -> u64 {
        let after = self.oscillator.micros_after(self.tick, self.now_ns);
        self.sink_us.saturating_add(after)
    }

    /// Runs ticks up to an instant, at most to the next fault or, if asked, the next output.
    /// Says whether there may be more to do.
    fn run_to(&mut self, until_ns: u64, out: &mut Vec<u8>, to_output: bool) -> bool {
        while let Some(fault) = self.faults.get(self.next_fault).copied() {
            let at_ns = fault.at.micros().saturating_mul(1_000);
            let due = self.oscillator.tick_by(at_ns.min(until_ns));
            if at_ns > until_ns || due > self.tick {
                break;
            }
            self.next_fault += 1;
            self.happen(fault.what);
        }
        let stop_ns = match self.faults.get(self.next_fault) {
            Some(fault) => until_ns.min(fault.at.micros().saturating_mul(1_000)),
            None => until_ns,
        };
        let last = self.oscillator.tick_by(stop_ns);
        if last <= self.tick {
            self.drain(out);
            return false;
        }
        self.run_ticks(last - self.tick, out, to_output);
        self.now_ns = self.now_ns.max(self.oscillator.instant_ns(self.tick));
        true
    }

    fn run_ticks(&mut self, ticks: u64, out: &mut Vec<u8>, to_output: bool) {
        let tick_us = self.figures.tick.micros();
        let before = out.len();
        let end = self.tick.saturating_add(ticks);
        while self.tick < end {
            let sample = self.plant.tick();
            self.tick += 1;
            self.sink_us += tick_us;
            if self.hung {
                continue;
            }
            let now = SinkTime::from_micros(self.sink_us);
            let drive = self.firmware.tick(now, sample);
            if drive != self.drive {
                self.drive = drive;
                self.plant.set_drive(drive);
            }
            if self.firmware.transmit_waiting() > 0 {
                self.send(out);
                if to_output && out.len() > before {
                    return;
                }
                if self.firmware.transmit_waiting() > 0 {
                    continue;
                }
            }
            let same = self.plant.same_ticks();
            if same > 0 && self.skips {
                let left = u32::try_from(end - self.tick).unwrap_or(u32::MAX);
                let same = same.min(left).min(self.firmware.quiet_ticks());
                if same > 0 {
                    let first = SinkTime::from_micros(self.sink_us + tick_us);
                    self.firmware.tick_same(first, same, sample);
                    self.plant.skip(same);
                    self.tick += u64::from(same);
                    self.sink_us += tick_us * u64::from(same);
                }
            }
        }
    }

    /// Sends what one tick of the line carries.
    fn send(&mut self, out: &mut Vec<u8>) {
        let tick_ns = self.figures.tick.micros().saturating_mul(1_000);
        match &mut self.line {
            None => self.firmware.transmit(out, usize::MAX),
            Some(line) => {
                let earned = line.bytes_per_second.saturating_mul(tick_ns);
                let most = earned.max(IDLE_CREDIT_BYTES * 1_000_000_000);
                line.credit = line.credit.saturating_add(earned).min(most);
                let whole = line.credit / 1_000_000_000;
                let before = out.len();
                self.firmware
                    .transmit(out, usize::try_from(whole).unwrap_or(usize::MAX));
                let sent = u64::try_from(out.len() - before).unwrap_or(whole);
                line.credit -= (sent * 1_000_000_000).min(line.credit);
            }
        }
    }

    /// Answers that were ready before the next tick.
    fn drain(&mut self, out: &mut Vec<u8>) {
        if self.line.is_none() && !self.hung {
            self.firmware.transmit(out, usize::MAX);
        }
    }

    fn happen(&mut self, what: Happening) {
        match what {
            Happening::MosfetShorted => self.breaks(|broken| broken.channel = Channel::Shorted),
            Happening::MosfetOpen => self.breaks(|broken| broken.channel = Channel::Open),
            Happening::FeedbackLost => self.breaks(|broken| broken.feedback_lost = true),
            Happening::VoltageSenseLost => self.breaks(|broken| broken.voltage_sense_lost = true),
            Happening::TemperatureOpen => {
                self.breaks(|broken| broken.temperature = Some(TemperatureReading::Open));
            }
            Happening::TemperatureShort => {
                self.breaks(|broken| broken.temperature = Some(TemperatureReading::Short));
            }
            Happening::TemperatureStuck => self.breaks(|broken| broken.temperature_stuck = true),
            Happening::CurrentStuck => self.breaks(|broken| broken.current_stuck = true),
            Happening::VoltageStuck => self.breaks(|broken| broken.voltage_stuck = true),
            Happening::Mended => self.breaks(|broken| *broken = Broken::NOTHING),
            Happening::OscillatorRate(ppb) => {
                self.oscillator.set_rate(self.tick, ppb);
                self.plant
                    .set_tick(true_tick_s(self.figures.tick, self.oscillator.ppb()));
            }
            Happening::OscillatorJump(span) => {
                self.sink_us = self.sink_us.saturating_add(span.micros());
            }
            Happening::SupplyVoltage(voltage) => self.plant.change_source(|source| {
                if let Source::Supply(supply) = source {
                    supply.set_voltage(voltage.volts());
                }
            }),
            Happening::Ambient(temperature) => {
                self.plant.set_ambient(temperature.degrees_celsius());
            }
            Happening::Restart(reset) => self.restart(reset),
            Happening::Hang => self.hung = true,
        }
    }

    fn breaks(&mut self, change: impl FnOnce(&mut Broken)) {
        self.plant.set_broken(change);
    }
}

impl VirtualDevice for SimulatedSink {
    fn now(&self) -> Span {
        self.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        self.advance_to_output(until, out);
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.receive(bytes);
    }
}

fn check(parts: &SinkParts) -> Result<(), DeviceError> {
    let path = &parts.path;
    let positive = [
        ("sense_ohm", path.sense_ohm),
        (
            "transconductance_a_per_v2",
            path.mosfet.transconductance_a_per_v2,
        ),
    ];
    for (name, value) in positive {
        if !(value.is_finite() && value > 0.0) {
            return refuse(name, value, "give a finite number above zero");
        }
    }
    let errors = &parts.errors;
    let not_negative = [
        ("lead_ohm", path.lead_ohm),
        ("drain_ohm", path.mosfet.drain_ohm),
        ("current_noise_a", errors.current_noise_a),
        ("voltage_noise_v", errors.voltage_noise_v),
        ("temperature_noise_k", errors.temperature_noise_k),
        ("loop_time_constant_s", errors.loop_time_constant_s),
        ("drive_floor_v", errors.drive_floor_v),
    ];
    for (name, value) in not_negative {
        if !(value.is_finite() && value >= 0.0) {
            return refuse(name, value, "give a finite number that is not below zero");
        }
    }
    let gains = [
        ("set_gain", errors.set_gain),
        ("current_gain", errors.current_gain),
        ("voltage_gain", errors.voltage_gain),
    ];
    for (name, value) in gains {
        if !(-0.99..=0.99).contains(&value) {
            return refuse(name, value, "give a relative error between -0.99 and 0.99");
        }
    }
    let finite = [
        ("threshold_v", path.mosfet.threshold_v),
        ("gate_drive_v", path.mosfet.gate_drive_v),
        ("set_offset_a", errors.set_offset_a),
        ("current_offset_a", errors.current_offset_a),
        ("voltage_offset_v", errors.voltage_offset_v),
        ("temperature_offset_k", errors.temperature_offset_k),
        ("sense_per_k", errors.sense_per_k),
        ("ambient_degc", parts.ambient_degc),
    ];
    for (name, value) in finite {
        if !value.is_finite() {
            return refuse(name, value, "give a finite number");
        }
    }
    Ok(())
}

fn refuse<T>(name: &'static str, value: f64, mend: &'static str) -> Result<T, DeviceError> {
    Err(DeviceError::Value { name, value, mend })
}
