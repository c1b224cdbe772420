//! Propagation of distributions by the Monte Carlo method, JCGM 101:2008.
//!
//! For models that are not linear enough for the law of propagation. Seeded by
//! the caller, so that a figure can be recomputed to the last digit: the
//! generator is xoshiro256++ (Blackman and Vigna, ACM TOMS 47 (2021) 36) filled
//! by SplitMix64 (Steele, Lea and Flood, OOPSLA 2014), written out here because
//! a figure must not change with a library's version.
//!
//! What it deliberately does not do: it is no source of secrets.

mod distribution;
mod random;

use crate::accumulate::{Moments, count};

pub use distribution::{Distribution, JointNormal, NotPositive};
pub use random::Random;

/// The smallest number of trials that JCGM 101 7.2.2 advises for a 95 %
/// interval: 10^4 over 1 - p.
pub const TRIALS_ADVISED: usize = 200_000;

/// What the trials of a Monte Carlo evaluation show.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize, serde::Deserialize)]
pub struct Outcome {
    /// Mean of the trials: the estimate.
    pub mean: f64,
    /// Their standard deviation: the standard uncertainty.
    pub standard_uncertainty: f64,
    /// Probability that the intervals cover.
    pub probability: f64,
    /// Probabilistically symmetric interval: equal tails.
    pub symmetric: [f64; 2],
    /// Shortest interval.
    pub shortest: [f64; 2],
    /// How many trials there were.
    pub trials: usize,
}

/// Why trials tell nothing.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
pub enum OutcomeError {
    /// Too few to see the tails of the interval.
    #[error("{trials} trials are too few for an interval of {probability}; make at least {needed}")]
    TooFewTrials {
        /// Trials made.
        trials: usize,
        /// Probability asked for.
        probability: f64,
        /// Least number for it.
        needed: usize,
    },
    /// The model gave a value that is not finite.
    #[error(
        "{bad} of {trials} trials gave no finite value; the model does not hold over its inputs"
    )]
    NotFinite {
        /// Trials without a finite value.
        bad: usize,
        /// Trials made.
        trials: usize,
    },
    /// A probability that is none.
    #[error("{0} is no probability between 0 and 1")]
    NoProbability(f64),
}

/// Runs a model on draws of its inputs.
///
/// # Errors
/// [`OutcomeError`] for too few trials or a model that is not finite.
pub fn simulate(
    model: impl Fn(&[f64]) -> f64,
    inputs: &[Distribution],
    trials: usize,
    seed: u64,
    probability: f64,
) -> Result<Outcome, OutcomeError> {
    let mut random = Random::from_seed(seed);
    let mut draw = vec![0.0; inputs.len()];
    let values = (0..trials)
        .map(|_| {
            for (slot, input) in draw.iter_mut().zip(inputs) {
                *slot = input.draw(&mut random);
            }
            model(&draw)
        })
        .collect();
    Outcome::from_trials(values, probability)
}

impl Outcome {
    /// Mean, deviation and intervals of the values of trials made elsewhere
    /// (JCGM 101 7.5 to 7.7).
    ///
    /// # Errors
    /// [`OutcomeError`] for too few trials or values that are not finite.
    pub fn from_trials(mut values: Vec<f64>, probability: f64) -> Result<Self, OutcomeError> {
        if !(probability > 0.0 && probability < 1.0) {
            return Err(OutcomeError::NoProbability(probability));
        }
        let trials = values.len();
        let needed = whole((10.0 / (1.0 - probability)).ceil());
        if trials < needed {
            return Err(OutcomeError::TooFewTrials {
                trials,
                probability,
                needed,
            });
        }
        let bad = values.iter().filter(|value| !value.is_finite()).count();
        if bad > 0 {
            return Err(OutcomeError::NotFinite { bad, trials });
        }
        let moments: Moments = values.iter().copied().collect();
        values.sort_unstable_by(f64::total_cmp);
        let covered = whole((probability * count(trials)).round()).min(trials - 1);
        let symmetric_start = (trials - covered) / 2;
        let shortest_start = (0..trials - covered)
            .min_by(|&one, &other| {
                width(&values, one, covered).total_cmp(&width(&values, other, covered))
            })
            .unwrap_or(symmetric_start);
        let interval = |start: usize| {
            let end = (start + covered).min(trials - 1);
            [start, end].map(|index| values.get(index).copied().unwrap_or(f64::NAN))
        };
        Ok(Self {
            mean: moments.mean().unwrap_or(f64::NAN),
            standard_uncertainty: moments.standard_deviation().unwrap_or(f64::NAN),
            probability,
            symmetric: interval(symmetric_start),
            shortest: interval(shortest_start),
            trials,
        })
    }
}

/// The width of the interval of `covered` trials from `start` on.
fn width(sorted: &[f64], start: usize, covered: usize) -> f64 {
    match (sorted.get(start), sorted.get(start + covered)) {
        (Some(low), Some(high)) => high - low,
        _ => f64::INFINITY,
    }
}

/// A whole float as a number of things.
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "a float cast saturates, and the caller's value is whole and not negative"
)]
const fn whole(value: f64) -> usize {
    value as usize
}

#[cfg(test)]
mod tests;
