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
        ok: "Half a minute (invented)" may run on `left` with K-02

          instructions  3: discharge
          duration      about 30.00 s, at most 30.00 s
          charge        about 3.556 mAh
          energy        about 11.91 mWh
          readbacks     at most 300

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
    expect![[""]].assert_eq(&answer.stdout);
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
    expect![[""]].assert_eq(&answer.stdout);
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
