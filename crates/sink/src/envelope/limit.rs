//! The limits by name, and the lines of the safe operating area.

use std::fmt;

use serde::{Deserialize, Serialize};

use crate::bench::Mosfet;

/// Share of the MOSFET's rated power that is allowed without a d.c. line.
/// Common practice, no source: switching MOSFETs fail in linear operation at a
/// fraction of their rating.
const SHARE_WITHOUT_DC_LINE: f64 = 0.25;
/// Share of the highest drain voltage from which the allowed power falls with
/// the voltage, too. Common practice, no source.
const INSTABILITY_FROM: f64 = 0.2;

/// What bounds a sink's current.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Limit {
    /// The source's voltage is above what the sink or its MOSFET stands.
    Voltage,
    /// The current limit stated in the bench file.
    StatedCurrent,
    /// The power limit stated in the bench file.
    StatedPower,
    /// The converter's last code.
    Converter,
    /// The gate is at its highest voltage.
    GateDrive,
    /// The source cannot push more through the sink's own resistance.
    Source,
    /// The sense resistor's rating.
    SenseResistor,
    /// The MOSFET's continuous current.
    MosfetCurrent,
    /// The junction's temperature.
    Junction,
    /// The heat sink's temperature.
    HeatSink,
    /// The d.c. line of the MOSFET's safe operating area.
    SafeOperatingArea,
    /// The conservative limit that stands in for a missing d.c. line.
    NoDcLine,
}

impl Limit {
    /// Its name in a table or a plot.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Voltage => "voltage",
            Self::StatedCurrent => "stated current",
            Self::StatedPower => "stated power",
            Self::Converter => "converter",
            Self::GateDrive => "gate drive",
            Self::Source => "source",
            Self::SenseResistor => "sense resistor",
            Self::MosfetCurrent => "MOSFET current",
            Self::Junction => "junction",
            Self::HeatSink => "heat sink",
            Self::SafeOperatingArea => "safe operating area",
            Self::NoDcLine => "no d.c. line",
        }
    }
}

impl fmt::Display for Limit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

/// What a user should know beside an envelope's numbers.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Warning {
    /// The MOSFET's data sheet has no d.c. line.
    NoDcLine,
    /// The MOSFET's transient thermal impedance is not given.
    NoFosterNetwork,
}

impl fmt::Display for Warning {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::NoDcLine => {
                "the MOSFET has no d.c. line in its safe operating area: such a part is made for \
                 switching and may fail in linear operation well inside its power rating; a \
                 quarter of its rated power is allowed, less at high voltage (common practice, no \
                 source); give soa_dc from a data sheet that has one, or use another part"
            }
            Self::NoFosterNetwork => {
                "the MOSFET has no Foster network: pulses are allowed no more heat in the junction \
                 than a steady current; give foster from the data sheet's transient thermal \
                 impedance"
            }
        })
    }
}

/// The current of a line through points, straight in log-log; level below the
/// first point, nothing beyond the last.
pub(super) fn log_log(points: &[(f64, f64)], voltage: f64) -> f64 {
    let Some(&(first, current)) = points.first() else {
        return 0.0;
    };
    if voltage <= first {
        return current;
    }
    for pair in points.windows(2) {
        if let &[(v0, i0), (v1, i1)] = pair
            && voltage <= v1
        {
            let share = (voltage / v0).ln() / (v1 / v0).ln();
            return i0 * (i1 / i0).powf(share);
        }
    }
    0.0
}

/// What is allowed without a d.c. line: a share of the rated power, falling
/// with the voltage where thermal instability is to be feared.
pub(super) fn without_dc_line(mosfet: &Mosfet, voltage: f64) -> f64 {
    let rise = mosfet.junction_max.degrees_celsius() - 25.0;
    let rated = rise / mosfet.junction_to_case.kelvins_per_watt();
    let from = INSTABILITY_FROM * mosfet.voltage_max.volts();
    let share = if voltage > from { from / voltage } else { 1.0 };
    if voltage <= 0.0 {
        return f64::INFINITY;
    }
    SHARE_WITHOUT_DC_LINE * rated * share / voltage
}
