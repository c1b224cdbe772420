//! Heat: transient thermal impedance, the heat sink, derating.
//!
//! A Foster network is a sum of first-order lags; its pairs describe the step
//! response of a data sheet and have no place in the device of their own.
//! Temperatures here are rises above a reference, in kelvins, or temperatures
//! in degrees Celsius, as each name says.
//!
//! What it deliberately does not do: no radiation and no draught; the heat sink
//! is one lag with a constant resistance to the air.

use quantity::Temperature;

use crate::bench::{HeatSink, Mosfet, SenseResistor};

/// One lag of a network.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Lag {
    /// Thermal resistance in K/W.
    pub resistance: f64,
    /// Time constant in seconds; 0 for one that settles at once.
    pub time_constant: f64,
}

/// A Foster network.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Network {
    lags: Vec<Lag>,
}

impl Lag {
    /// The share of the way to its settled value that is covered after a time.
    fn covered(self, seconds: f64) -> f64 {
        if self.time_constant > 0.0 {
            // 1 - exp(-x) without losing the digits of a small x.
            -(-seconds / self.time_constant).exp_m1()
        } else {
            1.0
        }
    }
}

impl Network {
    /// From its lags.
    pub const fn new(lags: Vec<Lag>) -> Self {
        Self { lags }
    }

    /// From junction to case: the data sheet's Foster network, or without one
    /// the whole resistance at once, which is on the safe side.
    pub fn junction_to_case(mosfet: &Mosfet) -> Self {
        if mosfet.foster.is_empty() {
            return Self::new(vec![Lag {
                resistance: mosfet.junction_to_case.kelvins_per_watt(),
                time_constant: 0.0,
            }]);
        }
        let lags = mosfet.foster.iter().map(|pair| Lag {
            resistance: pair.resistance.kelvins_per_watt(),
            time_constant: pair.time_constant.seconds(),
        });
        Self::new(lags.collect())
    }

    /// From case to air: pad and heat sink.
    pub fn case_to_ambient(heat_sink: &HeatSink) -> Self {
        Self::new(vec![
            Lag {
                resistance: heat_sink.from_case.kelvins_per_watt(),
                time_constant: 0.0,
            },
            Lag {
                resistance: heat_sink.to_ambient.kelvins_per_watt(),
                time_constant: heat_sink.time_constant.seconds(),
            },
        ])
    }

    /// From heat sink to air.
    pub fn sink_to_ambient(heat_sink: &HeatSink) -> Self {
        Self::new(vec![Lag {
            resistance: heat_sink.to_ambient.kelvins_per_watt(),
            time_constant: heat_sink.time_constant.seconds(),
        }])
    }

    /// This network with another in series.
    #[must_use]
    pub fn then(mut self, other: &Self) -> Self {
        self.lags.extend_from_slice(&other.lags);
        self
    }

    /// The rise per watt of a step of power after a time, in K/W:
    /// the sum of R_i (1 - exp(-t / tau_i)).
    pub fn impedance(&self, seconds: f64) -> f64 {
        self.lags
            .iter()
            .map(|lag| lag.resistance * lag.covered(seconds))
            .sum()
    }

    /// The settled rise per watt, in K/W.
    pub fn resistance(&self) -> f64 {
        self.lags.iter().map(|lag| lag.resistance).sum()
    }
}

/// A network's rise above its reference as the power changes from step to step.
#[derive(Debug, Clone, PartialEq)]
pub struct Rise {
    network: Network,
    rises: Vec<f64>,
}

impl Rise {
    /// A network at its reference temperature.
    pub fn at_rest(network: Network) -> Self {
        let rises = vec![0.0; network.lags.len()];
        Self { network, rises }
    }

    /// Lets a constant power act for a time, exactly, whatever the time.
    pub fn advance(&mut self, power: f64, seconds: f64) {
        for (lag, rise) in self.network.lags.iter().zip(&mut self.rises) {
            *rise += (power * lag.resistance - *rise) * lag.covered(seconds);
        }
    }

    /// Repeats what led here from an earlier rise, in a time, so many times
    /// more.
    ///
    /// Each lag is linear: a round takes its rise `r` to `a r + b` with
    /// `a = exp(-T / tau)`, whatever the powers within the round, and the next
    /// one does the same.
    pub fn repeat(&mut self, before: &Self, seconds: f64, times: f64) {
        let lags = self.network.lags.iter().zip(&before.rises);
        for (rise, (lag, earlier)) in self.rises.iter_mut().zip(lags) {
            let covered = lag.covered(seconds);
            if covered <= 0.0 {
                continue;
            }
            // Where the rounds settle: r = a r + b.
            let settled = earlier + (*rise - earlier) / covered;
            let all = lag.covered(seconds * times);
            *rise += (settled - *rise) * all;
        }
    }

    /// The rise in kelvins.
    pub fn kelvins(&self) -> f64 {
        self.rises.iter().sum()
    }
}

/// The largest heat sink's resistance to the air, in K/W, that keeps a junction
/// at its limit: R_sa = (T_j - T_a - P (R_jc + R_cs)) / P. `None` for a power
/// that is not above zero or that no heat sink could carry away.
pub fn largest_to_ambient(
    junction_max: Temperature,
    ambient: Temperature,
    power_watts: f64,
    junction_to_sink: f64,
) -> Option<f64> {
    let rise = junction_max.degrees_celsius() - ambient.degrees_celsius();
    let largest = rise / power_watts - junction_to_sink;
    (power_watts > 0.0 && largest > 0.0).then_some(largest)
}

/// The share of a rating that is left at a temperature: all of it up to one,
/// none from another on, a straight line between.
pub fn derating(at: f64, full_up_to: f64, none_at: f64) -> f64 {
    ((none_at - at) / (none_at - full_up_to)).clamp(0.0, 1.0)
}

/// The power in watts that a sense resistor may turn into heat at an ambient
/// temperature.
pub fn sense_resistor_rating(resistor: &SenseResistor, ambient: Temperature) -> f64 {
    resistor.rating.watts()
        * derating(
            ambient.degrees_celsius(),
            resistor.full_rating_up_to.degrees_celsius(),
            resistor.no_rating_at.degrees_celsius(),
        )
}

#[cfg(test)]
mod tests;
