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
//! within the readbacks of some looks like noise there.

use sink::uncertainty::{expected_range, noise_of_range, of_dithered_step, of_resolution};

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
        Noise {
            range: self.ranges / readbacks,
            expected: expected_range(samples),
            moved: self.means.map_or(0.0, |(low, high)| high - low),
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
    /// Mean range of a readback, ampere or volt.
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

impl Noise {
    /// Standard deviation of a sample as it seems, ampere or volt.
    fn sample(&self) -> f64 {
        self.range / self.expected
    }

    /// Standard uncertainty of a readback's mean from noise and from a converter's step.
    pub(crate) fn of_mean(self, step: f64) -> f64 {
        let whole_step = of_resolution(step);
        // As many values as codes were passed, but no more than there are readbacks.
        let values = (self.moved / step).clamp(1.0, self.readbacks);
        let surely = noise_of_range(self.range, self.expected, step, values);
        let left = of_dithered_step(step, surely);
        // What the samples of one value scatter by: all that they err, less what they share.
        let scatter = self.sample().hypot(whole_step).powi(2) - left * left;
        let averaged = (scatter / self.samples).max(0.0).sqrt();
        averaged.hypot(left).min(whole_step)
    }
}
