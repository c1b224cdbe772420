use quantity::{Charge, Current, Energy, Span};
use serde_json::json;
use sink::bench::Bench;

use crate::plan::{OutlinePoint, Plan};
use crate::{Files, Options, compile};

/// The plan of some steps on the cell of the rules' cases: 3.2 Ah, 3.35 V in the mean.
fn plan(steps: &serde_json::Value) -> Plan {
    let bench = Bench::from_toml(include_str!("../../../../sink/src/bench/weir.toml")).unwrap();
    let mut sequence: serde_json::Value =
        serde_json::from_str(include_str!("../../check/tests/base.json")).unwrap();
    sequence["steps"] = steps.clone();
    let sink = bench.sink("left").unwrap();
    match compile(
        &sequence.to_string(),
        sink,
        &Files::new(),
        &Options::default(),
    ) {
        Ok(compiled) => compiled.plan,
        Err(refused) => panic!("{refused}"),
    }
}

#[test]
fn a_discharge_is_expected_to_end_when_the_rated_capacity_is_drawn() {
    let plan = plan(&json!([
        { "rest": "10 min" },
        { "draw": "0.2 It", "at_most": "7 h", "until": [{ "voltage_below": "2.75 V" }] },
        { "rest": "1 min" }
    ]));
    let forecast = plan.forecast();
    assert_eq!(forecast.duration, Span::from_secs(5 * 3600 + 11 * 60));
    assert_eq!(forecast.charge, "3.2 Ah".parse::<Charge>().unwrap());
    // 3.2 Ah at 3.35 V.
    assert_eq!(forecast.energy, "10.72 Wh".parse::<Energy>().unwrap());
    assert_eq!(plan.duration_at_most(), Span::from_secs(7 * 3600 + 11 * 60));
    // Five a second.
    assert_eq!(plan.readbacks_at_most(), (7 * 3600 + 11 * 60) * 5);
}

#[test]
fn a_ramp_draws_its_mean_and_a_charge_ends_a_step() {
    let plan = plan(&json!([
        { "ramp": { "to": "1 A", "over": "10 s" } },
        { "draw": "1 A", "at_most": "1 h", "until": [{ "charge": "15 C", "then": "end" }] },
        { "rest": "1 h" }
    ]));
    let forecast = plan.forecast();
    assert_eq!(forecast.charge, Charge::from_microcoulombs(20_000_000));
    assert_eq!(forecast.duration, Span::from_secs(25));
    // The longest way goes by the time of the step, and through the rest.
    assert_eq!(plan.duration_at_most(), Span::from_secs(10 + 3600 + 3600));
}

#[test]
fn a_repeat_is_multiplied_and_cut_off_by_the_capacity() {
    let cycle = json!([
        { "draw": "1 A", "for": "1 s" },
        { "rest": "9 s" }
    ]);
    let fixed = plan(&json!([{ "repeat": { "times": 100, "steps": cycle } }]));
    assert_eq!(fixed.forecast().duration, Span::from_secs(1000));
    assert_eq!(
        fixed.forecast().charge,
        Charge::from_microcoulombs(100_000_000)
    );
    let timed = plan(&json!([{ "repeat": { "at_most": "1005 s", "steps": cycle } }]));
    assert_eq!(timed.forecast().duration, Span::from_secs(1005));
    assert_eq!(timed.duration_at_most(), Span::from_secs(1005));
    let emptied = plan(&json!([{ "repeat": { "at_most": "39 h", "steps": cycle,
        "until": [{ "voltage_below": "2.75 V" }] } }]));
    // 11520 C at one a round.
    assert_eq!(emptied.forecast().duration, Span::from_secs(115_200));
    assert_eq!(emptied.duration_at_most(), Span::from_secs(39 * 3600));
}

#[test]
fn the_longest_way_counts_skips_and_every_round() {
    let plan = plan(&json!([
        { "repeat": { "times": 3, "steps": [
            { "draw": "1 A", "at_most": "10 s",
              "until": [{ "voltage_below": "3 V", "then": { "skip_to": "late" } }] },
            { "rest": "5 s" }
        ] } },
        { "rest": "100 s", "then": "end" },
        { "rest": "1000 s", "label": "late" }
    ]));
    // Three rounds, and in the last one at worst the skip to the longest rest.
    assert_eq!(plan.duration_at_most(), Span::from_secs(3 * 15 + 1000));
}

#[test]
fn an_outline_draws_what_fits_and_bands_the_rest() {
    let plan = plan(&json!([
        { "draw": "1 A", "for": "1 s" },
        { "repeat": { "times": 1000, "steps": [
            { "draw": "500 mA", "for": "1 s" }, { "draw": "2 A", "for": "1 s" } ] } },
        { "ramp": { "from": "2 A", "to": "0 A", "over": "10 s" } }
    ]));
    let outline = plan.outline(50);
    assert!(outline.points.len() < 60, "{}", outline.points.len());
    let [band] = outline.bands[..] else {
        panic!("{outline:?}")
    };
    assert_eq!(band.least, Current::from_milliamperes(500));
    assert_eq!(band.largest, Current::from_milliamperes(2000));
    assert_eq!(band.to, Span::from_secs(2001));
    let last = OutlinePoint {
        time: Span::from_secs(2011),
        current: Current::ZERO,
    };
    assert_eq!(outline.points.last(), Some(&last));
    assert_eq!(plan.forecast().duration, Span::from_secs(2011));
}

/// A ramp from elsewhere is an edge and a ramp with one label; a label's second step is not told.
#[test]
fn an_outline_tells_where_each_label_s_first_step_lies() {
    let plan = plan(&json!([
        { "draw": "1 A", "for": "1 s", "label": "on" },
        { "ramp": { "from": "2 A", "to": "0 A", "over": "10 s" }, "label": "back" },
        { "draw": "1 A", "for": "1 s" },
        { "draw": "1 A", "for": "1 s", "label": "later" }
    ]));
    let labels: Vec<_> = plan
        .outline(50)
        .labels
        .iter()
        .map(|labelled| {
            let label = usize::try_from(labelled.label).unwrap();
            (
                plan.labels[label].clone(),
                labelled.from.seconds(),
                labelled.to.seconds(),
            )
        })
        .collect();
    let expected = [("on", 0.0, 1.0), ("back", 1.0, 11.0), ("later", 12.0, 13.0)];
    assert_eq!(labels.len(), 3);
    for ((label, from, to), (name, begins, ends)) in labels.iter().zip(expected) {
        assert_eq!(label, name);
        assert!(
            (from - begins).abs() < 0.01 && (to - ends).abs() < 0.01,
            "{labels:?}"
        );
    }
}
