//! Readback pairs: joining `c` and `r`, finding what was lost, unwrapping the time.
//!
//! Invariants:
//! - A reading's time is the full sink time of its pair, or there is no reading.
//! - Readings come in order of time, each pair at most once.

use quantity::{Current, HostTime, SinkTime, Span};
use wire::{Counters, Readback, Reading};

/// Readbacks and events count 1 to 65535, then 1 again.
const NUMBERS: u32 = 65_535;

/// After this long without a full time, 32 bits no longer say which turn they are of.
const UNWRAP_MAX: Span = Span::from_secs(30 * 60);

/// How much later than the time passed on the host a lone `r` may be: what a stall can hold up.
const UNWRAP_SLACK: Span = Span::from_secs(60);

/// Charge that a counter may move beyond reason before it counts as another sink's, in
/// microcoulombs.
const CHARGE_SLACK: i128 = 1_000;

/// How many numbers lie between two that followed each other; 0 if none was lost.
pub(super) fn lost_between(last: u16, number: u16) -> u16 {
    let ahead = (u32::from(number) + NUMBERS - u32::from(last)) % NUMBERS;
    let between = if ahead == 0 { NUMBERS - 1 } else { ahead - 1 };
    u16::try_from(between).unwrap_or(u16::MAX)
}

/// What came of the second line of a pair.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) enum Paired {
    /// A reading.
    Reading(Reading),
    /// The same pair again, or one whose full time cannot be told.
    Discarded,
}

/// Why a `c` line shows another sink or another start of it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum CountersFault {
    TimeWentBack { from: SinkTime },
    ChargeMoved,
}

/// Joins the lines of readback pairs.
#[derive(Debug, Default)]
pub(super) struct Pairing {
    first_line: Option<(u16, Counters)>,
    last: Option<Last>,
    last_counters: Option<Counters>,
    /// Full scale of the current readback, once the sink is known.
    full_scale: Option<Current>,
}

#[derive(Debug, Clone, Copy)]
struct Last {
    readback: u16,
    time: SinkTime,
    heard: HostTime,
}

impl Pairing {
    /// Begins anew for a sink with this full scale.
    pub(super) fn begin(&mut self, full_scale: Current) {
        *self = Self {
            full_scale: Some(full_scale),
            ..Self::default()
        };
    }

    /// Forgets a pair under way, as after a lost link.
    pub(super) fn interrupt(&mut self) {
        self.first_line = None;
    }

    /// Takes a `c` line. Returns the sink's damaged lines since the previous one.
    pub(super) fn counters(
        &mut self,
        readback: u16,
        counters: Counters,
    ) -> Result<u16, CountersFault> {
        let mut damaged = 0;
        if let Some(last) = self.last_counters {
            let passed = counters
                .time
                .checked_since(last.time)
                .ok_or(CountersFault::TimeWentBack { from: last.time })?;
            if !self.charge_is_possible(&last, &counters, passed) {
                return Err(CountersFault::ChargeMoved);
            }
            damaged = counters.damaged.wrapping_sub(last.damaged);
        }
        self.last_counters = Some(counters);
        self.first_line = Some((readback, counters));
        Ok(damaged)
    }

    /// The charge cannot have moved by more than twice full scale over the time passed.
    fn charge_is_possible(&self, last: &Counters, counters: &Counters, passed: Span) -> bool {
        let Some(full_scale) = self.full_scale else {
            return true;
        };
        let moved =
            i128::from(counters.charge.microcoulombs()) - i128::from(last.charge.microcoulombs());
        // Current times time in millionths of a microcoulomb, so that nothing is divided.
        let most = 2 * i128::from(full_scale.microamperes()) * i128::from(passed.micros());
        moved.abs() * 1_000_000 <= most + CHARGE_SLACK * 1_000_000
    }

    /// Takes an `r` line.
    pub(super) fn readback(
        &mut self,
        readback: u16,
        time_low: u32,
        values: Readback,
        now: HostTime,
    ) -> Paired {
        let counters = self
            .first_line
            .take()
            .filter(|(number, counters)| *number == readback && low_bits(counters.time) == time_low)
            .map(|(_, counters)| counters);
        let time = match counters {
            Some(counters) => Some(counters.time),
            None => self.unwrap(time_low, now),
        };
        let Some(time) = time else {
            return Paired::Discarded;
        };
        let lost = match self.last {
            None => 0,
            Some(last) if last.time >= time => return Paired::Discarded,
            Some(last) => lost_between(last.readback, readback),
        };
        self.last = Some(Last {
            readback,
            time,
            heard: now,
        });
        Paired::Reading(Reading {
            readback,
            time,
            values,
            counters,
            lost,
        })
    }

    /// The full time of a lone `r`: the first after the last pair's time that has these low
    /// bits, if it is believable.
    fn unwrap(&self, time_low: u32, now: HostTime) -> Option<SinkTime> {
        let last = self.last?;
        let passed = now.saturating_since(last.heard);
        let ahead = time_low.wrapping_sub(low_bits(last.time));
        let ahead = Span::from_micros(u64::from(ahead));
        if passed > UNWRAP_MAX || ahead > passed.saturating_add(UNWRAP_SLACK) {
            return None;
        }
        last.time.checked_add(ahead)
    }
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "the low 32 bits are what the line carries"
)]
const fn low_bits(time: SinkTime) -> u32 {
    time.micros() as u32
}

#[cfg(test)]
mod tests;
