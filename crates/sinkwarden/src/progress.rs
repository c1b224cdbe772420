//! Progress on stderr: shown after a second, and only where stderr is a terminal.

use std::time::Duration;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use quantity::{HostTime, Span};
use transport::port::HostClock;

/// What takes less is done without a bar.
const SHOWN_AFTER: Span = Span::from_secs(1);
/// How often a bar is drawn, times a second.
const DRAWN_PER_SECOND: u8 = 8;

/// A bar or a line that is kept up to date.
pub(crate) struct Progress {
    bar: ProgressBar,
    clock: HostClock,
    begun: HostTime,
    shown: bool,
}

impl Progress {
    /// A bar towards a number known beforehand.
    pub(crate) fn towards(total: u64) -> Self {
        Self::new(Some(total.max(1)), "{bar:24} {percent:>3} %  {msg}")
    }

    /// A line without an end known beforehand.
    pub(crate) fn open_ended() -> Self {
        Self::new(None, "{spinner} {msg}")
    }

    fn new(total: Option<u64>, template: &str) -> Self {
        let bar = ProgressBar::with_draw_target(total, ProgressDrawTarget::hidden());
        let style = ProgressStyle::with_template(template)
            .unwrap_or_else(|_| ProgressStyle::default_bar())
            .progress_chars("=> ");
        bar.set_style(style);
        let clock = HostClock::start();
        Self {
            bar,
            clock,
            begun: clock.now(),
            shown: false,
        }
    }

    /// How long it has been going on.
    pub(crate) fn took(&self) -> Span {
        self.clock.now().saturating_since(self.begun)
    }

    /// How far it has come.
    pub(crate) fn at(&mut self, position: u64, message: impl Into<String>) {
        if !self.shown && self.took() >= SHOWN_AFTER {
            self.shown = true;
            self.bar
                .set_draw_target(ProgressDrawTarget::stderr_with_hz(DRAWN_PER_SECOND));
            if self.bar.length().is_none() {
                self.bar.enable_steady_tick(Duration::from_millis(250));
            }
        }
        // A forecast may be short: the bar then stays full.
        let most = self.bar.length().unwrap_or(u64::MAX);
        self.bar.set_position(position.min(most));
        self.bar.set_message(message.into());
    }

    /// Tells something beside it.
    pub(crate) fn note(&self, text: impl std::fmt::Display) {
        self.bar.suspend(|| crate::output::tell(text));
    }

    /// Takes it away.
    pub(crate) fn finish(&self) {
        self.bar.finish_and_clear();
    }
}
