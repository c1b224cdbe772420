//! The envelope: the largest current at each source voltage, and which limit
//! binds.
//!
//! Every limit is solved on its own and the least is the envelope; the binding
//! limit's name goes with each number. Currents round down. Circuit and heat
//! are `circuit` and `thermal`; temperatures start from the bench's ambient.
//!
//! For a pulse (a duration) only heat gets better: the converter, the circuit,
//! the sense resistor and the d.c. line of the safe operating area hold as they
//! do for ever, since no data sheet promises a home-built sink more. A pulse is
//! one, out of rest at ambient temperature; for repeated pulses the mean power
//! must also fit the continuous envelope.
//!
//! What it deliberately does not do: it is no protection; it says what a sink
//! that is in order can do.

mod limit;
mod table;

use quantity::{Current, Resistance, Span, Temperature, Voltage};

use crate::bench::SinkEntry;
use crate::circuit::{Circuit, Wall};
use crate::converter::Converter;
use crate::leads::{LeadsError, loop_resistance};
use crate::thermal::{Lag, Network, sense_resistor_rating};

pub use limit::{Limit, Warning};
pub use table::{EnvelopeTable, Row, usual_durations};

/// How long the current is to flow.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Duration {
    /// Once, for a time, out of rest.
    Pulse(Span),
    /// For ever.
    Continuous,
}

/// The largest current at one source voltage.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Ceiling {
    /// The current.
    pub current: Current,
    /// The limit that binds.
    pub binding: Limit,
    /// Every limit's own current, the least first.
    pub limits: Vec<(Limit, Current)>,
}

/// What one sink can do.
#[derive(Debug, Clone, PartialEq)]
pub struct Envelope {
    sink: SinkEntry,
    /// Both leads, in ohms.
    leads: f64,
    junction_to_case: Network,
    case_to_ambient: Network,
    sink_to_ambient: Network,
}

impl Envelope {
    /// The envelope of a sink of the bench.
    ///
    /// # Errors
    /// [`LeadsError`] for leads of a cross-section that is in no table.
    pub fn of(sink: &SinkEntry) -> Result<Self, LeadsError> {
        // Copper at the ambient temperature; a warm lead only lowers the
        // source's wall, which the sink then reports as not following.
        let leads = loop_resistance(&sink.leads.conductor, sink.ambient)?;
        Ok(Self {
            sink: sink.clone(),
            leads: leads.ohms(),
            junction_to_case: Network::junction_to_case(&sink.mosfet),
            case_to_ambient: Network::case_to_ambient(&sink.heat_sink),
            sink_to_ambient: Network::sink_to_ambient(&sink.heat_sink),
        })
    }

    /// The largest current on a source of a voltage and an output resistance.
    ///
    /// With a source resistance of zero the voltage is that at the sink under
    /// load, which is the hottest case.
    pub fn ceiling(&self, source: Voltage, output: Resistance, duration: Duration) -> Ceiling {
        let load = Load {
            volts: source.volts(),
            source: output.ohms(),
        };
        let mut limits: Vec<(Limit, Current)> = self
            .amperes(&load, duration)
            .into_iter()
            .map(|(limit, amperes)| (limit, rounded_down(amperes)))
            .collect();
        // A stable sort: of equal currents the first in the order of the limits.
        limits.sort_by_key(|(_, current)| *current);
        let (binding, current) = limits
            .first()
            .copied()
            .unwrap_or((Limit::StatedCurrent, Current::ZERO));
        Ceiling {
            current,
            binding,
            limits,
        }
    }

    /// The smallest current that can be set.
    pub fn floor(&self) -> Current {
        self.converter().floor()
    }

    /// The smallest change of current that can be set.
    pub fn step(&self) -> Current {
        self.converter().step()
    }

    /// The converter that sets.
    pub const fn converter(&self) -> Converter {
        Converter::of(&self.sink.front_end)
    }

    /// What a user should know beside the numbers.
    pub fn warnings(&self) -> Vec<Warning> {
        let mut warnings = Vec::new();
        if self.sink.mosfet.soa_dc.is_empty() {
            warnings.push(Warning::NoDcLine);
        }
        if self.sink.mosfet.foster.is_empty() {
            warnings.push(Warning::NoFosterNetwork);
        }
        warnings
    }

    /// The junction's and the heat sink's settled temperature in degrees
    /// Celsius for a power in watts.
    pub fn settled_temperatures(&self, watts: f64) -> (f64, f64) {
        let ambient = self.sink.ambient.degrees_celsius();
        let sink = ambient + watts * self.sink_to_ambient.resistance();
        let junction = ambient
            + watts * (self.junction_to_case.resistance() + self.case_to_ambient.resistance());
        (junction, sink)
    }

    /// The power in the MOSFET, in watts, at a voltage at the device under test
    /// and a current: what leads and sense resistor turn into heat is not in it.
    pub fn mosfet_watts(&self, volts: f64, amperes: f64) -> f64 {
        (amperes * (volts - amperes * (self.leads + self.sense()))).max(0.0)
    }

    /// The heat path from the junction to the heat sink (to the case and over
    /// its pad), and that from the heat sink to the air; each a rise per watt
    /// over time.
    pub fn heat_path(&self) -> (Network, Network) {
        let pad = Network::new(vec![Lag {
            resistance: self.sink.heat_sink.from_case.kelvins_per_watt(),
            time_constant: 0.0,
        }]);
        (
            self.junction_to_case.clone().then(&pad),
            self.sink_to_ambient.clone(),
        )
    }

    /// The ambient temperature that the envelope stands on.
    pub const fn ambient(&self) -> Temperature {
        self.sink.ambient
    }

    /// The hottest that the junction may get.
    pub const fn junction_max(&self) -> Temperature {
        self.sink.mosfet.junction_max
    }

    /// The hottest that the heat sink may get.
    pub fn heat_sink_max(&self) -> Temperature {
        self.sink.limits.temperature.min(self.sink.heat_sink.limit)
    }

    /// The resistance of both leads in ohms.
    pub const fn leads_ohms(&self) -> f64 {
        self.leads
    }

    fn sense(&self) -> f64 {
        self.sink.front_end.sense_resistor.resistance.ohms()
    }

    /// Every limit's largest current in amperes.
    fn amperes(&self, load: &Load, duration: Duration) -> Vec<(Limit, f64)> {
        let wall = Circuit::of(&self.sink, load.volts, load.source + self.leads).largest();
        let wall_limit = match wall.wall {
            Wall::Gate | Wall::Following => Limit::GateDrive,
            Wall::Source => Limit::Source,
        };
        let safe_area = if self.sink.mosfet.soa_dc.is_empty() {
            Limit::NoDcLine
        } else {
            Limit::SafeOperatingArea
        };
        vec![
            (Limit::Voltage, self.voltage(load)),
            (Limit::StatedCurrent, self.sink.limits.current.amperes()),
            (Limit::StatedPower, self.stated_power(load)),
            (Limit::Converter, self.converter().top().amperes()),
            (wall_limit, wall.current),
            (Limit::SenseResistor, self.sense_resistor()),
            (Limit::MosfetCurrent, self.sink.mosfet.current_max.amperes()),
            (Limit::Junction, self.junction(load, duration)),
            (Limit::HeatSink, self.heat_sink(load, duration)),
            (safe_area, self.safe_operating_area(load, duration)),
        ]
    }

    fn voltage(&self, load: &Load) -> f64 {
        let allowed = self.sink.limits.voltage.min(self.sink.mosfet.voltage_max);
        if load.volts > allowed.volts() {
            0.0
        } else {
            f64::INFINITY
        }
    }

    fn stated_power(&self, load: &Load) -> f64 {
        least_current_of_power(load.volts, load.source, self.sink.limits.power.watts())
    }

    fn sense_resistor(&self) -> f64 {
        let resistor = &self.sink.front_end.sense_resistor;
        // The highest resistance within the tolerance gets hottest.
        let ohms = self.sense() * (1.0 + resistor.tolerance.fraction());
        (sense_resistor_rating(resistor, self.sink.ambient) / ohms).sqrt()
    }

    fn junction(&self, load: &Load, duration: Duration) -> f64 {
        let ambient = self.sink.ambient.degrees_celsius();
        let room = self.sink.mosfet.junction_max.degrees_celsius() - ambient;
        let impedance =
            after(&self.junction_to_case, duration) + after(&self.case_to_ambient, duration);
        self.mosfet_power(load, room / impedance)
    }

    fn heat_sink(&self, load: &Load, duration: Duration) -> f64 {
        let ambient = self.sink.ambient.degrees_celsius();
        let allowed = self.sink.limits.temperature.min(self.sink.heat_sink.limit);
        let room = allowed.degrees_celsius() - ambient;
        self.mosfet_power(load, room / after(&self.sink_to_ambient, duration))
    }

    /// The current at which the MOSFET reaches a power for the first time.
    fn mosfet_power(&self, load: &Load, watts: f64) -> f64 {
        let resistance = load.source + self.leads + self.sense();
        least_current_of_power(load.volts, resistance, watts)
    }

    /// The current at which the safe operating area is first left: the d.c.
    /// line at the drain's voltage, derated with the case's temperature.
    fn safe_operating_area(&self, load: &Load, duration: Duration) -> f64 {
        let resistance = load.source + self.leads + self.sense();
        let ambient = self.sink.ambient.degrees_celsius();
        let junction_max = self.sink.mosfet.junction_max.degrees_celsius();
        let case_impedance = after(&self.case_to_ambient, duration);
        let inside = |current: f64| {
            let drain_source = load.volts - current * resistance;
            let case = ambient + current * drain_source.max(0.0) * case_impedance;
            let derating = ((junction_max - case) / (junction_max - 25.0)).clamp(0.0, 1.0);
            current <= self.dc_line(drain_source) * derating
        };
        first_outside(load.volts.max(0.0) / resistance, inside)
    }

    /// The d.c. line's current at a drain-to-source voltage, case at 25 degC.
    fn dc_line(&self, drain_source: f64) -> f64 {
        let mosfet = &self.sink.mosfet;
        let line: Vec<(f64, f64)> = mosfet
            .soa_dc
            .iter()
            .map(|point| (point.voltage.volts(), point.current.amperes()))
            .collect();
        if line.is_empty() {
            return limit::without_dc_line(mosfet, drain_source);
        }
        limit::log_log(&line, drain_source)
    }
}

/// A source, in volts and ohms.
struct Load {
    volts: f64,
    source: f64,
}

/// A network's rise per watt for a duration.
fn after(network: &Network, duration: Duration) -> f64 {
    match duration {
        Duration::Continuous => network.resistance(),
        Duration::Pulse(span) => network.impedance(span.seconds()),
    }
}

/// The least current at which I (V - I R) reaches a power; infinite if it
/// never does.
fn least_current_of_power(volts: f64, resistance: f64, watts: f64) -> f64 {
    if watts <= 0.0 || volts <= 0.0 {
        return if watts <= 0.0 { 0.0 } else { f64::INFINITY };
    }
    let discriminant = volts * volts - 4.0 * resistance * watts;
    if discriminant < 0.0 {
        return f64::INFINITY;
    }
    // This form does not subtract two nearly equal numbers.
    2.0 * watts / (volts + discriminant.sqrt())
}

/// The least value from zero to `end` at which a condition no longer holds;
/// infinite if it holds throughout.
///
/// Neither the line nor its derating is monotone in the current, so the range
/// is walked in steps fine against the data sheet before the edge is refined.
fn first_outside(end: f64, inside: impl Fn(f64) -> bool) -> f64 {
    const STEPS: u32 = 4_096;
    let at = |step: u32| end * f64::from(step) / f64::from(STEPS);
    let Some(step) = (0..=STEPS).find(|&step| !inside(at(step))) else {
        return f64::INFINITY;
    };
    if step == 0 {
        return 0.0;
    }
    let (mut low, mut high) = (at(step - 1), at(step));
    for _ in 0..60 {
        let middle = f64::midpoint(low, high);
        if inside(middle) {
            low = middle;
        } else {
            high = middle;
        }
    }
    low
}

/// As a quantity, rounded down; what is beyond the range is held there.
fn rounded_down(amperes: f64) -> Current {
    if amperes.is_nan() || amperes <= 0.0 {
        return Current::ZERO;
    }
    match Current::from_amperes(amperes) {
        Ok(current) if current.amperes() > amperes => {
            current.saturating_sub(Current::from_microamperes(1))
        }
        Ok(current) => current,
        Err(_) => Current::MAX,
    }
}

#[cfg(test)]
mod tests;
