//! Whatever is done to a sequence: no panic, and what compiles is a valid plan that says the
//! same again.

use proptest::prelude::*;
use serde_json::{Value, json};
use sink::bench::Bench;

use crate::compile::compile_with;
use crate::plan::{Op, Plan};
use crate::{Facts, Files, Options, Refused};

fn facts() -> Facts {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    let mut facts = Facts::of(bench.sink("left").unwrap(), Options::default().correction);
    facts.baud = Some(115_200);
    facts
}

fn base() -> Value {
    serde_json::from_str(include_str!("../check/tests/base.json")).unwrap()
}

fn milliseconds() -> impl Strategy<Value = String> {
    (1_u32..100_000).prop_map(|count| format!("{count} ms"))
}

fn current() -> impl Strategy<Value = String> {
    prop_oneof![
        (3_u32..2_900).prop_map(|count| format!("{count} mA")),
        (1_u32..8).prop_map(|tenths| format!("0.{tenths} It")),
        Just("0 A".to_owned()),
    ]
}

fn next() -> impl Strategy<Value = Value> {
    prop_oneof![
        4 => Just(json!("go_on")),
        1 => Just(json!("end")),
        1 => Just(json!({ "skip_to": "last" })),
    ]
}

fn condition() -> impl Strategy<Value = Value> {
    let watched = prop_oneof![
        (2_600_u32..4_000).prop_map(|mv| json!({ "voltage_below": format!("{mv} mV") })),
        (1_u32..4_000).prop_map(|mah| json!({ "charge": format!("{mah} mAh") })),
        milliseconds().prop_map(|time| json!({ "elapsed": time })),
        milliseconds()
            .prop_map(|time| json!({ "voltage_settled": { "change": "1 mV", "over": time } })),
    ];
    (watched, next()).prop_map(|(mut watched, then)| {
        watched["then"] = then;
        watched
    })
}

fn leaf() -> impl Strategy<Value = Value> {
    let points = prop::collection::vec((1_u32..10_000, current()), 2..8).prop_map(|steps| {
        let mut time = 0;
        let mut points = Vec::new();
        for (span, current) in steps {
            points.push(json!([format!("{time} ms"), current]));
            time += span;
        }
        points
    });
    let interpolation = prop_oneof![Just("steps"), Just("linear")];
    prop_oneof![
        milliseconds().prop_map(|time| json!({ "rest": time })),
        (current(), milliseconds(), next()).prop_map(
            |(current, time, then)| json!({ "draw": current, "for": time, "then": then })
        ),
        (
            current(),
            milliseconds(),
            prop::collection::vec(condition(), 1..3)
        )
            .prop_map(
                |(current, time, until)| json!({ "draw": current, "at_most": time, "until": until })
            ),
        (current(), current(), milliseconds()).prop_map(
            |(from, to, over)| json!({ "ramp": { "from": from, "to": to, "over": over } })
        ),
        (current(), milliseconds())
            .prop_map(|(to, over)| json!({ "ramp": { "to": to, "over": over } })),
        (1_u32..7_000, milliseconds())
            .prop_map(|(mw, time)| json!({ "draw_power": format!("{mw} mW"), "for": time })),
        (points, interpolation, next()).prop_map(|(points, interpolation, then)| {
            json!({ "profile": { "points": points, "interpolation": interpolation }, "then": then })
        }),
    ]
}

fn steps() -> impl Strategy<Value = Value> {
    let step = leaf().prop_recursive(3, 24, 4, |inner| {
        let steps = prop::collection::vec(inner, 1..4);
        let until = prop::collection::vec(condition(), 0..2);
        (steps, 1_u32..5, until).prop_map(|(steps, times, until)| {
            let mut repeat = json!({ "times": times, "steps": steps });
            if !until.is_empty() {
                repeat["until"] = json!(until);
            }
            json!({ "repeat": repeat })
        })
    });
    prop::collection::vec(step, 1..6).prop_map(|mut steps| {
        steps.push(json!({ "rest": "1 s", "label": "last" }));
        json!(steps)
    })
}

/// Readbacks and time of a plan as the sum along the way without skips and conditions.
fn written_out(plan: &Plan, begin: usize, end: usize) -> u64 {
    let mut sum = 0;
    let mut at = begin;
    while at < end {
        at = match &plan.ops[at] {
            Op::Step(step) => {
                sum += step.duration.micros();
                at + 1
            }
            Op::LoopBegin(head) => {
                let foot = head.end as usize;
                let once = written_out(plan, at + 1, foot);
                let all = once * head.times.unwrap();
                sum += head
                    .at_most
                    .map_or(all, |at_most| all.min(at_most.micros()));
                foot + 1
            }
            Op::LoopEnd { .. } => at + 1,
        };
    }
    sum
}

fn compiled(sequence: &Value) -> Result<Plan, Refused> {
    let text = sequence.to_string();
    compile_with(&text, &facts(), &Files::new(), &Options::default()).map(|compiled| compiled.plan)
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(256))]

    #[test]
    fn what_compiles_is_a_valid_plan_that_survives_its_json(steps in steps()) {
        let mut sequence = base();
        sequence["steps"] = steps;
        let Ok(plan) = compiled(&sequence) else { return Ok(()) };
        prop_assert_eq!(plan.validate(), Ok(()));
        let back: Plan = serde_json::from_str(&serde_json::to_string(&plan).unwrap()).unwrap();
        prop_assert_eq!(&back, &plan);
        // Every instruction points at the step it came from.
        for op in &plan.ops {
            let pointer = match op {
                Op::Step(step) => &step.pointer,
                Op::LoopBegin(head) => &head.pointer,
                Op::LoopEnd { .. } => continue,
            };
            prop_assert!(sequence.pointer(pointer).is_some(), "{}", pointer);
        }
    }

    #[test]
    fn no_forecast_and_no_outline_goes_beyond_the_longest_time(steps in steps()) {
        let mut sequence = base();
        sequence["steps"] = steps;
        let Ok(plan) = compiled(&sequence) else { return Ok(()) };
        let longest = plan.duration_at_most();
        prop_assert!(longest.micros() <= written_out(&plan, 0, plan.ops.len()));
        prop_assert!(plan.forecast().duration <= longest);
        let outline = plan.outline(40);
        prop_assert!(outline.points.windows(2).all(|pair| pair[0].time <= pair[1].time));
        prop_assert!(outline.points.last().unwrap().time <= longest);
    }

    #[test]
    fn a_damaged_text_never_panics_and_is_refused_or_valid(
        steps in steps(),
        cuts in prop::collection::vec((any::<prop::sample::Index>(), 0_usize..6, "\\PC{0,3}|[\\[\\]{}\",:0-9]"), 1..4),
    ) {
        let mut sequence = base();
        sequence["steps"] = steps;
        let mut text: Vec<char> = serde_json::to_string_pretty(&sequence).unwrap().chars().collect();
        for (at, gone, new) in cuts {
            let at = at.index(text.len());
            let end = (at + gone).min(text.len());
            text.splice(at..end, new.chars());
        }
        let text: String = text.into_iter().collect();
        match compile_with(&text, &facts(), &Files::new(), &Options::default()) {
            Ok(compiled) => prop_assert_eq!(compiled.plan.validate(), Ok(())),
            Err(Refused(findings)) => {
                prop_assert!(findings.refuse());
                prop_assert!(findings.list.iter().all(|finding| finding.place.is_some()));
                prop_assert!(!findings.to_string().is_empty());
            }
        }
    }

    #[test]
    fn a_value_of_any_kind_in_any_place_never_panics(
        steps in steps(),
        place in any::<prop::sample::Index>(),
        value in prop_oneof![
            Just(json!(null)), Just(json!(true)), Just(json!(-1)), Just(json!(1e300)),
            Just(json!("")), Just(json!("99999999999999999999 A")), Just(json!("9000000 MW")),
            Just(json!("-5 V")), Just(json!("1 A")), Just(json!("500000 d")), Just(json!([])), Just(json!({})),
            Just(json!("9000000000000 A")), Just(json!("9000000000000 V")), Just(json!("1 uohm")),
        ],
    ) {
        let mut sequence = base();
        sequence["steps"] = steps;
        let mut pointers = Vec::new();
        pointers_of(&sequence, "", &mut pointers);
        let pointer = place.get(&pointers).clone();
        *sequence.pointer_mut(&pointer).unwrap() = value;
        if let Ok(plan) = compiled(&sequence) {
            prop_assert_eq!(plan.validate(), Ok(()));
        }
    }
}

fn pointers_of(value: &Value, pointer: &str, found: &mut Vec<String>) {
    found.push(pointer.to_owned());
    match value {
        Value::Object(map) => {
            for (key, value) in map {
                pointers_of(value, &format!("{pointer}/{key}"), found);
            }
        }
        Value::Array(list) => {
            for (index, value) in list.iter().enumerate() {
                pointers_of(value, &format!("{pointer}/{index}"), found);
            }
        }
        Value::Null | Value::Bool(_) | Value::Number(_) | Value::String(_) => {}
    }
}
