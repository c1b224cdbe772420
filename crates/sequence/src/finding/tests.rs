//! The ten-mistakes sequence: everything at once, as a person and as a script see it.

use expect_test::expect;
use sink::bench::Bench;

use crate::{Files, Finding, Options, Refused, compile};

fn refused(text: &str) -> Refused {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    let sink = bench.sink("left").unwrap();
    compile(text, sink, &Files::new(), &Options::default()).unwrap_err()
}

#[test]
fn ten_different_mistakes_are_ten_findings_in_one_answer() {
    let Refused(findings) = refused(include_str!("tests/ten_mistakes.json"));
    assert_eq!(findings.count(), (10, 0), "{findings}");
    let mut rules = findings.rules();
    rules.sort();
    rules.dedup();
    assert_eq!(rules.len(), 10);
    expect![[r#"
        error[missing-key]: a device under test has no `current_max`
           at line 4, column 10 (/dut)
        4:   "dut": {
                    ^
           hint: add `current_max`: largest discharge current the maker allows, of the whole device

        error[bad-word]: "cel" is none of the words wanted here
           at line 6, column 13 (/dut/kind)
        6:     "kind": "cel",
                       ^^^^^
           hint: did you mean "cell"? the words are "cell", "pack", "supply"

        error[bad-quantity]: `3,2 Ah` has a comma at byte 1
           at line 7, column 23 (/dut/rated_capacity)
        7:     "rated_capacity": "3,2 Ah",
                                 ^^^^^^^^
           hint: write a decimal point: `3.2 Ah`

        error[unit-missing]: the number 4.2 has no unit where a voltage is wanted
           at line 9, column 20 (/dut/voltage_max)
        9:     "voltage_max": 4.2
                              ^^^
           hint: write a text with the unit, for example "2.75 V"

        error[unknown-key]: a sequence has no key `readbck`
            at line 11, column 3 (/readbck)
        11:   "readbck": "200 ms",
              ^^^^^^^^^
            hint: did you mean `readback`?

        error[interlock-loosened]: `over_temperature` at 90 degC is looser than the bench's 75 degC
            at line 13, column 36 (/interlocks/over_temperature/above)
        13:     "over_temperature": { "above": "90 degC" },
                                               ^^^^^^^^^
            hint: write at most 75 degC, or leave the key out

        error[label-unknown]: no step has the label "dischrage"
            at line 17, column 46 (/steps/0/then/skip_to)
        17:     { "rest": "10 min", "then": { "skip_to": "dischrage" } },
                                                         ^^^^^^^^^^^
            hint: did you mean "discharge"?

        error[current-above-sink]: the step draws 3.2 A, above the 3 A that the sink `left` can draw
            at line 19, column 15 (/steps/1/draw)
        19:       "draw": "3.2 A",
                          ^^^^^^^
            hint: draw 3 A or less, or take a larger sink

        error[until-behind-interlock]: the interlock `undervoltage` at 2.8 V trips before 2.75 V is reached
            at line 20, column 36 (/steps/1/until/0/voltage_below)
        20:       "until": [{ "voltage_below": "2.75 V" }],
                                               ^^^^^^^^
            hint: write more than 2.8 V, or move the interlock

        error[time-missing]: the step could last for ever
            at line 24, column 5 (/steps/2)
        24:     { "draw": "100 mA" }
                ^^^^^^^^^^^^^^^^^^^^
            hint: add `for`, or `until` with `at_most`

        10 errors, 0 warnings
    "#]].assert_eq(&findings.to_string());
}

#[test]
fn a_finding_is_plain_data_for_a_script() {
    let Refused(findings) = refused(include_str!("tests/ten_mistakes.json"));
    let json = serde_json::to_string_pretty(&findings.list[8]).unwrap();
    expect![[r#"
        {
          "severity": "error",
          "rule": "until-behind-interlock",
          "message": "the interlock `undervoltage` at 2.8 V trips before 2.75 V is reached",
          "hint": "write more than 2.8 V, or move the interlock",
          "found": "2.75 V",
          "limit": "2.8 V",
          "pointer": "/steps/1/until/0/voltage_below",
          "place": {
            "line": 20,
            "column": 36,
            "excerpt": "      \"until\": [{ \"voltage_below\": \"2.75 V\" }],",
            "caret": 35,
            "width": 8
          }
        }"#]]
    .assert_eq(&json);
    assert_eq!(
        serde_json::from_str::<Finding>(&json).unwrap(),
        findings.list[8]
    );
}

#[test]
fn what_is_no_object_at_all_is_one_finding() {
    expect![[r#"
        error[wrong-kind]: a list where an object is wanted
           at line 1, column 1 (the whole sequence)
        1: []
           ^^
           hint: write an object

        1 error, 0 warnings
    "#]]
    .assert_eq(&refused("[]").0.to_string());
}
