//! Predicted run-times against a rehearsal on the same cell, and against the law of propagation.

use serde_json::Value;
use simulator::cell::Model;

use super::bench::{Setup, exact};
use crate::figure::Rows;
use crate::{CellModel, CellPoint, CellSpread, Known, Load, LoadStep, PairPoint, Terms, predict};

const CELL: &str = r#"{
  "format": "sinkwarden cell model 1", "name": "slope", "origin": "a worked case, not a cell",
  "rated_capacity": "0.5 Ah", "capacity": "0.5 Ah",
  "largest_voltage": "4.2 V", "cut_off_voltage": "2.5 V", "reference_temperature": "23 degC",
  "state_of_charge": [0, 1], "open_circuit_voltage_v": [2.6, 4.1],
  "series_resistance_ohm": [0.1, 0.05],
  "pairs": [ { "resistance_ohm": [0.06, 0.02], "time_constant_s": [2, 1] },
             { "resistance_ohm": [0.04, 0.03], "time_constant_s": [40, 30] } ] }"#;

const SEQUENCE: &str = r#"{ "sequence": 1, "title": "Cycles",
  "dut": { "label": "slope", "kind": "cell", "rated_capacity": "0.5 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "2 A" },
  "readback": "100 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [ { "rest": "2 s" },
             { "repeat": { "steps": [ { "draw": "0.1 A", "for": "8 s" }, { "draw": "1 A", "for": "2 s" } ],
               "until": [ { "voltage_below": "3 V" } ], "at_most": "9 h" } } ] }"#;

fn known(value: f64, share: f64) -> Known {
    Known {
        value,
        standard_uncertainty: share * value,
    }
}

/// The cell above as a fit would give it, each value known to a share.
fn model(share: f64) -> CellModel {
    let point = |state: f64, volts: f64, series: f64, pairs: [(f64, f64); 2]| CellPoint {
        state_of_charge: state,
        delivered_ah: 0.5 * (1.0 - state),
        open_circuit_voltage_v: known(volts, 0.0),
        series_resistance_ohm: known(series, share),
        pairs: pairs
            .map(|(ohms, seconds)| PairPoint {
                resistance_ohm: known(ohms, share),
                time_constant_s: known(seconds, share),
            })
            .to_vec(),
        correlations: Vec::new(),
        residual_rms_v: 0.0,
        no_second_pair: None,
        rows: Rows { first: 1, last: 2 },
    };
    CellModel {
        points: vec![
            point(1.0, 4.1, 0.05, [(0.02, 1.0), (0.03, 30.0)]),
            point(0.0, 2.6, 0.1, [(0.06, 2.0), (0.04, 40.0)]),
        ],
        open_circuit: Vec::new(),
        capacity_ah: 0.5,
        capacity_standard_uncertainty_ah: 0.0,
        capacity_from: "stated".to_owned(),
        residual_rms_v: 0.0,
        file: Value::Null,
        notes: Vec::new(),
        method: "stated".to_owned(),
    }
}

fn terms(spread: CellSpread, trials: usize, seed: u64) -> Terms {
    Terms {
        spread,
        warmth: None,
        trials,
        seed,
    }
}

fn load() -> Load {
    let step = |seconds, amperes| LoadStep { seconds, amperes };
    Load {
        cycle: vec![step(8.0, 0.1), step(2.0, 1.0)],
        cut_off_v: 3.0,
    }
}

/// The run ends in the very cycle that was predicted, of about five hundred.
#[test]
fn a_rehearsal_on_the_same_cell_ends_when_predicted() {
    let cell: Model = serde_json::from_str(CELL).unwrap();
    let entry = exact();
    let mut setup = Setup::on_cell(SEQUENCE, &entry, &cell, 1.0);
    setup.watched_v = 3.0;
    let night = setup.night();
    let crossed_s = night.device.crossings().first().unwrap().at_s.unwrap();
    let ran_s = crossed_s - night.step_began_s(2);
    let found = predict(&model(0.0), &load(), terms(CellSpread::default(), 1000, 1)).unwrap();
    assert!(
        (found.hours * 3600.0 - ran_s).abs() < 10.0,
        "{} s, ran {ran_s} s",
        found.hours * 3600.0
    );
    assert!(found.outcome.standard_uncertainty < 1e-9);
}

#[test]
fn the_spread_of_capacities_is_that_of_the_run_times() {
    let spread = CellSpread {
        capacity: 0.02,
        resistance: 0.0,
        degrees_of_freedom: None,
    };
    let found = predict(&model(0.0), &load(), terms(spread, 20_000, 5)).unwrap();
    let expected = 0.02 * found.hours;
    assert!((found.outcome.standard_uncertainty / expected - 1.0).abs() < 0.03);
    let [low, high] = found.outcome.symmetric;
    let half = 1.96 * expected;
    assert!(((high - low) / (2.0 * half) - 1.0).abs() < 0.04);
}

/// What 10 % on all resistances do is what moving them by 10 % does.
#[test]
fn the_spread_of_resistances_moves_the_end() {
    let spread = CellSpread {
        capacity: 0.0,
        resistance: 0.1,
        degrees_of_freedom: None,
    };
    let found = predict(&model(0.0), &load(), terms(spread, 20_000, 5)).unwrap();
    let mut more = model(0.0);
    for point in &mut more.points {
        point.series_resistance_ohm.value *= 1.1;
        for pair in &mut point.pairs {
            pair.resistance_ohm.value *= 1.1;
        }
    }
    let moved = predict(&more, &load(), terms(CellSpread::default(), 1000, 1)).unwrap();
    let expected = found.hours - moved.hours;
    assert!(expected > 0.0);
    assert!((found.outcome.standard_uncertainty / expected - 1.0).abs() < 0.05);
}

#[test]
fn a_load_that_draws_nothing_is_refused() {
    let mut load = load();
    load.cycle.truncate(1);
    load.cycle[0].amperes = 0.0;
    let refused = predict(&model(0.0), &load, terms(CellSpread::default(), 1000, 1)).unwrap_err();
    assert!(refused.to_string().contains("draws"));
}
