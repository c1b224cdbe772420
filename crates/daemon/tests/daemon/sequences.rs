use daemon::view::{CheckView, EndingWord, Problem, RehearsalView};
use serde_json::json;

use crate::desk::{Desk, SHORT};

#[test]
fn a_check_says_what_a_sequence_will_do() {
    let desk = Desk::open(1);
    let answer = desk.post_json(
        "/v1/sequences/check",
        &json!({"sequence": SHORT, "sink": "left"}),
    );
    assert_eq!(answer.status, 200, "{answer:?}");
    let check: CheckView = serde_json::from_str(&answer.text).unwrap();
    assert_eq!(check.labels, ["settle", "discharge", "recovery"]);
    assert!((check.duration_at_most_s - 14.0).abs() < 1e-9);
    assert_eq!(check.outline.time_s.len(), check.outline.current_a.len());
}

#[test]
fn a_sequence_is_refused_with_every_finding_in_its_place() {
    let desk = Desk::open(1);
    let wrong = SHORT
        .replace("0.2 It", "5 A")
        .replace("\"2.5 V\", \"for\"", "\"2.9\", \"for\"");
    let answer = desk.post_json(
        "/v1/sequences/check",
        &json!({"sequence": wrong, "sink": "left"}),
    );
    assert_eq!(
        (answer.status, answer.code().as_str()),
        (422, "sequence-refused")
    );
    let problem: Problem = serde_json::from_str(&answer.text).unwrap();
    let lines: Vec<u32> = problem
        .findings
        .iter()
        .filter_map(|finding| finding.place.as_ref().map(|place| place.line))
        .collect();
    assert!(lines.contains(&16), "{:#?}", problem.findings);
    let started = desk.post_json("/v1/runs", &json!({"sequence": wrong, "sink": "left"}));
    let same: Problem = serde_json::from_str(&started.text).unwrap();
    assert_eq!(problem.findings, same.findings);
}

#[test]
fn what_is_no_request_is_told_where() {
    let desk = Desk::open(1);
    let answer = desk.post_json("/v1/sequences/check", &json!({"sink": "left"}));
    assert_eq!(answer.code(), "body-unreadable");
    assert!(answer.text.contains("sequence"), "{answer:?}");
    let answer = desk.post_json(
        "/v1/sequences/check",
        &json!({"sequence": SHORT, "sink": "middle"}),
    );
    assert_eq!(answer.code(), "no-such-sink");
    assert!(answer.text.contains("left, right"), "{answer:?}");
}

#[test]
fn a_rehearsal_tells_how_the_night_will_go() {
    let desk = Desk::open(1);
    let night = include_str!("../../../../sequences/capacity-0.2-it.json");
    let body = json!({"sequence": night, "sink": "left", "points": 200});
    let answer = desk.post_json("/v1/sequences/rehearse", &body);
    assert_eq!(answer.status, 200, "{answer:?}");
    let rehearsal: RehearsalView = serde_json::from_str(&answer.text).unwrap();
    assert_eq!(
        rehearsal.ending.how,
        EndingWord::Finished,
        "{:?}",
        rehearsal.ending
    );
    assert!(
        (2.5..4.0).contains(&rehearsal.charge_ah),
        "{}",
        rehearsal.charge_ah
    );
    let points = rehearsal.curve.time_s.len();
    assert!((100..=200).contains(&points), "{points}");
    assert!(rehearsal.peak_temperature_degc.unwrap() > 23.0);
    println!(
        "a night of {} s took {} s",
        rehearsal.duration_s, rehearsal.took_s
    );
}

#[test]
fn a_rehearsal_takes_another_source_and_refuses_one_that_cannot_be() {
    let desk = Desk::open(1);
    let body =
        |source: serde_json::Value| json!({"sequence": SHORT, "sink": "left", "source": source});
    let weak = json!({"supply": {"voltage": "3.6 V", "output_resistance": "40 mohm", "current_limit": "300 mA"}});
    let answer = desk.post_json("/v1/sequences/rehearse", &body(weak));
    assert_eq!(answer.status, 200, "{answer:?}");
    assert_eq!(answer.json()["ending"]["how"], "tripped", "{answer:?}");
    let answer = desk.post_json("/v1/sequences/rehearse", &body(json!({"cell": "K-77"})));
    assert_eq!(answer.code(), "source-refused");
}
