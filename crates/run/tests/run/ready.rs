//! Every ready sequence is checked for its sink and rehearsed to its end.

use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;

use quantity::Span;
use sequencer::event::Ending;
use serde_json::json;
use simulator::cell::{Cell, Model, Spread, Start, specimen};
use simulator::device::{SimulatedSink, SinkParts};
use simulator::source::Source;
use simulator::supply::{Supply, SupplySpec};

use crate::bench::{error_free, plan_with, rehearsed, sink};

const DAY: Span = Span::from_secs(24 * 3600);

fn folder() -> &'static Path {
    Path::new(concat!(env!("CARGO_MANIFEST_DIR"), "/../../sequences"))
}

fn cell(label: &str, state_of_charge: f64) -> Source {
    let found = specimen(label).unwrap();
    let start = Start {
        state_of_charge,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    Source::Cell(Box::new(
        Cell::new(&found.model, found.spread, start).unwrap(),
    ))
}

fn supply(voltage: &str, output_resistance: &str) -> Source {
    let spec = json!({ "voltage": voltage, "output_resistance": output_resistance });
    let spec: SupplySpec = serde_json::from_value(spec).unwrap();
    Source::Supply(Box::new(Supply::new(&spec).unwrap()))
}

fn rehearse(file: &str, name: &str, change: impl FnOnce(&mut SinkParts)) {
    assert_eq!(ending(file, name, change), Ending::Finished, "{file}");
}

fn ending(file: &str, name: &str, change: impl FnOnce(&mut SinkParts)) -> Ending {
    let entry = sink(name);
    let text = std::fs::read_to_string(folder().join(file)).unwrap();
    let mut files = BTreeMap::new();
    let cycle = std::fs::read_to_string(folder().join("logger-cycle.csv")).unwrap();
    files.insert("logger-cycle.csv".to_owned(), cycle);
    let plan = plan_with(&text, &files, &entry);
    let mut parts = error_free(&entry);
    change(&mut parts);
    let mut device = SimulatedSink::new(parts).unwrap();
    let (rehearsal, _) = rehearsed(plan, &entry, &mut device, DAY);
    rehearsal.ending
}

/// The rehearsed files, so that none is forgotten.
const REHEARSED: [&str; 9] = [
    "capacity-0.2-it.json",
    "dc-resistance-two-currents.json",
    "logger-profile-to-cut-off.json",
    "primary-cell-application.json",
    "pulses-at-ten-states-of-charge.json",
    "regulator-heat-soak.json",
    "supply-current-limit-knee.json",
    "supply-load-sweep.json",
    "supply-transmit-pulses.json",
];

#[test]
fn no_ready_sequence_is_left_out() {
    let files = std::fs::read_dir(folder()).unwrap();
    let names: BTreeSet<String> = files
        .map(|file| file.unwrap().file_name().into_string().unwrap())
        .filter(|name| {
            Path::new(name)
                .extension()
                .is_some_and(|kind| kind == "json")
        })
        .collect();
    assert_eq!(names, REHEARSED.map(str::to_owned).into());
}

#[test]
fn the_sequences_for_the_supply_finish() {
    for file in [
        "regulator-heat-soak.json",
        "supply-load-sweep.json",
        "supply-transmit-pulses.json",
    ] {
        rehearse(file, "right", |_| {});
    }
    // One that folds back, as the bench has it, and one that gives way softly.
    rehearse("supply-current-limit-knee.json", "right", |_| {});
    rehearse("supply-current-limit-knee.json", "right", |parts| {
        parts.source = supply("3.3 V", "4 ohm");
    });
}

#[test]
fn the_sequences_for_cells_finish() {
    rehearse("capacity-0.2-it.json", "left", |_| {});
    rehearse("dc-resistance-two-currents.json", "left", |parts| {
        parts.source = cell("M-01", 1.0);
    });
    rehearse("pulses-at-ten-states-of-charge.json", "left", |parts| {
        parts.source = cell("M-02", 1.0);
    });
    // From the last few per cent on: the whole takes two weeks.
    rehearse("logger-profile-to-cut-off.json", "right", |parts| {
        parts.source = cell("K-02", 0.04);
    });
}

#[test]
fn the_application_test_finishes_on_the_primary_cell_beside_it() {
    // From the last hundredths on: the whole takes weeks.
    let text = std::fs::read_to_string(folder().join("sources/primary-cell.json")).unwrap();
    let source: serde_json::Value = serde_json::from_str(&text).unwrap();
    let model = Model::from_json(&source["model"].to_string()).unwrap();
    rehearse("primary-cell-application.json", "right", |parts| {
        let start = Start {
            state_of_charge: 0.06,
            temperature_degc: 20.0,
            ambient_degc: 20.0,
        };
        let cell = Cell::new(&model, Spread::default(), start).unwrap();
        parts.source = Source::Cell(Box::new(cell));
    });
}
