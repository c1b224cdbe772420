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
