use crate::desk::{Desk, SHORT};

#[test]
fn metrics_tell_of_runs_readbacks_and_commits() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let text = desk.get("/metrics").text;
    let value = |name: &str| -> f64 {
        let line = text.lines().find(|line| line.starts_with(name));
        let line = line.unwrap_or_else(|| panic!("no {name} in\n{text}"));
        line.rsplit(' ').next().unwrap().parse().unwrap()
    };
    assert!(value("sinkwarden_readbacks_total{sink=\"left\"}") > 50.0);
    assert!(value("sinkwarden_runs_total{sink=\"left\",ending=\"finished\"}") > 0.5);
    assert!(value("sinkwarden_link_up{sink=\"right\"}") > 0.5);
    assert!(value("sinkwarden_record_commit_seconds_count{sink=\"left\"}") > 0.5);
    assert!(value("sinkwarden_heat_sink_temperature_celsius{sink=\"left\"}") > 20.0);
}

#[test]
fn the_description_names_every_resource() {
    let desk = Desk::open(1);
    let document = desk.get("/v1/openapi.json").json();
    let paths = document["paths"].as_object().unwrap();
    for path in [
        "/v1/sinks/{sink}/off",
        "/v1/runs",
        "/v1/records/{id}/readings",
        "/v1/events",
    ] {
        assert!(paths.contains_key(path), "{path}");
    }
    assert!(document["components"]["schemas"]["SinkView"].is_object());
    let schema = desk.get("/v1/sequence-schema.json").json();
    assert!(
        schema["$schema"]
            .as_str()
            .unwrap()
            .contains("json-schema.org")
    );
}

#[test]
fn every_code_of_a_problem_stands_in_the_documentation() {
    let document = include_str!("../../../../docs/http.md");
    for code in daemon::view::Code::ALL {
        let row = format!("| `{code}` | {} |", code.status());
        assert!(document.contains(&row), "docs/http.md lacks {row}");
    }
}

#[test]
fn what_is_not_there_is_a_problem_too() {
    let desk = Desk::open(1);
    assert_eq!(desk.get("/v1/cells").code(), "no-such-resource");
    let wrong = desk.get("/v1/off");
    assert_eq!(
        (wrong.status, wrong.code().as_str()),
        (405, "method-not-allowed")
    );
    assert!(desk.get("/").media.starts_with("text/html"));
    assert_eq!(desk.get("/health").json()["ok"], true);
}
