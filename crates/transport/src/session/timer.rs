//! A timer for a machine that is told the time.

use quantity::{HostTime, Span};

/// When something is due, if at all.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(super) struct Timer(Option<HostTime>);

impl Timer {
    /// Not running.
    pub(super) const IDLE: Self = Self(None);
    /// Due since ever.
    pub(super) const AT_ONCE: Self = Self(Some(HostTime::MIN));

    pub(super) fn start(&mut self, now: HostTime, span: Span) {
        self.0 = Some(now.saturating_add(span));
    }

    pub(super) fn stop(&mut self) {
        self.0 = None;
    }

    pub(super) fn is_idle(self) -> bool {
        self.0.is_none()
    }

    pub(super) fn expired(self, now: HostTime) -> bool {
        self.0.is_some_and(|due| due <= now)
    }

    pub(super) fn due(self) -> Option<HostTime> {
        self.0
    }
}
