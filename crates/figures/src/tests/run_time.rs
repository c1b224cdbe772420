//! Predicted run-times of the river-level logger against full rehearsals to the cut-off on other
//! cells of the type, each predicted from another cell's model.
//!
//! A rehearsal is the whole thing: the logger's own sequence, sequencer, session, line and the
//! firmware's logic before a simulated cell. Cells are a fiftieth of their size, so that a
//! fortnight passes in some hours of virtual time; resistances stay, and with them every voltage.
//!
//! `SEEDS=100 cargo test -p figures run_time -- --nocapture` goes through two hundred cells, a
//! hundred of each type, and prints the counts.

use std::collections::BTreeMap;

use journal::{Body, Entry};
use quantity::{HostTime, SinkTime, Span};
use run::KeeperConfig;
use run::rehearse::rehearse;
use sequence::plan::Plan;
use sequence::{Options, compile};
use sequencer::Sequencer;
use sequencer::event::{Ending, Finding};
use simulator::cell::{Cell, Model, Spread, Start, type_k, type_m};
use simulator::device::SimulatedSink;
use simulator::front_end::Errors;
use simulator::source::Source;
use sink::bench::SinkEntry;
use sink::montecarlo::Random;

use super::bench::right;
use crate::{CellModel, CellSpread, Load, Terms, predict};

const SEQUENCE: &str = include_str!("../../../../sequences/logger-profile-to-cut-off.json");
const CYCLE: &str = include_str!("../../../../sequences/logger-cycle.csv");

/// Cells of each type; more are asked for by `SEEDS`.
const CELLS: u64 = 25;

/// Of two hundred intervals 93 to 97 % are to cover. So few as a test can wait for are given the
/// standard deviations of what chance makes of 95 % that all other figures are given.
const DEVIATIONS: f64 = 2.9;

const SMALLER: f64 = 50.0;

/// Standard deviations between cells, and of a measured capacity.
const CAPACITY: f64 = 0.015;
const RESISTANCE: f64 = 0.05;
const MEASURED: f64 = 0.004;

/// The logger's sequence, its rests cut short: the cells are at rest already.
fn plan(entry: &SinkEntry) -> Plan {
    let text = SEQUENCE
        .replace(r#"{ "rest": "10 min""#, r#"{ "rest": "1 s""#)
        .replace(r#"{ "rest": "30 min""#, r#"{ "rest": "1 s""#);
    let files = BTreeMap::from([("logger-cycle.csv".to_owned(), CYCLE.to_owned())]);
    match compile(&text, entry, &files, &Options::default()) {
        Ok(compiled) => compiled.plan,
        Err(refused) => panic!("{refused}"),
    }
}

fn specimen(random: &mut Random) -> Spread {
    Spread {
        capacity_factor: 1.0 + CAPACITY * random.normal(),
        resistance_factor: 1.0 + RESISTANCE * random.normal(),
    }
}

/// How long a cell carries the load in a rehearsal, hours.
fn ran_h(model: &Model, spread: Spread, entry: &SinkEntry, plan: &Plan) -> f64 {
    let start = Start {
        state_of_charge: 1.0,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    let mut parts = simulator::bench_source::sink_parts(entry).unwrap();
    parts.errors = Errors::default();
    parts.source = Source::Cell(Box::new(Cell::new(model, spread, start).unwrap()));
    let mut device = SimulatedSink::new(parts).unwrap();
    // The profile begins after a rest and ends before one.
    let mut began: Vec<SinkTime> = Vec::new();
    let mut observer = |entry: &Entry| {
        if let Body::Finding(Finding::StepBegan { time, .. }) = entry.body {
            began.push(time);
        }
    };
    let rehearsal = rehearse(
        Sequencer::new(plan.clone()).unwrap(),
        KeeperConfig::for_sink(entry).unwrap(),
        &mut device,
        HostTime::from_micros(1_796_155_200_000_000),
        Span::from_secs(60 * 3600),
        &mut observer,
    )
    .unwrap();
    assert_eq!(rehearsal.ending, Ending::Finished);
    let [_, first, .., last] = began[..] else {
        panic!("{began:?}")
    };
    last.saturating_since(first).seconds() / 3600.0
}

/// The model that a measurement of one cell gives: its tables, its capacity off by what measuring
/// is uncertain by.
fn measured(model: &Model, spread: Spread, random: &mut Random) -> CellModel {
    let mut found = CellModel::from_file(&model.to_json()).unwrap();
    let truth_ah = found.capacity_ah * spread.capacity_factor;
    found.capacity_ah = truth_ah * (1.0 + MEASURED * random.normal());
    found.capacity_standard_uncertainty_ah = truth_ah * MEASURED;
    for point in &mut found.points {
        point.series_resistance_ohm.value *= spread.resistance_factor;
        for pair in &mut point.pairs {
            pair.resistance_ohm.value *= spread.resistance_factor;
        }
    }
    found
}

fn covered(mut model: Model, count: u64, first_seed: u64) -> u64 {
    model.capacity = quantity::Charge::from_coulombs(model.capacity.coulombs() / SMALLER).unwrap();
    let entry = right();
    let plan = plan(&entry);
    let load = Load::of_plan(&plan, None).unwrap();
    let terms = |seed| Terms {
        spread: CellSpread {
            degrees_of_freedom: None,
            ..CellSpread::of_cells(CAPACITY, RESISTANCE, 2)
        },
        warmth: None,
        trials: 400,
        seed,
    };
    let one = |seed: u64| {
        let mut random = Random::from_seed(seed);
        let (known, other) = (specimen(&mut random), specimen(&mut random));
        let found = measured(&model, known, &mut random);
        let predicted = predict(&found, &load, terms(seed)).unwrap();
        let ran = ran_h(&model, other, &entry, &plan);
        let [low, high] = predicted.outcome.symmetric;
        u64::from((low..=high).contains(&ran))
    };
    (0..count).map(|cell| one(first_seed + cell)).sum()
}

#[test]
fn the_loggers_run_time_is_covered_as_claimed_for_both_types() {
    let count = std::env::var("SEEDS").map_or(CELLS, |seeds| seeds.parse().unwrap());
    let (k, m) = std::thread::scope(|scope| {
        let k = scope.spawn(|| covered(type_k(), count, 40_000));
        let m = scope.spawn(|| covered(type_m(), count, 50_000));
        (k.join().unwrap(), m.join().unwrap())
    });
    println!("{k} of {count} of type K, {m} of {count} of type M");
    #[expect(clippy::cast_precision_loss, reason = "some hundred")]
    let (covered, all) = ((k + m) as f64, 2.0 * count as f64);
    let chance = DEVIATIONS * (0.95 * 0.05 * all).sqrt();
    assert!(
        (covered - 0.95 * all).abs() <= chance,
        "{k} of {count} of type K, {m} of {count} of type M"
    );
}
