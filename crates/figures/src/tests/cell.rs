//! A cell model fitted from the pulses of a night, against the model the night was simulated on.

use simulator::cell::{Heat, Model, TemperatureEffect, type_m};

use super::bench::{Setup, exact};
use crate::cell_fit::{Mean, Pulse};
use crate::{CellModel, work_out};

const SEQUENCE: &str = include_str!("../../../../sequences/pulses-at-ten-states-of-charge.json");

/// Type M at its reference temperature for ever, so that its tables are the truth.
fn truth() -> Model {
    let mut model = type_m();
    model.heat = Heat::default();
    model.temperature_effect = TemperatureEffect::default();
    model.reference_temperature = quantity::Temperature::from_whole_degrees_celsius(23);
    model
}

fn fitted(model: &Model) -> CellModel {
    let night = Setup::on_cell(SEQUENCE, &exact(), model, 1.0).night();
    let figures = work_out(&night.record).unwrap();
    figures.cell_model.unwrap()
}

fn at(table: &[f64], model: &Model, state_of_charge: f64) -> f64 {
    let states = &model.state_of_charge;
    let next = states
        .partition_point(|state| *state < state_of_charge)
        .clamp(1, states.len() - 1);
    let share = (state_of_charge - states[next - 1]) / (states[next] - states[next - 1]);
    table[next - 1] + share * (table[next] - table[next - 1])
}

#[test]
fn the_model_of_a_night_is_the_one_it_was_simulated_on() {
    let model = truth();
    let found = fitted(&model);
    assert_eq!(found.points.len(), 10, "{:?}", found.notes);
    let capacity_ah = model.capacity.coulombs() / 3600.0;
    for point in &found.points {
        let state = 1.0 - point.delivered_ah / capacity_ah;
        let voltage = at(&model.open_circuit_voltage_v, &model, state);
        // The rests end when the voltage moves less than 1 mV in ten minutes.
        assert!(
            (point.open_circuit_voltage_v.value - voltage).abs() < 1e-3,
            "at {state}: {} V, truth {voltage} V",
            point.open_circuit_voltage_v.value
        );
        // In the pulse the state of charge falls by a little.
        let series = at(&model.series_resistance_ohm, &model, state - 0.0014);
        let value = point.series_resistance_ohm.value;
        assert!(
            (value / series - 1.0).abs() < 0.02,
            "at {state}: R0 = {value} ohm, truth {series} ohm"
        );
        assert_eq!(point.pairs.len(), 2, "{:?}", point.no_second_pair);
        for (pair, table) in point.pairs.iter().zip(&model.pairs) {
            let resistance = at(&table.resistance_ohm, &model, state - 0.0014);
            let value = pair.resistance_ohm.value;
            assert!(
                (value / resistance - 1.0).abs() < 0.06,
                "at {state}: R = {value} ohm, truth {resistance} ohm"
            );
            let seconds = at(&table.time_constant_s, &model, state - 0.0014);
            let value = pair.time_constant_s.value;
            assert!(
                (value / seconds - 1.0).abs() < 0.1,
                "at {state}: {value} s, truth {seconds} s"
            );
        }
    }
    assert!(found.residual_rms_v < 100e-6, "{} V", found.residual_rms_v);
}

#[test]
fn the_models_file_can_be_rehearsed_on_and_fits_to_itself() {
    let found = fitted(&truth());
    let text = found.file.to_string();
    let loaded = Model::from_json(&text).unwrap();
    assert_eq!(loaded.pairs.len(), 2);
    // Between and beyond the pulses stands what the slow discharges told.
    assert!(loaded.state_of_charge.len() > 100);
    let again = fitted(&loaded);
    for (one, other) in found.points.iter().zip(&again.points) {
        let (before, after) = (
            one.open_circuit_voltage_v.value,
            other.open_circuit_voltage_v.value,
        );
        assert!((before - after).abs() < 1e-3, "{before} V and {after} V");
        let (before, after) = (
            one.series_resistance_ohm.value,
            other.series_resistance_ohm.value,
        );
        assert!(
            (before / after - 1.0).abs() < 0.02,
            "{before} and {after} ohm"
        );
    }
}

#[test]
fn a_cell_with_one_pair_is_not_given_a_second() {
    let mut model = truth();
    model.pairs.truncate(1);
    let found = fitted(&model);
    let told = found
        .points
        .iter()
        .filter(|point| point.no_second_pair.is_none())
        .count();
    assert_eq!(told, 0, "{:#?}", found.points);
    assert!(found.points.iter().all(|point| point.pairs.len() == 1));
    assert!(
        found
            .notes
            .iter()
            .any(|note| note.contains("the model has one"))
    );
    let loaded = Model::from_json(&found.file.to_string()).unwrap();
    assert_eq!(loaded.pairs.len(), 1);
}

/// An independent circuit simulation (ngspice 39, rc2.cir): 3.7 V, 20 mohm, 15 mohm with 200 F,
/// 25 mohm with 2400 F, 2 A from 10 s to 40 s.
#[test]
fn a_pulse_of_an_independent_circuit_simulation_gives_its_components() {
    let text = include_str!("../../tests/data/rc2_pulse.csv");
    let points: Vec<(f64, f64)> = text
        .lines()
        .filter(|line| !line.starts_with('#'))
        .map(|line| {
            let (seconds, volts) = line.split_once(',').unwrap();
            (
                seconds.parse::<f64>().unwrap() - 10.0,
                volts.parse().unwrap(),
            )
        })
        .collect();
    let means = points
        .windows(2)
        .filter(|pair| pair[0].0 > 0.0 && pair[1].0 - pair[0].0 > 0.01)
        .map(|pair| Mean {
            from_s: pair[0].0,
            until_s: pair[1].0,
            volts: 0.5 * (pair[0].1 + pair[1].1),
            count: 1.0,
        })
        .collect();
    let pulse = Pulse {
        amperes: 2.0,
        length_s: 30.0,
        means,
        slope: Some((1e-9, 1.0)),
        rest_v: 3.7,
        shared: 0.0,
    };
    let fitted = pulse.fit(2).unwrap();
    let expected = [0.020, 0.015, 3.0, 0.025, 60.0];
    let found = [
        fitted.parameter(2),
        fitted.parameter(3),
        fitted.parameter(4).exp(),
        fitted.parameter(5),
        fitted.parameter(6).exp(),
    ];
    for (value, truth) in found.iter().zip(expected) {
        assert!(
            (value / truth - 1.0).abs() < 1e-3,
            "{found:?}, not {expected:?}"
        );
    }
}
