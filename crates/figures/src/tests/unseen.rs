//! A fitted cell model against the cell it was fitted to, on a profile that it never saw.

use simulator::cell::{Cell, Model, Spread, Start, type_k, type_m};
use simulator::front_end::Errors;

use super::bench::{Setup, cell, left};
use super::certificate::{MeterErrors, certificate};
use crate::{CellModel, Standing, work_out};

const PULSES: &str = include_str!("../../../../sequences/pulses-at-ten-states-of-charge.json");

/// The model of a night by a calibrated sink that errs and is noisy.
fn fitted(sequence: &str, model: &Model) -> CellModel {
    let entry = left();
    let mut setup = Setup::new(sequence, &entry);
    setup.parts.source = cell(model, 1.0);
    setup.parts.errors = Errors {
        current_gain: -0.009,
        current_offset_a: 1.2e-3,
        current_noise_a: 500e-6,
        voltage_gain: 0.003,
        voltage_offset_v: 2e-3,
        voltage_noise_v: 800e-6,
        ..Errors::default()
    };
    let meter = MeterErrors {
        current: 0.4,
        voltage: -0.5,
    };
    setup.certificate = Some(certificate(&setup.parts.errors, meter, 5));
    let figures = work_out(&setup.night().record).unwrap();
    assert_eq!(
        figures.standing,
        Standing::Calibrated,
        "{:?}",
        figures.warnings
    );
    figures.cell_model.unwrap()
}

/// Seconds and amperes, over and over: nothing that the pulses were made of.
const PROFILE: [(f64, f64); 6] = [
    (40.0, 0.3),
    (25.0, 0.0),
    (3.0, 1.9),
    (60.0, 0.05),
    (12.0, 0.9),
    (7.0, 0.6),
];

/// The voltage each second until so much is left of the charge.
fn driven(model: &Model, until: f64) -> Vec<f64> {
    let start = Start {
        state_of_charge: 1.0,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    let mut cell = Cell::new(model, Spread::default(), start).unwrap();
    let mut volts = Vec::new();
    for (seconds, amperes) in PROFILE.iter().cycle() {
        let mut passed = 0.0;
        while passed < *seconds {
            cell.step(*amperes, 1.0);
            passed += 1.0;
            volts.push(cell.terminal_voltage_v(*amperes));
        }
        if cell.state_of_charge() < until {
            return volts;
        }
    }
    unreachable!("the profile goes round for ever")
}

fn check(sequence: &str, model: &Model) {
    let found = fitted(sequence, model);
    let fitted = Model::from_json(&found.to_file().to_string()).unwrap();
    let (truth, told) = (driven(model, 0.05), driven(&fitted, 0.05));
    let squares: f64 = truth
        .iter()
        .zip(&told)
        .map(|(truth, told)| (truth - told).powi(2))
        .sum();
    let compared = truth.len().min(told.len());
    assert!(compared > 10_000, "{compared}");
    #[expect(clippy::cast_precision_loss, reason = "some ten thousand")]
    let rms = (squares / compared as f64).sqrt();
    assert!(rms < 5e-3, "{:.2} mV rms; {:?}", rms * 1e3, found.notes);
}

#[test]
fn the_low_resistance_cell_is_told_to_five_millivolts() {
    check(PULSES, &type_m());
}

/// The other type is larger and must be pulsed with less.
#[test]
fn the_high_capacity_cell_is_told_to_five_millivolts() {
    let sequence = PULSES
        .replace("2.6 Ah", "3.2 Ah")
        .replace("\"1 It", "\"0.5 It")
        .replace("250 mAh", "320 mAh")
        .replace("510 mAh", "640 mAh")
        .replace("125 mAh", "160 mAh")
        .replace("60 mAh", "80 mAh")
        .replace("3.1 Ah", "3.8 Ah");
    check(&sequence, &type_k());
}

/// The file is what a rehearsal runs on and what a prediction reads.
#[test]
fn a_models_file_holds_the_fit_and_reads_back() {
    let found = fitted(PULSES, &type_m());
    let text = found.to_file().to_string();
    let read = CellModel::from_file(&text).unwrap();
    assert_eq!(read, found);
    // One of the invented types states no uncertainty.
    let bare = CellModel::from_file(&type_m().to_json()).unwrap();
    assert!(
        bare.notes
            .iter()
            .any(|note| note.contains("no uncertainty"))
    );
    let refused = CellModel::from_file(&text.replace("cell model 1", "cell model 9"));
    assert!(refused.unwrap_err().to_string().contains("cell model 9"));
}
