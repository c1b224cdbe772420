//! The invented bench `weir`, and how the tests rehearse on it.

use std::collections::BTreeMap;
use std::sync::Arc;

use journal::Entry;
use quantity::{HostTime, Span};
use run::KeeperConfig;
use run::rehearse::{Rehearsal, rehearse};
use sequence::plan::Plan;
use sequence::{Options, compile};
use sequencer::Sequencer;
use serde_json::{Value, json};
use simulator::bench_source::sink_parts;
use simulator::device::{SimulatedSink, SinkParts};
use simulator::source::Source;
use simulator::supply::{Supply, SupplySpec};
use sink::bench::{Bench, SinkEntry};

use crate::stack::replays;

/// 2026-12-01T20:00:00Z, when an invented night begins.
pub(crate) const EVENING: HostTime = HostTime::from_micros(1_796_155_200_000_000);

pub(crate) fn sink(name: &str) -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    bench.sink(name).unwrap().clone()
}

pub(crate) fn plan(text: &str, entry: &SinkEntry) -> Plan {
    plan_with(text, &BTreeMap::new(), entry)
}

pub(crate) fn plan_with(text: &str, files: &BTreeMap<String, String>, entry: &SinkEntry) -> Plan {
    match compile(text, entry, files, &Options::default()) {
        Ok(compiled) => compiled.plan,
        Err(refused) => panic!("{refused}"),
    }
}

/// The parts of a simulated sink without any error, as the bench file describes it.
pub(crate) fn error_free(entry: &SinkEntry) -> SinkParts {
    let mut parts = sink_parts(entry).unwrap();
    parts.errors = simulator::front_end::Errors::default();
    parts
}

/// The same, drawing from an invented supply of 3.5 V over leads of 1 ohm, which keep the
/// current of a gate out of control within what the converter shows.
pub(crate) fn on_a_supply(entry: &SinkEntry) -> SinkParts {
    let mut parts = error_free(entry);
    let spec: SupplySpec =
        serde_json::from_value(json!({"voltage": "3.5 V", "output_resistance": "40 mohm"}))
            .unwrap();
    parts.source = Source::Supply(Box::new(Supply::new(&spec).unwrap()));
    parts.path.lead_ohm = 1.0;
    parts
}

/// A sequence for that supply with these steps, and with `more` written over its head.
pub(crate) fn supply_sequence(readback: &str, steps: &Value, more: &Value) -> String {
    let mut sequence = json!({
        "sequence": 1,
        "title": "A supply under test (invented)",
        "dut": {
            "label": "bench supply",
            "kind": "supply",
            "voltage_min": "3 V",
            "voltage_max": "3.6 V",
            "current_max": "2 A"
        },
        "readback": readback,
        "interlocks": { "undervoltage": { "below": "3 V" } },
        "steps": steps
    });
    for (key, value) in more.as_object().into_iter().flatten() {
        match (sequence.get_mut(key), value) {
            (Some(Value::Object(old)), Value::Object(new)) => {
                old.extend(new.iter().map(|(key, value)| (key.clone(), value.clone())));
            }
            _ => sequence[key] = value.clone(),
        }
    }
    sequence.to_string()
}

/// Rehearses and gives what happened with every entry a record would hold, which replays.
pub(crate) fn rehearsed(
    plan: Plan,
    entry: &SinkEntry,
    device: &mut SimulatedSink,
    at_most: Span,
) -> (Rehearsal, Vec<Entry>) {
    let mut entries = Vec::new();
    let plan = Arc::new(plan);
    let rehearsal = rehearse(
        Sequencer::new(Arc::clone(&plan)).unwrap(),
        KeeperConfig::for_sink(entry).unwrap(),
        device,
        EVENING,
        at_most,
        &mut |entry: &Entry| entries.push(entry.clone()),
    )
    .unwrap();
    replays(&plan, &entries, &rehearsal.ending);
    (rehearsal, entries)
}
