//! A rehearsal ends as the run would, and says how near it came.

use crate::program::{Desk, SHORT};

#[test]
fn a_rehearsal_that_finishes_ends_with_code_0_and_its_margins() {
    let desk = Desk::new();
    let answer = desk
        .run(&["rehearse", "short.json", "--sink", "left"])
        .with_code(0);
    assert!(
        answer.stdout.starts_with("finished after "),
        "{}",
        answer.stdout
    );
    for part in [
        "charge",
        "energy",
        "hottest heat sink",
        "undervoltage",
        "over voltage",
        "%",
    ] {
        assert!(
            answer.stdout.contains(part),
            "no `{part}` in:\n{}",
            answer.stdout
        );
    }
    // The check's warnings, and no bar where stderr is no terminal.
    let (findings, rest) = answer.stderr.split_once("0 errors, 1 warning\n").unwrap();
    assert!(
        findings.contains("warning[certificate-absent]"),
        "{findings}"
    );
    assert_eq!(rest, "");
    assert!(!answer.stderr.contains('\r'), "{:?}", answer.stderr);
}

#[test]
fn twenty_seconds_at_640_milliamperes_deliver_their_charge() {
    let desk = Desk::new();
    let view = desk
        .run(&["rehearse", "short.json", "--sink", "left", "--json"])
        .with_code(0)
        .json();
    assert_eq!(view["ending"]["how"], "finished");
    // 0.2 It of 3.2 Ah for 20 s; the simulated sink sets 0.6 % high and reads 0.9 % low.
    let expected_ah = 0.64 * 20.0 / 3600.0;
    let charge_ah = view["charge_ah"].as_f64().unwrap();
    assert!((charge_ah / expected_ah - 1.0).abs() < 0.02, "{charge_ah}");
    assert!(view["peak_temperature_degc"].as_f64().unwrap() > 20.0);
    assert_eq!(view["check"]["dut"], "K-01");
}

#[test]
fn a_rehearsal_that_trips_ends_with_code_5_and_names_the_interlock() {
    let desk = Desk::new();
    // The cell is emptied first, so that its voltage gives way under the load.
    let source = r#"{"cell": "K-01", "state_of_charge": "1 %"}"#;
    desk.write("empty.json", source);
    let heavy = SHORT.replace(
        "\"0.2 It\", \"for\": \"20 s\"",
        "\"2 A\", \"for\": \"30 min\"",
    );
    desk.write("heavy.json", &heavy);
    let answer = desk
        .run(&[
            "rehearse",
            "heavy.json",
            "--sink",
            "left",
            "--source",
            "empty.json",
        ])
        .with_code(5);
    assert!(
        answer.stdout.starts_with("tripped by undervoltage after "),
        "{}",
        answer.stdout
    );
}

#[test]
fn a_sequence_that_is_refused_is_not_rehearsed() {
    let desk = Desk::new();
    desk.write("bad.json", &SHORT.replace("0.2 It", "9 It"));
    let answer = desk
        .run(&["rehearse", "bad.json", "--sink", "left"])
        .with_code(3);
    assert_eq!(answer.stdout, "");
    assert!(answer.stderr.contains("refused: "), "{}", answer.stderr);
}

#[test]
fn a_real_sink_is_never_touched_its_label_picks_the_simulated_cell() {
    let desk = Desk::new();
    let bench = std::fs::read_to_string(desk.path("bench.toml")).unwrap();
    let (before, rest) = bench.split_once("[sink.link.simulated]").unwrap();
    let (_, after) = rest.split_once("[sink.front_end]").unwrap();
    let real = format!(
        "{before}link.serial = {{ path = \"/dev/no-such-port\" }}\n\n[sink.front_end]{after}"
    );
    desk.write("bench.toml", &real);
    desk.run(&["rehearse", "short.json", "--sink", "left", "--dut", "M-01"])
        .with_code(0);
    let answer = desk
        .run(&["rehearse", "short.json", "--sink", "left", "--dut", "box 7"])
        .with_code(1);
    assert!(
        answer.stderr.contains("hint: give --source"),
        "{}",
        answer.stderr
    );
}
