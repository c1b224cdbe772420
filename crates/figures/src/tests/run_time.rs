//! Predicted run-times of the river-level logger against what other cells of the type then gave:
//! two hundred cells, a hundred of each type, each predicted from another cell's model.
//!
//! Cells are a fiftieth of their size, so that a fortnight passes in hours; resistances stay, and
//! with them every voltage. The cell that runs goes through the load step by step on its own
//! tables, pairs, charge and all.

use simulator::cell::{Cell, Heat, Model, Spread, Start, TemperatureEffect, type_k, type_m};
use sink::montecarlo::Random;

use crate::{CellModel, CellSpread, Load, LoadStep, Terms, predict};

const CELLS: u64 = 100;
const SMALLER: f64 = 50.0;

/// Standard deviations between cells, and of a measured capacity.
const CAPACITY: f64 = 0.015;
const RESISTANCE: f64 = 0.05;
const MEASURED: f64 = 0.004;

const CUT_OFF_V: f64 = 2.75;

/// One minute of the logger: `sequences/logger-cycle.csv`.
fn load() -> Load {
    let step = |seconds, amperes| LoadStep { seconds, amperes };
    let mut cycle = Vec::new();
    for _ in 0..6 {
        cycle.extend([step(8.0, 0.004), step(1.5, 0.035)]);
    }
    cycle.push(step(0.12, 0.42));
    Load {
        cycle,
        cut_off_v: CUT_OFF_V,
    }
}

fn specimen(random: &mut Random) -> Spread {
    Spread {
        capacity_factor: 1.0 + CAPACITY * random.normal(),
        resistance_factor: 1.0 + RESISTANCE * random.normal(),
    }
}

/// How long a cell truly carries the load, hours.
fn ran_h(model: &Model, spread: Spread, load: &Load) -> f64 {
    let start = Start {
        state_of_charge: 1.0,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    let mut cell = Cell::new(model, spread, start).unwrap();
    let mut seconds = 0.0;
    for step in load.cycle.iter().cycle() {
        cell.step(step.amperes, step.seconds);
        seconds += step.seconds;
        if cell.terminal_voltage_v(step.amperes) < CUT_OFF_V {
            break;
        }
    }
    seconds / 3600.0
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

fn covered(mut model: Model, first_seed: u64) -> u64 {
    model.heat = Heat::default();
    model.temperature_effect = TemperatureEffect::default();
    model.capacity = quantity::Charge::from_coulombs(model.capacity.coulombs() / SMALLER).unwrap();
    let load = load();
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
        let ran = ran_h(&model, other, &load);
        let [low, high] = predicted.outcome.symmetric;
        u64::from((low..=high).contains(&ran))
    };
    (0..CELLS).map(|cell| one(first_seed + cell)).sum()
}

#[test]
fn the_loggers_run_time_is_covered_as_claimed_for_both_types() {
    let (k, m) = std::thread::scope(|scope| {
        let k = scope.spawn(|| covered(type_k(), 40_000));
        let m = scope.spawn(|| covered(type_m(), 50_000));
        (k.join().unwrap(), m.join().unwrap())
    });
    // 93 to 97 % of two hundred.
    assert!(
        (186..=194).contains(&(k + m)),
        "{k} of type K, {m} of type M"
    );
}
