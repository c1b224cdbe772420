//! D.c. internal resistance against the closed form of a two-RC cell.

use simulator::cell::Model;

use super::bench::{Setup, exact};
use crate::{Name, work_out};

const SEQUENCE: &str = include_str!("../../../../sequences/dc-resistance-two-currents.json");

/// The cell of the closed form: nothing in it depends on the state of charge or on temperature.
pub(crate) const CLOSED_FORM: &str = r#"{
  "format": "sinkwarden cell model 1", "name": "closed form",
  "origin": "a worked case, not a cell",
  "rated_capacity": "2.5 Ah", "capacity": "2.5 Ah",
  "largest_voltage": "4.2 V", "cut_off_voltage": "2.5 V", "reference_temperature": "23 degC",
  "state_of_charge": [0, 1], "open_circuit_voltage_v": [3.9, 3.9],
  "series_resistance_ohm": [0.05, 0.05],
  "pairs": [ { "resistance_ohm": [0.02, 0.02], "time_constant_s": [0.5, 0.5] },
             { "resistance_ohm": [0.03, 0.03], "time_constant_s": [30, 30] } ]
}"#;

/// IEC 61960-3 (from memory): 0,2 It for 10 s, then 1,0 It for 1 s. For an open-circuit voltage
/// of 3.9 V, R0 50 mohm, 20 mohm with 0.5 s, 30 mohm with 30 s and 2.5 Ah, worked out in closed
/// form outside this project: 0.068452991508 ohm.
#[test]
fn the_resistance_by_two_currents_is_that_of_the_closed_form() {
    let model: Model = serde_json::from_str(CLOSED_FORM).unwrap();
    let text = SEQUENCE.replace("2.6 Ah", "2.5 Ah");
    let night = Setup::on_cell(&text, &exact(), &model, 0.9).night();
    let figures = work_out(&night.record).unwrap();
    let found = figures
        .figures
        .iter()
        .find(|figure| figure.name == Name::DcResistance)
        .unwrap();
    let off = (found.value - 0.068_452_991_508).abs();
    let standard = found.uncertainty.unwrap().standard_uncertainty;
    assert!(
        off < 1e-4,
        "{} ohm, off by {off:e}, u = {standard:e}",
        found.value
    );
    assert!(off < 2.0 * standard);
}
