//! Powers of one exponential decay, tick by tick.
//!
//! `exp(-n * dt / tau)` for n = 0 to [`BLOCK`]: computed once for a time constant and a tick,
//! then only looked up. Built by halving, so the error of the last entry is a few roundings and
//! not hundreds.

/// Ticks between two refreshes of everything that is slow: temperatures, and what hangs on
/// them. A quarter of a second at a tick of one millisecond.
pub(crate) const BLOCK: u32 = 256;

const ENTRIES: usize = 257;

/// The table for one time constant.
#[derive(Debug, Clone)]
pub(crate) struct Decay {
    time_constant_s: f64,
    tick_s: f64,
    powers: Box<[f64; ENTRIES]>,
}

impl Decay {
    /// A decay that is over at once.
    pub(crate) fn new() -> Self {
        let mut decay = Self {
            time_constant_s: 0.0,
            tick_s: 1.0,
            powers: Box::new([0.0; ENTRIES]),
        };
        decay.fill(0.0);
        decay
    }

    /// Makes the table one for this time constant and tick, unless it is already.
    pub(crate) fn set(&mut self, time_constant_s: f64, tick_s: f64) {
        if self.time_constant_s.to_bits() == time_constant_s.to_bits()
            && self.tick_s.to_bits() == tick_s.to_bits()
        {
            return;
        }
        self.time_constant_s = time_constant_s;
        self.tick_s = tick_s;
        self.fill(after(tick_s, time_constant_s));
    }

    fn fill(&mut self, first: f64) {
        for (slot, power) in self.powers.iter_mut().zip([1.0, first]) {
            *slot = power;
        }
        let mut filled = 1;
        while filled < ENTRIES - 1 {
            let (done, open) = self.powers.split_at_mut(filled + 1);
            let last = done.last().copied().unwrap_or(0.0);
            for (slot, power) in open.iter_mut().zip(done.iter().skip(1)) {
                *slot = last * power;
            }
            filled *= 2;
        }
    }

    /// What is left after `ticks` ticks; at most [`BLOCK`] of them.
    pub(crate) fn at(&self, ticks: u32) -> f64 {
        // A tick count is a u32 and a usize has at least as many bits on every host we build for.
        let index = usize::try_from(ticks).unwrap_or(ENTRIES);
        self.powers.get(index).copied().unwrap_or(0.0)
    }
}

/// What is left of a decay after a time; nothing if its time constant is zero.
pub(crate) fn after(time_s: f64, time_constant_s: f64) -> f64 {
    if time_constant_s > 0.0 {
        (-time_s / time_constant_s).exp()
    } else {
        0.0
    }
}

#[cfg(test)]
mod tests {
    use super::{BLOCK, Decay};

    #[test]
    fn every_entry_is_the_exponential_to_a_few_roundings() {
        let mut decay = Decay::new();
        for tau in [0.05, 2.5, 60.0] {
            decay.set(tau, 1e-3);
            for ticks in 0..=BLOCK {
                let exact = (-f64::from(ticks) * 1e-3 / tau).exp();
                assert!(((decay.at(ticks) - exact) / exact).abs() < 1e-13);
            }
        }
    }

    #[test]
    fn a_time_constant_of_zero_is_over_after_one_tick() {
        let mut decay = Decay::new();
        decay.set(0.0, 1e-3);
        assert!((decay.at(0) - 1.0).abs() < f64::EPSILON);
        assert!(decay.at(1).abs() < f64::EPSILON);
        assert!(decay.at(BLOCK).abs() < f64::EPSILON);
    }
}
