//! Groups of DUTs against published statistics.

use serde_json::json;
use sink::accumulate::Moments;

use crate::compare::{Sample, grubbs_critical, welch};
use crate::{Figures, Name, compare, peukert};

/// Figures of a record that has nothing but a capacity, a charge and a duration.
fn figures(record: &str, capacity_ah: f64, standard: f64, hours: f64) -> Figures {
    let figure = |name: &str, value: f64, unit: &str, standard: f64| {
        json!({
            "name": name, "label": null, "value": value, "unit": unit,
            "uncertainty": { "standard_uncertainty": standard, "degrees_of_freedom": "infinite" },
            "expanded": null, "dominated_by": null, "budget": { "contributions": [] },
            "method": { "how": "invented", "source": "invented" },
            "rows": { "first": 1, "last": 2 }
        })
    };
    serde_json::from_value(json!({
        "record": record, "software": "test", "standing": "calibrated",
        "figures": [
            figure("capacity", capacity_ah, "Ah", standard),
            figure("delivered_charge", capacity_ah, "Ah", standard),
            figure("duration", hours * 3600.0, "s", 0.0),
        ],
        "missing": [], "warnings": []
    }))
    .unwrap()
}

fn group(values: &[f64]) -> Vec<Figures> {
    values
        .iter()
        .enumerate()
        .map(|(index, value)| figures(&format!("no. {}", index + 1), *value, 0.004, 5.0))
        .collect()
}

/// NIST/SEMATECH e-Handbook 1.3.5.3, two samples of miles per gallon: n = 249 and 79, means
/// 20.14458 and 30.48101, standard deviations 6.41470 and 6.10771; with unequal variances
/// t = -12.9463 and 136.875 degrees of freedom (from memory, and worked out again).
#[test]
fn welchs_test_gives_the_handbooks_statistic() {
    let one = Sample {
        count: 249.0,
        mean: 20.144_58,
        deviation: 6.414_70,
    };
    let other = Sample {
        count: 79.0,
        mean: 30.481_01,
        deviation: 6.107_71,
    };
    let test = welch(one, other).unwrap();
    let t = (one.mean - other.mean) / test.standard_error;
    assert!((t + 12.946_3).abs() < 1e-4, "t = {t}");
    assert!((test.degrees_of_freedom - 136.875).abs() < 0.001);
    assert!(test.probability < 1e-10);
}

/// Grubbs' two-sided critical values at 5 % (tables, from memory): 1.1543 for 3, 1.7150 for 5,
/// 2.2900 for 10 values; and the eight masses of NIST/SEMATECH e-Handbook 1.3.5.17.1, of which
/// 245.57 stands out with G = 2.4687 (from memory, and worked out again).
#[test]
fn an_outlier_is_named_and_stays() {
    for (count, critical) in [(3.0, 1.1543), (5.0, 1.7150), (10.0, 2.2900)] {
        let found = grubbs_critical(count, 0.05).unwrap();
        assert!((found - critical).abs() < 2e-4, "{count}: {found}");
    }
    let masses = [
        199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57,
    ];
    let moments: Moments = masses.into_iter().collect();
    let g = (245.57 - moments.mean().unwrap()) / moments.standard_deviation().unwrap();
    assert!((g - 2.4687).abs() < 1e-4, "G = {g}");
    let comparison = compare(&[("masses", group(&masses))]);
    let capacity = &comparison.figures[1];
    assert_eq!(capacity.name, Name::Capacity);
    let of = &capacity.groups[0];
    assert_eq!(of.outliers, ["no. 8"]);
    assert_eq!(of.values.len(), 8);
    assert!((of.mean - moments.mean().unwrap()).abs() < 1e-9);
}

/// Student's t at 95 %: 4.303 for two degrees of freedom.
#[test]
fn three_cells_each_give_an_interval_and_a_difference() {
    let comparison = compare(&[
        ("type K", group(&[3.15, 3.19, 3.17])),
        ("type M", group(&[2.61, 2.60, 2.65])),
    ]);
    let capacity = comparison
        .figures
        .iter()
        .find(|figure| figure.name == Name::Capacity)
        .unwrap();
    let of_k = &capacity.groups[0];
    let half = 4.302_65 * 0.02 / 3_f64.sqrt();
    let [low, high] = of_k.interval.unwrap();
    assert!((low - (3.17 - half)).abs() < 1e-6 && (high - (3.17 + half)).abs() < 1e-6);
    assert!((of_k.measurement.unwrap() - 0.004).abs() < 1e-12);
    assert!(of_k.outliers.is_empty());
    assert!(of_k.notes[0].contains("three values"));
    let difference = &capacity.differences[0];
    assert_eq!(
        (difference.of.as_str(), difference.from.as_str()),
        ("type M", "type K")
    );
    assert!((difference.difference + 0.55).abs() < 1e-9);
    let error = ((0.0004 + 0.000_7) / 3.0_f64).sqrt();
    assert!((difference.standard_error - error).abs() < 1e-9);
    assert!(difference.interval[1] < -0.45);
    assert!(difference.probability < 1e-4);
}

#[test]
fn one_cell_tells_no_spread() {
    let comparison = compare(&[("alone", group(&[3.1])), ("two", group(&[3.1, 3.2]))]);
    let capacity = comparison
        .figures
        .iter()
        .find(|figure| figure.name == Name::Capacity)
        .unwrap();
    assert_eq!(capacity.groups[0].standard_deviation, None);
    assert!(capacity.groups[0].notes[0].contains("neither a spread"));
    assert!(capacity.differences.is_empty());
    assert!(capacity.groups[1].notes[0].contains("no outlier can be told"));
}

/// 100 Ah, n = 1.2 and 5 A last 14.4956 h by t = C / I^n (worked example of the trade, recomputed).
#[test]
fn peukerts_exponent_is_found_from_two_rates_and_from_three() {
    let at = |amperes: f64| {
        let hours = 100.0 / amperes.powf(1.2);
        figures("battery", amperes * hours, 0.01 * amperes * hours, hours)
    };
    assert!((at(5.0).figures[2].value / 3600.0 - 14.4956).abs() < 1e-4);
    for rates in [vec![5.0, 20.0], vec![2.0, 5.0, 20.0]] {
        let discharges: Vec<Figures> = rates.iter().map(|&amperes| at(amperes)).collect();
        let found = peukert(&discharges).unwrap();
        assert!((found.exponent.value - 1.2).abs() < 1e-9);
        assert!((found.capacity_at_one_ampere_ah - 100.0).abs() < 1e-6);
        assert!(found.exponent.standard_uncertainty > 0.0);
    }
    // Two rates: 1 % each over the logarithm of four.
    let two = peukert(&[at(5.0), at(20.0)]).unwrap();
    let expected = 0.01 * 2_f64.sqrt() / 4_f64.ln();
    assert!((two.exponent.standard_uncertainty - expected).abs() < 1e-9);
    let refused = peukert(&[at(5.0), at(5.5)]).unwrap_err().to_string();
    assert!(
        refused.contains("two rates that are farther apart"),
        "{refused}"
    );
}
