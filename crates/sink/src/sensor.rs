//! The temperature sensor: resistance to temperature and back, its divider, and
//! how a broken one is told from a hot one.
//!
//! Sources: the Beta equation and Steinhart and Hart (Deep-Sea Research 15
//! (1968) 497) for NTCs, IEC 60751 for platinum.
//!
//! Invariant: a sensor that is open or shorted is a named fault and never a
//! temperature; a broken wire must not read as a cool heat sink.

use quantity::{Resistance, Temperature, Voltage};

use crate::bench::{Element, ResistancePoint, SensorSide, TemperatureSensor};

/// 0 degC in kelvins.
const ZERO_CELSIUS: f64 = 273.15;
/// 25 degC in kelvins.
const REFERENCE: f64 = 298.15;
/// IEC 60751, per kelvin and its powers.
const PLATINUM_A: f64 = 3.908_3e-3;
const PLATINUM_B: f64 = -5.775e-7;
const PLATINUM_C: f64 = -4.183e-12;

/// A temperature sensor that cannot be read.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, thiserror::Error)]
pub enum SensorFault {
    /// No current through it: a broken wire.
    #[error("the temperature sensor is open; check its wire")]
    Open,
    /// No resistance: its wires touch.
    #[error("the temperature sensor is shorted; check its insulation")]
    Short,
}

/// A sensor's law between resistance and temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Law {
    /// ln(R / R_25) = B (1/T - 1/298.15 K).
    Beta {
        /// Resistance at 25 degC in ohms.
        resistance_25: f64,
        /// B in kelvins.
        beta: f64,
    },
    /// 1/T = a + b ln R + c (ln R)^3.
    SteinhartHart {
        /// a, 1/K.
        a: f64,
        /// b, 1/K.
        b: f64,
        /// c, 1/K.
        c: f64,
    },
    /// IEC 60751 with this resistance at 0 degC in ohms.
    Platinum {
        /// 100 or 1000.
        resistance_0: f64,
    },
}

impl Law {
    /// The law of a sensor; `None` for three points that lie on no such curve.
    pub fn of(element: &Element) -> Option<Self> {
        match element {
            Element::NtcBeta {
                resistance_25,
                beta_kelvin,
            } => Some(Self::Beta {
                resistance_25: resistance_25.ohms(),
                beta: *beta_kelvin,
            }),
            Element::SteinhartHart { a, b, c } => Some(Self::SteinhartHart {
                a: *a,
                b: *b,
                c: *c,
            }),
            Element::NtcPoints(points) => Self::through(points),
            Element::Pt100 => Some(Self::Platinum {
                resistance_0: 100.0,
            }),
            Element::Pt1000 => Some(Self::Platinum {
                resistance_0: 1_000.0,
            }),
        }
    }

    /// The Steinhart-Hart curve through three points.
    pub fn through(points: &[ResistancePoint; 3]) -> Option<Self> {
        let [(l1, y1), (l2, y2), (l3, y3)] = points.map(|point| {
            let kelvins = point.at.degrees_celsius() + ZERO_CELSIUS;
            (point.resistance.ohms().ln(), 1.0 / kelvins)
        });
        let slope2 = (y2 - y1) / (l2 - l1);
        let slope3 = (y3 - y1) / (l3 - l1);
        let c = (slope3 - slope2) / ((l3 - l2) * (l1 + l2 + l3));
        let b = slope2 - c * (l1 * l1 + l1 * l2 + l2 * l2);
        let a = y1 - (b + l1 * l1 * c) * l1;
        (a.is_finite() && b.is_finite() && c.is_finite()).then_some(Self::SteinhartHart { a, b, c })
    }

    /// The temperature in degrees Celsius for a resistance in ohms; NaN for one
    /// that is not above zero.
    pub fn celsius(&self, ohms: f64) -> f64 {
        match *self {
            Self::Beta {
                resistance_25,
                beta,
            } => 1.0 / (1.0 / REFERENCE + (ohms / resistance_25).ln() / beta) - ZERO_CELSIUS,
            Self::SteinhartHart { a, b, c } => {
                let l = ohms.ln();
                1.0 / (a + b * l + c * l * l * l) - ZERO_CELSIUS
            }
            Self::Platinum { resistance_0 } => bisect(-200.0, 850.0, |celsius| {
                platinum(resistance_0, celsius) < ohms
            }),
        }
    }

    /// The resistance in ohms at a temperature in degrees Celsius.
    pub fn ohms(&self, celsius: f64) -> f64 {
        let kelvins = celsius + ZERO_CELSIUS;
        match *self {
            Self::Beta {
                resistance_25,
                beta,
            } => resistance_25 * (beta * (1.0 / kelvins - 1.0 / REFERENCE)).exp(),
            // ln R from 10 mohm to 1 Tohm; 1/T rises with ln R.
            Self::SteinhartHart { a, b, c } => {
                bisect(-5.0, 28.0, |l| a + b * l + c * l * l * l < 1.0 / kelvins).exp()
            }
            Self::Platinum { resistance_0 } => platinum(resistance_0, celsius),
        }
    }

    /// Resistances in ohms beyond which no heat sink's temperature lies: the
    /// sensor is shorted below the first and open above the second.
    fn plausible(&self) -> (f64, f64) {
        match self {
            Self::Beta { .. } | Self::SteinhartHart { .. } => (self.ohms(200.0), self.ohms(-55.0)),
            Self::Platinum { .. } => (self.ohms(-100.0), self.ohms(400.0)),
        }
    }
}

/// IEC 60751.
fn platinum(resistance_0: f64, t: f64) -> f64 {
    let below = if t < 0.0 {
        PLATINUM_C * (t - 100.0) * t * t * t
    } else {
        0.0
    };
    resistance_0 * (1.0 + PLATINUM_A * t + PLATINUM_B * t * t + below)
}

/// The place where a condition that holds below stops holding.
fn bisect(mut low: f64, mut high: f64, below: impl Fn(f64) -> bool) -> f64 {
    for _ in 0..100 {
        let middle = f64::midpoint(low, high);
        if below(middle) {
            low = middle;
        } else {
            high = middle;
        }
    }
    f64::midpoint(low, high)
}

/// A sensor in its divider.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sensor {
    law: Law,
    series: f64,
    supply: f64,
    side: SensorSide,
}

impl Sensor {
    /// The sensor of a sink; `None` for three points that lie on no curve.
    pub fn of(sensor: &TemperatureSensor) -> Option<Self> {
        Some(Self {
            law: Law::of(&sensor.element)?,
            series: sensor.divider.series.ohms(),
            supply: sensor.divider.supply.volts(),
            side: sensor.divider.sensor,
        })
    }

    /// The temperature for the divider's voltage.
    ///
    /// # Errors
    /// [`SensorFault`] for a resistance that no heat sink's temperature gives.
    pub fn temperature(&self, divider: Voltage) -> Result<Temperature, SensorFault> {
        let ohms = self.sensor_ohms(divider.volts());
        let (short, open) = self.law.plausible();
        if ohms.is_nan() || ohms > open {
            return Err(SensorFault::Open);
        }
        if ohms < short {
            return Err(SensorFault::Short);
        }
        Temperature::from_degrees_celsius(self.law.celsius(ohms)).map_err(|_| SensorFault::Open)
    }

    fn sensor_ohms(&self, volts: f64) -> f64 {
        let share = (volts / self.supply).clamp(0.0, 1.0);
        match self.side {
            SensorSide::ToGround => self.series * share / (1.0 - share),
            SensorSide::ToSupply => self.series * (1.0 - share) / share,
        }
    }

    /// The divider's voltage at a temperature, to the nearest microvolt.
    pub fn voltage(&self, at: Temperature) -> Voltage {
        self.voltage_of(self.law.ohms(at.degrees_celsius()))
    }

    /// The divider's voltage for a resistance of the sensor.
    pub fn voltage_at(&self, resistance: Resistance) -> Voltage {
        self.voltage_of(resistance.ohms())
    }

    fn voltage_of(&self, ohms: f64) -> Voltage {
        let share = match self.side {
            SensorSide::ToGround => ohms / (ohms + self.series),
            SensorSide::ToSupply => self.series / (ohms + self.series),
        };
        // A share of one is the open sensor's: the supply itself.
        Voltage::from_volts(self.supply * share).unwrap_or(Voltage::ZERO)
    }
}

#[cfg(test)]
mod tests;
