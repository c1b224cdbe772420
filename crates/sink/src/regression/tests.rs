//! Fits against JCGM 100 H.3 and the NIST Statistical Reference Datasets.

use super::{FTest, Form, Point, RegressionError, Weights, f_test, fit};
use crate::uncertainty::coverage_factor;

fn points(csv: &str, x: usize, y: usize) -> Vec<Point> {
    csv.lines()
        .skip(1)
        .map(|line| {
            let fields: Vec<f64> = line
                .split(',')
                .map(|field| field.parse().unwrap())
                .collect();
            Point {
                x: fields[x],
                y: fields[y],
                u: 1.0,
            }
        })
        .collect()
}

fn close(is: f64, expected: f64, tolerance: f64) {
    assert!(
        ((is - expected) / expected).abs() <= tolerance,
        "{is} is not {expected} within {tolerance}"
    );
}

/// JCGM 100:2008, Annex H.3, calibration of a thermometer. Values recomputed
/// with two libraries from the annex's data; the annex prints -0.1712(29),
/// 0.00218(67), r = -0.930.
#[test]
fn the_calibration_line_of_the_guide_is_met() {
    let points = points(include_str!("../../tests/data/gum_h3.csv"), 0, 1);
    let line = fit(&points, Form::Polynomial(1), Weights::Equal).unwrap();
    let (coefficients, covariance) = line.coefficients_about(20.0);
    let (u1, u2) = (covariance[(0, 0)].sqrt(), covariance[(1, 1)].sqrt());
    close(coefficients[0], -0.171_203_790_131_35, 1e-9);
    close(coefficients[1], 0.002_182_697_739_887, 1e-9);
    close(u1, 0.002_877_597_835_16, 1e-9);
    close(u2, 0.000_667_938_773_228, 1e-9);
    close(covariance[(0, 1)] / (u1 * u2), -0.930_429_603_093, 1e-9);
    close(line.residual_deviation(), 0.003_497_563_963_505, 1e-9);
    let at_30 = line.predict(30.0);
    close(at_30.value, -0.149_376_812_732, 1e-9);
    close(at_30.standard_uncertainty, 0.004_138_595_753, 1e-9);
    let factor = coverage_factor(0.95, at_30.degrees_of_freedom).unwrap();
    close(factor * at_30.standard_uncertainty, 0.009_362_15, 1e-6);
    // Without the correlation it would be 0.00727: a good trap.
    let without = (u1.powi(2) + 100.0 * u2.powi(2)).sqrt();
    close(without, 0.007_27, 1e-3);
}

/// NIST StRD, linear regression: Norris (36 points, certified).
#[test]
fn the_certified_line_of_norris_is_met() {
    let points = points(include_str!("../../tests/data/norris.csv"), 1, 0);
    assert_eq!(points.len(), 36);
    let line = fit(&points, Form::Polynomial(1), Weights::Equal).unwrap();
    let (coefficients, covariance) = line.coefficients_about(0.0);
    close(coefficients[0], -0.262_323_073_774_029, 1e-9);
    close(coefficients[1], 1.002_116_818_020_45, 1e-9);
    close(covariance[(0, 0)].sqrt(), 0.232_818_234_301_152, 1e-9);
    close(covariance[(1, 1)].sqrt(), 0.429_796_848_199_937e-3, 1e-9);
    close(line.chi_square(), 26.617_398_529_422_4, 1e-9);
}

/// NIST StRD, linear regression: NoInt1 (through the origin, certified).
#[test]
fn the_certified_line_through_the_origin_is_met() {
    let points = points(include_str!("../../tests/data/noint1.csv"), 1, 0);
    let line = fit(&points, Form::ThroughOrigin, Weights::Equal).unwrap();
    let (coefficients, covariance) = line.coefficients_about(0.0);
    close(coefficients[0], 2.074_380_165_289_26, 1e-9);
    close(covariance[(0, 0)].sqrt(), 0.016_528_925_619_834_7, 1e-9);
    close(line.chi_square(), 127.272_727_272_727, 1e-9);
}

fn parabola(bend: f64) -> Vec<Point> {
    (0..12)
        .map(|index| {
            let x = f64::from(index);
            // A fixed, zero-mean disturbance of 0.01.
            let wobble = if index % 2 == 0 { 0.01 } else { -0.01 };
            Point {
                x,
                y: 1.0 + 2.0 * x + bend * x * x + wobble,
                u: 0.01,
            }
        })
        .collect()
}

#[test]
fn a_second_order_term_is_accepted_only_if_the_residuals_demand_it() {
    let test = |bend| {
        let points = parabola(bend);
        let line = fit(&points, Form::Polynomial(1), Weights::Known).unwrap();
        let second = fit(&points, Form::Polynomial(2), Weights::Known).unwrap();
        f_test(&line, &second).unwrap()
    };
    assert!(test(0.0).probability > 0.2);
    assert!(test(0.05).probability < 1e-6);
}

/// The 95 % point of F(1, 9) is 5.1174 (tables of the F-distribution; from
/// memory).
#[test]
fn the_f_test_gives_the_probability_of_the_tables() {
    let points = parabola(0.000_3);
    let line = fit(&points, Form::Polynomial(1), Weights::Equal).unwrap();
    let second = fit(&points, Form::Polynomial(2), Weights::Equal).unwrap();
    let FTest { ratio, probability } = f_test(&line, &second).unwrap();
    // Whatever the ratio is, it and the table's point must be on the same side.
    assert_eq!(ratio > 5.1174, probability < 0.05);
    assert_eq!(f_test(&second, &line), None);
}

#[test]
fn known_uncertainties_set_the_covariance_and_large_residuals_enlarge_it() {
    let exact: Vec<Point> = (0..5)
        .map(|i| Point {
            x: f64::from(i),
            y: 1.0,
            u: 0.1,
        })
        .collect();
    let line = fit(&exact, Form::Polynomial(0), Weights::Known).unwrap();
    close(
        line.predict(0.0).standard_uncertainty,
        0.1 / 5_f64.sqrt(),
        1e-12,
    );
    let scattered: Vec<Point> = (0..6)
        .map(|i| Point {
            x: f64::from(i),
            y: f64::from(i % 2),
            u: 0.1,
        })
        .collect();
    let line = fit(&scattered, Form::Polynomial(0), Weights::Known).unwrap();
    assert!(line.predict(0.0).standard_uncertainty > 0.2);
}

#[test]
fn a_point_with_a_small_uncertainty_weighs_more() {
    let points = [
        Point {
            x: 0.0,
            y: 0.0,
            u: 0.01,
        },
        Point {
            x: 1.0,
            y: 3.0,
            u: 1.0,
        },
        Point {
            x: 2.0,
            y: 0.0,
            u: 0.01,
        },
    ];
    let constant = fit(&points, Form::Polynomial(0), Weights::Relative).unwrap();
    assert!(constant.value(0.0) < 0.001);
}

#[test]
fn points_that_cannot_be_fitted_are_refused() {
    let point = |x: f64, y: f64, u: f64| Point { x, y, u };
    let line = |points: &[Point], weights| fit(points, Form::Polynomial(1), weights).unwrap_err();
    assert_eq!(
        line(
            &[point(0.0, 0.0, 1.0), point(1.0, 1.0, 1.0)],
            Weights::Equal
        ),
        RegressionError::TooFewPoints {
            points: 2,
            parameters: 2
        }
    );
    assert_eq!(
        line(&[point(1.0, 1.0, 1.0); 4], Weights::Equal),
        RegressionError::Degenerate
    );
    let with_nan = [
        point(0.0, f64::NAN, 1.0),
        point(1.0, 1.0, 1.0),
        point(2.0, 1.0, 1.0),
    ];
    assert_eq!(
        line(&with_nan, Weights::Equal),
        RegressionError::BadPoint { index: 0 }
    );
    let without_u = [
        point(0.0, 1.0, 1.0),
        point(1.0, 1.0, 0.0),
        point(2.0, 1.0, 1.0),
    ];
    assert_eq!(
        line(&without_u, Weights::Known),
        RegressionError::BadPoint { index: 1 }
    );
    let two_abscissas = [
        point(0.0, 1.0, 1.0),
        point(0.0, 2.0, 1.0),
        point(1.0, 1.0, 1.0),
        point(1.0, 2.0, 1.0),
    ];
    assert_eq!(
        fit(&two_abscissas, Form::Polynomial(2), Weights::Equal).unwrap_err(),
        RegressionError::Degenerate
    );
}
