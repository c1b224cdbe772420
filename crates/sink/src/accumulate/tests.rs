//! Accumulators against the NIST Statistical Reference Datasets (univariate).

use super::{Moments, Sum, lag_one_autocorrelation};

fn values(text: &str) -> Vec<f64> {
    text.lines()
        .map(|line| line.trim().parse().unwrap())
        .collect()
}

/// `NumAcc3` and `NumAcc4` as NIST defines them: one middle value, then 500
/// times the pair 0.1 below and 0.1 above it.
fn alternating(whole: f64) -> Vec<f64> {
    let mut values = vec![whole + 0.2];
    for _ in 0..500 {
        values.extend([whole + 0.1, whole + 0.3]);
    }
    values
}

fn check(values: &[f64], mean: f64, deviation: f64, lag: f64, tolerance: f64) {
    let moments: Moments = values.iter().copied().collect();
    let close = |is: f64, certified: f64| {
        assert!(
            ((is - certified) / certified).abs() <= tolerance,
            "{is} is not the certified {certified}"
        );
    };
    close(moments.mean().unwrap(), mean);
    close(moments.standard_deviation().unwrap(), deviation);
    close(lag_one_autocorrelation(values).unwrap(), lag);
}

#[test]
fn certified_means_deviations_and_autocorrelations_are_met() {
    // NIST StRD, univariate: Lew, Michelson, NumAcc1; certified values.
    check(
        &values(include_str!("../../tests/data/lew.txt")),
        -177.435,
        277.332_168_044_316,
        -0.307_304_800_605_679,
        1e-13,
    );
    check(
        &values(include_str!("../../tests/data/michelson.txt")),
        299.852_4,
        0.079_010_547_819_051_8,
        0.535_199_668_621_283,
        1e-11,
    );
    check(
        &values(include_str!("../../tests/data/numacc1.txt")),
        10_000_002.0,
        1.0,
        -0.5,
        1e-15,
    );
}

#[test]
fn a_small_spread_on_a_large_mean_is_not_lost() {
    // NIST StRD, univariate: NumAcc3 and NumAcc4, mean and deviation. The bound
    // is what the decimal data lose when they become binary at all: half an ulp
    // of the value over the deviation of 0.1.
    for (whole, bound) in [(1e6, 2e-9), (1e7, 2e-8)] {
        check(&alternating(whole), whole + 0.2, 0.1, -0.999, bound);
    }
}

#[test]
fn a_compensated_sum_keeps_what_a_plain_one_drops() {
    let terms = [1.0, 1e100, 1.0, -1e100];
    assert!((terms.iter().copied().collect::<Sum>().value() - 2.0).abs() < f64::EPSILON);
    // Ten million readings of 0.1: a plain sum is off in the tenth digit.
    let sum: Sum = std::iter::repeat_n(0.1, 10_000_000).collect();
    assert!((sum.value() - 1_000_000.0).abs() < 1e-9);
}

#[test]
fn too_few_values_have_no_spread() {
    let mut moments = Moments::new();
    assert_eq!(moments.mean(), None);
    moments.add(3.0);
    assert_eq!(moments.standard_deviation(), None);
    assert_eq!(lag_one_autocorrelation(&[3.0]), None);
    assert_eq!(lag_one_autocorrelation(&[3.0, 3.0]), None);
}
