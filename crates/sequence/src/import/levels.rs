//! Currents that a sink can set, true values in nanoamperes.

use quantity::Current;

use super::{Limits, NANO_PER_MICRO, micro, nano};

/// The settings of a sink.
#[derive(Debug, Clone, Copy)]
pub(super) struct Levels<'a> {
    limits: &'a Limits,
    /// The first code at or above the floor.
    first: u32,
    /// The last code that the sink may draw.
    last: u32,
}

impl<'a> Levels<'a> {
    pub(super) fn new(limits: &'a Limits) -> Self {
        let mut levels = Self {
            limits,
            first: 0,
            last: limits.converter.last_code(),
        };
        levels.first = levels.code_below(limits.floor);
        if levels.set(levels.first) < nano(limits.floor) {
            levels.first += 1;
        }
        levels.last = levels.code_below(limits.largest);
        levels
    }

    /// The true current of a code.
    fn set(&self, code: u32) -> i64 {
        let nominal = self.limits.converter.current_of(code);
        nano(self.limits.correction.current_from_setpoint(nominal))
    }

    /// The last code that sets no more than a current.
    fn code_below(&self, wanted: Current) -> u32 {
        let nominal = self.limits.correction.to_nominal_setpoint(wanted);
        let mut code = self.limits.converter.nearest_code(nominal).min(self.last);
        while code > 0 && self.set(code) > nano(wanted) {
            code -= 1;
        }
        while code < self.last && self.set(code + 1) <= nano(wanted) {
            code += 1;
        }
        code
    }

    /// The settings next to a current: the greatest not above it and the least not below it.
    /// Below the floor there is but zero; negative currents are zero.
    pub(super) fn around(&self, wanted: i64) -> (i64, i64) {
        if wanted <= 0 {
            return (0, 0);
        }
        // Rounded down, so that the setting below is not above what is wanted.
        let code = self.code_below(Current::from_microamperes(wanted / NANO_PER_MICRO));
        if code < self.first {
            return (0, self.set(self.first));
        }
        let below = self.set(code);
        if below == wanted || code >= self.last {
            return (below, below);
        }
        (below, self.set(code + 1))
    }

    /// A current that a line may begin or end with: not between zero and the floor, and none
    /// that the sink may not draw.
    pub(super) fn bounded(&self, wanted: i64) -> i64 {
        let floor = self.set(self.first);
        let whole = nano(micro(wanted)).clamp(0, nano(self.limits.largest));
        match whole {
            whole if whole >= floor => whole,
            whole if whole * 2 >= floor => floor,
            _ => 0,
        }
    }

    /// Whether a mean current lies under the floor.
    pub(super) fn is_below_floor(&self, mean: i64) -> bool {
        mean != 0 && mean < self.set(self.first)
    }

    /// One step of the converter.
    pub(super) fn step(&self) -> i64 {
        nano(self.limits.converter.step())
    }
}
