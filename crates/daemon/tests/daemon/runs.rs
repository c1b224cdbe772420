use daemon::Config;
use daemon::view::{EndingWord, RunState};
use serde_json::{Value, json};

use crate::desk::{Desk, SHORT};

/// The short sequence with a discharge of six hours.
pub(crate) fn long() -> String {
    SHORT.replace("\"for\": \"10 s\"", "\"for\": \"6 h\"")
}

/// The same, to be gone on with after an interruption.
pub(crate) fn long_resuming() -> String {
    long().replace(
        "\"readback\"",
        "\"on_interruption\": \"resume\",\n  \"readback\"",
    )
}

#[test]
fn a_run_goes_from_its_start_to_its_sealed_record() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    assert_eq!((run.sink.as_str(), run.dut.as_str()), ("left", "K-01"));
    let run = desk.wait_for_run(run.id, "the record to be sealed", |run| run.sealed);
    assert_eq!(run.state, RunState::Ended);
    let ending = run.ending.unwrap();
    assert_eq!(ending.how, EndingWord::Finished, "{ending:?}");
    // 10 s at 0.64 A; the sink is uncalibrated, so within its few percent.
    let expected_ah = 0.64 * 10.0 / 3600.0;
    assert!(
        (run.charge_ah - expected_ah).abs() < 0.03 * expected_ah,
        "{}",
        run.charge_ah
    );
    assert!(
        run.margins
            .windows(2)
            .all(|pair| pair[0].nearness >= pair[1].nearness)
    );

    let verified = desk.get(&format!("/v1/records/{}/verify", run.id)).json();
    assert_eq!(verified["intact"], true, "{verified}");
    assert_eq!(
        desk.get("/v1/runs").json()["runs"][0]["id"],
        run.id.to_string()
    );
}

#[test]
fn a_second_run_on_a_busy_sink_is_refused_and_leaves_no_record() {
    let desk = Desk::open(20);
    let first = desk.start(&long());
    let body = json!({"sequence": SHORT, "sink": "left"});
    let second = desk.post_json("/v1/runs", &body);
    assert_eq!((second.status, second.code().as_str()), (409, "sink-busy"));
    let records = desk.get("/v1/records").json();
    assert_eq!(records["records"].as_array().unwrap().len(), 1, "{records}");
    let stopped = desk.post(&format!("/v1/runs/{}/stop", first.id));
    assert_eq!(stopped.status, 200, "{stopped:?}");
    let first = desk.wait_for_run(first.id, "the run to end", |run| {
        run.state == RunState::Ended
    });
    assert_eq!(first.ending.unwrap().how, EndingWord::Stopped);
    desk.start(SHORT);
}

#[test]
fn a_run_is_held_and_goes_on() {
    let desk = Desk::open(50);
    let run = desk.start(&long());
    let drawing = |run: &daemon::view::RunView| {
        run.step
            .as_ref()
            .is_some_and(|step| step.label.as_deref() == Some("discharge"))
    };
    desk.wait_for_run(run.id, "the discharge", drawing);
    assert_eq!(desk.post(&format!("/v1/runs/{}/hold", run.id)).status, 200);
    let held = desk.wait_for_run(run.id, "the hold", |run| run.state == RunState::Held);
    assert_eq!(
        desk.post(&format!("/v1/runs/{}/hold", run.id)).code(),
        "not-running"
    );
    assert!(held.setpoint_a.is_none());
    assert_eq!(
        desk.post(&format!("/v1/runs/{}/continue", run.id)).status,
        200
    );
    desk.wait_for_run(run.id, "the discharge to go on", |run| {
        run.state == RunState::Running && run.charge_ah > held.charge_ah
    });
}

#[test]
fn a_repeated_request_with_the_same_key_starts_nothing_twice() {
    let desk = Desk::open(50);
    let body = json!({"sequence": SHORT, "sink": "left"}).to_string();
    let key = [
        ("Content-Type", "application/json"),
        ("Idempotency-Key", "night 1"),
    ];
    let first = desk.ask("POST", "/v1/runs", &key, Some(&body));
    assert_eq!(first.status, 201, "{first:?}");
    let again = desk.ask("POST", "/v1/runs", &key, Some(&body));
    assert_eq!(again.status, 200, "{again:?}");
    assert_eq!(first.json()["id"], again.json()["id"]);
    assert_eq!(first.location, again.location);
    let other = json!({"sequence": long(), "sink": "left"}).to_string();
    let reused = desk.ask("POST", "/v1/runs", &key, Some(&other));
    assert_eq!((reused.status, reused.code().as_str()), (422, "key-reused"));

    let id = first.json()["id"].as_str().unwrap().to_owned();
    desk.wait_for_run(&id, "the record", |run| run.sealed);
    let desk = Desk::open_in(desk.close(), 50, |_| {});
    let later = desk.ask("POST", "/v1/runs", &key, Some(&body));
    assert_eq!(later.status, 303, "{later:?}");
    assert_eq!(later.location, Some(format!("/v1/records/{id}")));
    let records = desk.get("/v1/records").json();
    assert_eq!(records["records"].as_array().unwrap().len(), 1);
}

#[test]
fn a_run_that_is_not_there_is_told_from_one_that_has_ended() {
    let desk = Desk::open(50);
    assert_eq!(desk.get("/v1/runs/night").code(), "no-such-run");
    let missing = "/v1/runs/019ad6ac-1c00-7abc-8def-9f3ac1d2e4b5";
    assert_eq!(desk.get(missing).code(), "no-such-run");
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the end", |run| run.state == RunState::Ended);
    let late = desk.post(&format!("/v1/runs/{}/stop", run.id));
    assert_eq!((late.status, late.code().as_str()), (409, "not-running"));
}

#[test]
fn a_disk_that_runs_out_trips_the_run() {
    let desk = Desk::open_with(50, |config| {
        // More than any disk has free.
        config.bench.sinks[0].interlocks.record.free_space_mb = u64::MAX;
    });
    let run = desk.start(&long());
    let run = desk.wait_for_run(run.id, "the end", |run| run.state == RunState::Ended);
    let ending = run.ending.unwrap();
    assert_eq!(ending.how, EndingWord::Tripped);
    assert_eq!(serde_json::to_value(ending.interlock).unwrap(), "record");
    // There is still room to write that down.
    desk.wait_for_run(run.id, "the seal", |run| run.sealed);

    // Latched until reset.
    let body = json!({"sequence": SHORT, "sink": "left"});
    let again = desk.post_json("/v1/runs", &body);
    assert_eq!((again.status, again.code().as_str()), (409, "sink-latched"));
    assert_eq!(desk.get("/v1/sinks/left").json()["latched_by"], "record");
    assert_eq!(desk.post("/v1/sinks/left/reset").status, 200);
    desk.wait_for("the reset to show", |desk| {
        desk.get("/v1/sinks/left").json()["latched_by"].is_null()
    });
    desk.start(SHORT);
}

#[test]
fn a_latch_and_its_reset_outlive_the_daemon() {
    let starve = |config: &mut Config| {
        config.bench.sinks[0].interlocks.record.free_space_mb = u64::MAX;
    };
    let latched_by = |desk: &Desk| desk.get("/v1/sinks/left").json()["latched_by"].clone();
    let desk = Desk::open_with(50, starve);
    let run = desk.start(&long());
    desk.wait_for_run(run.id, "the seal", |run| run.sealed);

    let desk = Desk::open_in(desk.close(), 50, starve);
    assert_eq!(latched_by(&desk), "record");
    let body = json!({"sequence": SHORT, "sink": "left"});
    let refused = desk.post_json("/v1/runs", &body);
    assert_eq!(refused.code(), "sink-latched");
    assert_eq!(desk.post("/v1/sinks/left/reset").status, 200);

    let desk = Desk::open_in(desk.close(), 50, starve);
    assert_eq!(latched_by(&desk), Value::Null);
}

#[test]
fn figures_are_worked_out_from_the_record_and_kept_beside_it() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let path = format!("/v1/records/{}/figures", run.id);
    desk.wait_for("the figures", |desk| desk.get(&path).status == 200);
    let view = desk.get(&path).json();
    assert_eq!(view["figures"]["record"], run.id.to_string());
    assert!(!view["figures"]["figures"].as_array().unwrap().is_empty());
    let file = desk.records().join(&run.record).join("figures.json");
    desk.wait_for("figures.json", |_| file.exists());
}

#[test]
fn a_report_is_a_page_and_groups_of_records_are_compared() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let report = desk.get(&format!("/v1/records/{}/report", run.id));
    assert_eq!(report.status, 200, "{report:?}");
    assert!(report.text.starts_with("<!DOCTYPE html>"));
    assert!(report.text.contains(&run.id.to_string()));

    let groups = format!("/v1/comparison?groups=K:{0};L:{0},{0}", run.id);
    let compared = desk.get(&groups).json();
    let figures = compared["comparison"]["figures"].as_array().unwrap();
    let charge = figures
        .iter()
        .find(|figure| figure["name"] == "delivered_charge")
        .unwrap();
    assert_eq!(charge["groups"].as_array().unwrap().len(), 2);
    // Discharges that no cut-off ended have no exponent.
    assert!(compared["peukert"].as_array().unwrap().is_empty());
    let none = desk.get("/v1/comparison?groups=K");
    assert_eq!(none.code(), "query-unreadable");
}
