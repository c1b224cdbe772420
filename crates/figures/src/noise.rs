//! How noisy the converters were, from the extremes of the readbacks, and what that leaves of a
//! converter's step.
//!
//! A readback is the mean of many samples. Where their noise reaches over the converter's steps,
//! the steps average out with it, and a mean is known far better than to a step; where it does
//! not, every sample falls short by the same, and so does the mean. The range of a sample of known
//! size tells its standard deviation: of a value that stays where it is, to within a step; of one
//! that moves through many codes, much nearer.
//!
//! Invariant: the median of the steps that hold a current is believed, since a voltage that moves
//! within the readbacks of some looks like noise there; what moves in a straight line is taken off.

use sink::uncertainty::{expected_range, noise_of_range, of_dithered_step, of_resolution};
use statrs::distribution::{Continuous, ContinuousCDF, Normal};

use crate::stage::Stage;
use crate::walk::Delivered;

/// Fewest samples in a readback whose range is looked at.
const SAMPLES_LEAST: f64 = 10.0;

/// Fewest readbacks of a step.
const READBACKS_LEAST: u32 = 5;

/// Sums over the readbacks of one step.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Ranges {
    readbacks: u32,
    seconds: f64,
    /// Of the shortest one; a step's last may be cut short.
    shortest: f64,
    current: Extent,
    voltage: Extent,
}

/// Of one channel, nominal, ampere or volt.
#[derive(Debug, Clone, Copy, Default)]
struct Extent {
    /// Sum of the readbacks' ranges.
    ranges: f64,
    /// Least and largest of the readbacks' means.
    means: Option<(f64, f64)>,
}

impl Extent {
    fn add(&mut self, [least, mean, largest]: [f64; 3]) {
        self.ranges += largest - least;
        let (low, high) = self.means.unwrap_or((mean, mean));
        self.means = Some((low.min(mean), high.max(mean)));
    }

    fn noise(self, readbacks: f64, samples: f64, least_samples: f64) -> Noise {
        let (range, expected) = (self.ranges / readbacks, expected_range(samples));
        let moved = self.means.map_or(0.0, |(low, high)| high - low);
        // A course that is steeper at first leaves some of its range for noise: the safe side.
        let drift = moved / (readbacks - 1.0).max(1.0);
        Noise {
            range: range_without(drift, range, expected),
            expected,
            moved,
            readbacks,
            samples: least_samples,
        }
    }
}

impl Ranges {
    /// Takes a readback in: its interval, and least sample, mean and largest sample, nominal.
    pub(crate) fn add(&mut self, seconds: f64, amperes: [f64; 3], volts: [f64; 3]) {
        self.readbacks = self.readbacks.saturating_add(1);
        self.seconds += seconds;
        self.shortest = if self.readbacks == 1 {
            seconds
        } else {
            self.shortest.min(seconds)
        };
        self.current.add(amperes);
        self.voltage.add(volts);
    }
}

/// What tells the noise of one sample of a channel, and how many make a readback.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Noise {
    /// Mean range of a readback, less what a drift widens it by, ampere or volt.
    range: f64,
    /// What a range is expected to be, in standard deviations of a sample.
    expected: f64,
    /// How far the readbacks' means lie apart, ampere or volt.
    moved: f64,
    /// How many readbacks tell it.
    readbacks: f64,
    /// Samples in the shortest readback.
    samples: f64,
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
        let least = (ranges.shortest / tick_s).max(1.0);
        let of = |extent: Extent| extent.noise(readbacks, samples, least);
        Some((of(ranges.current), of(ranges.voltage)))
    });
    let (current, voltage): (Vec<Noise>, Vec<Noise>) = told.unzip();
    let all = current.iter().chain(&voltage);
    let samples = all.map(|one| one.samples).fold(f64::INFINITY, f64::min);
    let of = |noises| {
        Some(Noise {
            samples,
            ..lower_median(noises)?
        })
    };
    Some((of(current)?, of(voltage)?))
}

/// The middle one by noise, or the smaller of two.
fn lower_median(mut noises: Vec<Noise>) -> Option<Noise> {
    noises.sort_by(|one, other| one.sample().total_cmp(&other.sample()));
    let middle = noises.len().checked_sub(1)? / 2;
    noises.get(middle).copied()
}

/// The mean range that samples would have had without a straight drift through their reading.
///
/// The largest is where Blom has it ([`expected_range`]), in the distribution of the samples' sum
/// with a drift that passes all its values evenly.
fn range_without(drift: f64, range: f64, expected: f64) -> f64 {
    // A drift that is a twentieth of the range widens none.
    if drift < 0.05 * range {
        return range;
    }
    let normal = Normal::standard();
    let quantile = normal.cdf(0.5 * expected);
    let integral = |z: f64| z * normal.cdf(z) + normal.pdf(z);
    // How much of the sum's distribution lies below half the range.
    let below = |sigma: f64| {
        let at = |twice: f64| integral(0.5 * twice / sigma);
        sigma / drift * (at(range + drift) - at(range - drift))
    };
    let (mut low, mut high) = (0.0, range / expected);
    for _ in 0..50 {
        let middle = f64::midpoint(low, high);
        if below(middle) > quantile {
            low = middle;
        } else {
            high = middle;
        }
    }
    f64::midpoint(low, high) * expected
}

/// Mean of the largest of so many normal samples, in standard deviations; none of one alone.
pub(crate) fn expected_largest(samples: f64) -> f64 {
    0.5 * expected_range(samples)
}

/// Standard deviation of the largest of so many normal samples, in theirs: that of the largest of
/// as many even ones, by the slope between both at its mean. Tables have 0.826 for two, 0.669 for
/// five and 0.587 for ten (Tippett 1925, from memory); this is nearer than a tenth.
pub(crate) fn scatter_of_largest(samples: f64) -> f64 {
    if samples < 2.0 {
        return 1.0;
    }
    let normal = Normal::standard();
    let mean = expected_largest(samples);
    let place = normal.cdf(mean);
    let variance = place * (1.0 - place) / (samples + 1.0);
    variance.sqrt() / normal.pdf(mean)
}

impl Noise {
    /// Standard deviation of a sample as it seems, ampere or volt.
    fn sample(&self) -> f64 {
        self.range / self.expected
    }

    /// Standard uncertainty of a readback's mean from noise and from a converter's step.
    pub(crate) fn of_mean(self, step: f64) -> f64 {
        let whole_step = of_resolution(step);
        let left = self.left_of(step);
        // What the samples of one value scatter by: all that they err, less what they share.
        let scatter = self.sample().hypot(whole_step).powi(2) - left * left;
        let averaged = (scatter / self.samples).max(0.0).sqrt();
        averaged.hypot(left)
    }

    /// What a converter's step leaves in a mean of any number of samples.
    pub(crate) fn left_of(self, step: f64) -> f64 {
        // As many values as codes were passed, but no more than there are readbacks.
        let values = (self.moved / step).clamp(1.0, self.readbacks);
        of_dithered_step(
            step,
            noise_of_range(self.range, self.expected, step, values),
        )
    }

    /// Whether the noise makes a converter's steps average out.
    pub(crate) fn dithers(self, step: f64) -> bool {
        self.left_of(step) < 0.5 * of_resolution(step)
    }

    /// The same of means of so many samples.
    pub(crate) fn of_samples(self, samples: f64) -> Self {
        Self { samples, ..self }
    }

    /// Samples in the shortest readback.
    pub(crate) const fn samples(&self) -> f64 {
        self.samples
    }
}

#[cfg(test)]
mod tests {
    use sink::uncertainty::expected_range;

    use super::{range_without, scatter_of_largest};

    #[test]
    fn the_largest_of_several_scatters_as_tables_say() {
        for (samples, tabled) in [(1.0, 1.0), (2.0, 0.826), (5.0, 0.669), (10.0, 0.587)] {
            let found = scatter_of_largest(samples);
            assert!((found / tabled - 1.0).abs() < 0.1, "{samples}: {found}");
        }
    }

    /// Five hundred samples over a drift of eight deviations, by 20,000 trials in numpy
    /// 2.4.6: a mean range of 11.913; and 6.078 without the drift.
    #[test]
    fn a_drift_is_taken_off_a_range() {
        let expected = expected_range(500.0);
        let found = range_without(8.0, 11.913, expected);
        assert!((found / 6.078 - 1.0).abs() < 0.1, "{found}");
        assert!((range_without(0.0, 6.078, expected) - 6.078).abs() < 1e-12);
    }
}
