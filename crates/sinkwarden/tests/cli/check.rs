//! A check names every mistake at once, or says what the plan will take.

use expect_test::expect;

use crate::program::Desk;

/// Ten mistakes, one a line, each of another kind.
const TEN_MISTAKES: &str = r#"{
  "sequence": 1,
  "title": "Ten mistakes (invented)",
  "dut": {
    "label": "K-01",
    "kind": "sell",
    "rated_capacity": 3.2,
    "voltage_min": "2.5 V",
    "voltage_max": "4.2 A",
    "current_max": "6.4 A"
  },
  "readbak": "200 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [
    { "draw": 0.5, "for": "1 min" },
    { "draw": "500 mA", "until": [{ "voltage_below": "2.75 V" }] },
    { "draw": "500 mA", "rest": "1 min" },
    { "rest": "10 minutes" },
    { "repeat": { "times": 0, "steps": [{ "rest": "1 s" }] } },
    { "rest": "1 s", "label": "" }
  ]
}
"#;

#[test]
fn ten_mistakes_are_ten_findings_each_with_its_line_and_its_mend() {
    let desk = Desk::new();
    desk.write("ten.json", TEN_MISTAKES);
    let answer = desk
        .run(&["check", "ten.json", "--sink", "left"])
        .with_code(3);
    expect![[r#"
        ten.json:6:13: error[bad-word]: "sell" is none of the words wanted here
          6 |     "kind": "sell",
            |             ^^^^^^
            at /dut/kind
            hint: did you mean "cell"? the words are "cell", "pack", "supply"

        ten.json:7:23: error[unit-missing]: the number 3.2 has no unit where a charge is wanted
          7 |     "rated_capacity": 3.2,
            |                       ^^^
            at /dut/rated_capacity
            hint: write a text with the unit, for example "3.2 Ah"

        ten.json:9:20: error[bad-quantity]: `4.2 A` is a current (unit `A` at byte 4), but a voltage is wanted
          9 |     "voltage_max": "4.2 A",
            |                    ^^^^^^^
            at /dut/voltage_max
            hint: units of a voltage: V, mV, uV, kV

        ten.json:12:3: error[unknown-key]: a sequence has no key `readbak`
          12 |   "readbak": "200 ms",
             |   ^^^^^^^^^
             at /readbak
             hint: did you mean `readback`?

        ten.json:15:15: error[unit-missing]: the number 0.5 has no unit where a current is wanted
          15 |     { "draw": 0.5, "for": "1 min" },
             |               ^^^
             at /steps/0/draw
             hint: write a text with the unit, for example "500 mA"

        ten.json:16:5: error[time-missing]: the step could last for ever
          16 |     { "draw": "500 mA", "until": [{ "voltage_below": "2.75 V" }] },
             |     ^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^
             at /steps/1
             hint: add `at_most`, the longest time the step may take if no condition ever holds

        ten.json:17:5: error[exactly-one]: a step has rest and draw at once
          17 |     { "draw": "500 mA", "rest": "1 min" },
             |     ^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^
             at /steps/2
             hint: keep one of rest, draw, draw_power, draw_resistance, ramp, profile, repeat

        ten.json:18:15: error[bad-quantity]: `10 minutes` has an unknown unit `minutes` at byte 3
          18 |     { "rest": "10 minutes" },
             |               ^^^^^^^^^^^^
             at /steps/3/rest
             hint: units of a length of time: s, ms, us, min, h, d

        ten.json:19:28: error[bad-count]: 0 is no whole number from 1 to 1000000000
          19 |     { "repeat": { "times": 0, "steps": [{ "rest": "1 s" }] } },
             |                            ^
             at /steps/4/repeat/times
             hint: write digits only, from 1 to 1000000000

        ten.json:20:31: error[bad-text]: an empty text
          20 |     { "rest": "1 s", "label": "" }
             |                               ^^
             at /steps/5/label
             hint: write something or leave the key out

        10 errors, 0 warnings
        refused: sink `left` will not be given this sequence: 10 errors, 0 warnings
    "#]].assert_eq(&answer.stdout);
    assert_eq!(answer.stderr, "");
}

#[test]
fn a_refusal_as_json_has_the_same_findings_under_the_same_code_as_over_http() {
    let desk = Desk::new();
    desk.write("ten.json", TEN_MISTAKES);
    let answer = desk
        .run(&["check", "ten.json", "--sink", "left", "--json"])
        .with_code(3);
    let problem = answer.json();
    assert_eq!(problem["code"], "sequence-refused");
    assert_eq!(problem["findings"].as_array().unwrap().len(), 10);
}

#[test]
fn a_sequence_that_may_run_says_what_it_will_take() {
    let desk = Desk::new();
    let answer = desk
        .run(&["check", "short.json", "--sink", "left", "--dut", "K-02"])
        .with_code(0);
    expect![[r#"
        short.json:1:1: warning[certificate-absent]: the sink `left` has no certificate: every figure of this run will be nominal, uncalibrated
          1 | {
            | ^
            hint: calibrate the sink before a run whose figures are to decide something

        0 errors, 1 warning

        ok: "Half a minute (invented)" may run on `left` with K-02

          rest for 5 s
          draw 640 mA for 20 s  (discharge)
          rest for 5 s

          duration   about 30.00 s, at most 30.00 s
          charge     about 3.556 mAh
          energy     about 11.91 mWh
          heat sink  at most 30.36 degC, of 80.00 degC
          junction   at most 34.32 degC, of 150.0 degC
          readbacks  at most 300

          interlock         planned     limit           how near
          over voltage      4.200 V     4.300 V         98 %
          over temperature  30.36 degC  75.00 degC      40 %
          over current      640.0 mA    3.000 A         21 %
          over power        2.688 W     14.00 W         19 %
          silence           100.0 ms    2.000 s         5 %
          charge            3.556 mAh   4.000 Ah        0 %
          energy            11.91 mWh   16.00 Wh        0 %
          time              30.00 s     1 d 16 h 0 min  0 %

        "About" is reckoned from the data sheet's values alone; `rehearse` knows better.
    "#]]
    .assert_eq(&answer.stdout);
}

#[test]
fn the_plan_as_json_is_in_plain_numbers_with_units_in_their_names() {
    let desk = Desk::new();
    let view = desk
        .run(&["check", "short.json", "--sink", "left", "--json"])
        .with_code(0)
        .json();
    assert_eq!(view["sink"], "left");
    assert_eq!(view["duration_at_most_s"], 30.0);
}

/// Common practice, no source: a builder who took code 16 for 2 mA measured 11 mA. Code 16 of 10
/// bits over 3.3 V and 5 ohm is 10.3 mA, and 2 mA would be code 3.
#[test]
fn a_code_taken_for_a_current_is_told_in_words_a_builder_understands() {
    let desk = Desk::new();
    let bench = desk.read("bench.toml");
    // The right sink as that builder has it: 10 bits, 3.3 V, 5 ohm, and a buffer that reaches 0 V.
    let (left, right) = bench.split_at(bench.rfind("[[sink]]").unwrap());
    let right = right
        .replacen("bits = 12", "bits = 10", 1)
        .replacen("resistance = \"1 ohm\"", "resistance = \"5 ohm\"", 1)
        .replacen("full_scale = \"600 mV\"", "full_scale = \"3.3 V\"", 1)
        .replacen("rating = \"1 W\"", "rating = \"5 W\"", 1);
    desk.write("bench.toml", &format!("{left}{right}"));
    desk.write("two.json", TWO_MILLIAMPERES);
    let answer = desk.run(&["check", "two.json", "--sink", "right"]);
    expect![[r#"
        two.json:1:1: warning[certificate-absent]: the sink `right` has no certificate: every figure of this run will be nominal, uncalibrated
          1 | {
            | ^
            hint: calibrate the sink before a run whose figures are to decide something

        two.json:12:23: warning[coarse-step]: 2 mA is set in steps of 645 uA by the sink `right`: off by up to half a step
          12 |   "steps": [{ "draw": "2 mA", "for": "1 min" }]
             |                       ^^^^^^
             at /steps/0/draw
             hint: take a sink with a larger sense resistor where this current matters; its code is 3 (1.934 mA nominal); a code counts the converter's steps and is no current: code 16, say, draws 10.313 mA, and that is no error of the circuit

        0 errors, 2 warnings

        ok: "Two milliamperes (invented)" may run on `right` with PSU

          draw 2 mA for 1 min

          duration   about 1 min 0 s, at most 1 min 0 s
          charge     about 33.33 uAh
          energy     about 111.7 uWh
          heat sink  at most 30.02 degC, of 80.00 degC
          junction   at most 30.04 degC, of 150.0 degC
          readbacks  at most 300

          interlock         planned     limit       how near
          over voltage      4.200 V     6.000 V     70 %
          over temperature  30.02 degC  75.00 degC  40 %
          silence           200.0 ms    2.000 s     10 %
          over current      2.000 mA    500.0 mA    0 %
          over power        8.400 mW    4.500 W     0 %

        "About" is reckoned from the data sheet's values alone; `rehearse` knows better.
    "#]].assert_eq(&answer.stdout);
}

/// 2 mA from a sink whose floor is above.
const TWO_MILLIAMPERES: &str = r#"{
  "sequence": 1,
  "title": "Two milliamperes (invented)",
  "dut": {
    "label": "PSU",
    "kind": "supply",
    "voltage_min": "2.5 V",
    "voltage_max": "4.2 V",
    "current_max": "100 mA"
  },
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [{ "draw": "2 mA", "for": "1 min" }]
}
"#;

#[test]
fn a_plan_and_an_envelope_are_drawn_into_files_that_stand_alone() {
    let desk = Desk::new();
    desk.run(&[
        "check",
        "short.json",
        "--sink",
        "left",
        "--plot",
        "plan.svg",
    ])
    .with_code(0);
    desk.run(&["envelope", "--sink", "right", "--plot", "right.svg"])
        .with_code(0);
    for (file, word) in [("plan.svg", "mA"), ("right.svg", "stated current")] {
        let drawn = desk.read(file);
        assert!(drawn.starts_with("<svg xmlns"), "{file}");
        assert!(drawn.contains(word), "{file} says nothing of {word}");
        assert!(!drawn.contains("NaN") && !drawn.contains("href"), "{file}");
    }
    let answer = desk
        .run(&["envelope", "--sink", "left", "--plot", "nowhere/left.svg"])
        .with_code(1);
    assert!(
        answer
            .stderr
            .contains("cannot write the picture nowhere/left.svg")
    );
    assert!(answer.stderr.contains("hint: "));
}

#[test]
fn an_envelope_names_every_limit_and_warns_where_the_data_sheet_says_nothing() {
    let desk = Desk::new();
    let answer = desk
        .run(&["envelope", "--sink", "right", "--voltage", "4.2 V"])
        .with_code(0);
    expect![[r#"
        the largest current of `right`, and the limit that binds:

          source   for ever                 for 10 ms                for 1 s                  for 10 s                 for 5 min
          4.200 V  500.0 mA stated current  500.0 mA stated current  500.0 mA stated current  500.0 mA stated current  500.0 mA stated current

        every limit at 4.200 V, were it alone:

          limit           for ever  for 10 ms  for 1 s   for 10 s  for 5 min
          stated current  500.0 mA  500.0 mA   500.0 mA  500.0 mA  500.0 mA
          converter       599.8 mA  599.8 mA   599.8 mA  599.8 mA  599.8 mA
          sense resistor  997.5 mA  997.5 mA   997.5 mA  997.5 mA  997.5 mA
          stated power    1.190 A   1.190 A    1.190 A   1.190 A   1.190 A
          source          3.802 A   3.802 A    3.802 A   3.802 A   3.802 A
          MOSFET current  10.000 A  10.000 A   10.000 A  10.000 A  10.000 A
          voltage         -         -          -         -         -
          junction        -         -          -         -         -
          heat sink       -         -          -         -         -
          no d.c. line    -         -          -         -         -

          floor              400.0 uA
          step               147.0 uA
          ambient            30.00 degC
          source resistance  0 ohm

        warning: the MOSFET has no d.c. line in its safe operating area: such a part is made for switching and may fail in linear operation well inside its power rating; a quarter of its rated power is allowed, less at high voltage (common practice, no source); give soa_dc from a data sheet that has one, or use another part

        warning: the MOSFET has no Foster network: pulses are allowed no more heat in the junction than a steady current; give foster from the data sheet's transient thermal impedance

        Currents are rounded down. "For" a time is once, out of rest at ambient temperature; repeated pulses
        must fit "for ever" with their mean power, too. It is no protection: it says what a sink in order can do.
    "#]].assert_eq(&answer.stdout);
    let view = desk
        .run(&[
            "envelope",
            "--sink",
            "right",
            "--voltage",
            "500 mV",
            "--for",
            "10 ms",
            "--json",
        ])
        .with_code(0)
        .json();
    let ceiling = &view["voltages"][0]["ceilings"][0];
    assert_eq!(ceiling["binding"], "source");
    assert_eq!(ceiling["for_s"], 0.01);
    assert_eq!(ceiling["limits"].as_array().unwrap().len(), 10);
    let refused = desk
        .run(&["envelope", "--sink", "right", "--voltage", "-1 V"])
        .with_code(2);
    assert!(!refused.stderr.is_empty());
}
