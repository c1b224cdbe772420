//! Whether a value has stopped moving: its largest change over a sliding window.
//!
//! Memory is bounded whatever the readback rate: the window is cut into [`PARTS`] parts, each of
//! which keeps its least and largest value. The window looked back on is therefore between one
//! window and one part more of it, never less: doubt waits.

use quantity::{SinkTime, Span};

const PARTS: u64 = 64;

/// A sliding window over a value.
#[derive(Debug, Clone)]
pub(crate) struct Window {
    part: Span,
    began: SinkTime,
    /// Number of the part that is being filled.
    number: u64,
    /// Least and largest value of the part being filled and of those before, by `number % len`.
    parts: Box<[Option<(i64, i64)>]>,
}

impl Window {
    /// A window of this length that begins to be filled at `began`.
    pub(crate) fn new(length: Span, began: SinkTime) -> Self {
        let part = length.micros().div_ceil(PARTS).max(1);
        let slots = usize::try_from(PARTS).unwrap_or(0) + 1;
        Self {
            part: Span::from_micros(part),
            began,
            number: 0,
            parts: vec![None; slots].into_boxed_slice(),
        }
    }

    /// Adds a value; returns the largest change over the window once it is full.
    pub(crate) fn add(&mut self, time: SinkTime, value: i64) -> Option<i64> {
        let number = time.saturating_since(self.began).micros() / self.part.micros();
        let len = u64::try_from(self.parts.len()).unwrap_or(1);
        // Parts without a reading are emptied, at most all of them.
        for skipped in (self.number + 1..=number).rev().take(self.parts.len()) {
            if let Some(part) = self.slot(skipped % len) {
                *part = None;
            }
        }
        self.number = self.number.max(number);
        if let Some(part) = self.slot(number % len) {
            let (least, largest) = part.unwrap_or((value, value));
            *part = Some((least.min(value), largest.max(value)));
        }
        if number < PARTS {
            return None;
        }
        let bounds = self.parts.iter().flatten().copied();
        let (least, largest) = bounds.reduce(|a, b| (a.0.min(b.0), a.1.max(b.1)))?;
        Some(largest.saturating_sub(least))
    }

    fn slot(&mut self, at: u64) -> Option<&mut Option<(i64, i64)>> {
        self.parts.get_mut(usize::try_from(at).ok()?)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(millis: u64) -> SinkTime {
        SinkTime::ZERO + Span::from_millis(millis)
    }

    #[test]
    fn says_nothing_before_the_window_is_full() {
        let mut window = Window::new(Span::from_secs(64), at(0));
        assert_eq!(window.add(at(100), 5), None);
        assert_eq!(window.add(at(63_900), 5), None);
        assert_eq!(window.add(at(64_000), 7), Some(2));
    }

    #[test]
    fn forgets_what_is_older_than_the_window() {
        let mut window = Window::new(Span::from_secs(64), at(0));
        window.add(at(0), 1_000);
        for second in 1..=64 {
            window.add(at(second * 1000), 10);
        }
        assert_eq!(window.add(at(65_000), 10), Some(0));
    }

    #[test]
    fn a_gap_longer_than_the_window_empties_it() {
        let mut window = Window::new(Span::from_secs(64), at(0));
        window.add(at(1_000), 1_000);
        assert_eq!(window.add(at(9_000_000), 10), Some(0));
    }
}
