//! Resistance some time after an edge, against the closed form of a two-RC cell.

use simulator::cell::Model;

use super::bench::{Setup, assert_covers, exact, only};
use super::resistance::CLOSED_FORM;
use crate::{Name, work_out};

const SEQUENCE: &str = r#"{ "sequence": 1, "title": "One pulse",
  "dut": { "label": "closed form", "kind": "cell", "rated_capacity": "2.5 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "5 A" },
  "readback": "20 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" }, "over_power": { "above": "9 W" } },
  "steps": [ { "rest": "2 s" },
             { "draw": "2 A", "for": "10 s", BURST "label": "pulse" },
             { "rest": "2 s" } ] }"#;

/// `R0 + R1 (1 - exp(-t / tau1)) + R2 (1 - exp(-t / tau2))` of the closed form.
fn resistance(seconds: f64) -> f64 {
    0.05 + 0.02 * (1.0 - (-seconds / 0.5).exp()) + 0.03 * (1.0 - (-seconds / 30.0).exp())
}

#[test]
fn the_resistance_after_an_edge_is_that_of_the_closed_form() {
    let model: Model = serde_json::from_str(CLOSED_FORM).unwrap();
    let burst = r#""burst": { "before": "10 ms", "after": "200 ms" },"#;
    let text = SEQUENCE.replace("BURST", burst);
    let night = Setup::on_cell(&text, &exact(), &model, 0.9).night();
    let figures = work_out(&night.record).unwrap();
    for (name, seconds) in [
        (Name::ResistanceAt10Ms, 0.01),
        (Name::ResistanceAt100Ms, 0.1),
        (Name::ResistanceAt1S, 1.0),
        (Name::ResistanceAt10S, 10.0),
    ] {
        let figure = only(&figures, name);
        let truth = resistance(seconds);
        assert!(
            (figure.value - truth).abs() < 1e-4,
            "{seconds} s: {} ohm, truth {truth} ohm",
            figure.value
        );
        assert_covers(figure, truth, 2.0);
    }
}

#[test]
fn without_a_capture_readbacks_that_are_too_coarse_give_a_reason() {
    let model: Model = serde_json::from_str(CLOSED_FORM).unwrap();
    let text = SEQUENCE.replace("BURST", "").replace("20 ms", "50 ms");
    let night = Setup::on_cell(&text, &exact(), &model, 0.9).night();
    let figures = work_out(&night.record).unwrap();
    assert!((only(&figures, Name::ResistanceAt100Ms).value - resistance(0.1)).abs() < 1e-4);
    let missing = figures
        .missing
        .iter()
        .find(|missing| missing.name == Name::ResistanceAt10Ms)
        .unwrap();
    assert!(
        missing.reason.contains("too coarse to show 10 ms"),
        "{}",
        missing.reason
    );
}
