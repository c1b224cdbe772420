//! Of a cell model: what the second of two pulses of a small cell tells.
//!
//! A model states standard uncertainties and no intervals. Where the fit dominates, 1.96 of them
//! are the interval at 95 %; where a bound does (of the voltage channel in the open-circuit voltage,
//! of the sense resistor in resistances without a certificate), they are held against the errors
//! alone.

use std::collections::BTreeMap;
use std::sync::Mutex;

use simulator::cell::Model;
use sink::accumulate::Moments;

use super::super::bench::{cell, left};
use super::{BOTH, Behind, assert_stands, erring, nights, stating};
use crate::work_out;

/// 50 mAh, 60 mohm, and two pairs: 30 mohm with 4 s, 40 mohm with 30 s; falling in a straight line.
const CELL: &str = r#"{
  "format": "sinkwarden cell model 1", "name": "small", "origin": "a worked case, not a cell",
  "rated_capacity": "50 mAh", "capacity": "50 mAh",
  "largest_voltage": "4.2 V", "cut_off_voltage": "2.5 V", "reference_temperature": "23 degC",
  "state_of_charge": [0, 1], "open_circuit_voltage_v": [3.3, 4.1],
  "series_resistance_ohm": [0.06, 0.06],
  "pairs": [ { "resistance_ohm": [0.03, 0.03], "time_constant_s": [4, 4] },
             { "resistance_ohm": [0.04, 0.04], "time_constant_s": [30, 30] } ] }"#;

const PULSES: &str = r#"{ "sequence": 1, "title": "Pulses",
  "dut": { "label": "small", "kind": "cell", "rated_capacity": "50 mAh",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "3 A" },
  "readback": "100 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [ { "repeat": { "times": 2, "steps": [
    { "rest": "240 s" },
    { "draw": "1 A", "for": "20 s", "label": "pulse" } ] } },
    { "rest": "240 s" } ] }"#;

fn check(behind: Behind) {
    let entry = stating(left());
    let model: Model = serde_json::from_str(CELL).unwrap();
    let bounds: Mutex<BTreeMap<&str, (Moments, Moments)>> = Mutex::default();
    nights(&format!("{behind:?}"), |seed, claims| {
        let (mut setup, _) = erring(behind, PULSES, &entry, seed);
        setup.parts.source = cell(&model, 1.0);
        let night = setup.night();
        let figures = work_out(&night.record).unwrap();
        assert_stands(&figures, behind);
        let found = figures.cell_model.unwrap();
        assert_eq!(found.points.len(), 2);
        let point = &found.points[1];
        let [fast, slow] = &point.pairs[..] else {
            panic!("{:?}", point.no_second_pair)
        };
        // Both pulses delivered the same, and the voltage falls by 0.8 V over 180 C.
        let level = 4.1 - 0.8 * (night.truth.charge_c / 2.0) / 180.0;
        let of_resistor = behind == Behind::Tolerances;
        let known = [
            ("open circuit", point.open_circuit_voltage_v, level, true),
            (
                "series resistance",
                point.series_resistance_ohm,
                0.06,
                of_resistor,
            ),
            ("fast resistance", fast.resistance_ohm, 0.03, of_resistor),
            ("fast time constant", fast.time_constant_s, 4.0, false),
            ("slow resistance", slow.resistance_ohm, 0.04, of_resistor),
            ("slow time constant", slow.time_constant_s, 30.0, false),
        ];
        for (what, known, truth, bound) in known {
            let (error, standard) = (known.value - truth, known.standard_uncertainty);
            if bound {
                let mut bounds = bounds.lock().unwrap();
                let (squares, stated) = bounds.entry(what).or_default();
                squares.add(error * error);
                stated.add(standard);
            } else {
                let half_width = 1.96 * standard;
                claims
                    .lock()
                    .unwrap()
                    .add(what, error, standard, half_width);
            }
        }
    });
    for (what, (squares, stated)) in bounds.into_inner().unwrap() {
        let times = stated.mean().unwrap() / squares.mean().unwrap().sqrt();
        println!("{behind:?}: {what}: u is {times:.2} times the error");
        assert!((0.8..1.25).contains(&times), "{what}: {times}");
    }
}

#[test]
fn a_cell_models_parameters_hold_what_they_claim() {
    for behind in BOTH {
        check(behind);
    }
}
