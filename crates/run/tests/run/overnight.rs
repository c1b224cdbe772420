//! The overnight discharge: what the counters say against what the simulated cell truly gave.

use journal::Entry;
use quantity::Span;
use sequencer::event::Ending;
use simulator::device::SimulatedSink;
use wire::Counters;

use crate::bench::{error_free, plan, rehearsed, sink};

const SEQUENCE: &str = include_str!("../../../../sequences/capacity-0.2-it.json");

fn last_counters(entries: &[Entry]) -> Counters {
    let mut readings = entries.iter().rev().filter_map(Entry::reading);
    readings.find_map(|reading| reading.counters).unwrap()
}

#[test]
fn an_overnight_discharge_finishes_and_its_counters_are_the_cells_own_charge() {
    let left = sink("left");
    let mut device = SimulatedSink::new(error_free(&left)).unwrap();
    let night = Span::from_secs(12 * 3600);
    let (rehearsal, entries) = rehearsed(plan(SEQUENCE, &left), &left, &mut device, night);
    assert_eq!(rehearsal.ending, Ending::Finished);
    assert_eq!(rehearsal.entries, entries.len() as u64);
    let truth = device.truth();
    let counters = last_counters(&entries);
    // The converter shows a current of 640 mA to half a code of 3.3 A / 4096, a voltage of 3.6 V
    // to half a code of 9.9 V / 4096: that share of the charge and energy is all they may err by.
    let charge = counters.charge.coulombs();
    let half_code = 0.5 * 3.3 / 4096.0 / 0.64;
    assert!(
        (charge / truth.charge_c - 1.0).abs() < half_code,
        "{charge} C counted, {} C given",
        truth.charge_c
    );
    let energy = counters.energy.joules();
    let both = half_code + 0.5 * 9.9 / 4096.0 / 2.75;
    assert!(
        (energy / truth.terminal_j - 1.0).abs() < both,
        "{energy} J counted, {} J given",
        truth.terminal_j
    );
    // The cell's rated capacity is 3.2 Ah; the specimen may differ by a few per cent.
    assert!((10_500.0..=12_500.0).contains(&truth.charge_c));
    // What the run accounts is what the last counters say.
    let accounted = rehearsal.status.charge.coulombs();
    assert!(
        (accounted - charge).abs() < 0.64 * 0.2 + 1e-6,
        "{accounted}"
    );
}
