//! How hot a plan makes a sink, against closed forms.

use quantity::{Current, Power, Temperature, Voltage};
use sink::bench::Bench;

use crate::compile::{Options, compile};
use crate::plan::Foresight;
use crate::{Files, finding::Findings};

fn foresight(steps: &str) -> Foresight {
    let bench = Bench::from_toml(include_str!("../../../../sink/src/bench/weir.toml")).unwrap();
    let mut entry = bench.sink("left").unwrap().clone();
    // One lag each, so that a closed form says what comes out.
    entry.mosfet.foster.clear();
    let text = format!(
        r#"{{ "sequence": 1, "title": "Heat",
        "dut": {{ "label": "PSU", "kind": "supply",
                 "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "3 A" }},
        "interlocks": {{ "undervoltage": {{ "below": "2.5 V", "for": "0 s" }} }},
        "steps": [ {steps} ] }}"#
    );
    match compile(&text, &entry, &Files::new(), &Options::default()) {
        Ok(compiled) => compiled.foresight,
        Err(refused) => {
            let findings: &Findings = &refused.0;
            panic!("{findings}")
        }
    }
}

/// The sink's leads and sense resistor at 30 degC: what they take off 4.2 V.
fn watts(amperes: f64) -> f64 {
    let leads = 2.0 * 0.6 * 0.013_3 * (1.0 + 0.003_93 * 10.0);
    amperes * (4.2 - amperes * (0.1 + leads))
}

/// 2 A for an hour: the heat sink of 2.5 K/W has settled; the junction's 0.5 K/W of pad and the
/// MOSFET's own stand above it.
#[test]
fn a_long_step_settles_where_ohm_s_law_of_heat_says() {
    let seen = foresight(r#"{ "draw": "2 A", "for": "3 h" }"#);
    let peak = seen.peak.unwrap();
    let expected = 30.0 + 2.5 * watts(2.0);
    let heat_sink = peak.heat_sink.degrees_celsius();
    assert!(
        (heat_sink - expected).abs() < 0.05,
        "{heat_sink}, not {expected}"
    );
    let junction = peak.junction.degrees_celsius();
    // From the bench file: 1 K/W to the case, 0.5 K/W to the heat sink.
    let above = 1.5 * watts(2.0);
    assert!((junction - heat_sink - above).abs() < 0.05, "{junction}");
    assert_eq!(peak.ambient, Temperature::from_whole_degrees_celsius(30));
    assert_eq!(seen.current_max, Current::from_milliamperes(2_000));
    assert_eq!(seen.power_max, Power::from_milliwatts(8_400));
    assert_eq!(seen.cut_off, None);
}

/// A million rounds of one second at 2 A and three of rest: the heat sink swings about the mean
/// power, and the walk does not take a million rounds.
#[test]
fn a_long_repeat_settles_about_its_mean_power() {
    let seen = foresight(
        r#"{ "repeat": { "times": 1000000, "steps": [
            { "draw": "2 A", "for": "1 s" }, { "rest": "3 s" } ] } }"#,
    );
    let mean = 30.0 + 2.5 * watts(2.0) / 4.0;
    let heat_sink = seen.peak.unwrap().heat_sink.degrees_celsius();
    assert!(
        heat_sink > mean && heat_sink < mean + 0.2,
        "{heat_sink} about {mean}"
    );
}

/// The same rounds written out, leapt over, and nested.
#[test]
fn rounds_leapt_over_are_as_hot_as_rounds_written_out() {
    let round = r#"{ "draw": "2.5 A", "for": "20 s" }, { "draw": "1 A", "for": "40 s" }"#;
    let written = [round; 12].join(", ");
    let out = foresight(&written).peak.unwrap();
    let repeated = |times: u32, inner: &str| {
        format!(r#"{{ "repeat": {{ "times": {times}, "steps": [ {inner} ] }} }}"#)
    };
    let leapt = foresight(&repeated(12, round)).peak.unwrap();
    let nested = foresight(&repeated(3, &repeated(4, round))).peak.unwrap();
    for other in [leapt, nested] {
        let apart = (other.junction.degrees_celsius() - out.junction.degrees_celsius()).abs();
        assert!(apart < 0.002, "{other:?} is not {out:?}");
    }
}

#[test]
fn the_lowest_cut_off_and_the_largest_current_of_regulated_steps_are_foreseen() {
    let seen = foresight(
        r#"{ "draw_power": "4 W", "for": "1 s" },
           { "draw_resistance": "10 ohm", "for": "1 s" },
           { "draw": "1 A", "until": [ { "voltage_below": "2.75 V", "for": "0 s" } ],
             "at_most": "1 min" }"#,
    );
    // 4 W at 2.5 V.
    assert_eq!(seen.current_max, Current::from_milliamperes(1_600));
    assert_eq!(seen.power_max, Power::from_milliwatts(4_200));
    assert_eq!(seen.cut_off, Some(Voltage::from_millivolts(2_750)));
}
