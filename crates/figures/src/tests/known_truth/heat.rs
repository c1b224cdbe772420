//! Of a heat soak, and of the efficiency of the supply that it draws from.

use quantity::Span;

use super::super::bench::left;
use super::{BOTH, Behind, assert_stands, erring, nights, stating, supply};
use crate::{InputMeter, InputReading, Name, work_out_with_input};

const SOAK: &str = r#"{ "sequence": 1, "title": "Soak",
  "dut": { "label": "supply", "kind": "supply", "voltage_min": "2.9 V", "voltage_max": "3.6 V",
           "current_max": "2 A" },
  "readback": "1 s",
  "interlocks": { "undervoltage": { "below": "2.9 V", "for": "20 ms" } },
  "steps": [ { "rest": "30 s" }, { "draw": "1 A", "for": "6 min", "label": "soak" } ] }"#;

/// What the input meter's data sheet states, and what the supply takes in.
const METER: f64 = 0.002;
const EFFICIENCY: f64 = 0.88;

/// The left sink: 2.5 K/W with 6 min, here 2 min; 1 A at 3.24 V, less what 100 mohm of sense
/// resistor and the leads take.
fn check(behind: Behind) {
    let mut entry = stating(left());
    entry.heat_sink.time_constant = Span::from_secs(120);
    nights(&format!("{behind:?}"), |seed, claims| {
        let (mut setup, mut random) = erring(behind, SOAK, &entry, seed);
        setup.parts.errors.temperature_noise_k = 0.05;
        setup.parts.source = supply(r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm" }"#);
        let night = setup.night();
        let taken_in = night.truth.terminal_j / 360.0 / EFFICIENCY;
        let shown = taken_in * (1.0 + METER * (2.0 * random.unit() - 1.0));
        let meter = InputMeter {
            readings: vec![InputReading {
                label: "soak".to_owned(),
                input_voltage_v: 5.0,
                input_current_a: shown / 5.0,
            }],
            accuracy: METER,
        };
        let figures = work_out_with_input(&night.record, Some(&meter)).unwrap();
        assert_stands(&figures, behind);
        // Power by the source's own ledger of the heat in the MOSFET.
        let watts = night.truth.mosfet_j / 360.0;
        let settled = 23.0 + 2.5 * watts;
        let soak = [
            (Name::SettledTemperature, settled),
            (Name::ThermalResistance, 2.5),
            (Name::JunctionMargin, 150.0 - settled - 1.5 * watts),
            (Name::Efficiency, EFFICIENCY),
        ];
        let mut claims = claims.lock().unwrap();
        for (name, truth) in soak {
            claims.take_of(&figures, name, "soak", truth);
        }
    });
}

#[test]
fn heat_figures_hold_what_they_claim() {
    for behind in BOTH {
        check(behind);
    }
}
