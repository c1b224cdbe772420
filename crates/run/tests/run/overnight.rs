//! The overnight discharge: capacity and energy against what the simulated cell truly gave.

use sequencer::event::Ending;
use simulator::device::SimulatedSink;

use crate::bench::{error_free, plan, rehearsed, sink};

const SEQUENCE: &str = include_str!("../../../../sequences/capacity-0.2-it.json");

#[test]
fn an_overnight_discharge_finishes_and_its_counters_are_the_cells_own_charge() {
    let left = sink("left");
    let mut device = SimulatedSink::new(error_free(&left)).unwrap();
    let (rehearsal, entries) = rehearsed(plan(SEQUENCE, &left), &left, &mut device);
    assert_eq!(rehearsal.ending, Ending::Finished);
    let truth = device.truth();
    eprintln!("{rehearsal:#?} {} entries, truth {truth:?}", entries.len());
}
