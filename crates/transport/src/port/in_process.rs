//! A simulated sink in the same process, on a clock of its own that may run faster.
//!
//! Nothing above this module knows that the sink is simulated or that time is virtual: the
//! same worker, session and keeper run on it.

use std::sync::Arc;
use std::time::Duration;

use quantity::{HostTime, Span};

use super::host_clock::HostClock;
use super::mailbox::{Commands, Mailbox};
use super::{Inbox, Link};
use crate::session::Urgency;

/// How long a paced link sleeps at most before it looks what the sink has to say.
const GLANCE: Duration = Duration::from_millis(10);

/// How far a paced link may fall behind before it gives up catching up.
const LAG_MAX: Span = Span::from_millis(250);

/// How long it waits for a command while time is held, before it looks again.
const HELD: Duration = Duration::from_millis(100);

/// A sink in virtual time: what a simulator offers to be used as a link.
pub trait VirtualDevice {
    /// Virtual time since the device was made.
    fn now(&self) -> Span;

    /// Lets virtual time pass until the device has sent something or `until` is reached; what
    /// it sends is appended to `out`.
    fn advance(&mut self, until: Span, out: &mut Vec<u8>);

    /// Bytes from the host, now.
    fn receive(&mut self, bytes: &[u8]);
}

/// How virtual time goes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Pace {
    /// So many times as fast as the host's clock; 1 is real time, 0 counts as 1.
    Times(u32),
    /// As fast as it can.
    Unbounded,
}

/// A link to a device in the same process.
pub struct VirtualLink<C, D> {
    device: D,
    mailbox: Arc<Mailbox<C>>,
    /// Host time at which the device's time was `begun`.
    start: HostTime,
    begun: Span,
    pace: Pace,
    clock: HostClock,
    /// Real and virtual time from which pacing is reckoned.
    anchor: (HostTime, Span),
    held: bool,
    opened: bool,
}

impl<C, D: VirtualDevice> VirtualLink<C, D> {
    /// A link whose virtual time begins at the present host time.
    pub fn new(device: D, pace: Pace, clock: HostClock) -> (Self, Commands<C>) {
        let mailbox = Mailbox::new();
        let commands = Commands::new(&mailbox);
        let (start, begun) = (clock.now(), device.now());
        let link = Self {
            device,
            mailbox,
            start,
            begun,
            pace,
            clock,
            anchor: (start, begun),
            held: false,
            opened: false,
        };
        (link, commands)
    }

    /// The same link with a virtual time that begins no earlier than `earliest`: a record that
    /// is taken up again must not go back in time.
    #[must_use]
    pub fn not_before(mut self, earliest: HostTime) -> Self {
        self.start = self.start.max(earliest);
        self
    }

    /// The device, for those who look at the truth behind it.
    pub const fn device(&self) -> &D {
        &self.device
    }

    /// The device, for those who break it.
    pub const fn device_mut(&mut self) -> &mut D {
        &mut self.device
    }

    /// The device's time at a host time of this link.
    fn device_time(&self, at: HostTime) -> Span {
        self.begun.saturating_add(at.saturating_since(self.start))
    }

    /// How far virtual time may have come by now.
    fn allowed(&mut self) -> Span {
        let Pace::Times(factor) = self.pace else {
            return Span::MAX;
        };
        let real = self.clock.now();
        let passed = real.saturating_since(self.anchor.0);
        let allowed = passed
            .checked_mul_int(i64::from(factor.max(1)))
            .unwrap_or(Span::MAX);
        let allowed = self.anchor.1.saturating_add(allowed);
        // A device slower than its pace, or a host that slept, must not make it race later.
        let lag_max = LAG_MAX
            .checked_mul_int(i64::from(factor.max(1)))
            .unwrap_or(Span::MAX);
        if allowed.saturating_sub(self.device.now()) <= lag_max {
            return allowed;
        }
        let allowed = self.device.now().saturating_add(lag_max);
        self.anchor = (real, allowed);
        allowed
    }

    /// Real time until virtual time `until` is allowed.
    fn real_until(&self, until: Span) -> Duration {
        let missing = until.saturating_sub(self.device.now());
        match self.pace {
            Pace::Unbounded => Duration::ZERO,
            Pace::Times(factor) => {
                Duration::from_micros(missing.micros().div_ceil(u64::from(factor.max(1))))
            }
        }
    }

    /// Lets time pass as far as it may.
    fn advance(&mut self, until: Span) -> Option<Inbox<C>> {
        let mut bytes = Vec::new();
        let target = until.min(self.allowed());
        if target > self.device.now() {
            self.device.advance(target, &mut bytes);
        }
        (!bytes.is_empty()).then_some(Inbox::Bytes(bytes))
    }
}

impl<C, D: VirtualDevice> Link<C> for VirtualLink<C, D> {
    fn now(&self) -> HostTime {
        self.start
            .saturating_add(self.device.now().saturating_sub(self.begun))
    }

    fn wait(&mut self, until: HostTime) -> Option<Inbox<C>> {
        if !self.opened {
            self.opened = true;
            return Some(Inbox::LinkBack);
        }
        if self.held {
            return self.mailbox.wait(HELD);
        }
        let until = self.device_time(until);
        loop {
            if let Some(command) = self.mailbox.wait(Duration::ZERO) {
                return Some(command);
            }
            if let Some(bytes) = self.advance(until) {
                return Some(bytes);
            }
            if self.device.now() >= until {
                return None;
            }
            if let Some(command) = self.mailbox.wait(self.real_until(until).min(GLANCE)) {
                return Some(command);
            }
        }
    }

    fn send(&mut self, bytes: &[u8], _urgency: Urgency) {
        // There is nothing unsent to overtake: bytes arrive as they are sent.
        self.device.receive(bytes);
    }

    fn hold_time(&mut self, held: bool) {
        if self.held && !held {
            // Time begins to pass where it stood.
            self.anchor = (self.clock.now(), self.device.now());
        }
        self.held = held;
    }
}

impl<C, D> Drop for VirtualLink<C, D> {
    fn drop(&mut self) {
        self.mailbox.end();
    }
}
