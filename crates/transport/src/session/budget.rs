//! How much is listened to: a flood must not keep the host from its other work.

use quantity::HostTime;

/// What may come at once after a stall: the operating system's buffers.
const ALLOWANCE_LEAST: u64 = 65_536;

/// An allowance of bytes that refills at twice the rate of the link.
#[derive(Debug)]
pub(super) struct Budget {
    rate: u64,
    allowance: u64,
    most: u64,
    refilled: Option<HostTime>,
}

impl Budget {
    pub(super) fn new(bytes_per_second: u32) -> Self {
        let rate = 2 * u64::from(bytes_per_second.max(1));
        let most = rate.max(ALLOWANCE_LEAST);
        Self {
            rate,
            allowance: most,
            most,
            refilled: None,
        }
    }

    /// How many of so many bytes may be listened to now.
    pub(super) fn take(&mut self, bytes: usize, now: HostTime) -> usize {
        self.refill(now);
        let wanted = u64::try_from(bytes).unwrap_or(u64::MAX);
        let granted = wanted.min(self.allowance);
        self.allowance -= granted;
        usize::try_from(granted).unwrap_or(bytes)
    }

    fn refill(&mut self, now: HostTime) {
        let Some(refilled) = self.refilled else {
            self.refilled = Some(now);
            return;
        };
        let passed = now.saturating_since(refilled).micros().min(1_000_000);
        let earned = passed * self.rate / 1_000_000;
        // A step too short to earn a byte is left to add up with the next.
        if earned > 0 {
            self.allowance = self.allowance.saturating_add(earned).min(self.most);
            self.refilled = Some(now);
        }
    }
}
