//! Uncertainty against the worked examples of JCGM 100:2008.

use expect_test::expect;
use nalgebra::DMatrix;

use super::{
    Budget, BudgetError, Contribution, DegreesOfFreedom, Estimate, Evaluation, PropagateError,
    Stated, coverage_factor, of_resolution, propagate, second_order_variance,
};

fn close(is: f64, expected: f64, tolerance: f64) {
    assert!(
        ((is - expected) / expected).abs() <= tolerance,
        "{is} is not {expected} within {tolerance}"
    );
}

fn line(u: f64, freedom: f64) -> Contribution {
    Contribution::new(
        "line",
        Evaluation::TypeA,
        u,
        DegreesOfFreedom::finite(freedom),
    )
}

/// JCGM 100 table G.2 (Student's t, 95 %), recomputed.
#[test]
fn coverage_factors_are_those_of_the_table() {
    for (freedom, factor) in [
        (1.0, 12.71),
        (2.0, 4.30),
        (3.0, 3.18),
        (4.0, 2.78),
        (5.0, 2.57),
        (8.0, 2.31),
        (10.0, 2.23),
        (16.0, 2.12),
        (20.0, 2.09),
        (50.0, 2.01),
        (100.0, 1.98),
    ] {
        let is = coverage_factor(0.95, DegreesOfFreedom::finite(freedom)).unwrap();
        assert!(
            (is - factor).abs() <= 0.005,
            "{is} for {freedom} degrees of freedom"
        );
    }
    let normal = coverage_factor(0.95, DegreesOfFreedom::INFINITE).unwrap();
    close(normal, 1.959_963_985, 1e-9);
    close(
        coverage_factor(0.99, DegreesOfFreedom::finite(16.75)).unwrap(),
        2.920_782,
        1e-6,
    );
    close(
        coverage_factor(0.95, DegreesOfFreedom::finite(19.0)).unwrap(),
        2.093_024,
        1e-6,
    );
    assert_eq!(coverage_factor(0.95, DegreesOfFreedom::finite(0.5)), None);
    assert_eq!(coverage_factor(1.0, DegreesOfFreedom::INFINITE), None);
}

/// The t of one and two degrees of freedom have closed inverses (Cauchy, and
/// t = z sqrt(2 / (1 - z^2)) with z = p).
#[test]
fn coverage_factors_meet_the_closed_forms() {
    let cauchy = (std::f64::consts::PI * 0.95 / 2.0).tan();
    close(
        coverage_factor(0.95, DegreesOfFreedom::finite(1.0)).unwrap(),
        cauchy,
        1e-10,
    );
    let two = 0.95 * (2.0_f64 / (1.0 - 0.95 * 0.95)).sqrt();
    close(
        coverage_factor(0.95, DegreesOfFreedom::finite(2.0)).unwrap(),
        two,
        1e-10,
    );
}

/// JCGM 100 H.1, end-gauge calibration: contributions in nanometres with their
/// degrees of freedom; recomputed (printed: 32 nm, 16).
#[test]
fn the_end_gauge_budget_of_the_guide_is_met() {
    let budget = Budget::new(vec![
        line(25.0, 18.0),
        line(5.8, 24.0),
        line(3.9, 5.0),
        line(6.7, 8.0),
        line(2.886_787, 50.0),
        line(16.599_027, 2.0),
    ]);
    let combined = budget.combined().unwrap();
    close(combined.standard_uncertainty, 31.663_879, 1e-7);
    close(combined.degrees_of_freedom.number(), 16.751_856, 1e-6);
    let expanded = combined.expanded(0.99).unwrap();
    close(expanded.coverage_factor, 2.920_782, 1e-6);
    close(expanded.half_width, 92.5, 1e-3);
    close(budget.dominant().unwrap().standard_uncertainty, 25.0, 1e-15);
}

/// JCGM 100 H.1.7: the second-order terms raise 31.7 nm to 34 nm. Model
/// l = l_s + d - l_s (delta_alpha theta + alpha_s delta_theta).
#[test]
fn the_second_order_terms_of_the_end_gauge_are_met() {
    let model = |x: &[f64]| {
        let &[length, difference, delta_alpha, theta, alpha, delta_theta] = x else {
            panic!("six inputs");
        };
        length + difference - length * (delta_alpha * theta + alpha * delta_theta)
    };
    let inputs = [50_000_623.0, 215.0, 0.0, -0.1, 11.5e-6, 0.0];
    let third = 3_f64.sqrt();
    let uncertainties = [0.0, 0.0, 1e-6 / third, 0.41, 2e-6 / third, 0.05 / third];
    let second = second_order_variance(model, &inputs, &uncertainties);
    close((31.663_879_f64.powi(2) + second).sqrt(), 33.844_7, 1e-5);
}

/// JCGM 100 H.2: resistance, reactance and impedance from correlated voltage,
/// current and phase; recomputed (printed: 127.732(71), 219.847(295),
/// 254.260(236); r -0.588, -0.485, 0.993).
#[test]
fn the_correlated_impedance_of_the_guide_is_met() {
    let u = [3.2e-3, 9.5e-6, 7.5e-4];
    let r = DMatrix::from_row_slice(
        3,
        3,
        &[1.0, -0.36, 0.86, -0.36, 1.0, -0.65, 0.86, -0.65, 1.0],
    );
    let covariance = DMatrix::from_fn(3, 3, |row, column| r[(row, column)] * u[row] * u[column]);
    let model = |x: &[f64]| {
        let impedance = x[0] / x[1];
        vec![impedance * x[2].cos(), impedance * x[2].sin(), impedance]
    };
    let result = propagate(model, &[4.999, 19.661e-3, 1.044_46], &covariance).unwrap();
    for (output, (value, u)) in [
        (127.732_170, 0.069_978_7),
        (219.846_512, 0.295_716_8),
        (254.259_702, 0.236_603_0),
    ]
    .into_iter()
    .enumerate()
    {
        close(result.values[output], value, 1e-8);
        close(result.standard_uncertainty(output).unwrap(), u, 1e-6);
    }
    // Printed to three digits from the annex's unrounded readings.
    assert!((result.correlation(0, 1).unwrap() + 0.588).abs() < 0.01);
    assert!((result.correlation(0, 2).unwrap() + 0.485).abs() < 0.01);
    assert!((result.correlation(1, 2).unwrap() - 0.993).abs() < 0.001);
}

/// JCGM 100 G.4.1, example (readings from memory, result recomputed).
#[test]
fn the_effective_degrees_of_freedom_of_the_guide_are_met() {
    let combined = Budget::new(vec![line(0.25, 9.0), line(0.57, 4.0), line(0.82, 14.0)])
        .combined()
        .unwrap();
    close(combined.standard_uncertainty, 1.029_465_9, 1e-7);
    close(combined.degrees_of_freedom.number(), 18.998_742, 1e-7);
    close(
        combined.expanded(0.95).unwrap().coverage_factor,
        2.100_922,
        1e-6,
    );
}

/// JCGM 100 5.2.2, note 1: ten resistors calibrated against one standard are
/// fully correlated, so their uncertainties add up: 10 x 100 mohm = 1 ohm.
#[test]
fn fully_correlated_contributions_add_up() {
    let mut budget = Budget::new(vec![line(0.1, 5.0); 10]);
    for first in 0..10 {
        for second in first + 1..10 {
            budget.correlations.push((first, second, 1.0));
        }
    }
    let combined = budget.combined().unwrap();
    close(combined.standard_uncertainty, 1.0, 1e-12);
    close(combined.degrees_of_freedom.number(), 5.0, 1e-12);
}

#[test]
fn correlations_that_make_no_sense_are_refused() {
    let with = |pair| {
        let mut budget = Budget::new(vec![line(1.0, 1.0), line(1.0, 1.0)]);
        budget.correlations.push(pair);
        budget.combined()
    };
    assert_eq!(
        with((0, 2, 0.1)),
        Err(BudgetError::NoSuchPair {
            first: 0,
            second: 2
        })
    );
    assert_eq!(
        with((0, 0, 0.1)),
        Err(BudgetError::NoSuchPair {
            first: 0,
            second: 0
        })
    );
    assert_eq!(with((0, 1, 1.1)), Err(BudgetError::Contradiction));
    assert!(with((0, 1, -1.0)).is_ok());
}

/// JCGM 100 4.4.3: 20 readings of a temperature, mean 100.14, s 1.49, u 0.33.
/// The readings are from memory of table 1; mean and deviation are printed there.
#[test]
fn readings_give_a_mean_and_its_deviation() {
    let readings = [
        96.90, 98.18, 98.25, 98.61, 99.03, 99.49, 99.56, 99.74, 99.89, 100.07, 100.33, 100.42,
        100.68, 100.95, 101.11, 101.20, 101.57, 101.84, 102.36, 102.72,
    ];
    let estimate = Estimate::from_readings(&readings).unwrap();
    assert!((estimate.value - 100.14).abs() <= 0.01);
    assert!((estimate.standard_uncertainty - 0.33).abs() <= 0.005);
    close(estimate.degrees_of_freedom.number(), 19.0, 1e-15);
    assert_eq!(Estimate::from_readings(&[1.0]), None);
}

/// JCGM 100 4.3.7, 4.3.9 and F.2.2.1; G.4.2 for the degrees of freedom: a
/// standard uncertainty known to 25 % has 8.
#[test]
fn a_stated_bound_becomes_a_standard_uncertainty() {
    close(
        Stated::Rectangular.standard_uncertainty(1.0),
        0.577_350_269_2,
        1e-9,
    );
    close(
        Stated::Triangular.standard_uncertainty(1.0),
        0.408_248_290_5,
        1e-9,
    );
    close(
        Stated::ArcSine.standard_uncertainty(0.5),
        0.353_553_390_6,
        1e-9,
    );
    close(
        Stated::Normal {
            coverage_factor: 2.0,
        }
        .standard_uncertainty(0.24),
        0.12,
        1e-12,
    );
    close(of_resolution(1.0), 0.29, 0.005);
    close(DegreesOfFreedom::from_relative(0.25).number(), 8.0, 1e-12);
    assert_eq!(
        DegreesOfFreedom::from_relative(0.0),
        DegreesOfFreedom::INFINITE
    );
}

#[test]
fn a_propagation_that_cannot_be_is_refused() {
    let covariance = DMatrix::from_element(1, 1, 1.0);
    let model = |x: &[f64]| vec![1.0 / x[0]];
    assert_eq!(
        propagate(model, &[1.0, 2.0], &covariance),
        Err(PropagateError::Shape {
            inputs: 2,
            rows: 1,
            columns: 1
        })
    );
    assert_eq!(
        propagate(model, &[0.0], &covariance),
        Err(PropagateError::NotFinite)
    );
}

#[test]
fn a_budget_prints_as_a_table() {
    let mut second = line(0.5, 9.0);
    second.name = "repeatability".to_owned();
    let mut first = line(2.0, 0.0);
    first.name = "reference meter".to_owned();
    first.evaluation = Evaluation::TypeB;
    first.degrees_of_freedom = DegreesOfFreedom::INFINITE;
    expect![[r"
                         type            u            c         |c|u       dof
        reference meter  B        2.0000e0     1.0000e0     2.0000e0  infinite
        repeatability    A       5.0000e-1     1.0000e0    5.0000e-1       9.0
        combined                                            2.0616e0    2601.0"]]
    .assert_eq(&Budget::new(vec![first, second]).to_string());
}

#[test]
fn infinite_degrees_of_freedom_survive_a_file() {
    let estimate = Estimate::known(1.0, 0.1);
    let json = serde_json::to_string(&estimate).unwrap();
    assert!(json.contains(r#""degrees_of_freedom":"infinite""#));
    assert_eq!(serde_json::from_str::<Estimate>(&json).unwrap(), estimate);
    assert!(serde_json::from_str::<DegreesOfFreedom>("-1.0").is_err());
}

/// EA-4/02 M:2022, S9.14 (from memory): where one rectangular contribution dominates, the
/// expanded uncertainty at 95 % is 1.65 times the standard uncertainty.
#[test]
fn a_dominant_rectangle_is_covered_without_reaching_beyond_its_bound() {
    let alone = Budget::new(vec![line(1.0, f64::INFINITY).rectangular()]);
    let expanded = alone.expanded(0.95).unwrap();
    assert!((expanded.coverage_factor - 0.95 * 3_f64.sqrt()).abs() < 1e-9);
    assert!((expanded.coverage_factor - 1.65).abs() < 0.005);
}

/// Against trials of the sum itself (JCGM 101).
#[test]
fn a_rectangle_with_others_is_covered_as_trials_say() {
    for sigma in [0.1, 0.5, 1.0, 3.0] {
        let lines = vec![
            line(1.0, f64::INFINITY).rectangular(),
            line(sigma, f64::INFINITY),
        ];
        let expanded = Budget::new(lines).expanded(0.95).unwrap();
        let mut random = crate::montecarlo::Random::from_seed(7);
        let mut covered = 0_u32;
        for _ in 0..200_000 {
            let rectangle = 3_f64.sqrt() * (2.0 * random.unit() - 1.0);
            let error = rectangle + sigma * random.normal();
            covered += u32::from(error.abs() <= expanded.half_width);
        }
        let share = f64::from(covered) / 200_000.0;
        assert!((share - 0.95).abs() < 0.002, "sigma {sigma}: {share}");
    }
}

#[test]
fn without_a_rectangle_the_expanded_uncertainty_is_students() {
    let budget = Budget::new(vec![line(1.0, 5.0), line(0.5, f64::INFINITY)]);
    let combined = budget.combined().unwrap();
    assert_eq!(budget.expanded(0.95), combined.expanded(0.95));
}
