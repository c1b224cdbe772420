//! The current path through the sink: leads, power MOSFET, sense resistor.
//!
//! The MOSFET follows the square law with its triode region (Shichman and Hodges, 1968; "level
//! 1" of circuit simulators, without channel-length modulation), driven by an ideal op-amp that
//! can lift the gate to a largest voltage. Both walls are solved exactly: how much current a
//! source can push through the fully driven path, and how little voltage a current needs.
//!
//! What it deliberately does not do: body diode (a reversed source drives no current here),
//! avalanche, the loop's ringing. Damage does not happen by itself; it is injected as a fault.

/// A power MOSFET and what drives it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mosfet {
    /// Gate threshold, volt.
    pub threshold_v: f64,
    /// `k` in `I = k / 2 * (V_gs - V_th)^2`, ampere per square volt.
    pub transconductance_a_per_v2: f64,
    /// Resistance in the drain that the channel does not account for, ohm.
    pub drain_ohm: f64,
    /// Highest gate voltage against ground, volt.
    pub gate_drive_v: f64,
}

/// The whole path from the source's terminals to ground.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Path {
    /// The MOSFET in it.
    pub mosfet: Mosfet,
    /// Both leads together, ohm.
    pub lead_ohm: f64,
    /// The sense resistor as it is, not as it is marked, ohm.
    pub sense_ohm: f64,
}

/// What the gate lets through.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Channel {
    /// The loop works: any current up to the walls.
    Driven,
    /// Failed short: a resistance whatever the gate does.
    Shorted,
    /// Failed open, or the circuit is cut: nothing.
    Open,
}

/// Channel resistance of a MOSFET that has failed short, ohm.
const SHORTED_OHM: f64 = 0.01;

impl Path {
    fn series_ohm(&self) -> f64 {
        self.lead_ohm + self.mosfet.drain_ohm + self.sense_ohm
    }

    /// Gate overdrive left at no current.
    fn overdrive_v(&self) -> f64 {
        self.mosfet.gate_drive_v - self.mosfet.threshold_v
    }

    /// The least voltage at the source's terminals at which a current can flow, the gate driven
    /// fully; infinite beyond the gate wall.
    pub(crate) fn least_voltage_v(&self, current_a: f64, channel: Channel) -> f64 {
        if current_a <= 0.0 {
            return f64::NEG_INFINITY;
        }
        let series = current_a * self.series_ohm();
        match channel {
            Channel::Open => f64::INFINITY,
            Channel::Shorted => series + current_a * SHORTED_OHM,
            Channel::Driven => {
                let overdrive = self.overdrive_v() - current_a * self.sense_ohm;
                let least = 2.0 * current_a / self.mosfet.transconductance_a_per_v2;
                let under = overdrive * overdrive - least;
                if overdrive <= 0.0 || under < 0.0 {
                    return f64::INFINITY;
                }
                // The smaller root of I = k (o d - d^2 / 2), without cancellation.
                series + least / (overdrive + under.sqrt())
            }
        }
    }

    /// The current that the fully driven path carries from a source with an open voltage and a
    /// resistance.
    pub(crate) fn largest_current_a(&self, open_v: f64, source_ohm: f64, channel: Channel) -> f64 {
        if open_v <= 0.0 {
            return 0.0;
        }
        let around = source_ohm + self.series_ohm();
        match channel {
            Channel::Open => 0.0,
            Channel::Shorted => open_v / (around + SHORTED_OHM),
            Channel::Driven => {
                let wall = self.gate_wall_a();
                let drop = open_v - wall * around;
                let overdrive = self.overdrive_v() - wall * self.sense_ohm;
                if drop >= overdrive {
                    wall
                } else {
                    self.triode_a(open_v, around)
                }
            }
        }
    }

    /// Where raising the converter raises nothing any more: the gate is at its highest and the
    /// MOSFET still saturated. The root of `R_s I + sqrt(2 I / k) = V_g - V_th`.
    pub(crate) fn gate_wall_a(&self) -> f64 {
        let overdrive = self.overdrive_v();
        if overdrive <= 0.0 {
            return 0.0;
        }
        let per_root = (2.0 / self.mosfet.transconductance_a_per_v2).sqrt();
        // The positive root in sqrt(I), in the form that holds for a sense resistor of zero.
        let root = 2.0 * overdrive
            / (per_root + (per_root * per_root + 4.0 * self.sense_ohm * overdrive).sqrt());
        root * root
    }

    /// The triode region's current: `I = k (o d - d^2 / 2)` with `o = O - I R_s` and
    /// `d = E - I R`, a quadratic in I.
    fn triode_a(&self, open_v: f64, around: f64) -> f64 {
        let factor = self.mosfet.transconductance_a_per_v2;
        let (overdrive, sense) = (self.overdrive_v(), self.sense_ohm);
        let a = factor * around * (sense - 0.5 * around);
        let b = -(factor * (overdrive * around + open_v * (sense - around)) + 1.0);
        let c = factor * open_v * (overdrive - 0.5 * open_v);
        let discriminant = (b * b - 4.0 * a * c).max(0.0).sqrt();
        // Both roots without cancellation; the one in the triode region is wanted.
        let q = -0.5 * (b + discriminant.copysign(b));
        let fits = |current: f64| {
            let drop = open_v - current * around;
            current >= 0.0 && drop >= -1e-12 && drop <= overdrive - current * sense + 1e-9
        };
        [c / q, q / a]
            .into_iter()
            .filter(|current| current.is_finite() && fits(*current))
            .fold(f64::INFINITY, f64::min)
            .min(open_v / around)
    }
}

#[cfg(test)]
mod tests {
    use super::{Channel, Mosfet, Path};

    fn path(threshold_v: f64, k: f64, sense_ohm: f64, gate_drive_v: f64) -> Path {
        Path {
            mosfet: Mosfet {
                threshold_v,
                transconductance_a_per_v2: k,
                drain_ohm: 0.01,
                gate_drive_v,
            },
            lead_ohm: 0.0,
            sense_ohm,
        }
    }

    // Source: a circuit simulator (ngspice 39), level-1 MOSFET, op-amp clamped: sweeps of the
    // two netlists give 6.698729811 A at the gate wall and 4.665881315 A at the source wall.
    #[test]
    fn both_walls_are_where_a_circuit_simulator_finds_them() {
        let gate = path(2.5, 4.0, 0.1, 5.0).largest_current_a(5.0, 0.05, Channel::Driven);
        assert!((gate - 6.698_729_811).abs() < 1e-8, "{gate}");
        let source = path(3.0, 20.0, 1.0, 12.0).largest_current_a(5.0, 0.05, Channel::Driven);
        assert!((source - 4.665_881_315).abs() < 1e-8, "{source}");
    }

    #[test]
    fn the_least_voltage_of_the_largest_current_is_the_sources_own() {
        for path in [path(2.5, 4.0, 0.1, 5.0), path(3.0, 20.0, 1.0, 12.0)] {
            for open in [0.1, 0.3, 0.5] {
                let current = path.largest_current_a(open, 0.05, Channel::Driven);
                let needed = path.least_voltage_v(current, Channel::Driven);
                let given = open - current * 0.05;
                assert!((needed - given).abs() < 1e-9, "{needed} {given}");
            }
        }
    }

    #[test]
    fn a_reversed_or_empty_source_drives_nothing() {
        let path = path(2.5, 4.0, 0.1, 5.0);
        for channel in [Channel::Driven, Channel::Shorted, Channel::Open] {
            assert!(path.largest_current_a(-1.0, 0.05, channel).abs() < f64::EPSILON);
        }
        assert!(path.least_voltage_v(1.0, Channel::Open).is_infinite());
    }

    #[test]
    fn a_shorted_channel_is_a_small_resistance() {
        let path = path(2.5, 4.0, 0.1, 5.0);
        let current = path.largest_current_a(3.6, 0.04, Channel::Shorted);
        assert!((current - 3.6 / (0.04 + 0.01 + 0.1 + 0.01)).abs() < 1e-12);
    }
}
