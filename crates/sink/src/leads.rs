//! The leads' resistance: copper by cross-section or gauge, and what it does to
//! a two-wire reading.
//!
//! Sources: IEC 60228 (largest d.c. resistance at 20 degC, plain copper), ASTM
//! B258 for the diameters of the American wire gauge, and the International
//! Annealed Copper Standard for copper itself (1/58 ohm mm2/m, 0.00393 per
//! kelvin at 20 degC). IEC 60228 has a temperature factor of its own, 0.004 per
//! kelvin, which differs in the third digit; 0.00393 is used throughout.

use quantity::{Area, Length, Resistance, Temperature};

use crate::bench::{Conductor, Sensing, SinkEntry, Strands};
use crate::uncertainty::Stated;

/// Copper's temperature coefficient at 20 degC, per kelvin.
pub const COPPER_PER_KELVIN: f64 = 0.003_93;
/// Resistivity of annealed copper at 20 degC, ohm mm2/m (IACS, 1/58).
const COPPER_RESISTIVITY: f64 = 1.0 / 58.0;

/// IEC 60228: cross-section in mm2, largest resistance at 20 degC in ohm/km
/// for class 1 and 2, and for class 5.
const IEC_60228: [(f64, f64, f64); 8] = [
    (0.5, 36.0, 39.0),
    (0.75, 24.5, 26.0),
    (1.0, 18.1, 19.5),
    (1.5, 12.1, 13.3),
    (2.5, 7.41, 7.98),
    (4.0, 4.61, 4.95),
    (6.0, 3.08, 3.30),
    (10.0, 1.83, 1.91),
];

/// Leads whose resistance is in no table.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum LeadsError {
    /// A cross-section that IEC 60228 does not list.
    #[error(
        "a cross-section of {0} is not in IEC 60228; use 0.5, 0.75, 1, 1.5, 2.5, 4, 6 or 10 mm2, \
         or give the measured resistance"
    )]
    CrossSection(Area),
    /// A resistance that does not fit its type: a length in kilometres.
    #[error("leads of {0} are no bench's; check the length")]
    Length(Length),
}

/// The resistance of the whole loop (both leads) at a temperature.
///
/// A measured resistance is taken as it is: it was measured at the bench.
///
/// # Errors
/// [`LeadsError`] for a cross-section that is in no table.
pub fn loop_resistance(conductor: &Conductor, at: Temperature) -> Result<Resistance, LeadsError> {
    let (length, per_metre) = match *conductor {
        Conductor::Measured { resistance } => return Ok(resistance),
        Conductor::Copper {
            length,
            cross_section,
            strands,
        } => (length, iec_60228(cross_section, strands)?),
        Conductor::Gauge { length, gauge } => (length, gauge_per_metre(gauge)),
    };
    let ohms = 2.0 * length.metres() * per_metre * temperature_factor(at);
    Resistance::from_ohms(ohms).map_err(|_| LeadsError::Length(length))
}

/// Largest resistance per metre at 20 degC after IEC 60228.
fn iec_60228(cross_section: Area, strands: Strands) -> Result<f64, LeadsError> {
    let wanted = cross_section.square_millimetres();
    IEC_60228
        .iter()
        .find(|(listed, ..)| (listed - wanted).abs() < 1e-9)
        .map(|&(_, fixed, flexible)| match strands {
            Strands::Fixed => fixed / 1_000.0,
            Strands::Flexible => flexible / 1_000.0,
        })
        .ok_or(LeadsError::CrossSection(cross_section))
}

/// Resistance per metre at 20 degC of solid annealed copper by its American
/// wire gauge: diameter 0.127 mm * 92^((36 - n) / 39).
fn gauge_per_metre(gauge: u8) -> f64 {
    let diameter = 0.127 * 92_f64.powf((36.0 - f64::from(gauge)) / 39.0);
    COPPER_RESISTIVITY / (std::f64::consts::FRAC_PI_4 * diameter * diameter)
}

/// Copper's resistance at a temperature over that at 20 degC.
pub fn temperature_factor(at: Temperature) -> f64 {
    1.0 + COPPER_PER_KELVIN * (at.degrees_celsius() - 20.0)
}

/// The resistance of both leads if the voltage is read over them, at the bench's
/// ambient temperature; zero for four wires.
///
/// # Errors
/// [`LeadsError`] as [`loop_resistance`].
pub fn two_wire_resistance(sink: &SinkEntry) -> Result<Resistance, LeadsError> {
    match sink.leads.sensing {
        Sensing::FourWire => Ok(Resistance::ZERO),
        Sensing::TwoWire => loop_resistance(&sink.leads.conductor, sink.ambient),
    }
}

/// The standard uncertainty of the resistance that two-wire voltages are
/// corrected by, in ohms; zero for four wires.
///
/// A tabled resistance is a largest value and leaves the contacts out; it is
/// taken as known to a tenth (rectangular; common practice, no source), a
/// measured one to a twentieth.
///
/// # Errors
/// [`LeadsError`] as [`loop_resistance`].
pub fn two_wire_uncertainty(sink: &SinkEntry) -> Result<f64, LeadsError> {
    let share = match sink.leads.conductor {
        Conductor::Measured { .. } => 0.05,
        Conductor::Copper { .. } | Conductor::Gauge { .. } => 0.1,
    };
    let bound = two_wire_resistance(sink)?.ohms() * share;
    Ok(Stated::Rectangular.standard_uncertainty(bound))
}

#[cfg(test)]
mod tests;
