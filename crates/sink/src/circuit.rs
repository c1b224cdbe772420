//! The sink's d.c. circuit: source, leads, MOSFET, sense resistor, op-amp.
//!
//! ```text
//! source --- R_source + R_leads --- R_drain --- MOSFET --- sense --- R_sense --- ground
//!                                               gate <-- op-amp (+: set voltage, -: sense)
//! ```
//!
//! Solved exactly, with the MOSFET's triode region: where the source cannot
//! push more through, the loop runs out of headroom, and a formula that takes
//! the least of separate walls is off by about a percent there.
//!
//! What it deliberately does not do: no channel-length modulation (the loop
//! cancels it), no dynamics (the transient is the sink's own matter).

use crate::bench::{SinkEntry, Transfer};

/// The circuit in volts, ohms and amperes.
#[derive(Debug, Clone, PartialEq)]
pub struct Circuit {
    /// Open-circuit voltage of the source.
    pub source: f64,
    /// Source and leads, in series.
    pub series: f64,
    /// Resistance of the MOSFET in series with its channel.
    pub drain: f64,
    /// Sense resistor.
    pub sense: f64,
    /// The MOSFET's channel.
    pub channel: Channel,
    /// Highest gate voltage.
    pub gate_max: f64,
    /// Open-loop gain of the op-amp; infinite for an ideal one.
    pub gain: f64,
}

/// How the MOSFET's channel conducts.
#[derive(Debug, Clone, PartialEq)]
pub enum Channel {
    /// Square law with its triode region (Shichman and Hodges).
    SquareLaw {
        /// Threshold voltage.
        threshold: f64,
        /// k in A/V^2, for I = k/2 (V_gs - V_th)^2 in saturation.
        factor: f64,
    },
    /// Gate voltage and saturation current by points of a data sheet; below
    /// saturation the channel is taken as fully on.
    Table(Vec<(f64, f64)>),
}

/// What keeps the current from rising further.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Wall {
    /// None: the loop follows its setting.
    Following,
    /// The gate is at its highest voltage and the channel saturated.
    Gate,
    /// The gate is at its highest voltage and the channel fully on: source and
    /// series resistances bound the current.
    Source,
}

/// Where the circuit settles.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct OperatingPoint {
    /// Current in amperes.
    pub current: f64,
    /// Gate voltage from ground.
    pub gate: f64,
    /// Voltage over the sense resistor.
    pub sense: f64,
    /// Voltage at the MOSFET's drain terminal from ground.
    pub drain: f64,
    /// What bounds the current.
    pub wall: Wall,
}

impl Channel {
    /// Of a sink's MOSFET.
    pub fn of(transfer: &Transfer) -> Self {
        match transfer {
            Transfer::SquareLaw { threshold, factor } => Self::SquareLaw {
                threshold: threshold.volts(),
                factor: factor.amperes_per_square_volt(),
            },
            Transfer::Table(points) => Self::Table(
                points
                    .iter()
                    .map(|point| (point.gate.volts(), point.current.amperes()))
                    .collect(),
            ),
        }
    }

    /// The saturation current at a gate-to-source voltage.
    fn saturation(&self, gate_source: f64) -> f64 {
        match self {
            Self::SquareLaw { threshold, factor } => {
                factor / 2.0 * (gate_source - threshold).max(0.0).powi(2)
            }
            Self::Table(points) => interpolate(points, gate_source),
        }
    }

    /// The channel's current; never negative.
    fn current(&self, gate_source: f64, drain_source: f64) -> f64 {
        if drain_source <= 0.0 {
            return 0.0;
        }
        match self {
            Self::SquareLaw { threshold, factor } => {
                let overdrive = gate_source - threshold;
                if overdrive <= 0.0 {
                    0.0
                } else if drain_source < overdrive {
                    factor * (overdrive - drain_source / 2.0) * drain_source
                } else {
                    factor / 2.0 * overdrive * overdrive
                }
            }
            Self::Table(_) => self.saturation(gate_source),
        }
    }

    fn is_saturated(&self, gate_source: f64, drain_source: f64) -> bool {
        match self {
            Self::SquareLaw { threshold, .. } => drain_source >= gate_source - threshold,
            Self::Table(_) => drain_source > 0.0,
        }
    }
}

/// Straight between points that rise in the first coordinate, zero below them,
/// level above them (beyond the data sheet nothing is promised).
fn interpolate(points: &[(f64, f64)], x: f64) -> f64 {
    let Some((&(first, _), &(last, top))) = points.first().zip(points.last()) else {
        return 0.0;
    };
    if x < first {
        return 0.0;
    }
    if x >= last {
        return top;
    }
    for pair in points.windows(2) {
        if let &[(x0, y0), (x1, y1)] = pair
            && x < x1
        {
            return y0 + (y1 - y0) * (x - x0) / (x1 - x0);
        }
    }
    top
}

impl Circuit {
    /// A sink's circuit on a source.
    ///
    /// The data sheet's on-resistance stands in series with the square law's
    /// channel, which has a resistance of its own: the current is on the safe
    /// side near the source's wall.
    pub fn of(sink: &SinkEntry, source_volts: f64, series_ohms: f64) -> Self {
        Self {
            source: source_volts,
            series: series_ohms,
            drain: sink.mosfet.on_resistance.ohms(),
            sense: sink.front_end.sense_resistor.resistance.ohms(),
            channel: Channel::of(&sink.mosfet.transfer),
            gate_max: sink.gate_drive.voltage_max.volts(),
            gain: sink.gate_drive.open_loop_gain.unwrap_or(f64::INFINITY),
        }
    }

    /// All resistances but the channel's.
    fn total_resistance(&self) -> f64 {
        self.series + self.drain + self.sense
    }

    /// The channel's current if a current flows and the gate is at a voltage.
    fn channel_current(&self, gate: f64, current: f64) -> f64 {
        self.channel.current(
            gate - current * self.sense,
            self.source - current * self.total_resistance(),
        )
    }

    /// The current that flows with the gate at a fixed voltage.
    fn current_at_gate(&self, gate: f64) -> f64 {
        // The channel's current falls as the assumed one rises: one crossing.
        self.crossing(|current| self.channel_current(gate, current))
    }

    /// The current at which a falling function of it equals it.
    fn crossing(&self, falling: impl Fn(f64) -> f64) -> f64 {
        let mut low = 0.0;
        let mut high = self.source.max(0.0) / self.total_resistance();
        // Each step halves the bracket: beyond 200 no float lies between.
        for _ in 0..200 {
            let middle = f64::midpoint(low, high);
            if middle <= low || middle >= high {
                break;
            }
            if falling(middle) > middle {
                low = middle;
            } else {
                high = middle;
            }
        }
        f64::midpoint(low, high)
    }

    /// The largest current the circuit can carry, whatever is set.
    pub fn largest(&self) -> OperatingPoint {
        self.point(self.current_at_gate(self.gate_max), self.gate_max, true)
    }

    /// Where the circuit settles for a voltage set at the op-amp.
    pub fn settle(&self, set: f64) -> OperatingPoint {
        let largest = self.largest();
        if self.gain.is_infinite() {
            let wanted = set.max(0.0) / self.sense;
            if wanted >= largest.current {
                return largest;
            }
            let gate = self.gate_for(wanted);
            return self.point(wanted, gate, false);
        }
        let gate =
            |current: f64| (self.gain * (set - current * self.sense)).clamp(0.0, self.gate_max);
        let current = self.crossing(|current| self.channel_current(gate(current), current));
        // The op-amp's gain makes the gate a steep function of the current; the
        // channel's own law gives it without that loss of digits.
        if current >= largest.current * (1.0 - 1e-12) {
            return largest;
        }
        self.point(current, self.gate_for(current), false)
    }

    /// The gate voltage at which a current flows.
    fn gate_for(&self, current: f64) -> f64 {
        let (mut low, mut high) = (0.0, self.gate_max);
        for _ in 0..200 {
            let middle = f64::midpoint(low, high);
            if middle <= low || middle >= high {
                break;
            }
            if self.channel_current(middle, current) < current {
                low = middle;
            } else {
                high = middle;
            }
        }
        f64::midpoint(low, high)
    }

    fn point(&self, current: f64, gate: f64, at_wall: bool) -> OperatingPoint {
        let sense = current * self.sense;
        let internal = self.source - current * self.total_resistance();
        let wall = match (at_wall, self.channel.is_saturated(gate - sense, internal)) {
            (false, _) => Wall::Following,
            // The crossing of a table sits on the source's wall to a rounding.
            (true, true) if internal > 1e-9 * self.source => Wall::Gate,
            (true, _) => Wall::Source,
        };
        OperatingPoint {
            current,
            gate,
            sense,
            drain: self.source - current * self.series,
            wall,
        }
    }
}

#[cfg(test)]
mod tests;
