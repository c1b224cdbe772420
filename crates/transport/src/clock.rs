//! Where the sink's clock stands against the host's.
//!
//! Each answered `clock` ask is a sample: the sink read its clock at some instant between the
//! ask's sending and the answer's arrival, so the middle of the round trip is right to within
//! half of it. A slow round trip says little, a fast one much. The estimate is therefore a
//! straight line by least squares through the fastest round trips of the last minutes: of each
//! stretch of time the fastest is kept, and of those the faster half is fitted.
//!
//! Invariants:
//! - Integer arithmetic only: the same samples give the same estimate, bit for bit.
//! - Memory is bounded, whatever the length of the run.
//! - The uncertainty is a bound, not a standard deviation: half the slowest round trip that was
//!   fitted, or the worst distance of a fitted sample from the line if that is more; growing
//!   with the distance from the fitted samples by the rate's own bound.
//!
//! What it deliberately does not do: it reads no clock, and it does not judge. A jump or a rate
//! out of bounds is reported; what follows is decided above.

mod estimate;

use std::collections::VecDeque;

use quantity::{HostTime, SinkTime, Span};
use serde::{Deserialize, Serialize};

pub use estimate::ClockEstimate;

/// Stretches of time of which the fastest sample is kept.
const STRETCHES_MAX: usize = 64;

/// The first stretches are short, so that the rate is known soon; they double as the history
/// grows, up to a window of about four minutes, over which an oscillator is steady.
const STRETCH_FIRST: u64 = 250_000;
const STRETCH_LAST: u64 = 4_000_000;

/// Samples older than this are dropped: after a long gap the old line says nothing.
const HISTORY_MICROS: i64 = 600_000_000;

/// At least this many samples are fitted, if there are as many.
const FITTED_MIN: usize = 3;

/// How far a sink's clock may be out.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ClockBounds {
    /// Largest deviation of one sample from the estimate, beyond both uncertainties.
    pub jump: Span,
    /// Largest rate error, in parts per billion.
    pub rate_ppb: u32,
}

impl Default for ClockBounds {
    /// 100 ms, and 2 %: what an uncalibrated RC oscillator may be off (common practice, no
    /// source).
    fn default() -> Self {
        Self {
            jump: Span::from_millis(100),
            rate_ppb: 20_000_000,
        }
    }
}

/// A sink clock out of bounds.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum ClockFault {
    /// A sample is off the line by more than the bound; the estimate starts anew from it.
    Jumped {
        /// By how much, beyond both uncertainties.
        by: Span,
        /// Whether the sink's clock is behind the estimate.
        back: bool,
    },
    /// The rate is out of bounds by more than its uncertainty.
    Rate {
        /// Parts per billion; positive: the sink's clock runs fast.
        ppb: i64,
        /// What that made over the samples fitted.
        by: Span,
    },
}

impl ClockFault {
    /// How far the sink's clock is out.
    pub const fn by(&self) -> Span {
        match self {
            Self::Jumped { by, .. } | Self::Rate { by, .. } => *by,
        }
    }
}

/// One round trip: host time of its middle, the sink's clock, its length. All in microseconds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct Sample {
    host: i64,
    sink: u64,
    round_trip: u64,
}

/// The running estimate.
#[derive(Debug, Clone)]
pub struct ClockAlignment {
    bounds: ClockBounds,
    stretch: u64,
    samples: VecDeque<Sample>,
    /// Kept to sort round trips in without allocating.
    sorted: Vec<u64>,
    estimate: Option<ClockEstimate>,
}

impl ClockAlignment {
    /// Knows nothing yet.
    pub fn new(bounds: ClockBounds) -> Self {
        Self {
            bounds,
            stretch: STRETCH_FIRST,
            samples: VecDeque::with_capacity(STRETCHES_MAX + 1),
            sorted: Vec::with_capacity(STRETCHES_MAX + 1),
            estimate: None,
        }
    }

    /// Forgets everything, as after a restart of the sink.
    pub fn clear(&mut self) {
        self.stretch = STRETCH_FIRST;
        self.samples.clear();
        self.estimate = None;
    }

    /// The estimate, once there is a sample.
    pub const fn estimate(&self) -> Option<ClockEstimate> {
        self.estimate
    }

    /// Takes a round trip: asked at `sent`, answered at `received`, with the sink's clock.
    ///
    /// Returns the fault it shows, if any. An answer from before its ask is ignored: it would
    /// be a broken host clock, of which this type is no judge.
    pub fn add(
        &mut self,
        sent: HostTime,
        received: HostTime,
        sink: SinkTime,
    ) -> Option<ClockFault> {
        let round_trip = received.checked_since(sent)?;
        let middle = sent.checked_add(Span::from_micros(round_trip.micros() / 2))?;
        let sample = Sample {
            host: middle.micros(),
            sink: sink.micros(),
            round_trip: round_trip.micros(),
        };
        let jump = self.jump(&sample, middle);
        if jump.is_some() {
            self.clear();
        }
        self.keep(sample);
        self.fit();
        jump.or_else(|| self.rate_fault())
    }

    fn jump(&self, sample: &Sample, middle: HostTime) -> Option<ClockFault> {
        let estimate = self.estimate?;
        let deviation = i128::from(sample.sink) - estimate.sink_micros_at(middle);
        let known = u128::from(estimate.uncertainty_at(middle).micros())
            + u128::from(sample.round_trip / 2);
        let beyond = deviation.unsigned_abs().saturating_sub(known);
        (beyond > u128::from(self.bounds.jump.micros())).then(|| ClockFault::Jumped {
            by: Span::from_micros(u64::try_from(beyond).unwrap_or(u64::MAX)),
            back: deviation < 0,
        })
    }

    fn rate_fault(&self) -> Option<ClockFault> {
        let estimate = self.estimate?;
        let sure = estimate
            .rate_ppb
            .unsigned_abs()
            .saturating_sub(estimate.rate_uncertainty_ppb);
        if sure <= u64::from(self.bounds.rate_ppb) {
            return None;
        }
        let by = u128::from(self.length()) * u128::from(estimate.rate_ppb.unsigned_abs())
            / 1_000_000_000;
        Some(ClockFault::Rate {
            ppb: estimate.rate_ppb,
            by: Span::from_micros(u64::try_from(by).unwrap_or(u64::MAX)),
        })
    }

    /// Host time between the oldest and the newest sample, in microseconds.
    fn length(&self) -> u64 {
        match (self.samples.front(), self.samples.back()) {
            (Some(first), Some(last)) => last.host.abs_diff(first.host),
            _ => 0,
        }
    }

    fn stretch_of(&self, sample: &Sample) -> i64 {
        sample.host.div_euclid(self.stretch.cast_signed())
    }

    fn keep(&mut self, sample: Sample) {
        while let Some(oldest) = self.samples.front() {
            if sample.host.saturating_sub(oldest.host) <= HISTORY_MICROS {
                break;
            }
            self.samples.pop_front();
        }
        let stretch = self.stretch_of(&sample);
        match self.samples.back().copied() {
            Some(last) if self.stretch_of(&last) == stretch => {
                if sample.round_trip < last.round_trip {
                    self.samples.pop_back();
                    self.samples.push_back(sample);
                }
            }
            _ => self.samples.push_back(sample),
        }
        if self.samples.len() > STRETCHES_MAX {
            if self.stretch < STRETCH_LAST {
                self.double_stretch();
            } else {
                self.samples.pop_front();
            }
        }
    }

    /// Joins neighbouring stretches, keeping the faster sample of each.
    fn double_stretch(&mut self) {
        self.stretch *= 2;
        for _ in 0..self.samples.len() {
            let Some(sample) = self.samples.pop_front() else {
                return;
            };
            let stretch = self.stretch_of(&sample);
            // In the first round the back is the newest sample, which is in another stretch.
            match self.samples.back().copied() {
                Some(last) if self.stretch_of(&last) == stretch => {
                    if sample.round_trip < last.round_trip {
                        self.samples.pop_back();
                        self.samples.push_back(sample);
                    }
                }
                _ => self.samples.push_back(sample),
            }
        }
    }

    fn fit(&mut self) {
        self.sorted.clear();
        self.sorted
            .extend(self.samples.iter().map(|sample| sample.round_trip));
        self.sorted.sort_unstable();
        let count = self.sorted.len();
        let fitted = count.div_ceil(2).max(FITTED_MIN).min(count);
        let slowest = fitted
            .checked_sub(1)
            .and_then(|last| self.sorted.get(last).copied());
        self.estimate = slowest.and_then(|slowest| {
            let chosen = self
                .samples
                .iter()
                .filter(move |sample| sample.round_trip <= slowest)
                .map(|sample| (sample.host, sample.sink));
            ClockEstimate::fit(chosen, slowest, self.bounds.rate_ppb)
        });
    }
}

#[cfg(test)]
mod tests;
