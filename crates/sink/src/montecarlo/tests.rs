//! The Monte Carlo method against JCGM 101:2008 and closed forms.

use nalgebra::DMatrix;

use super::{Distribution, JointNormal, NotPositive, Outcome, OutcomeError, Random, simulate};
use crate::accumulate::Moments;

fn sum(x: &[f64]) -> f64 {
    x.iter().sum()
}

/// The first values of xoshiro256++ for the state 1, 2, 3, 4, from the authors'
/// reference code (41943041, 58720359, ...; from memory of the published test
/// vector, and recomputed by hand for the first).
#[test]
fn the_generator_gives_its_published_values() {
    let mut random = Random::from_state([1, 2, 3, 4]);
    let values: Vec<u64> = (0..4).map(|_| random.bits()).collect();
    assert_eq!(
        values,
        [
            41_943_041,
            58_720_359,
            3_588_806_011_781_223,
            3_591_011_842_654_386
        ]
    );
}

#[test]
fn a_seed_gives_the_same_stream_for_ever() {
    let mut random = Random::from_seed(0);
    // SplitMix64 of seed 0 begins with E220A8397B1DCDAF (published test value).
    assert_eq!(
        Random::from_seed(0).state_for_test()[0],
        0xE220_A839_7B1D_CDAF
    );
    assert_eq!(random.bits(), Random::from_seed(0).bits());
    assert_ne!(random.bits(), Random::from_seed(1).bits());
}

/// JCGM 101 9.2.2: four standard normal inputs; y = 0, u = 2.00, 95 % interval
/// [-3.92, 3.92].
#[test]
fn a_sum_of_normals_is_that_of_the_supplement() {
    let inputs = [Distribution::Normal {
        mean: 0.0,
        deviation: 1.0,
    }; 4];
    let outcome = simulate(sum, &inputs, 400_000, 7, 0.95).unwrap();
    assert!(outcome.mean.abs() < 0.015);
    assert!((outcome.standard_uncertainty - 2.0).abs() < 0.01);
    assert!((outcome.symmetric[0] + 3.92).abs() < 0.03);
    assert!((outcome.symmetric[1] - 3.92).abs() < 0.03);
}

/// JCGM 101 9.2.3: four rectangular inputs of standard deviation 1; the law of
/// propagation would give ±3.92, the distribution has ±3.88. The closed form of
/// the sum's tail is (2 sqrt 3)(2 - 0.6^(1/4)).
#[test]
fn a_sum_of_rectangles_is_narrower_than_a_normal() {
    let half = 3_f64.sqrt();
    let inputs = [Distribution::Rectangular {
        low: -half,
        high: half,
    }; 4];
    let outcome = simulate(sum, &inputs, 400_000, 11, 0.95).unwrap();
    let exact = 2.0 * half * (2.0 - 0.6_f64.powf(0.25));
    assert!((exact - 3.88).abs() < 0.005);
    assert!((outcome.symmetric[1] - exact).abs() < 0.02);
    assert!((outcome.symmetric[0] + exact).abs() < 0.02);
}

/// The shortest 95 % interval of an exponential value begins at its foot.
#[test]
fn the_shortest_interval_of_a_lopsided_value_is_not_the_symmetric_one() {
    let inputs = [Distribution::Rectangular {
        low: 0.0,
        high: 1.0,
    }];
    let outcome = simulate(|x| -x[0].ln(), &inputs, 200_000, 3, 0.95).unwrap();
    assert!(outcome.shortest[0] < 0.01);
    assert!((outcome.shortest[1] - 20_f64.ln()).abs() < 0.05);
    assert!((outcome.symmetric[1] - 40_f64.ln()).abs() < 0.1);
    assert!((outcome.symmetric[0] - (40.0_f64 / 39.0).ln()).abs() < 0.005);
}

#[test]
fn each_distribution_has_its_deviation() {
    let check = |distribution: Distribution, mean: f64, deviation: f64| {
        let mut random = Random::from_seed(5);
        let moments: Moments = (0..200_000)
            .map(|_| distribution.draw(&mut random))
            .collect();
        assert!((moments.mean().unwrap() - mean).abs() < 0.02 * deviation);
        assert!((moments.standard_deviation().unwrap() / deviation - 1.0).abs() < 0.02);
    };
    check(
        Distribution::Rectangular {
            low: 1.0,
            high: 3.0,
        },
        2.0,
        1.0 / 3_f64.sqrt(),
    );
    check(
        Distribution::Triangular {
            low: 1.0,
            high: 3.0,
        },
        2.0,
        1.0 / 6_f64.sqrt(),
    );
    // A t with nu degrees of freedom has the variance nu / (nu - 2).
    let student = Distribution::Student {
        mean: 2.0,
        deviation: 1.0,
        freedom: 8.0,
    };
    check(student, 2.0, (8.0_f64 / 6.0).sqrt());
}

#[test]
fn correlated_inputs_are_drawn_with_their_covariance() {
    let covariance = DMatrix::from_row_slice(2, 2, &[4.0, -1.8, -1.8, 1.0]);
    let joint = JointNormal::new(&[1.0, 2.0], &covariance).unwrap();
    let mut random = Random::from_seed(1);
    let sums: Moments = (0..200_000)
        .map(|_| joint.draw(&mut random).iter().sum::<f64>())
        .collect();
    assert!((sums.mean().unwrap() - 3.0).abs() < 0.01);
    // 4 + 1 - 2 * 1.8 = 1.4.
    assert!((sums.standard_deviation().unwrap() - 1.4_f64.sqrt()).abs() < 0.01);
    let singular = DMatrix::from_row_slice(2, 2, &[1.0, 1.0, 1.0, 1.0]);
    assert!(JointNormal::new(&[0.0, 0.0], &singular).is_ok());
    let impossible = DMatrix::from_row_slice(2, 2, &[1.0, 2.0, 2.0, 1.0]);
    assert_eq!(JointNormal::new(&[0.0, 0.0], &impossible), Err(NotPositive));
}

#[test]
fn trials_that_tell_nothing_are_refused() {
    assert_eq!(
        Outcome::from_trials(vec![0.0; 100], 0.95),
        Err(OutcomeError::TooFewTrials {
            trials: 100,
            probability: 0.95,
            needed: 200
        })
    );
    let with_nan: Vec<f64> = (0..1000)
        .map(|i| if i == 7 { f64::NAN } else { 1.0 })
        .collect();
    assert_eq!(
        Outcome::from_trials(with_nan, 0.95),
        Err(OutcomeError::NotFinite {
            bad: 1,
            trials: 1000
        })
    );
    assert_eq!(
        Outcome::from_trials(vec![], 1.0),
        Err(OutcomeError::NoProbability(1.0))
    );
}
