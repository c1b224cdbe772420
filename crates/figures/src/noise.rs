//! How noisy the converters were, from the extremes of the readbacks, and what that leaves of a
//! converter's step.
//!
//! A readback is the mean of many samples. Where their noise reaches over the converter's steps,
//! the steps average out with it, and a mean is known far better than to a step; where it does
//! not, every sample falls short by the same, and so does the mean. The range of a sample of known
//! size tells its standard deviation.
//!
//! Invariant: the median of the steps that hold a current is believed, since a voltage that moves
//! within the readbacks of some looks like noise there.

use statrs::distribution::{ContinuousCDF, Normal};

use crate::stage::Stage;
use crate::walk::Delivered;

/// Fewest samples in a readback whose range is looked at.
const SAMPLES_LEAST: f64 = 10.0;

/// Fewest readbacks of a step.
const READBACKS_LEAST: u32 = 5;

/// Steps are believed to average out from this share of noise on.
const DITHERED: f64 = 0.4;

/// Sums over the readbacks of one step.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Ranges {
    readbacks: u32,
    seconds: f64,
    /// Of the shortest one; a step's last may be cut short.
    shortest: f64,
    amperes: f64,
    volts: f64,
}

impl Ranges {
    /// Takes a readback's interval and ranges in, nominal.
    pub(crate) fn add(&mut self, seconds: f64, amperes: f64, volts: f64) {
        self.readbacks = self.readbacks.saturating_add(1);
        self.seconds += seconds;
        self.shortest = if self.readbacks == 1 {
            seconds
        } else {
            self.shortest.min(seconds)
        };
        self.amperes += amperes;
        self.volts += volts;
    }
}

/// Noise of one sample of a channel, and how many make a readback.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Noise {
    /// Standard deviation of one sample, ampere or volt.
    pub(crate) sample: f64,
    /// Samples in the shortest readbacks.
    pub(crate) samples: f64,
}

/// Noise of current and voltage; `None` where no step tells it.
pub(crate) fn noise(
    stages: &[Stage<'_>],
    walked: &[Delivered],
    tick_s: f64,
) -> Option<(Noise, Noise)> {
    let told = stages.iter().zip(walked).filter_map(|(stage, delivered)| {
        let ranges = delivered.ranges;
        stage.held_current()?;
        if ranges.readbacks < READBACKS_LEAST {
            return None;
        }
        let readbacks = f64::from(ranges.readbacks);
        let samples = ranges.seconds / readbacks / tick_s;
        if samples < SAMPLES_LEAST {
            return None;
        }
        let per = expected_range(samples) * readbacks;
        let least = (ranges.shortest / tick_s).max(1.0);
        Some((ranges.amperes / per, ranges.volts / per, least))
    });
    let told: Vec<(f64, f64, f64)> = told.collect();
    let samples = told.iter().map(|one| one.2).fold(f64::INFINITY, f64::min);
    let of = |sample: f64| Noise { sample, samples };
    let amperes = lower_median(told.iter().map(|one| one.0))?;
    let volts = lower_median(told.iter().map(|one| one.1))?;
    Some((of(amperes), of(volts)))
}

/// The middle value, or the smaller of two.
fn lower_median(values: impl Iterator<Item = f64>) -> Option<f64> {
    let mut values: Vec<f64> = values.collect();
    values.sort_by(f64::total_cmp);
    let middle = values.len().checked_sub(1)? / 2;
    values.get(middle).copied()
}

/// Mean range of so many normal samples, in standard deviations: twice the expected extreme, by
/// Blom's approximation (G. Blom, Statistical Estimates and Transformed Beta-Variables, 1958).
fn expected_range(samples: f64) -> f64 {
    let quantile = (samples - 0.375) / (samples + 0.25);
    2.0 * Normal::standard().inverse_cdf(quantile)
}

impl Noise {
    /// Standard uncertainty of a readback's mean from noise and from a converter's step.
    pub(crate) fn of_mean(self, step: f64) -> f64 {
        let whole_step = step / 12_f64.sqrt();
        // The range of a steady value between two codes is one step, noise or not.
        let share = self.sample / step;
        if share < DITHERED {
            return whole_step;
        }
        // The steps hardly widen a range of several of them, but they do err.
        let averaged = self.sample.hypot(whole_step) / self.samples.sqrt();
        // What noise leaves of the steps' pattern: the first term of its Fourier series
        // (Widrow and Kollar, Quantization Noise, 2008, from memory).
        let pi = std::f64::consts::PI;
        let left = step / pi * (-2.0 * (pi * share).powi(2)).exp() / 2_f64.sqrt();
        averaged.hypot(left).min(whole_step)
    }
}
