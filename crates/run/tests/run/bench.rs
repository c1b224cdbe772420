//! The invented bench `weir`, and how the tests rehearse on it.

use std::collections::BTreeMap;

use journal::Entry;
use quantity::{HostTime, Span};
use run::KeeperConfig;
use run::rehearse::{Rehearsal, rehearse};
use sequence::plan::Plan;
use sequence::{Options, compile};
use sequencer::Sequencer;
use simulator::bench_source::sink_parts;
use simulator::device::{SimulatedSink, SinkParts};
use sink::bench::{Bench, SinkEntry};

/// 2026-12-01T20:00:00Z, when an invented night begins.
pub(crate) const EVENING: HostTime = HostTime::from_micros(1_796_155_200_000_000);

pub(crate) fn sink(name: &str) -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    bench.sink(name).unwrap().clone()
}

pub(crate) fn plan(text: &str, entry: &SinkEntry) -> Plan {
    match compile(text, entry, &BTreeMap::new(), &Options::default()) {
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

/// Rehearses and gives what happened with every entry a record would hold.
pub(crate) fn rehearsed(
    plan: Plan,
    entry: &SinkEntry,
    device: &mut SimulatedSink,
) -> (Rehearsal, Vec<Entry>) {
    let mut entries = Vec::new();
    let rehearsal = rehearse(
        Sequencer::new(plan).unwrap(),
        KeeperConfig::for_sink(entry).unwrap(),
        device,
        EVENING,
        Span::from_secs(48 * 3600),
        &mut |entry: &Entry| entries.push(entry.clone()),
    );
    (rehearsal.unwrap(), entries)
}
