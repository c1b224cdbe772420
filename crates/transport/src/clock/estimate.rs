//! The straight line that maps host time to sink time and back.

use quantity::{HostTime, SinkTime, Span};
use serde::{Deserialize, Serialize};

const BILLION: i128 = 1_000_000_000;

/// Microseconds by which a line may move, and parts per billion by which it may turn, without
/// being worth a word: far below what any figure can see.
const MOVED_LEAST: u128 = 50;
const TURNED_LEAST: u64 = 500;

/// A straight line through the fastest round trips: `sink = anchor + elapsed * (1 + rate)`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ClockEstimate {
    /// Host time of the anchor: the mean of the samples fitted.
    pub host: HostTime,
    /// Sink time at the anchor.
    pub sink: SinkTime,
    /// Rate of the sink's clock against the host's, less one, in parts per billion; positive:
    /// the sink's clock runs fast.
    pub rate_ppb: i64,
    /// Bound of the error at the anchor.
    pub uncertainty: Span,
    /// Bound of the error of the rate, in parts per billion.
    pub rate_uncertainty_ppb: u64,
}

impl ClockEstimate {
    /// Fits samples of host and sink time (microseconds), the slowest of which took
    /// `round_trip` microseconds. `None` without samples, or for a sink time the line puts
    /// before the sink's start.
    ///
    /// From a single instant no rate can be told: it is then zero, with `rate_ppb_unknown` as
    /// its bound.
    pub(super) fn fit(
        samples: impl Iterator<Item = (i64, u64)> + Clone,
        round_trip: u64,
        rate_ppb_unknown: u32,
    ) -> Option<Self> {
        let (host_first, sink_first) = samples.clone().next()?;
        let (host_first, sink_first) = (i128::from(host_first), i128::from(sink_first));
        let mut sums = Sums::default();
        let mut length = 0;
        for (host, sink) in samples.clone() {
            // The sink's lead over the host since the first sample: small numbers, exact sums.
            length = i128::from(host) - host_first;
            sums.add(length, i128::from(sink) - sink_first - length);
        }
        // Both clocks are read in whole microseconds.
        let reading = i128::from(round_trip) + 2;
        let (rate, rate_uncertainty) = match sums.slope_billionths() {
            Some(rate) if length > 0 => (rate, reading * BILLION / length + 1),
            _ => (0, i128::from(rate_ppb_unknown)),
        };
        let (mean_x, mean_y) = (divide(sums.x, sums.count), divide(sums.y, sums.count));
        let mut estimate = Self {
            host: HostTime::from_micros(i64::try_from(host_first + mean_x).ok()?),
            sink: SinkTime::from_micros(u64::try_from(sink_first + mean_x + mean_y).ok()?),
            rate_ppb: i64::try_from(rate).ok()?,
            uncertainty: Span::from_micros(u64::try_from(reading).ok()?.div_ceil(2)),
            rate_uncertainty_ppb: u64::try_from(rate_uncertainty).ok()?,
        };
        // Where the clock did not run straight, the line is no better than it fits.
        let worst = estimate.worst_residual(samples);
        estimate.uncertainty = estimate.uncertainty.max(worst);
        Some(estimate)
    }

    fn worst_residual(&self, samples: impl Iterator<Item = (i64, u64)>) -> Span {
        let worst = samples
            .map(|(host, sink)| {
                let line = self.sink_micros_at(HostTime::from_micros(host));
                (i128::from(sink) - line).unsigned_abs()
            })
            .max()
            .unwrap_or(0);
        Span::from_micros(u64::try_from(worst).unwrap_or(u64::MAX))
    }

    /// Sink time in microseconds, which the line may put before the sink's start.
    pub(super) fn sink_micros_at(&self, at: HostTime) -> i128 {
        let elapsed = i128::from(at.micros()) - i128::from(self.host.micros());
        let lead = divide(elapsed * i128::from(self.rate_ppb), BILLION);
        i128::from(self.sink.micros()) + elapsed + lead
    }

    /// What the sink's clock shows at a host time; `None` before the sink's start.
    pub fn sink_at(&self, at: HostTime) -> Option<SinkTime> {
        u64::try_from(self.sink_micros_at(at))
            .ok()
            .map(SinkTime::from_micros)
    }

    /// The host time at which the sink's clock shows `at`; `None` beyond the host clock's range.
    pub fn host_at(&self, at: SinkTime) -> Option<HostTime> {
        let elapsed = i128::from(at.micros()) - i128::from(self.sink.micros());
        let rate = BILLION + i128::from(self.rate_ppb);
        if rate <= 0 {
            return None;
        }
        let host = i128::from(self.host.micros()) + divide(elapsed * BILLION, rate);
        i64::try_from(host).ok().map(HostTime::from_micros)
    }

    /// Bound of the error of [`Self::sink_at`] at a host time: it grows away from the anchor.
    pub fn uncertainty_at(&self, at: HostTime) -> Span {
        let distance = u128::from(at.micros().abs_diff(self.host.micros()));
        let drift = (distance * u128::from(self.rate_uncertainty_ppb)).div_ceil(1_000_000_000);
        let drift = Span::from_micros(u64::try_from(drift).unwrap_or(u64::MAX));
        self.uncertainty.saturating_add(drift)
    }

    /// Whether `newer` says something that a record should know: the line moved or turned
    /// beyond this one's bounds and by more than matters, its bounds halved, or a minute has
    /// passed.
    pub fn materially_differs(&self, newer: &Self) -> bool {
        let moved = (self.sink_micros_at(newer.host) - i128::from(newer.sink.micros()))
            .unsigned_abs()
            > u128::from(self.uncertainty_at(newer.host).micros()) + MOVED_LEAST;
        let turned = self.rate_ppb.abs_diff(newer.rate_ppb)
            > self.rate_uncertainty_ppb.saturating_add(TURNED_LEAST);
        let sharper = newer.uncertainty.micros() < self.uncertainty.micros() / 2
            || newer.rate_uncertainty_ppb < self.rate_uncertainty_ppb / 2;
        let old = newer.host.saturating_since(self.host) >= Span::from_secs(60);
        moved || turned || sharper || old
    }
}

/// What a straight line by least squares needs, exactly.
#[derive(Default)]
struct Sums {
    count: i128,
    x: i128,
    y: i128,
    squares: i128,
    products: i128,
}

impl Sums {
    const fn add(&mut self, x: i128, y: i128) {
        self.count += 1;
        self.x += x;
        self.y += y;
        self.squares += x * x;
        self.products += x * y;
    }

    /// The slope in parts per billion; `None` if all points stand at the same place.
    const fn slope_billionths(&self) -> Option<i128> {
        let spread = self.count * self.squares - self.x * self.x;
        if spread <= 0 {
            return None;
        }
        let moment = self.count * self.products - self.x * self.y;
        Some(divide(moment.saturating_mul(BILLION), spread))
    }
}

/// Quotient rounded to the nearest, away from zero at a half; the divisor is positive.
const fn divide(numerator: i128, divisor: i128) -> i128 {
    let half = divisor / 2;
    if numerator < 0 {
        (numerator.saturating_sub(half)) / divisor
    } else {
        (numerator.saturating_add(half)) / divisor
    }
}
