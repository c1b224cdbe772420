//! What records are for: report, comparison, prediction, another source.

use std::fs;

use crate::program::Desk;

/// Pulses between rests on a small part of a cell, short enough for a test (invented).
const PULSES: &str = r#"{
  "sequence": 1, "title": "Two pulses (invented)",
  "dut": { "label": "M-01", "kind": "cell", "rated_capacity": "2.6 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "13 A" },
  "readback": "200 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" }, "over_voltage": { "above": "4.3 V" } },
  "steps": [ { "repeat": { "times": 2, "steps": [
    { "rest": "2 min" },
    { "draw": "1 It", "for": "10 s", "readback": "20 ms", "label": "pulse" },
    { "rest": "2 min", "readback": "100 ms" },
    { "draw": "0.5 It", "for": "5 min", "label": "on" } ] } } ]
}"#;

/// A load that goes round until a voltage (invented).
const LOAD: &str = r#"{
  "sequence": 1, "title": "A load that goes round (invented)",
  "dut": { "label": "M-01", "kind": "cell", "rated_capacity": "2.6 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "13 A" },
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" }, "over_voltage": { "above": "4.3 V" } },
  "steps": [ { "repeat": { "steps": [ { "draw": "100 mA", "for": "9 s" }, { "draw": "1 A", "for": "1 s" } ],
               "until": [ { "voltage_below": "3 V" } ], "at_most": "30 h" } } ]
}"#;

#[test]
fn a_report_is_one_page_on_stdout_or_in_a_file() {
    let desk = Desk::kept();
    let page = desk.run(&["report", "kept"]).with_code(0).stdout;
    assert!(page.starts_with("<!DOCTYPE html>"), "{page}");
    assert!(page.contains("Half a minute (invented)"));
    let told = desk
        .run(&["report", "kept", "-o", "report.html", "--json"])
        .with_code(0)
        .json();
    assert_eq!(told["output"], "report.html");
    let file = fs::read_to_string(desk.path("report.html")).unwrap();
    assert_eq!(told["bytes"], file.len());
}

#[test]
fn groups_are_compared_and_a_word_that_is_none_is_refused() {
    let desk = Desk::kept();
    for (label, folder) in [("K-02", "two"), ("K-03", "three")] {
        desk.run(&[
            "rehearse",
            "short.json",
            "--sink",
            "left",
            "--dut",
            label,
            "--keep",
            folder,
        ])
        .with_code(0);
    }
    let answer = desk
        .run(&["compare", "K=kept,two", "L=three,two", "--json"])
        .with_code(0)
        .json();
    // So short a draw gives every cell the same charge; their voltages tell them apart.
    let voltage = answer["figures"]
        .as_array()
        .unwrap()
        .iter()
        .find(|figure| figure["name"] == "mean_voltage")
        .unwrap();
    assert_eq!(voltage["groups"][0]["values"].as_array().unwrap().len(), 2);
    assert_eq!(voltage["differences"].as_array().unwrap().len(), 1);
    let text = desk
        .run(&["compare", "K=kept,two", "--figure", "mean voltage"])
        .with_code(0)
        .stdout;
    assert!(text.contains("mean voltage") && !text.contains("delivered charge"));
    let refused = desk.run(&["compare", "kept"]).with_code(1).stderr;
    assert!(
        refused.contains("hint: give each group as NAME=RECORD"),
        "{refused}"
    );
}

#[test]
fn a_fitted_model_predicts_a_run_time_and_is_a_source_to_rehearse_on() {
    let desk = Desk::kept();
    fs::write(desk.path("pulses.json"), PULSES).unwrap();
    fs::write(desk.path("load.json"), LOAD).unwrap();
    desk.run(&[
        "rehearse",
        "pulses.json",
        "--sink",
        "left",
        "--dut",
        "M-01",
        "--keep",
        "pulses",
    ])
    .with_code(0);
    desk.run(&["figures", "pulses", "--model", "cell.json"])
        .with_code(0);
    let predicted = desk
        .run(&[
            "predict",
            "--model",
            "cell.json",
            "--profile",
            "load.json",
            "--sink",
            "left",
            "--spread-capacity",
            "2 %",
            "--json",
        ])
        .with_code(0)
        .json();
    assert_eq!(predicted["dominated_by"], "spread between cells");
    // 0.19 A on average from 2.6 Ah: about half a day.
    let hours = predicted["hours"].as_f64().unwrap();
    assert!((10.0..15.0).contains(&hours), "{hours} h");
    let interval = predicted["outcome"]["symmetric"].as_array().unwrap();
    assert!(interval[0].as_f64().unwrap() < hours && hours < interval[1].as_f64().unwrap());

    let against = desk
        .run(&["replay", "pulses", "--against", "cell.json", "--json"])
        .with_code(0)
        .json();
    assert_eq!(against["same_ending"], true);
    let pulse = against["labels"]
        .as_array()
        .unwrap()
        .iter()
        .find(|label| label["label"] == "pulse")
        .unwrap();
    let apart = pulse["voltage_rms_v"].as_f64().unwrap();
    assert!(apart < 20e-3, "{apart} V");
    // The sink's own source is a cell that it cannot hold on to for ever.
    let other = desk
        .run(&["replay", "pulses", "--against", "nowhere.json"])
        .with_code(1)
        .stderr;
    assert!(other.contains("is no simulated cell"), "{other}");
}
