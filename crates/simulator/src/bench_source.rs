//! From a sink's entry in the bench file to a simulated sink.
//!
//! What the bench file says of the hardware becomes the simulated hardware; what stands under
//! `link.simulated.source` says what is connected to it and how it departs from its figures:
//!
//! ```toml
//! [sink.link.simulated]
//! source = { cell = "K-01", state_of_charge = "100 %", temperature = "23 degC", seed = 1 }
//! ```
//!
//! or `{ supply = { voltage = "3.3 V", output_resistance = "40 mohm", current_limit = "1 A" } }`,
//! or `{ model = { ... } }` with a whole cell model as its file has it. Beside these may stand
//! `errors` (see [`ErrorsSpec`]; none of them: the converters are exact but for the bench file's
//! own converter minimum and offset), `faults` (see [`Fault`]), `line_rate_baud` and `seed`.
//!
//! What it deliberately does not do: read files, and judge whether the bench file is wise.

#[cfg(test)]
mod tests;

use quantity::{
    Current, Ratio, Resistance, Span, Temperature, TemperatureCoefficient, Text, Voltage,
};
use serde::{Deserialize, Serialize};
use sink::bench::{Codes, Conductor, Link, Sensing, SinkEntry, Transfer};
use wire::{Abilities, Reset};

use crate::cell::{Cell, Model, ModelError, Spread, Start, specimen};
use crate::device::{DeviceError, SimulatedSink, SinkParts};
use crate::fault::Fault;
use crate::firmware::FirmwareConfig;
use crate::front_end::Errors;
use crate::mosfet::{Mosfet, Path};
use crate::source::Source;
use crate::supply::{Supply, SupplyError, SupplySpec};
use crate::thermal::HeatPath;

/// Steps the simulated firmware's queue holds.
const QUEUE: u16 = 32;
/// Samples its burst memory holds.
const BURST: u16 = 1024;
/// Heat capacity of a power MOSFET's case where the bench file gives no network, joule per
/// kelvin: about that of a TO-220 (common practice, no source).
const CASE_J_PER_K: f64 = 1.0;
/// Bits on a serial line for each byte: eight, a start bit and a stop bit.
const BITS_PER_BYTE: u32 = 10;

/// What is connected to a simulated sink.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SourceSpec {
    /// A built-in cell by its label, such as `K-01`, or a type without spread, `K` or `M`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub cell: Option<String>,
    /// A whole cell model.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub model: Option<Model>,
    /// A supply.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub supply: Option<SupplySpec>,
    /// How full a cell is at the start.
    #[serde(default = "full", with = "quantity::text")]
    pub state_of_charge: Ratio,
    /// Temperature of cell and air at the start.
    #[serde(default = "room", with = "quantity::text")]
    pub temperature: Temperature,
    /// Seed of all noise.
    #[serde(default = "first_seed")]
    pub seed: u64,
    /// How the sink departs from its figures.
    #[serde(default)]
    pub errors: ErrorsSpec,
    /// What breaks, and when.
    #[serde(default)]
    pub faults: Vec<Fault>,
    /// What the line carries towards the host, bits per second; without it, anything at once.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub line_rate_baud: Option<u32>,
}

/// The [`Errors`] as a file has them: text with units, all of them optional.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct ErrorsSpec {
    /// Current set above nominal.
    pub set_gain: Option<Text<Ratio>>,
    /// Current added to what is set, instead of the bench file's converter offset.
    pub set_offset: Option<Text<Current>>,
    /// Lowest voltage the setting converter reaches, instead of the bench file's minimum.
    pub drive_floor: Option<Text<Voltage>>,
    /// Current read above true.
    pub current_gain: Option<Text<Ratio>>,
    /// Current added to what is read.
    pub current_offset: Option<Text<Current>>,
    /// Standard deviation of the current read.
    pub current_noise: Option<Text<Current>>,
    /// Voltage read above true.
    pub voltage_gain: Option<Text<Ratio>>,
    /// Voltage added to what is read.
    pub voltage_offset: Option<Text<Voltage>>,
    /// Standard deviation of the voltage read.
    pub voltage_noise: Option<Text<Voltage>>,
    /// Kelvins read above true.
    pub temperature_offset_k: Option<f64>,
    /// Standard deviation of the temperature read, kelvins.
    pub temperature_noise_k: Option<f64>,
    /// The sense resistor's own growth with temperature.
    pub sense_drift: Option<Text<TemperatureCoefficient>>,
    /// The current's way to a new setpoint.
    pub loop_time_constant: Option<Text<Span>>,
    /// The sink's oscillator fast against true time.
    pub oscillator: Option<Text<Ratio>>,
}

/// Why a bench entry gives no simulated sink.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum BenchSourceError {
    /// The sink has hardware.
    #[error("sink `{sink}` is not simulated; give it a `link.simulated` with a `source`")]
    NotSimulated {
        /// Its name.
        sink: String,
    },
    /// The source is not of the wanted shape.
    #[error(
        "the simulated source of sink `{sink}` cannot be read: {text}; write, for example, \
         source = {{ cell = \"K-01\", temperature = \"23 degC\" }}"
    )]
    Shape {
        /// Its name.
        sink: String,
        /// What the parser says.
        text: String,
    },
    /// None or several of cell, model, supply.
    #[error(
        "the simulated source of sink `{sink}` has {found} of `cell`, `model` and `supply`; give \
         exactly one"
    )]
    Which {
        /// Its name.
        sink: String,
        /// How many.
        found: usize,
    },
    /// The cell cannot be.
    #[error("the simulated source of sink `{sink}`: {error}")]
    Cell {
        /// Its name.
        sink: String,
        /// Why.
        error: ModelError,
    },
    /// The supply cannot be.
    #[error("the simulated source of sink `{sink}`: {error}")]
    Supply {
        /// Its name.
        sink: String,
        /// Why.
        error: SupplyError,
    },
    /// The sink cannot be.
    #[error("sink `{sink}` cannot be simulated: {error}")]
    Device {
        /// Its name.
        sink: String,
        /// Why.
        error: DeviceError,
    },
    /// The figures are beyond what a description can carry.
    #[error(
        "sink `{sink}` cannot be simulated: its converter that reads, with codes of 2^N-1, has a \
         full scale beyond what can be held; give a smaller one"
    )]
    FullScale {
        /// Its name.
        sink: String,
    },
}

fn full() -> Ratio {
    Ratio::from_fraction(1.0).unwrap_or_else(|_| unreachable!("one is a ratio"))
}

fn room() -> Temperature {
    Temperature::from_degrees_celsius(23.0)
        .unwrap_or_else(|_| unreachable!("23 degC is a temperature"))
}

const fn first_seed() -> u64 {
    1
}

/// The simulated sink that an entry of the bench file describes.
///
/// # Errors
/// [`BenchSourceError`] with the sink's name, what is wrong and the mend.
pub fn simulated_sink(entry: &SinkEntry) -> Result<SimulatedSink, BenchSourceError> {
    let parts = sink_parts(entry)?;
    SimulatedSink::new(parts).map_err(|error| BenchSourceError::Device {
        sink: entry.name.clone(),
        error,
    })
}

/// What the simulated sink of an entry is made of, for those who want to change some of it.
///
/// # Errors
/// As [`simulated_sink`].
pub fn sink_parts(entry: &SinkEntry) -> Result<SinkParts, BenchSourceError> {
    let sink = || entry.name.clone();
    let spec = match &entry.link {
        Link::Simulated { source, .. } => {
            SourceSpec::deserialize(source).map_err(|error| BenchSourceError::Shape {
                sink: sink(),
                text: error.to_string(),
            })?
        }
        Link::Serial { .. } | Link::Tcp { .. } => {
            return Err(BenchSourceError::NotSimulated { sink: sink() });
        }
    };
    let source = spec.source(&entry.name)?;
    Ok(SinkParts {
        figures: figures(entry)?,
        reset: Reset::Power,
        source,
        path: path(entry),
        four_wire: entry.leads.sensing == Sensing::FourWire,
        heat_path: heat_path(entry),
        ambient_degc: spec.temperature.degrees_celsius(),
        errors: spec.errors.in_si(entry),
        bytes_per_second: spec.line_rate_baud.map(|baud| baud / BITS_PER_BYTE),
        seed: spec.seed,
        faults: spec.faults,
    })
}

/// The figures that the firmware of an entry's sink states of itself. A converter whose codes
/// span 2^N-1 states the full scale that the protocol's code of 2^N would have.
///
/// # Errors
/// [`BenchSourceError::FullScale`] if that is beyond the type's range.
pub fn figures(entry: &SinkEntry) -> Result<FirmwareConfig, BenchSourceError> {
    let front_end = &entry.front_end;
    let adc = front_end.adc;
    let stretch = match adc.codes {
        Codes::PowerOfTwo => 1.0,
        Codes::PowerOfTwoLessOne => {
            let codes = f64::from(1_u32 << adc.bits.min(31));
            codes / (codes - 1.0)
        }
    };
    let beyond = || BenchSourceError::FullScale {
        sink: entry.name.clone(),
    };
    let sense_current = Current::from_amperes(adc.current_full_scale.amperes() * stretch);
    let sense_voltage = Voltage::from_volts(adc.voltage_full_scale.volts() * stretch);
    Ok(FirmwareConfig {
        serial: entry.serial_number.unwrap_or(1),
        tick: front_end.tick,
        queue: QUEUE,
        fastest_readback: entry.readback.fastest.max(front_end.tick),
        burst: BURST,
        abilities: Abilities {
            power: true,
            resistance: true,
            burst: true,
            isolator: entry.isolator,
        },
        drive_bits: front_end.dac.bits,
        drive_full_scale: front_end.dac.full_scale,
        drive_spans_full_scale: front_end.dac.codes == Codes::PowerOfTwoLessOne,
        sense_resistor: front_end.sense_resistor.resistance,
        sense_bits: adc.bits,
        sense_current: sense_current.map_err(|_| beyond())?,
        sense_voltage: sense_voltage.map_err(|_| beyond())?,
    })
}

impl SourceSpec {
    fn source(&self, sink: &str) -> Result<Source, BenchSourceError> {
        let cell = |model: &Model, spread| {
            let start = Start {
                state_of_charge: self.state_of_charge.fraction(),
                temperature_degc: self.temperature.degrees_celsius(),
                ambient_degc: self.temperature.degrees_celsius(),
            };
            let cell = Cell::new(model, spread, start);
            cell.map(|cell| Source::Cell(Box::new(cell)))
        };
        let refused = |error| BenchSourceError::Cell {
            sink: sink.to_owned(),
            error,
        };
        match (&self.cell, &self.model, &self.supply) {
            (Some(label), None, None) => {
                let found = specimen(label).map_err(refused)?;
                cell(&found.model, found.spread).map_err(refused)
            }
            (None, Some(model), None) => cell(model, Spread::default()).map_err(refused),
            (None, None, Some(supply)) => Supply::new(supply)
                .map(|supply| Source::Supply(Box::new(supply)))
                .map_err(|error| BenchSourceError::Supply {
                    sink: sink.to_owned(),
                    error,
                }),
            (cell, model, supply) => Err(BenchSourceError::Which {
                sink: sink.to_owned(),
                found: usize::from(cell.is_some())
                    + usize::from(model.is_some())
                    + usize::from(supply.is_some()),
            }),
        }
    }
}

impl ErrorsSpec {
    fn in_si(&self, entry: &SinkEntry) -> Errors {
        let dac = entry.front_end.dac;
        let sense_ohm = entry.front_end.sense_resistor.resistance.ohms();
        let ratio = |value: Option<Text<Ratio>>| value.map_or(0.0, |ratio| ratio.0.fraction());
        let current = |value: Option<Text<Current>>| value.map_or(0.0, |text| text.0.amperes());
        let voltage = |value: Option<Text<Voltage>>| value.map_or(0.0, |text| text.0.volts());
        let stated_offset = dac.offset.volts() / sense_ohm;
        let per_billion = (ratio(self.oscillator) * 1e9).round();
        Errors {
            set_gain: ratio(self.set_gain),
            set_offset_a: self
                .set_offset
                .map_or(stated_offset, |text| text.0.amperes()),
            drive_floor_v: self
                .drive_floor
                .map_or(dac.minimum.volts(), |text| text.0.volts()),
            current_gain: ratio(self.current_gain),
            current_offset_a: current(self.current_offset),
            current_noise_a: current(self.current_noise),
            voltage_gain: ratio(self.voltage_gain),
            voltage_offset_v: voltage(self.voltage_offset),
            voltage_noise_v: voltage(self.voltage_noise),
            temperature_offset_k: self.temperature_offset_k.unwrap_or(0.0),
            temperature_noise_k: self.temperature_noise_k.unwrap_or(0.0),
            sense_per_k: self
                .sense_drift
                .map_or(0.0, |drift| drift.0.fraction_per_kelvin()),
            loop_time_constant_s: self.loop_time_constant.map_or(0.0, |time| time.0.seconds()),
            oscillator_ppb: saturated(per_billion),
        }
    }
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "a float cast saturates, and two thousand million parts in 10^9 are no oscillator"
)]
fn saturated(per_billion: f64) -> i32 {
    per_billion as i32
}

fn path(entry: &SinkEntry) -> Path {
    let (threshold_v, factor) = square_law(&entry.mosfet.transfer);
    let gate_drive_v = entry.gate_drive.voltage_max.volts();
    // The on-resistance of a data sheet is that of drain and fully driven channel together.
    let channel_ohm = 1.0 / (factor * (gate_drive_v - threshold_v)).max(f64::MIN_POSITIVE);
    Path {
        mosfet: Mosfet {
            threshold_v,
            transconductance_a_per_v2: factor,
            drain_ohm: (entry.mosfet.on_resistance.ohms() - channel_ohm).max(0.0),
            gate_drive_v,
        },
        lead_ohm: lead_resistance(&entry.leads.conductor).ohms(),
        sense_ohm: entry.front_end.sense_resistor.resistance.ohms(),
    }
}

/// Threshold and factor; from a table by a straight line of gate voltage over the current's
/// root, which is what the square law says.
fn square_law(transfer: &Transfer) -> (f64, f64) {
    let points = match transfer {
        Transfer::SquareLaw { threshold, factor } => {
            return (threshold.volts(), factor.amperes_per_square_volt());
        }
        Transfer::Table(points) => points,
    };
    let rows = points
        .iter()
        .map(|point| (point.current.amperes().max(0.0).sqrt(), point.gate.volts()));
    let (mut n, mut x, mut y, mut xx, mut xy) = (0.0, 0.0, 0.0, 0.0, 0.0);
    for (root, gate) in rows {
        n += 1.0;
        x += root;
        y += gate;
        xx += root * root;
        xy += root * gate;
    }
    let slope = (n * xy - x * y) / (n * xx - x * x);
    let threshold = (y - slope * x) / n;
    // Gate voltage = threshold + sqrt(2 / k) * root.
    (threshold, 2.0 / (slope * slope))
}

fn heat_path(entry: &SinkEntry) -> HeatPath {
    let mosfet = &entry.mosfet;
    // The slowest pair of the network is the case's own warming.
    let slowest = mosfet.foster.iter().max_by_key(|pair| pair.time_constant);
    let case = slowest.map_or(CASE_J_PER_K, |pair| {
        pair.time_constant.seconds() / pair.resistance.kelvins_per_watt()
    });
    let to_ambient = entry.heat_sink.to_ambient.kelvins_per_watt();
    HeatPath {
        mosfet_j_per_k: case,
        to_heat_sink_k_per_w: mosfet.junction_to_case.kelvins_per_watt()
            + entry.heat_sink.from_case.kelvins_per_watt(),
        heat_sink_j_per_k: entry.heat_sink.time_constant.seconds() / to_ambient,
        to_ambient_k_per_w: to_ambient,
    }
}

/// Resistance of both leads together.
fn lead_resistance(conductor: &Conductor) -> Resistance {
    /// Resistivity of annealed copper at 20 degC, ohm square millimetre per metre (IEC 60028).
    const COPPER: f64 = 1.0 / 58.0;
    let loop_of = |metres: f64, mm2: f64| {
        Resistance::from_ohms(2.0 * metres * COPPER / mm2)
            .unwrap_or_else(|_| unreachable!("a checked bench file has leads of a finite size"))
    };
    match conductor {
        Conductor::Measured { resistance } => *resistance,
        Conductor::Copper {
            length,
            cross_section,
            ..
        } => loop_of(length.metres(), cross_section.square_millimetres()),
        Conductor::Gauge { length, gauge } => {
            // ASTM B258: the diameter is 0.127 mm * 92^((36 - gauge) / 39).
            let diameter = 0.127 * 92_f64.powf((36.0 - f64::from(*gauge)) / 39.0);
            let area = core::f64::consts::FRAC_PI_4 * diameter * diameter;
            loop_of(length.metres(), area)
        }
    }
}
