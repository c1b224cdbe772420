//! The overnight discharge: capacity and energy against what the simulated cell truly gave.

use journal::Entry;
use sequencer::event::Ending;
use simulator::device::SimulatedSink;
use wire::Counters;

use crate::bench::{error_free, plan, rehearsed, sink};

const SEQUENCE: &str = include_str!("../../../../sequences/capacity-0.2-it.json");

fn last_counters(entries: &[Entry]) -> Counters {
    let readings = entries.iter().rev().filter_map(Entry::reading);
    readings
        .filter_map(|reading| reading.counters)
        .next()
        .unwrap()
}

#[test]
fn an_overnight_discharge_finishes_and_its_counters_are_the_cells_own_charge() {
    let left = sink("left");
    let mut device = SimulatedSink::new(error_free(&left)).unwrap();
    let (rehearsal, entries) = rehearsed(plan(SEQUENCE, &left), &left, &mut device);
    assert_eq!(rehearsal.ending, Ending::Finished);
    let truth = device.truth();
    for e in entries.iter().filter(|e| e.reading().is_none()) {
        eprintln!("{e:?}");
    }
    eprintln!("{:?}", entries.iter().find_map(Entry::reading));
    let counters = last_counters(&entries);
    eprintln!("{counters:?} {truth:?}");
}
