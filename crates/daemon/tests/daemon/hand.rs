use daemon::view::{EndingWord, RunState, RunView};
use serde_json::{Value, json};

use crate::desk::{Desk, SHORT};
use crate::runs::long;

/// Five seconds on a sink that is five times as fast: one second of a script's.
const FACTOR: u32 = 5;

pub(crate) fn request() -> Value {
    json!({
        "sink": "left",
        "dut": { "label": "K-01", "kind": "cell", "rated_capacity": "3.2 Ah",
                 "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "6.4 A" },
        "interlocks": { "undervoltage": { "below": "2.75 V", "for": "0 s" } },
        "interval": "5 s",
        "readback": "200 ms",
    })
}

fn begin(desk: &Desk, request: &Value) -> RunView {
    let answer = desk.post_json("/v1/runs/by-hand", request);
    assert_eq!(answer.status, 201, "{answer:?}");
    let run: RunView = serde_json::from_str(&answer.text).unwrap();
    assert_eq!(answer.location, Some(format!("/v1/runs/{}", run.id)));
    run
}

fn draws(run: &RunView, current_a: f64) -> bool {
    let reading = run.reading.as_ref();
    reading.is_some_and(|reading| (reading.current_a - current_a).abs() < 0.03)
}

#[test]
fn a_setpoint_is_held_as_long_as_it_is_asked_for_and_no_longer() {
    let desk = Desk::open(FACTOR);
    let run = begin(&desk, &request());
    let path = format!("/v1/runs/{}", run.id);
    let set = desk.post_json(
        &format!("{path}/setpoint"),
        &json!({ "setpoint": "500 mA" }),
    );
    assert_eq!(set.status, 200, "{set:?}");
    assert_eq!(
        set.json()["by_hand"],
        json!({ "setpoint_a": 0.5, "interval_s": 5.0 })
    );
    // Far beyond one interval, as long as it is renewed.
    let held = std::cell::Cell::new(0);
    desk.wait_for("20 s at 500 mA", |desk| {
        assert_eq!(desk.post(&format!("{path}/renew")).status, 200);
        held.set(held.get() + u32::from(draws(&desk.run(run.id), 0.5)));
        desk.run(run.id).elapsed_s > 20.0
    });
    assert!(held.get() > 20, "{held:?}");
    let again = desk.post_json(&format!("{path}/setpoint"), &json!({ "setpoint": "1 A" }));
    assert_eq!(again.status, 200, "{again:?}");
    let asked_s = again.json()["elapsed_s"].as_f64().unwrap();
    desk.wait_for_run(run.id, "1 A", |run| draws(run, 1.0));

    let ended = desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let ending = ended.ending.unwrap();
    assert_eq!(ending.how, EndingWord::Stopped);
    assert!(ending.reason.unwrap().contains("not asked for again"));
    // The interval, and the readback that shows it is over.
    assert!(
        (4.0..6.0).contains(&(ended.elapsed_s - asked_s)),
        "{}",
        ended.elapsed_s - asked_s
    );
    let late = desk.post(&format!("{path}/renew"));
    assert_eq!((late.status, late.code().as_str()), (409, "not-running"));
    assert!(
        late.json()["detail"]
            .as_str()
            .unwrap()
            .contains("not asked for again")
    );

    // A record like any other.
    let verified = desk.get(&format!("/v1/records/{}/verify", run.id)).json();
    assert_eq!(verified["intact"], true, "{verified}");
    let manifest = desk.get(&format!("/v1/records/{}", run.id)).json();
    assert_eq!(manifest["manifest"]["plan"]["by_hand"], true);
    assert_eq!(
        desk.get(&format!("/v1/records/{}/figures", run.id)).status,
        200
    );
    // No latch: nothing was wrong with the sink.
    desk.start(SHORT);
}

#[test]
fn a_setpoint_is_put_to_the_check_like_a_step() {
    let desk = Desk::open(FACTOR);
    let above = json!({ "setpoint": "8 A" });
    let mut wrong = request();
    wrong["setpoint"] = json!("8 A");
    let refused = desk.post_json("/v1/runs/by-hand", &wrong);
    assert_eq!(
        (refused.status, refused.code().as_str()),
        (422, "sequence-refused")
    );
    assert!(!refused.json()["findings"].as_array().unwrap().is_empty());
    assert!(
        desk.get("/v1/records").json()["records"]
            .as_array()
            .unwrap()
            .is_empty()
    );

    let run = begin(&desk, &request());
    let path = format!("/v1/runs/{}/setpoint", run.id);
    let refused = desk.post_json(&path, &above);
    assert_eq!(
        (refused.status, refused.code().as_str()),
        (422, "sequence-refused")
    );
    let bare = desk.post_json(&path, &json!({ "setpoint": 0.5 }));
    assert_eq!(
        (bare.status, bare.code().as_str()),
        (400, "body-unreadable")
    );
    let short = desk.post_json(&path, &json!({ "interval": "100 ms" }));
    assert_eq!(
        (short.status, short.code().as_str()),
        (422, "interval-refused")
    );
    // Refused is not ended.
    assert_eq!(desk.post_json(&path, &json!({})).status, 200);
    let hold = desk.post(&format!("/v1/runs/{}/hold", run.id));
    assert_eq!((hold.status, hold.code().as_str()), (409, "not-running"));
}

#[test]
fn off_ends_a_run_by_hand() {
    let desk = Desk::open(FACTOR);
    let mut with = request();
    with["setpoint"] = json!("1 A");
    let run = begin(&desk, &with);
    desk.wait_for_run(run.id, "1 A", |run| draws(run, 1.0));
    assert_eq!(desk.post("/v1/sinks/left/off").json()["acknowledged"], true);
    let run = desk.wait_for_run(run.id, "the end", |run| run.state == RunState::Ended);
    let ending = run.ending.unwrap();
    assert_eq!(ending.how, EndingWord::Stopped);
    assert_eq!(ending.reason.as_deref(), Some("off was asked for"));
}

#[test]
fn interlocks_hold_in_a_run_by_hand() {
    let desk = Desk::open(FACTOR);
    let mut with = request();
    // A full cell sags by more than that under 3 A.
    with["interlocks"]["undervoltage"]["below"] = json!("4.05 V");
    with["dut"]["voltage_min"] = json!("2.5 V");
    let run = begin(&desk, &with);
    let set = json!({ "setpoint": "2.9 A" });
    let answer = desk.post_json(&format!("/v1/runs/{}/setpoint", run.id), &set);
    assert_eq!(answer.status, 200, "{answer:?}");
    let run = desk.wait_for_run(run.id, "the trip", |run| run.state == RunState::Ended);
    let ending = run.ending.unwrap();
    assert_eq!(ending.how, EndingWord::Tripped);
    assert_eq!(
        serde_json::to_value(ending.interlock).unwrap(),
        "undervoltage"
    );
    assert_eq!(
        desk.post_json("/v1/runs/by-hand", &request()).code(),
        "sink-latched"
    );
}

#[test]
fn a_run_of_a_sequence_takes_no_setpoint_and_a_busy_sink_no_hand() {
    let desk = Desk::open(50);
    let run = desk.start(&long());
    let set = desk.post_json(&format!("/v1/runs/{}/setpoint", run.id), &json!({}));
    assert_eq!((set.status, set.code().as_str()), (409, "not-by-hand"));
    let hand = desk.post_json("/v1/runs/by-hand", &request());
    assert_eq!((hand.status, hand.code().as_str()), (409, "sink-busy"));
}

#[test]
fn a_repeated_request_begins_one_run_by_hand() {
    let desk = Desk::open(FACTOR);
    let key = [
        ("Content-Type", "application/json"),
        ("Idempotency-Key", "hand 1"),
    ];
    let body = request().to_string();
    let first = desk.ask("POST", "/v1/runs/by-hand", &key, Some(&body));
    let again = desk.ask("POST", "/v1/runs/by-hand", &key, Some(&body));
    assert_eq!((first.status, again.status), (201, 200), "{again:?}");
    assert_eq!(first.json()["id"], again.json()["id"]);
}
