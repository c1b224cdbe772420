//! The ready sequences, and compiling as a whole.

use std::fmt::Write as _;

use expect_test::{Expect, expect};
use serde_json::json;
use sink::bench::Bench;

use quantity::Span;

use super::*;
use crate::plan::{Action, Next, Op};

/// The bench of the invented scenario, the same text that the crate `sink` tests.
const WEIR: &str = include_str!("../../../sink/src/bench/weir.toml");

fn bench() -> Bench {
    Bench::from_toml(WEIR).unwrap()
}

fn sequences() -> std::path::PathBuf {
    std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("../../sequences")
}

fn ready(name: &str, sink: &str) -> Result<Compiled, Refused> {
    let text = std::fs::read_to_string(sequences().join(name)).unwrap();
    let files = files_wanted(&text)
        .into_iter()
        .map(|name| {
            let text = std::fs::read_to_string(sequences().join(&name)).unwrap();
            (name, text)
        })
        .collect();
    compile(
        &text,
        bench().sink(sink).unwrap(),
        &files,
        &Options::default(),
    )
}

/// Name and sink of every ready sequence, from the table that users read.
fn table() -> Vec<(String, String)> {
    let readme = std::fs::read_to_string(sequences().join("README.md")).unwrap();
    readme
        .lines()
        .filter(|line| line.starts_with("| `"))
        .map(|line| {
            let cells: Vec<&str> = line.split('|').map(str::trim).collect();
            let plain = |text: &str| text.trim_matches('`').to_owned();
            (plain(cells[1]), plain(cells[2]))
        })
        .collect()
}

#[test]
fn every_ready_sequence_compiles_for_its_sink_without_a_warning() {
    for (name, sink) in table() {
        match ready(&name, &sink) {
            Ok(compiled) => {
                assert_eq!(
                    compiled.warnings,
                    Findings::default(),
                    "{name}:\n{}",
                    compiled.warnings
                );
            }
            Err(refused) => panic!("{name}: {refused}"),
        }
    }
}

#[test]
fn the_table_of_ready_sequences_lists_every_file() {
    let mut listed: Vec<String> = table().into_iter().map(|(name, _)| name).collect();
    let mut there: Vec<String> = std::fs::read_dir(sequences())
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.extension().is_some_and(|end| end == "json"))
        .map(|path| path.file_name().unwrap().to_str().unwrap().to_owned())
        .collect();
    listed.sort();
    there.sort();
    assert_eq!(listed, there);
}

/// A plan's program as one line an instruction.
fn program(plan: &crate::plan::Plan) -> String {
    let mut out = String::new();
    let mut depth = 0;
    for (at, op) in plan.ops.iter().enumerate() {
        if matches!(op, Op::LoopEnd { .. }) {
            depth -= 1;
        }
        let indent = "  ".repeat(depth);
        match op {
            Op::Step(step) => {
                let action = match step.action {
                    Action::Rest => "rest".to_owned(),
                    Action::Current { target, ramp } if ramp == Span::ZERO => target.to_string(),
                    Action::Current { target, ramp } => format!("to {target} over {ramp}"),
                    Action::Power { target } => target.to_string(),
                    Action::Resistance { target } => target.to_string(),
                };
                write!(out, "{at} {indent}{action} for {}", step.duration).unwrap();
                if step.then != Next::GoOn {
                    write!(out, ", then {:?}", step.then).unwrap();
                }
                for until in &step.until {
                    write!(out, ", until {:?}", until.condition).unwrap();
                    write!(out, " for {} then {:?}", until.persistence, until.then).unwrap();
                }
                if let Some(label) = step.label {
                    write!(out, " [{}]", plan.labels[label as usize]).unwrap();
                }
                if let Some(burst) = step.burst {
                    write!(out, " burst {} {}", burst.before, burst.after).unwrap();
                }
                writeln!(out, " {}", step.pointer).unwrap();
            }
            Op::LoopBegin(head) => {
                let times = head.times.map(|times| format!(" {times} times"));
                let at_most = head.at_most.map(|span| format!(" at most {span}"));
                write!(out, "{at} {indent}repeat to {}", head.end).unwrap();
                write!(out, "{}", times.unwrap_or_default()).unwrap();
                writeln!(out, "{}", at_most.unwrap_or_default()).unwrap();
                depth += 1;
            }
            Op::LoopEnd { begin } => writeln!(out, "{at} {indent}end of {begin}").unwrap(),
        }
    }
    out
}

fn check(steps: &serde_json::Value, expected: &Expect) {
    let mut sequence: serde_json::Value =
        serde_json::from_str(include_str!("../check/tests/base.json")).unwrap();
    sequence["steps"] = steps.clone();
    let compiled = compile(
        &sequence.to_string(),
        bench().sink("left").unwrap(),
        &Files::new(),
        &Options::default(),
    );
    match compiled {
        Ok(compiled) => expected.assert_eq(&program(&compiled.plan)),
        Err(refused) => expected.assert_eq(&refused.to_string()),
    }
}

#[test]
fn a_discharge_keeps_its_conditions_and_its_longest_time() {
    check(
        &json!([
            { "rest": "10 min" },
            { "draw": "0.2 It", "at_most": "7 h", "label": "discharge", "until": [
                { "voltage_below": "2.75 V", "for": "400 ms", "then": "end" },
                { "charge": "3.3 Ah" }, { "energy": "12 Wh" },
                { "voltage_settled": { "change": "1 mV", "over": "1 min" } } ] },
            { "rest": "1 min" }
        ]),
        &expect![[r#"
             0 rest for 10 min /steps/0
             1 640 mA for 7 h, until VoltageBelow(Voltage(2750000)) for 400 ms then End, until Charge(Charge(11880000000)) for 0 s then GoOn, until Energy(Energy(43200000000)) for 0 s then GoOn, until VoltageSettled { change: Voltage(1000), window: Span(60000000) } for 0 s then GoOn [discharge] /steps/1
             2 rest for 1 min /steps/2
        "#]],
    );
}

#[test]
fn an_elapsed_time_shortens_the_step_and_brings_its_own_next() {
    check(
        &json!([
            { "draw": "1 A", "at_most": "1 h", "until": [
                { "voltage_below": "3 V" }, { "elapsed": "10 min", "then": { "skip_to": "last" } }
            ] },
            { "rest": "1 min" },
            { "rest": "2 min", "label": "last" }
        ]),
        &expect![[r#"
             0 1 A for 10 min, then SkipTo(2), until VoltageBelow(Voltage(3000000)) for 0 s then GoOn /steps/0
             1 rest for 1 min /steps/1
             2 rest for 2 min [last] /steps/2
        "#]],
    );
}

#[test]
fn a_ramp_begins_where_the_step_before_left_off_or_with_an_edge_of_one_tick() {
    check(
        &json!([
            { "ramp": { "from": "0 A", "to": "1 A", "over": "10 s" } },
            { "ramp": { "to": "2 A", "over": "1 s" } },
            { "ramp": { "from": "500 mA", "to": "0 A", "over": "1 s" }, "label": "down",
              "burst": { "before": "5 ms", "after": "20 ms" } }
        ]),
        &expect![[r#"
             0 to 1 A over 10 s for 10 s /steps/0
             1 to 2 A over 1 s for 1 s /steps/1
             2 500 mA for 1 ms [down] burst 5 ms 20 ms /steps/2
             3 to 0 A over 999 ms for 999 ms [down] /steps/2
        "#]],
    );
}

#[test]
fn a_profile_of_steps_joins_equal_currents_and_ends_with_its_last_pair() {
    check(
        &json!([{ "profile": { "interpolation": "steps", "points": [
            ["0 s", "4 mA"], ["5 s", "4 mA"], ["8 s", "0 A"], ["9.5 s", "0.1 It"], ["10 s", "0.1 It"]
        ] }, "label": "cycle" }]),
        &expect![[r#"
             0 4 mA for 8 s [cycle] /steps/0
             1 rest for 1.5 s [cycle] /steps/0
             2 320 mA for 500 ms [cycle] /steps/0
        "#]],
    );
}

#[test]
fn a_linear_profile_keeps_slopes_and_turns_jumps_into_edges() {
    check(
        &json!([{ "profile": { "interpolation": "linear", "points": [
            ["0 s", "100 mA"], ["1 s", "200 mA"], ["1 s", "500 mA"], ["2 s", "500 mA"],
            ["2 s", "1 A"], ["3 s", "0 A"]
        ] }, "then": "end" }]),
        &expect![[r#"
             0 100 mA for 1 ms /steps/0
             1 to 200 mA over 999 ms for 999 ms /steps/0
             2 500 mA for 1 s /steps/0
             3 1 A for 1 ms /steps/0
             4 to 0 A over 999 ms for 999 ms, then End /steps/0
        "#]],
    );
}

#[test]
fn a_profile_with_a_condition_becomes_a_loop_of_one_turn() {
    check(
        &json!([{ "profile": { "interpolation": "steps", "csv":
            "# invented\nremark;t [ms];I/mA\nx;0;100\ny;1.5e3;200\nz;2000;200\n" },
            "until": [{ "voltage_below": "3 V", "then": "end" }, { "elapsed": "1900 ms" }] }]),
        &expect![[r#"
             0 repeat to 3 1 times at most 1.9 s
             1   100 mA for 1.5 s /steps/0
             2   200 mA for 500 ms /steps/0
             3 end of 0
        "#]],
    );
}

#[test]
fn repeats_nest_and_skips_leave_them() {
    check(
        &json!([
            { "repeat": { "times": 3, "at_most": "2 h", "steps": [
                { "repeat": { "times": 2, "steps": [
                    { "draw": "1 A", "for": "1 s", "then": { "skip_to": "after" } } ] },
                  "label": "inner" },
                { "ramp": { "from": "1 A", "to": "2 A", "over": "1 s" }, "label": "up" }
            ], "until": [{ "temperature_above": "60 degC", "then": "end" }, { "elapsed": "1 h" }] } },
            { "draw_power": "2 W", "for": "1 s", "label": "after" },
            { "draw_resistance": "3.9 ohm", "for": "1 s" }
        ]),
        &expect![[r#"
             0 repeat to 6 3 times at most 1 h
             1   repeat to 3 2 times
             2     1 A for 1 s, then SkipTo(7) /steps/0/repeat/steps/0/repeat/steps/0
             3   end of 1
             4   1 A for 1 ms [up] /steps/0/repeat/steps/1
             5   to 2 A over 999 ms for 999 ms [up] /steps/0/repeat/steps/1
             6 end of 0
             7 2 W for 1 s [after] /steps/1
             8 3.9 ohm for 1 s /steps/2
        "#]],
    );
}

#[test]
fn the_plan_has_the_bench_s_interlocks_tightened_by_the_sequence_s() {
    let compiled = ready("capacity-0.2-it.json", "left").unwrap();
    expect![[r#"
        Interlocks {
            over_temperature: Armed {
                threshold: Temperature(
                    60000,
                ),
                persistence: Span(
                    500000,
                ),
            },
            over_power: Armed {
                threshold: Power(
                    3200000,
                ),
                persistence: Span(
                    20000,
                ),
            },
            undervoltage: Armed {
                threshold: Voltage(
                    2500000,
                ),
                persistence: Span(
                    0,
                ),
            },
            over_voltage: Armed {
                threshold: Voltage(
                    4250000,
                ),
                persistence: Span(
                    20000,
                ),
            },
            reversed_polarity: Armed {
                threshold: Voltage(
                    -50000,
                ),
                persistence: Span(
                    5000,
                ),
            },
            over_current: Armed {
                threshold: Current(
                    800000,
                ),
                persistence: Span(
                    10000,
                ),
            },
            not_following: Armed {
                threshold: Current(
                    50000,
                ),
                persistence: Span(
                    1000000,
                ),
            },
            not_releasing: Armed {
                threshold: Current(
                    50000,
                ),
                persistence: Span(
                    100000,
                ),
            },
            sensor_fault: Span(
                200000,
            ),
            silence: Span(
                2000000,
            ),
            charge: Some(
                Charge(
                    13824000000,
                ),
            ),
            energy: Some(
                Energy(
                    57600000000,
                ),
            ),
            time: Some(
                Span(
                    144000000000,
                ),
            ),
            clock: Span(
                100000,
            ),
        }
    "#]]
    .assert_debug_eq(&compiled.plan.interlocks);
}

#[test]
fn a_label_given_with_the_run_wins() {
    let text = include_str!("../check/tests/base.json");
    let options = Options {
        dut_label: Some("K-03".to_owned()),
        ..Options::default()
    };
    let bench = bench();
    let compiled = compile(text, bench.sink("left").unwrap(), &Files::new(), &options).unwrap();
    assert_eq!(compiled.plan.dut.label, "K-03");
}

#[test]
fn a_sequence_made_for_one_sink_is_refused_by_the_other_with_the_reasons() {
    let Refused(findings) = ready("capacity-0.2-it.json", "right").unwrap_err();
    expect![[r#"
        [
            InterlockLoosened,
            InterlockCannotAct,
            CurrentAboveSink,
        ]
    "#]]
    .assert_debug_eq(&findings.rules());
}

#[test]
fn a_file_that_is_not_given_is_a_finding_and_wanted_files_are_named_in_any_depth() {
    let text = std::fs::read_to_string(sequences().join("logger-profile-to-cut-off.json")).unwrap();
    assert_eq!(files_wanted(&text), ["logger-cycle.csv"]);
    assert_eq!(files_wanted("nonsense"), Vec::<String>::new());
    let bench = bench();
    let Refused(findings) = compile(
        &text,
        bench.sink("right").unwrap(),
        &Files::new(),
        &Options::default(),
    )
    .unwrap_err();
    assert_eq!(findings.rules(), [Rule::ProfileSource]);
}

#[test]
fn a_text_of_nothing_but_mistakes_gets_a_bounded_answer() {
    let bench = bench();
    let refused = |text: &str| {
        let Refused(findings) = compile(
            text,
            bench.sink("left").unwrap(),
            &Files::new(),
            &Options::default(),
        )
        .unwrap_err();
        findings.list
    };
    let base = include_str!("../check/tests/base.json");
    let pairs = vec!["[1, 2]"; 50_000].join(",");
    let profile =
        format!("{{ \"profile\": {{ \"interpolation\": \"steps\", \"points\": [{pairs}] }} }},");
    let list = refused(&base.replace("{ \"rest\": \"10 min\" },", &profile));
    assert_eq!(list.len(), 201);
    assert!(
        list[200].message.starts_with("99800 more errors"),
        "{}",
        list[200]
    );
    let list = refused(&vec!["[01"; 50_000].join(","));
    assert!(list.len() < 110, "{}", list.len());
    let keys: Vec<String> = (0..50_000).map(|n| format!("\"k{n}\": 1")).collect();
    let list = refused(&format!("{{{}}}", keys.join(",")));
    assert_eq!(list.len(), 1, "{}", list[0]);
}
