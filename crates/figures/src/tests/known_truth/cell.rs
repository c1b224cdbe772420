//! Of a small cell: two currents, a pulse with its edge captured, a discharge to the cut-off.

use simulator::cell::Model;

use super::super::bench::{cell, left};
use super::{BOTH, Behind, assert_stands, erring, nights, stating};
use crate::{Name, work_out};

/// 10 mAh, 50 mohm, falling from 4.1 V in a straight line.
const CELL: &str = r#"{
  "format": "sinkwarden cell model 1", "name": "small", "origin": "a worked case, not a cell",
  "rated_capacity": "10 mAh", "capacity": "10 mAh",
  "largest_voltage": "4.2 V", "cut_off_voltage": "2.5 V", "reference_temperature": "23 degC",
  "state_of_charge": [0, 1], "open_circuit_voltage_v": [2.6, 4.1],
  "series_resistance_ohm": [0.05, 0.05] }"#;

const DISCHARGE: &str = r#"{ "sequence": 1, "title": "Small cell",
  "dut": { "label": "small", "kind": "cell", "rated_capacity": "10 mAh",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "1 A" },
  "readback": "500 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [ { "rest": "2 s" },
             { "draw": "100 mA", "for": "3 s", "label": "first" },
             { "draw": "500 mA", "for": "11 s", "label": "second",
               "burst": { "before": "10 ms", "after": "120 ms" } },
             { "draw": "500 mA", "until": [ { "voltage_below": "2.75 V", "for": "1 s" } ],
               "at_most": "10 min", "label": "discharge" },
             { "rest": "2 s" } ] }"#;

/// Volts by which the open-circuit voltage falls per coulomb: 1.5 V over 36 C.
const FALL: f64 = 1.5 / 36.0;

fn check(behind: Behind) {
    let entry = stating(left());
    let model: Model = serde_json::from_str(CELL).unwrap();
    nights(&format!("{behind:?}"), |seed, claims| {
        let (mut setup, mut random) = erring(behind, DISCHARGE, &entry, seed);
        setup.parts.source = cell(&model, 1.0);
        // The host's clock errs within what is allowed for it, which only times tell.
        let host = 1.0 + 50e-6 * (2.0 * random.unit() - 1.0);
        let night = setup.night();
        let figures = work_out(&night.record).unwrap();
        assert_stands(&figures, behind);
        let (began_s, ended_s) = (night.step_began_s(1), night.step_began_s(4));
        let crossed_s = night.device.crossings().first().unwrap().at_s.unwrap();
        let truth = night.truth;
        // After the crossing a steady current at the cut-off voltage; before, 3 s of a fifth.
        let amperes = truth.charge_c / (ended_s - began_s - 3.0 * 0.8);
        let beyond_s = ended_s - crossed_s;
        let charge_c = truth.charge_c - amperes * beyond_s;
        let beyond_v = 2.75 - 0.5 * FALL * amperes * beyond_s;
        let energy_j = truth.terminal_j - amperes * beyond_s * beyond_v;
        let hours = host / 3600.0;
        // After the step from 0.1 A: R0, and what the charge since has taken off.
        let resistance = |seconds: f64| 0.05 + FALL * seconds * 0.5 / 0.4;
        let mut claims = claims.lock().unwrap();
        let whole = [
            (Name::DeliveredCharge, truth.charge_c * hours),
            (Name::DeliveredEnergy, truth.terminal_j * hours),
            (Name::MeanVoltage, truth.terminal_j / truth.charge_c),
            (Name::ChargeByTrapezoid, truth.charge_c * hours),
            (Name::Duration, (ended_s - began_s) * host),
            (Name::Capacity, charge_c * hours),
            (Name::Energy, energy_j * hours),
        ];
        for (name, truth) in whole {
            claims.take(&figures, name, truth);
        }
        // From a rest, where no current flows, and from another current.
        claims.take_of(&figures, Name::ResistanceAt1S, "first", 0.05 + FALL);
        let second = [
            (Name::DcResistance, 11.0),
            (Name::ResistanceAt10Ms, 0.01),
            (Name::ResistanceAt100Ms, 0.1),
            (Name::ResistanceAt1S, 1.0),
            (Name::ResistanceAt10S, 10.0),
        ];
        for (name, seconds) in second {
            claims.take_of(&figures, name, "second", resistance(seconds));
        }
    });
}

#[test]
fn a_cells_figures_hold_what_they_claim() {
    for behind in BOTH {
        check(behind);
    }
}
