//! What the compiler and the rules know of a sink.
//!
//! A rule needs a few facts of a sink, the bench entry has many: converters, leads, heat sinks,
//! ports. The facts are taken out of the entry in one place, so that a rule names what it judges
//! by and a test needs no bench.

use quantity::{Charge, Current, Energy, Power, Span, Temperature, Voltage};
use sink::bench::{InterlockDefaults, Link, SinkEntry};
use sink::converter::Converter;
use sink::correction::Correction;
use sink::envelope::Envelope;
use sink::leads::{LeadsError, two_wire_resistance};

use crate::plan::{Armed, Interlocks, Ranges};

/// What the compiler and the rules know of a sink.
#[derive(Debug, Clone, PartialEq)]
pub struct Facts {
    /// Its name on the bench.
    pub name: String,
    /// Most current it may draw.
    pub current_max: Current,
    /// Most power it may take.
    pub power_max: Power,
    /// Largest voltage it may be connected to.
    pub voltage_max: Voltage,
    /// Its setting converter.
    pub converter: Converter,
    /// What one step of the setting converter is.
    pub current_step: Current,
    /// Least current it can hold.
    pub current_floor: Current,
    /// What its reading converters show at most.
    pub ranges: Ranges,
    /// Its sampling period.
    pub tick: Span,
    /// Steps its queue holds.
    pub queue: u16,
    /// Whether it has an isolator relay.
    pub isolator: bool,
    /// Its shortest readback interval.
    pub readback_fastest: Span,
    /// Its longest readback interval.
    pub readback_slowest: Span,
    /// Its readback interval where a sequence names none.
    pub readback_usual: Span,
    /// Whether it can hold a power.
    pub holds_power: bool,
    /// Whether it can hold a resistance.
    pub holds_resistance: bool,
    /// Samples a burst can have; zero: it captures none.
    pub burst_samples: u16,
    /// Speed of its port in baud; `None` where the port is no bottleneck (TCP, in-process).
    pub baud: Option<u32>,
    /// How long it may hear nothing before it turns itself off.
    pub deadman: Span,
    /// The bench's interlocks for it.
    pub interlocks: Thresholds,
    /// What it can do at each source voltage, or why that cannot be worked out.
    pub envelope: Result<Envelope, LeadsError>,
    /// Nominal from true values and back.
    pub correction: Correction,
}

/// Steps that every sink's queue holds (the protocol's least).
const QUEUE_LEAST: u16 = 16;
/// Samples that the reference firmware's burst memory holds.
const BURST_SAMPLES: u16 = 512;

impl Facts {
    /// What the bench file says of a sink, with its calibration.
    ///
    /// What only the sink itself can say (its queue, its abilities, its burst memory) is taken
    /// as the reference firmware has it; whoever has read the sink's description writes its
    /// words over these fields.
    pub fn of(entry: &SinkEntry, correction: Correction) -> Self {
        // Leads in no table are told by the envelope's rule.
        let leads = two_wire_resistance(entry).unwrap_or_default();
        let front_end = &entry.front_end;
        let converter = Converter::of(front_end);
        Self {
            name: entry.name.clone(),
            current_max: entry.limits.current.min(converter.top()),
            power_max: entry.limits.power,
            voltage_max: entry.limits.voltage,
            converter,
            current_step: converter.step(),
            current_floor: converter.floor(),
            ranges: Ranges {
                current: front_end.adc.current_full_scale,
                voltage: front_end.adc.voltage_full_scale,
            },
            tick: front_end.tick,
            queue: QUEUE_LEAST,
            isolator: entry.isolator,
            readback_fastest: entry.readback.fastest,
            readback_slowest: entry.readback.slowest,
            readback_usual: entry.readback.usual,
            holds_power: true,
            holds_resistance: true,
            burst_samples: BURST_SAMPLES,
            baud: match entry.link {
                Link::Serial { baud, .. } => Some(baud),
                Link::Tcp { .. } | Link::Simulated { .. } => None,
            },
            deadman: entry.deadman,
            interlocks: Thresholds::of(&entry.interlocks),
            envelope: Envelope::of(entry),
            correction: correction.with_leads(leads),
        }
    }
}

/// Interlocks that need not be complete: the bench's defaults, or what a merge has so far.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Thresholds {
    /// Hottest heat sink.
    pub over_temperature: Option<Armed<Temperature>>,
    /// Most power in the sink.
    pub over_power: Option<Armed<Power>>,
    /// Least voltage of the device under test.
    pub undervoltage: Option<Armed<Voltage>>,
    /// Largest voltage.
    pub over_voltage: Option<Armed<Voltage>>,
    /// Voltage below this means reversed leads.
    pub reversed_polarity: Option<Armed<Voltage>>,
    /// Largest current.
    pub over_current: Option<Armed<Current>>,
    /// Largest shortfall of the readback.
    pub not_following: Option<Armed<Current>>,
    /// Largest excess of the readback.
    pub not_releasing: Option<Armed<Current>>,
    /// How long a sensor may be faulty.
    pub sensor_fault: Option<Span>,
    /// How long without a valid readback.
    pub silence: Option<Span>,
    /// Most charge of the run.
    pub charge: Option<Charge>,
    /// Most energy of the run.
    pub energy: Option<Energy>,
    /// Longest run.
    pub time: Option<Span>,
    /// Largest jump of the sink's clock.
    pub clock: Option<Span>,
}

impl Thresholds {
    /// The defaults of a bench.
    pub fn of(defaults: &InterlockDefaults) -> Self {
        macro_rules! armed {
            ($field:ident) => {
                Some(Armed {
                    threshold: defaults.$field.threshold,
                    persistence: defaults.$field.persistence,
                })
            };
        }
        Self {
            over_temperature: armed!(over_temperature),
            over_power: armed!(over_power),
            undervoltage: armed!(undervoltage),
            over_voltage: armed!(over_voltage),
            reversed_polarity: armed!(reversed_polarity),
            over_current: armed!(over_current),
            not_following: armed!(not_following),
            not_releasing: armed!(not_releasing),
            sensor_fault: Some(defaults.sensor_fault.persistence),
            silence: Some(defaults.silence.persistence),
            charge: defaults.charge,
            energy: defaults.energy,
            time: defaults.time,
            clock: Some(defaults.clock.threshold),
        }
    }

    /// The complete interlocks, or `None` while one that must have a threshold has none.
    pub fn complete(&self) -> Option<Interlocks> {
        Some(Interlocks {
            over_temperature: self.over_temperature?,
            over_power: self.over_power?,
            undervoltage: self.undervoltage?,
            over_voltage: self.over_voltage?,
            reversed_polarity: self.reversed_polarity?,
            over_current: self.over_current?,
            not_following: self.not_following?,
            not_releasing: self.not_releasing?,
            sensor_fault: self.sensor_fault?,
            silence: self.silence?,
            charge: self.charge,
            energy: self.energy,
            time: self.time,
            clock: self.clock?,
        })
    }
}
