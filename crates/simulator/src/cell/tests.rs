//! The cell against closed forms, a circuit simulator, and itself at finer steps.

use proptest::prelude::*;
use quantity::{Charge, Temperature, Voltage};

use super::*;

/// A cell of constant parameters and so much capacity that it hardly moves.
fn plain(voltage_v: f64, series_ohm: f64, pairs: &[(f64, f64)], capacity_ah: f64) -> Model {
    Model {
        format: MODEL_FORMAT.to_owned(),
        name: "plain".to_owned(),
        origin: "made for a test".to_owned(),
        rated_capacity: Charge::from_ampere_hours(capacity_ah).unwrap(),
        capacity: Charge::from_ampere_hours(capacity_ah).unwrap(),
        largest_voltage: Voltage::from_volts(4.2).unwrap(),
        cut_off_voltage: Voltage::from_volts(2.5).unwrap(),
        reference_temperature: Temperature::from_degrees_celsius(25.0).unwrap(),
        state_of_charge: vec![0.0, 1.0],
        open_circuit_voltage_v: vec![voltage_v, voltage_v],
        series_resistance_ohm: vec![series_ohm, series_ohm],
        pairs: pairs
            .iter()
            .map(|(ohm, tau)| PairTable {
                resistance_ohm: vec![*ohm, *ohm],
                time_constant_s: vec![*tau, *tau],
            })
            .collect(),
        temperature_effect: TemperatureEffect::default(),
        heat: Heat::default(),
        specimens: std::collections::BTreeMap::new(),
        fit: None,
    }
}

fn full(model: &Model) -> Cell {
    start(model, 1.0, 25.0)
}

fn start(model: &Model, state_of_charge: f64, temperature_degc: f64) -> Cell {
    let start = Start {
        state_of_charge,
        temperature_degc,
        ambient_degc: temperature_degc,
    };
    Cell::new(model, Spread::default(), start).unwrap()
}

// Source: a circuit simulator (ngspice 39) run on tests/data/two-rc-pulse.cir; its ramps of one
// millisecond act as edges half a millisecond later.
#[test]
fn a_pulse_into_two_pairs_follows_a_circuit_simulator() {
    let model = plain(3.7, 0.02, &[(0.015, 3.0), (0.025, 60.0)], 100.0);
    let table = include_str!("../../tests/data/two-rc-pulse.csv");
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_reader(table.as_bytes());
    let mut rows = 0;
    for row in reader.deserialize::<(f64, f64)>() {
        let (time_s, voltage_v) = row.unwrap();
        let mut cell = full(&model);
        let pulse = (time_s - 10.0005).clamp(0.0, 30.0);
        cell.step(0.0, time_s.min(10.0005));
        cell.step(2.0, pulse);
        cell.step(0.0, (time_s - 40.0005).max(0.0));
        let flows = (10.0005..40.0005).contains(&time_s);
        let voltage = cell.terminal_voltage_v(if flows { 2.0 } else { 0.0 });
        assert!((voltage - voltage_v).abs() < 1e-6, "{time_s} s: {voltage}");
        rows += 1;
    }
    assert_eq!(rows, 171);
}

// Source: the closed form of the same circuit, evaluated with numpy.
#[test]
fn a_pulse_into_two_pairs_follows_its_closed_form() {
    let model = plain(3.7, 0.02, &[(0.015, 3.0), (0.025, 60.0)], 100.0);
    let points = [
        (11.0_f64, 3.650_673_5),
        (20.0, 3.623_394_8),
        (39.99, 3.610_333_2),
        (40.01, 3.650_425_9),
        (43.0, 3.670_248_1),
        (60.0, 3.685_865_0),
        (100.0, 3.692_762_5),
        (200.0, 3.698_633),
    ];
    let mut cell = full(&model);
    cell.step(0.0, 10.0005);
    let mut now = 10.0005;
    for (time_s, voltage_v) in points {
        let in_pulse = (time_s.min(40.0005) - now).max(0.0);
        cell.step(2.0, in_pulse);
        cell.step(0.0, time_s - now - in_pulse);
        now = time_s;
        let current = if time_s < 40.0005 { 2.0 } else { 0.0 };
        let voltage = cell.terminal_voltage_v(current);
        assert!((voltage - voltage_v).abs() < 1e-7, "{time_s} s: {voltage}");
    }
}

// Method: IEC 61960-3, d.c. internal resistance by two currents (currents and times from
// memory); figures of the closed form, evaluated with numpy.
#[test]
fn resistance_by_two_currents_is_that_of_the_closed_form() {
    let model = plain(3.9, 0.05, &[(0.02, 0.5), (0.03, 30.0)], 2.5);
    let mut cell = full(&model);
    cell.step(0.5, 10.0);
    let first = cell.terminal_voltage_v(0.5);
    cell.step(2.5, 1.0);
    let second = cell.terminal_voltage_v(2.5);
    assert!((first - 3.860_747_969_679).abs() < 1e-12, "{first}");
    assert!((second - 3.723_841_986_662).abs() < 1e-12, "{second}");
    let resistance = (first - second) / (2.5 - 0.5);
    assert!(
        (resistance - 0.068_452_991_508).abs() < 1e-12,
        "{resistance}"
    );
}

#[test]
fn a_cell_gives_exactly_its_capacity() {
    for model in [type_k(), type_m()] {
        let mut isothermal = model.clone();
        isothermal.heat = Heat::default();
        let mut cell = full(&isothermal);
        let flow = cell.step(0.7, isothermal.capacity.coulombs() / 0.7);
        assert!(cell.state_of_charge().abs() < 1e-10);
        assert!((flow.charge_c - isothermal.capacity.coulombs()).abs() < 1e-6);
    }
}

/// Discharges at a current to the cut-off voltage in steps and says time and energy.
fn discharge(cell: &mut Cell, current_a: f64, cut_off_v: f64, step_s: f64) -> (f64, f64) {
    let (mut time, mut energy) = (0.0, 0.0);
    while cell.terminal_voltage_v(current_a) > cut_off_v {
        energy += cell.step(current_a, step_s).terminal_j;
        time += step_s;
    }
    (time, energy)
}

#[test]
fn the_invented_cells_keep_what_their_types_promise() {
    for (label, capacity_ah, resistance) in [
        ("K-01", 3.2, 0.1),
        ("K-02", 3.2, 0.1),
        ("K-03", 3.2, 0.1),
        ("M-01", 2.6, 0.04),
        ("M-02", 2.6, 0.04),
        ("M-03", 2.6, 0.04),
    ] {
        let found = specimen(label).unwrap();
        let start = Start {
            state_of_charge: 1.0,
            temperature_degc: 23.0,
            ambient_degc: 23.0,
        };
        let mut cell = Cell::new(&found.model, found.spread, start).unwrap();
        let (time, _) = discharge(&mut cell, 0.2 * capacity_ah, 2.5, 1.0);
        let given = 0.2 * capacity_ah * time / 3600.0;
        assert!(
            (capacity_ah..capacity_ah * 1.04).contains(&given),
            "{label}: {given} Ah"
        );
        assert!(
            time >= 300.0 * 60.0,
            "{label} empties at 0.2 It in {time} s"
        );
        assert!(cell.series_resistance_ohm() < resistance);
    }
}

#[test]
fn a_cold_cell_resists_more_and_gives_less() {
    let model = type_k();
    let mut warm = start(&model, 1.0, 25.0);
    let mut cold = start(&model, 1.0, -10.0);
    assert!(cold.series_resistance_ohm() > 1.5 * warm.series_resistance_ohm());
    assert!((cold.capacity_c() / warm.capacity_c() - 0.84).abs() < 1e-12);
    let (warm_s, _) = discharge(&mut warm, 1.6, 2.5, 1.0);
    let (cold_s, _) = discharge(&mut cold, 1.6, 2.5, 1.0);
    assert!(cold_s < 0.9 * warm_s);
    assert!(cold.temperature_degc() > -10.0);
}

#[test]
fn an_over_discharged_cell_collapses() {
    let mut cell = start(&type_m(), 0.0, 25.0);
    cell.step(1.0, 300.0);
    assert!(cell.terminal_voltage_v(0.0) < 1.5);
}

// What the coarse refresh of temperature and time constants costs, against one 250 times finer:
// a twelve-bit converter of 5 V has steps of 1.2 mV.
#[test]
fn the_coarse_refresh_is_far_below_a_converter_step() {
    for model in [type_k(), type_m()] {
        let current = model.rated_capacity.ampere_hours();
        let (mut coarse, mut fine) = (full(&model), full(&model));
        let mut largest: f64 = 0.0;
        for _ in 0..3300 {
            coarse.step(current, 1.0);
            for _ in 0..1000 {
                fine.step(current, 1e-3);
            }
            let apart = coarse.terminal_voltage_v(current) - fine.terminal_voltage_v(current);
            largest = largest.max(apart.abs());
        }
        assert!(largest < 2e-5, "{}: {largest} V", model.name);
    }
}

#[test]
fn a_model_file_reads_back_as_it_was_written() {
    for model in [type_k(), type_m()] {
        assert_eq!(Model::from_json(&model.to_json()).unwrap(), model);
    }
}

#[test]
fn every_specimen_is_known_and_no_other() {
    assert_eq!(
        specimens(),
        ["K-01", "K-02", "K-03", "M-01", "M-02", "M-03"]
    );
    assert_eq!(
        specimen("K-04").unwrap_err().to_string(),
        "there is no cell `K-04`; known are K, M, K-01, K-02, K-03, M-01, M-02, M-03"
    );
}

fn check_refused(change: impl FnOnce(&mut Model), message: &str) {
    let mut model = plain(3.7, 0.02, &[(0.015, 3.0)], 1.0);
    change(&mut model);
    assert_eq!(model.check().unwrap_err().to_string(), message);
}

#[test]
fn an_unsound_model_is_refused_with_the_place_and_the_mend() {
    check_refused(
        |model| model.state_of_charge = vec![0.0, 0.5, 0.5, 1.0],
        "`state_of_charge` has 0.5 at entry 2; make it larger than the entry before",
    );
    check_refused(
        |model| model.state_of_charge = vec![0.1, 1.0],
        "`state_of_charge` has 0.1 at entry 0; begin at 0 and end at 1",
    );
    check_refused(
        |model| model.series_resistance_ohm = vec![0.02],
        "`series_resistance_ohm` has 1 entries; give 2, one for each entry of `state_of_charge`",
    );
    check_refused(
        |model| model.open_circuit_voltage_v = vec![3.7, f64::NAN],
        "`open_circuit_voltage_v` has NaN at entry 1; give a finite number that is not below zero",
    );
    check_refused(
        |model| model.open_circuit_voltage_v = vec![3.7, 3.6],
        "`open_circuit_voltage_v` has 3.6 at entry 1; make it no lower than the entry before",
    );
    check_refused(
        |model| model.pairs[0].time_constant_s[1] = 0.0,
        "`pairs[0].time_constant_s` has 0 at entry 1; give a time constant of at least 0.000001 s",
    );
    check_refused(
        |model| model.capacity = Charge::from_coulombs(0.0).unwrap(),
        "`capacity` is 0; give a finite number above zero",
    );
    check_refused(
        |model| model.format = "another".to_owned(),
        "the cell model's format is `another`; `sinkwarden cell model 1` is read here",
    );
}

#[test]
fn a_misspelt_key_in_a_model_file_is_named() {
    let text = type_k().to_json().replace("\"heat\"", "\"heta\"");
    let message = Model::from_json(&text).unwrap_err().to_string();
    assert!(message.contains("heta"), "{message}");
}

#[test]
fn the_capacity_share_is_straight_between_its_entries_and_level_beyond() {
    let effect = type_k().temperature_effect;
    for (degc, share) in [
        (-40.0, 0.74),
        (-20.0, 0.74),
        (-15.0, 0.79),
        (25.0, 1.0),
        (90.0, 1.01),
    ] {
        assert!((effect.capacity_fraction(degc) - share).abs() < 1e-12);
    }
}

proptest! {
    // However a stretch is cut, the cell ends where it ends and gives what it gives. Heat off:
    // the refresh of temperature is what a cut may move.
    #[test]
    fn one_long_step_and_many_short_ones_agree(
        current in 0.05_f64..6.0, charge in 0.15_f64..1.0, cuts in 2_u32..40,
    ) {
        let mut model = type_m();
        model.heat = Heat::default();
        for pair in &mut model.pairs {
            pair.time_constant_s.fill(7.0);
        }
        let (mut whole, mut cut) = (start(&model, charge, 25.0), start(&model, charge, 25.0));
        let total = whole.step(current, 90.0);
        let mut parts = Flow::default();
        for _ in 0..cuts {
            parts += cut.step(current, 90.0 / f64::from(cuts));
        }
        prop_assert!((total.charge_c - parts.charge_c).abs() < 1e-9);
        prop_assert!((total.terminal_j - parts.terminal_j).abs() < 1e-8);
        let apart = whole.terminal_voltage_v(current) - cut.terminal_voltage_v(current);
        prop_assert!(apart.abs() < 1e-9, "{apart}");
    }

    // What the open-circuit voltage gives is lost inside or comes out.
    #[test]
    fn energy_is_neither_made_nor_lost_in_the_cell(
        steps in prop::collection::vec((0.0_f64..6.0, 0.01_f64..200.0), 1..12),
        charge in 0.3_f64..1.0,
    ) {
        let mut cell = start(&type_k(), charge, 10.0);
        let mut flow = Flow::default();
        for (current, time) in steps {
            flow += cell.step(current, time);
        }
        let open = flow.source_j - flow.inner_j - flow.terminal_j;
        prop_assert!(open.abs() <= 1e-10 * flow.source_j.abs() + 1e-12, "{open}");
    }
}
