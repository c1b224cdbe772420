//! The sink's oscillator against true time, in whole nanoseconds.
//!
//! Ticks are counted, and the instant of each is worked out from its number: no error adds up
//! over a night, and the same tick falls on the same instant however the time is asked for.

use quantity::Span;

const GIGA: u64 = 1_000_000_000;

/// Where ticks fall in true time.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Oscillator {
    tick_us: u64,
    ppb: i32,
    from_tick: u64,
    from_ns: u64,
}

impl Oscillator {
    /// Ticks from true time zero on, by an oscillator so many parts in 10^9 fast.
    pub(crate) fn new(tick: Span, ppb: i32) -> Self {
        Self {
            tick_us: tick.micros().max(1),
            ppb,
            from_tick: 0,
            from_ns: 0,
        }
    }

    pub(crate) fn ppb(&self) -> i32 {
        self.ppb
    }

    /// The rate over nominal, in parts of 10^9; the least is a crawl, never standing still.
    fn rate(&self) -> u64 {
        GIGA.saturating_add_signed(i64::from(self.ppb)).max(1)
    }

    /// Nanoseconds of the sink's clock in one tick, times 10^9.
    fn tick_scaled(&self) -> u128 {
        u128::from(self.tick_us) * 1_000 * u128::from(GIGA)
    }

    /// The true instant of a tick, which must not lie before the last change of rate.
    pub(crate) fn instant_ns(&self, tick: u64) -> u64 {
        let ticks = u128::from(tick.saturating_sub(self.from_tick));
        let since = ticks * self.tick_scaled() / u128::from(self.rate());
        self.from_ns
            .saturating_add(u64::try_from(since).unwrap_or(u64::MAX))
    }

    /// The last tick that has come by a true instant.
    pub(crate) fn tick_by(&self, instant_ns: u64) -> u64 {
        let Some(since) = instant_ns.checked_sub(self.from_ns) else {
            return self.from_tick;
        };
        let ticks = ((u128::from(since) + 1) * u128::from(self.rate()) - 1) / self.tick_scaled();
        self.from_tick
            .saturating_add(u64::try_from(ticks).unwrap_or(u64::MAX))
    }

    /// Microseconds of the sink's clock from a tick to a true instant after it.
    pub(crate) fn micros_after(&self, tick: u64, instant_ns: u64) -> u64 {
        let since = instant_ns.saturating_sub(self.instant_ns(tick));
        let micros = u128::from(since) * u128::from(self.rate()) / (1_000 * u128::from(GIGA));
        u64::try_from(micros).unwrap_or(u64::MAX).min(self.tick_us)
    }

    /// Another rate from a tick on.
    pub(crate) fn set_rate(&mut self, from_tick: u64, ppb: i32) {
        self.from_ns = self.instant_ns(from_tick);
        self.from_tick = from_tick;
        self.ppb = ppb;
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn a_fast_oscillator_ticks_more_often_by_exactly_its_rate() {
        let oscillator = Oscillator::new(Span::from_millis(1), 50_000);
        let day_ns = 86_400 * GIGA;
        assert_eq!(oscillator.tick_by(day_ns), 86_404_320);
    }

    #[test]
    fn a_change_of_rate_moves_no_earlier_tick() {
        let mut oscillator = Oscillator::new(Span::from_millis(1), 0);
        oscillator.set_rate(1000, 1_000_000);
        assert_eq!(oscillator.instant_ns(1000), GIGA);
        assert_eq!(oscillator.instant_ns(2001), 2 * GIGA);
    }

    proptest! {
        #[test]
        fn a_tick_has_come_at_its_instant_and_not_a_nanosecond_before(
            tick_us in 10_u64..100_000, ppb in -200_000_i32..200_000, tick in 1_u64..1 << 36,
        ) {
            let oscillator = Oscillator::new(Span::from_micros(tick_us), ppb);
            let instant = oscillator.instant_ns(tick);
            prop_assert_eq!(oscillator.tick_by(instant), tick);
            prop_assert_eq!(oscillator.tick_by(instant - 1), tick - 1);
        }
    }
}
