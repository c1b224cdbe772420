//! The linear network behind every simulated source, stepped exactly.
//!
//! An ideal voltage, a series resistance and two resistor-capacitor pairs. Within one stretch
//! the current is constant, and the ideal voltage and all resistances are straight lines in the
//! state of charge (which then moves in a straight line too); time constants stand still. Under
//! these terms the terminal voltage has a closed form, used here for its value at any instant
//! and for the exact integrals of charge and energy: the step length costs no accuracy.
//!
//! With `w = -I / Q` the rate of the state of charge, pair k with `R(t) = r + s w t` obeys
//! `tau dv/dt = I R(t) - v`, whose solution is `v(t) = A + B t + (v0 - A) exp(-t / tau)` with
//! `B = I s w` and `A = I r - B tau`.

/// The number of resistor-capacitor pairs.
pub(crate) const PAIRS: usize = 2;

/// A quantity straight in the state of charge: its value now and its slope per unit of charge
/// state.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Line {
    pub(crate) now: f64,
    pub(crate) slope: f64,
}

/// A resistor-capacitor pair.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Pair {
    pub(crate) resistance_ohm: Line,
    pub(crate) time_constant_s: f64,
}

/// The network's elements at the present state of charge.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Network {
    pub(crate) voltage_v: Line,
    pub(crate) series_ohm: Line,
    pub(crate) pairs: [Pair; PAIRS],
    /// Change of the state of charge per coulomb drawn; 0 for a source without end.
    pub(crate) per_coulomb: f64,
}

/// What the network remembers.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct State {
    /// State of charge, 0 to 1; meaningless (0) for a source without end.
    pub(crate) charge: f64,
    /// Voltage over each pair.
    pub(crate) drop_v: [f64; PAIRS],
}

/// A stretch of constant current, in closed form.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Stretch {
    pub(crate) current_a: f64,
    /// Terminal voltage: `level + slope * t - sum(swing_k * exp(-t / tau_k))`.
    pub(crate) level_v: f64,
    pub(crate) slope_v_per_s: f64,
    pub(crate) swing_v: [f64; PAIRS],
    time_constant_s: [f64; PAIRS],
    ideal_v: f64,
    ideal_v_per_s: f64,
    series_ohm: f64,
    series_ohm_per_s: f64,
    settled_v: [f64; PAIRS],
    settled_v_per_s: [f64; PAIRS],
    charge_per_s: f64,
    dropped_v: f64,
}

/// What flowed during a stretch, all from closed forms.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Flow {
    /// Charge through the terminals, coulomb.
    pub charge_c: f64,
    /// Energy out of the terminals, joule.
    pub terminal_j: f64,
    /// Energy given by the ideal voltage behind the network, joule.
    pub source_j: f64,
    /// Energy lost inside the source, joule. For a pair it is counted when its voltage stands
    /// against the current, whether it heats at once or is held in the capacitor a while.
    pub inner_j: f64,
}

impl Network {
    /// The stretch that begins in `state` under a constant current. `dropped_v` is what a
    /// regulator in current limit keeps for itself on top of the network.
    pub(crate) fn stretch(&self, state: &State, current_a: f64, dropped_v: f64) -> Stretch {
        let rate = -current_a * self.per_coulomb;
        let mut stretch = Stretch {
            current_a,
            ideal_v: self.voltage_v.now,
            ideal_v_per_s: self.voltage_v.slope * rate,
            series_ohm: self.series_ohm.now,
            series_ohm_per_s: self.series_ohm.slope * rate,
            charge_per_s: rate,
            dropped_v,
            ..Stretch::default()
        };
        stretch.level_v = stretch.ideal_v - current_a * stretch.series_ohm - dropped_v;
        stretch.slope_v_per_s = stretch.ideal_v_per_s - current_a * stretch.series_ohm_per_s;
        for (index, (pair, held)) in self.pairs.iter().zip(state.drop_v).enumerate() {
            let moving = current_a * pair.resistance_ohm.slope * rate;
            let settled = current_a * pair.resistance_ohm.now - moving * pair.time_constant_s;
            stretch.level_v -= settled;
            stretch.slope_v_per_s -= moving;
            stretch.put_pair(index, held - settled, pair.time_constant_s, settled, moving);
        }
        stretch
    }

    /// The terminal voltage without current, and the resistance the terminals show at once.
    pub(crate) fn thevenin(&self, state: &State) -> (f64, f64) {
        let held: f64 = state.drop_v.iter().sum();
        (self.voltage_v.now - held, self.series_ohm.now)
    }
}

impl Stretch {
    fn put_pair(&mut self, index: usize, swing: f64, tau: f64, settled: f64, moving: f64) {
        let slots = (
            self.swing_v.get_mut(index),
            self.time_constant_s.get_mut(index),
            self.settled_v.get_mut(index),
            self.settled_v_per_s.get_mut(index),
        );
        if let (Some(a), Some(b), Some(c), Some(d)) = slots {
            (*a, *b, *c, *d) = (swing, tau, settled, moving);
        }
    }

    /// The terminal voltage after `time_s`, given what is left of each pair's decay by then.
    pub(crate) fn voltage(&self, time_s: f64, left: [f64; PAIRS]) -> f64 {
        let [a, b] = self.swing_v;
        let [p, q] = left;
        self.level_v + self.slope_v_per_s * time_s - a * p - b * q
    }

    /// Moves `state` to the end of the stretch and says what flowed.
    pub(crate) fn finish(&self, state: &mut State, time_s: f64, left: [f64; PAIRS]) -> Flow {
        let current = self.current_a;
        let half_square = 0.5 * time_s * time_s;
        let mut over_pairs = 0.0;
        let pairs = self
            .swing_v
            .iter()
            .zip(self.time_constant_s)
            .zip(self.settled_v.iter().zip(self.settled_v_per_s))
            .zip(left);
        for (held, (((swing, tau), (settled, moving)), left)) in state.drop_v.iter_mut().zip(pairs)
        {
            over_pairs += settled * time_s + moving * half_square + swing * tau * (1.0 - left);
            *held = settled + moving * time_s + swing * left;
        }
        state.charge += self.charge_per_s * time_s;
        let ideal = self.ideal_v * time_s + self.ideal_v_per_s * half_square;
        let over_series =
            current * (self.series_ohm * time_s + self.series_ohm_per_s * half_square);
        let swings: f64 = self
            .swing_v
            .iter()
            .zip(self.time_constant_s)
            .zip(left)
            .map(|((swing, tau), left)| swing * tau * (1.0 - left))
            .sum();
        Flow {
            charge_c: current * time_s,
            terminal_j: current
                * (self.level_v * time_s + self.slope_v_per_s * half_square - swings),
            source_j: current * ideal,
            inner_j: current * (over_series + over_pairs + self.dropped_v * time_s),
        }
    }
}

impl core::ops::AddAssign for Flow {
    fn add_assign(&mut self, other: Self) {
        self.charge_c += other.charge_c;
        self.terminal_j += other.terminal_j;
        self.source_j += other.source_j;
        self.inner_j += other.inner_j;
    }
}
