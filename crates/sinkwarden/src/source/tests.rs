//! Which source a rehearsal gets.

use sink::bench::Bench;

use super::*;
use crate::bench_file::STARTING;

fn entry(sink: &str) -> SinkEntry {
    Bench::from_toml(STARTING)
        .unwrap()
        .sink(sink)
        .unwrap()
        .clone()
}

fn real(sink: &str) -> SinkEntry {
    let mut entry = entry(sink);
    entry.link = Link::Tcp {
        address: "192.0.2.7:4000".to_owned(),
    };
    entry
}

fn source_of(entry: SinkEntry) -> Value {
    let Link::Simulated { source, .. } = entry.link else {
        panic!("a rehearsal never touches hardware")
    };
    source
}

#[test]
fn a_simulated_sink_keeps_its_own_source_and_the_sequences_label_changes_nothing() {
    let own = source_of(entry("right"));
    let found = simulated(&entry("right"), None, None, "K-01").unwrap();
    assert_eq!(source_of(found), own);
}

#[test]
fn a_known_label_puts_that_cell_in_and_keeps_the_sinks_errors() {
    let own = source_of(entry("right"));
    let found = source_of(simulated(&entry("right"), None, Some("M-02"), "x").unwrap());
    assert_eq!(found["cell"], "M-02");
    assert_eq!(found.get("supply"), None);
    assert_eq!(found["errors"], own["errors"]);
}

#[test]
fn an_unknown_label_leaves_a_simulated_source_alone() {
    let own = source_of(entry("left"));
    let found = simulated(&entry("left"), None, Some("logger 7"), "x").unwrap();
    assert_eq!(source_of(found), own);
}

#[test]
fn a_real_sink_takes_the_cell_of_the_label() {
    let found = source_of(simulated(&real("left"), None, None, "K-03").unwrap());
    assert_eq!(found, json!({"cell": "K-03"}));
}

#[test]
fn a_real_sink_with_an_unknown_device_is_refused_with_the_flag_to_give() {
    let error = simulated(&real("left"), None, None, "logger 7").unwrap_err();
    assert_eq!(
        error.to_string(),
        "sink `left` is a real one, a rehearsal never touches it, and `logger 7` is no simulated cell"
    );
}

#[test]
fn a_source_that_is_neither_a_label_nor_a_file_is_refused() {
    let error = simulated(&entry("left"), Some("K-99"), None, "x").unwrap_err();
    assert!(
        error
            .to_string()
            .starts_with("`K-99` is no simulated cell, and no file"),
        "{error}"
    );
}
