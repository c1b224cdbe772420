//! Nonlinear fits against certified values: NIST/ITL Statistical Reference Datasets.

use crate::least_squares::{Fitted, least_squares};

/// A model's value at an abscissa, and its slopes by the parameters.
type Model = fn(&[f64], f64, &mut [f64]) -> f64;

struct Certified {
    starts: [Vec<f64>; 2],
    values: Vec<f64>,
    deviations: Vec<f64>,
    /// Abscissa and ordinate.
    points: Vec<(f64, f64)>,
}

/// Reads a file of the collection: a line `b1 = start1 start2 value deviation` for each
/// parameter, and after the last line that begins with `Data:` the ordinate and the abscissa.
fn parse(text: &str) -> Certified {
    let numbers = |line: &str| -> Vec<f64> {
        line.split_whitespace()
            .map(|word| word.parse().unwrap())
            .collect()
    };
    let rows: Vec<Vec<f64>> = text
        .lines()
        .filter_map(|line| line.trim().strip_prefix('b')?.split_once('='))
        .filter(|(name, _)| name.trim().parse::<u8>().is_ok())
        .map(|(_, row)| numbers(row))
        .collect();
    let column = |index: usize| rows.iter().map(|row| row[index]).collect::<Vec<f64>>();
    let last = text.rfind("Data:").unwrap();
    let points = text[last..]
        .lines()
        .skip(1)
        .filter(|line| !line.trim().is_empty())
        .map(|line| {
            let row = numbers(line);
            (row[1], row[0])
        })
        .collect();
    Certified {
        starts: [column(0), column(1)],
        values: column(2),
        deviations: column(3),
        points,
    }
}

fn fit(model: Model, points: &[(f64, f64)], start: &[f64]) -> Fitted {
    let residual = |parameters: &[f64], index: usize, slopes: &mut [f64]| {
        let (x, y) = points[index];
        model(parameters, x, slopes) - y
    };
    least_squares(&residual, points.len(), start).unwrap()
}

/// To six digits of the parameters and four of their standard deviations, from both starts.
fn check(text: &str, model: Model) {
    let certified = parse(text);
    assert!(certified.points.len() > certified.values.len());
    for start in &certified.starts {
        let fitted = fit(model, &certified.points, start);
        for (index, (value, deviation)) in certified
            .values
            .iter()
            .zip(&certified.deviations)
            .enumerate()
        {
            let off = (fitted.parameter(index) / value - 1.0).abs();
            assert!(
                off < 1e-6,
                "parameter {index} is off by {off:e} from {start:?}"
            );
            let off = (fitted.standard(index) / deviation - 1.0).abs();
            assert!(
                off < 1e-4,
                "deviation {index} is off by {off:e} from {start:?}"
            );
        }
    }
}

#[test]
fn misra1a_is_met_from_both_starts() {
    check(
        include_str!("../../tests/data/nist_strd/Misra1a.dat"),
        |b, x, slopes| {
            let decay = (-b[1] * x).exp();
            slopes[0] = 1.0 - decay;
            slopes[1] = b[0] * x * decay;
            b[0] * (1.0 - decay)
        },
    );
}

#[test]
fn chwirut2_is_met_from_both_starts() {
    check(
        include_str!("../../tests/data/nist_strd/Chwirut2.dat"),
        |b, x, slopes| {
            let (decay, line) = ((-b[0] * x).exp(), b[1] + b[2] * x);
            let value = decay / line;
            slopes[0] = -x * value;
            slopes[1] = -value / line;
            slopes[2] = -x * value / line;
            value
        },
    );
}

#[test]
fn lanczos3_three_exponentials_are_met_from_both_starts() {
    check(
        include_str!("../../tests/data/nist_strd/Lanczos3.dat"),
        |b, x, slopes| {
            let mut value = 0.0;
            for pair in [0, 2, 4] {
                let decay = (-b[pair + 1] * x).exp();
                slopes[pair] = decay;
                slopes[pair + 1] = -x * b[pair] * decay;
                value += b[pair] * decay;
            }
            value
        },
    );
}

#[test]
fn mgh17_an_offset_and_two_exponentials_is_met_from_both_starts() {
    check(
        include_str!("../../tests/data/nist_strd/MGH17.dat"),
        |b, x, slopes| {
            let (first, second) = ((-x * b[3]).exp(), (-x * b[4]).exp());
            slopes[0] = 1.0;
            slopes[1] = first;
            slopes[2] = second;
            slopes[3] = -x * b[1] * first;
            slopes[4] = -x * b[2] * second;
            b[0] + b[1] * first + b[2] * second
        },
    );
}

#[test]
fn danwood_is_met_from_both_starts() {
    check(
        include_str!("../../tests/data/nist_strd/DanWood.dat"),
        |b, x, slopes| {
            let power = x.powf(b[1]);
            slopes[0] = power;
            slopes[1] = b[0] * power * x.ln();
            b[0] * power
        },
    );
}

#[test]
fn rat42_is_met_from_both_starts() {
    check(
        include_str!("../../tests/data/nist_strd/Rat42.dat"),
        |b, x, slopes| {
            let grown = (b[1] - b[2] * x).exp();
            let value = b[0] / (1.0 + grown);
            slopes[0] = 1.0 / (1.0 + grown);
            slopes[1] = -value * grown / (1.0 + grown);
            slopes[2] = x * value * grown / (1.0 + grown);
            value
        },
    );
}
