//! The host's clock, as the calendar shows it but never going back.

use std::time::{Duration, Instant, SystemTime, UNIX_EPOCH};

use quantity::{HostTime, Span};

/// The calendar clock as it was when this was made, carried on by the monotonic clock.
///
/// So a calendar clock that is set while a run goes on moves no time in its record. Over months
/// it stays as near to the calendar as the operating system disciplines its monotonic clock.
#[derive(Debug, Clone, Copy)]
pub struct HostClock {
    calendar: HostTime,
    since: Instant,
}

impl HostClock {
    /// Reads both clocks.
    #[expect(
        clippy::disallowed_methods,
        reason = "this is the place where the host's clocks are read"
    )]
    pub fn start() -> Self {
        let since = Instant::now();
        // A calendar before 1970 is a clock that was never set; zero is as good.
        let calendar = SystemTime::now()
            .duration_since(UNIX_EPOCH)
            .unwrap_or_default();
        let micros = i64::try_from(calendar.as_micros()).unwrap_or(i64::MAX);
        Self {
            calendar: HostTime::from_micros(micros),
            since,
        }
    }

    /// The time now.
    pub fn now(&self) -> HostTime {
        let passed = self.since.elapsed();
        let micros = u64::try_from(passed.as_micros()).unwrap_or(u64::MAX);
        self.calendar.saturating_add(Span::from_micros(micros))
    }

    /// How long until a time; zero if it has passed.
    pub(super) fn until(&self, time: HostTime) -> Duration {
        Duration::from_micros(time.saturating_since(self.now()).micros())
    }
}
