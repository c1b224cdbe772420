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
    expect![[""]].assert_eq(&answer.stdout);
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
    expect![[""]].assert_eq(&answer.stdout);
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
