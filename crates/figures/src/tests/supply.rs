//! Figures of a supply against the values that the simulated one was made of.

use quantity::Span;
use simulator::front_end::Errors;
use simulator::source::Source;
use simulator::supply::{Supply, SupplySpec};
use sink::bench::{Sensing, SinkEntry};

use super::bench::{Setup, assert_covers, only, right};
use crate::{Figures, Name, work_out};

const SWEEP: &str = include_str!("../../../../sequences/supply-load-sweep.json");
const PULSES: &str = include_str!("../../../../sequences/supply-transmit-pulses.json");
const KNEE: &str = include_str!("../../../../sequences/supply-current-limit-knee.json");

/// The sink with four-wire sensing, so that the leads are not in the output resistance.
fn sensing() -> SinkEntry {
    let mut entry = right();
    entry.leads.sensing = Sensing::FourWire;
    entry
}

fn figures_of(text: &str, supply: &str, errors: bool) -> Figures {
    let entry = sensing();
    let mut setup = Setup::new(text, &entry);
    let spec: SupplySpec = serde_json::from_str(supply).unwrap();
    setup.parts.source = Source::Supply(Box::new(Supply::new(&spec).unwrap()));
    setup.parts.four_wire = true;
    if !errors {
        setup.parts.errors = Errors::default();
    }
    work_out(&setup.night().record).unwrap()
}

#[test]
fn output_resistance_and_load_regulation_are_those_of_the_supply() {
    let supply = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm" }"#;
    for errors in [false, true] {
        let figures = figures_of(SWEEP, supply, errors);
        assert_covers(only(&figures, Name::OutputResistance), 0.060, 2.5);
        assert_covers(only(&figures, Name::LoadRegulation), 0.060 * 0.45, 2.5);
    }
}

const RECOVERING: &str = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm",
  "undershoot": { "resistance": "150 mohm", "time_constant": "5 ms" } }"#;

/// 385 mA through 60 mohm that stay and 150 mohm that decay with 5 ms, sampled every 1 ms: the
/// first sample after the edge is a fifth of a time constant late.
#[test]
fn droop_and_recovery_are_those_of_the_samples() {
    let figures = figures_of(PULSES, RECOVERING, false);
    let all = |name: Name| {
        let figures = figures.figures.iter();
        figures.filter(move |figure| figure.name == name)
    };
    assert_eq!(all(Name::Droop).count(), 10, "{:#?}", figures.missing);
    assert_eq!(all(Name::Overshoot).count(), 10, "{:#?}", figures.missing);
    let step = 0.385;
    let at_first = step * (0.060 + 0.150 * (-1.0_f64 / 5.0).exp());
    for figure in all(Name::Droop).chain(all(Name::Overshoot)) {
        assert!(
            (figure.value - at_first).abs() < 0.004,
            "{} V, expected {at_first} V",
            figure.value
        );
    }
    // Half a percent of the settled voltage is left after t = tau ln(57.75 mV / band): 16.4 mV under
    // the pulse, 16.5 mV after it.
    for figure in all(Name::RecoveryTime) {
        let settled = 3.3
            - 0.060
                * if figure.label.as_deref() == Some("transmit") {
                    0.420
                } else {
                    0.035
                };
        let truth = 0.005 * (step * 0.150 / (0.005 * settled)).ln();
        assert_covers(figure, truth, 2.0);
        assert!(figure.uncertainty.unwrap().standard_uncertainty < 0.5e-3);
    }
    let warned = figures
        .warnings
        .iter()
        .filter(|warning| warning.contains("first sample after the edge"));
    assert_eq!(warned.count(), 2);
}

/// A regulator that makes good within three samples, read by converters with their noise: each time
/// is told, to a sample or better.
#[test]
fn a_fast_recovery_is_told_through_noise() {
    let fast = RECOVERING.replace("5 ms", "2 ms");
    let figures = figures_of(PULSES, &fast, true);
    let all: Vec<_> = figures
        .figures
        .iter()
        .filter(|figure| figure.name == Name::RecoveryTime)
        .collect();
    assert_eq!(all.len(), 20, "{:#?}", figures.missing);
    let truth = 0.002 * (0.385 * 0.150 / 0.0164_f64).ln();
    for figure in all {
        let standard = figure.uncertainty.unwrap().standard_uncertainty;
        assert!(standard < 0.7e-3, "u = {standard} s");
        assert_covers(figure, truth, 4.0);
    }
}

#[test]
fn an_edge_too_soon_after_a_captured_one_gives_a_reason() {
    // The capture of a pulse's beginning is still being sent when the pulse ends.
    let alone = r#""for": "120 ms", "label": "second transmit""#;
    let captured = r#""for": "120 ms", "label": "second transmit",
                      "burst": { "before": "10 ms", "after": "50 ms" }"#;
    assert!(PULSES.contains(alone));
    let figures = figures_of(&PULSES.replace(alone, captured), RECOVERING, false);
    let missing = figures
        .missing
        .iter()
        .find(|missing| missing.name == Name::Overshoot)
        .unwrap();
    assert!(
        missing.reason.contains("one capture at a time"),
        "{}",
        missing.reason
    );
}

#[test]
fn a_limit_that_folds_back_is_told_from_one_that_does_not() {
    let folding = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm",
                       "current_limit": "450 mA", "fold_back_to": "150 mA" }"#;
    let figures = figures_of(KNEE, folding, false);
    let knee = only(&figures, Name::CurrentLimitKnee);
    assert!((knee.value - 0.45).abs() < 0.004, "{} A", knee.value);
    let fold = only(&figures, Name::FoldBackCurrent);
    assert!(fold.value < 0.4, "{} A", fold.value);

    let plain = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm",
                     "current_limit": "450 mA" }"#;
    let figures = figures_of(KNEE, plain, false);
    assert!((only(&figures, Name::CurrentLimitKnee).value - 0.45).abs() < 0.004);
    let missing = figures
        .missing
        .iter()
        .find(|missing| missing.name == Name::FoldBackCurrent)
        .unwrap();
    assert!(
        missing.reason.contains("does not fold back"),
        "{}",
        missing.reason
    );
}

#[test]
fn a_supply_that_holds_has_no_knee() {
    let supply = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm" }"#;
    let figures = figures_of(KNEE, supply, false);
    let missing = figures
        .missing
        .iter()
        .find(|missing| missing.name == Name::CurrentLimitKnee)
        .unwrap();
    assert!(
        missing.reason.contains("held its voltage"),
        "{}",
        missing.reason
    );
}

const SOAK: &str = r#"{ "sequence": 1, "title": "Unfinished soak",
  "dut": { "label": "logger 3.3 V", "kind": "supply", "voltage_min": "2.9 V",
           "voltage_max": "3.6 V", "current_max": "500 mA" },
  "readback": "1 s",
  "interlocks": { "undervoltage": { "below": "2.9 V", "for": "20 ms" } },
  "steps": [ { "rest": "1 min", "label": "ambient" },
             { "draw": "400 mA", "for": "LENGTH", "label": "soak" } ] }"#;

/// The right sink: 8 K/W to the air, 4 min, air at 23 degC; 398.5 mA at 3.276 V, less what 42 mohm
/// of leads and 1 ohm of sense resistor take. A soak of two time constants is extrapolated to its end.
#[test]
fn an_unfinished_soak_tells_where_it_leads() {
    let supply = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm" }"#;
    let figures = figures_of(&SOAK.replace("LENGTH", "8 min"), supply, true);
    let watts = 0.3985 * 3.276 - 0.3985 * 0.3985 * 1.042;
    let settled = only(&figures, Name::SettledTemperature);
    let truth = 23.0 + 8.0 * watts;
    assert!(
        (settled.value - truth).abs() < 0.3,
        "{} degC, truth {truth}",
        settled.value
    );
    let resistance = only(&figures, Name::ThermalResistance);
    assert!(
        (resistance.value - 8.0).abs() < 0.25,
        "{} K/W",
        resistance.value
    );
    let margin = only(&figures, Name::JunctionMargin);
    let truth = 150.0 - truth - watts * 2.8;
    assert!(
        (margin.value - truth).abs() < 0.5,
        "{} K, truth {truth}",
        margin.value
    );
}

#[test]
fn a_soak_that_has_hardly_begun_does_not_tell_where_it_leads() {
    let supply = r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm" }"#;
    let mut entry = sensing();
    entry.heat_sink.time_constant = Span::from_secs(1800);
    let text = SOAK.replace("LENGTH", "8 min");
    let mut setup = Setup::new(&text, &entry);
    let spec: SupplySpec = serde_json::from_str(supply).unwrap();
    setup.parts.source = Source::Supply(Box::new(Supply::new(&spec).unwrap()));
    let figures = work_out(&setup.night().record).unwrap();
    let missing = figures
        .missing
        .iter()
        .find(|missing| missing.name == Name::SettledTemperature)
        .unwrap();
    assert!(missing.reason.contains("too short"), "{}", missing.reason);
}
