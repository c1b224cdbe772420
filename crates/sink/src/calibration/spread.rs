//! How noisy the converter that reads was at a calibration.
//!
//! A readback is the mean of many samples, and the noise of these decides what the converter's
//! step leaves in that mean ([`of_dithered_step`](crate::uncertainty::of_dithered_step)). Where
//! the points hold how far the samples of a readback lay apart, that tells it (the mean range of
//! normal samples of known number); where they do not, as in a table typed by hand, the scatter of
//! the readbacks themselves does. Of means it is less than that of the samples, so too much is
//! left to the step rather than too little.
//!
//! Points lie anywhere between two codes, so each tells of another value; and what was found is
//! taken for one standard deviation less than it is, so that a step which may not have been averaged
//! away counts.

use quantity::{Quantity, Textual};
use serde::{Deserialize, Serialize};

use super::micro;
use crate::accumulate::{Moments, count};
use crate::uncertainty::{DegreesOfFreedom, expected_range, noise_before_steps, noise_of_range};

/// How far the samples behind a point's readbacks lay apart.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, bound = "T: Textual")]
pub struct Spread<T> {
    /// The mean, over the readbacks, of largest less least sample.
    #[serde(with = "quantity::text")]
    pub range: T,
    /// How many samples a readback is the mean of.
    pub samples: u32,
}

impl<T: Textual + Quantity> Spread<T> {
    /// From least and largest sample of each readback; `None` without a readback, or of readbacks
    /// of fewer than two samples.
    pub fn of(extremes: impl Iterator<Item = (T, T)>, samples: u32) -> Option<Self> {
        let ranges: Moments = extremes
            .map(|(least, largest)| micro(largest) - micro(least))
            .collect();
        #[expect(
            clippy::cast_possible_truncation,
            reason = "the mean of ranges that fit does, too"
        )]
        let mean = ranges.mean()?.max(0.0).round() as i128;
        let range = T::from_base_units(mean)?;
        (samples >= 2).then_some(Self { range, samples })
    }
}

/// The standard deviation of one sample, micro-units, one standard deviation of itself taken off;
/// `deviation` is that of a readback with what it was told by.
pub(super) fn noise<'a, T: Textual + Quantity + 'a>(
    spreads: impl Iterator<Item = &'a Spread<T>>,
    (deviation, freedom): (f64, DegreesOfFreedom),
    step: f64,
) -> f64 {
    let told = spreads.filter(|spread| spread.samples >= 2);
    let (mut ranges, mut expected) = (Moments::new(), Moments::new());
    for spread in told {
        ranges.add(micro(spread.range));
        expected.add(expected_range(f64::from(spread.samples)));
    }
    if let (Some(range), Some(expected)) = (ranges.mean(), expected.mean()) {
        return noise_of_range(range, expected, step, count(ranges.number()));
    }
    // Relative standard deviation of a standard deviation: JCGM 100 E.4.3.
    let own = 1.0 / (2.0 * freedom.number()).sqrt();
    noise_before_steps(step, deviation * (1.0 - own).max(0.0))
}

#[cfg(test)]
mod tests {
    use quantity::Current;

    use super::*;
    use crate::montecarlo::Random;

    /// Ten points of ten readbacks of a hundred samples each, somewhere between two codes.
    fn seen(noise_steps: f64, seed: u64) -> f64 {
        let mut random = Random::from_seed(seed);
        let spreads: Vec<_> = (0..10)
            .map(|_| {
                let value = random.unit();
                let extremes: Vec<_> = (0..10)
                    .map(|_| {
                        let samples: Vec<f64> = (0..100)
                            .map(|_| (value + noise_steps * random.normal()).round() * 1e-3)
                            .collect();
                        let end = |fold: fn(f64, f64) -> f64| {
                            Current::from_amperes(samples.iter().copied().reduce(fold).unwrap())
                        };
                        (end(f64::min).unwrap(), end(f64::max).unwrap())
                    })
                    .collect();
                Spread::of(extremes.into_iter(), 100).unwrap()
            })
            .collect();
        noise(spreads.iter(), (0.0, DegreesOfFreedom::INFINITE), 1e3) / 1e3
    }

    #[test]
    fn noise_is_found_from_the_extremes_and_hardly_ever_too_much() {
        for noise in [0.05, 0.2, 0.4, 1.0, 4.0] {
            let found: Moments = (0..50).map(|seed| seen(noise, seed)).collect();
            let mean = found.mean().unwrap();
            assert!(mean <= noise, "{noise}: {mean}");
            assert!(mean > 0.93 * noise - 0.035, "{noise}: {mean}");
        }
        assert!(seen(0.0, 1) <= 0.0);
    }

    #[test]
    fn without_extremes_the_scatter_of_the_readbacks_tells() {
        let none = || std::iter::empty::<&Spread<Current>>();
        let many = (500.0, DegreesOfFreedom::finite(100.0));
        // 500 uA of scatter on steps of 1 mA is 410 uA of noise and the steps' own 289 uA; 7 % are
        // taken off first.
        let found = noise(none(), many, 1e3);
        assert!((330.0..410.0).contains(&found), "{found}");
        assert!(noise(none(), (0.0, DegreesOfFreedom::INFINITE), 1e3) <= 0.0);
        let two = (500.0, DegreesOfFreedom::finite(0.5));
        assert!(noise(none(), two, 1e3) <= 0.0);
    }
}
