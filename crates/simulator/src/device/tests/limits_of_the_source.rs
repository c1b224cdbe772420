//! Sources that give up: headroom, an empty cell, a supply's current limit.

use super::*;
use crate::supply::{Droop, Ripple, Supply, SupplySpec};
use quantity::Text;
use wire::SinkState;

fn spec() -> SupplySpec {
    SupplySpec {
        voltage: Voltage::from_volts(3.3).unwrap(),
        output_resistance: Resistance::from_ohms(0.04).unwrap(),
        undershoot: None,
        sag: None,
        current_limit: None,
        fold_back_to: None,
        ripple: None,
    }
}

fn on_supply(spec: &SupplySpec) -> Host {
    let supply = Source::Supply(Box::new(Supply::new(spec).unwrap()));
    let mut host = Host::new(SinkParts::error_free(figures(), supply));
    host.begin(Span::from_millis(10));
    host
}

/// Holds a current for half a second and says what was read at its end.
fn hold(host: &mut Host, current: f64) -> (f64, f64) {
    host.step(amperes(current), Span::ZERO, Span::from_secs(60));
    host.wait_ms(500);
    let last = host.readbacks().pop().unwrap();
    (last.current.amperes(), last.voltage.volts())
}

#[test]
fn a_supply_drops_by_its_output_resistance() {
    let mut host = on_supply(&spec());
    for current in [0.0, 0.5, 1.0, 2.0] {
        let (_, voltage) = hold(&mut host, current);
        assert!((voltage - (3.3 - 0.04 * current)).abs() < 1e-4, "{voltage}");
    }
}

#[test]
fn an_undershoot_recovers_with_its_time_constant() {
    let droop = Droop {
        resistance: Resistance::from_ohms(0.2).unwrap(),
        time_constant: Span::from_millis(20),
    };
    let mut host = on_supply(&SupplySpec {
        undershoot: Some(droop),
        ..spec()
    });
    host.step(amperes(1.0), Span::ZERO, Span::from_secs(60));
    host.wait_ms(500);
    let readbacks = host.readbacks();
    let lowest = readbacks.iter().map(|one| one.voltage_min.volts());
    let lowest = lowest.fold(f64::INFINITY, f64::min);
    // After the first tick of 1 ms, exp(-1/20) of the undershoot is left.
    let expected = 3.3 - 0.04 - 0.2 * (-0.05_f64).exp();
    assert!((lowest - expected).abs() < 2e-4, "{lowest} {expected}");
    let last = readbacks.last().unwrap();
    assert!((last.voltage.volts() - 3.26).abs() < 2e-4);
}

#[test]
fn a_current_limit_holds_the_current_and_collapses_the_voltage() {
    let mut host = on_supply(&SupplySpec {
        current_limit: Some(Text(Current::from_amperes(1.2).unwrap())),
        ..spec()
    });
    let (current, voltage) = hold(&mut host, 1.1);
    assert!((current - 1.1).abs() < 1e-4 && voltage > 3.2);
    let (current, voltage) = hold(&mut host, 1.5);
    assert!(
        (current - 1.2).abs() < 1e-4 && voltage < 0.4,
        "{current} {voltage}"
    );
    let last = host.readbacks().pop().unwrap();
    assert_eq!(last.state, SinkState::Saturated);
    let (current, voltage) = hold(&mut host, 1.1);
    assert!((current - 1.1).abs() < 1e-4 && voltage > 3.2);
}

#[test]
fn a_folding_limit_returns_only_well_below_its_knee() {
    let mut host = on_supply(&SupplySpec {
        current_limit: Some(Text(Current::from_amperes(1.2).unwrap())),
        fold_back_to: Some(Text(Current::from_amperes(0.4).unwrap())),
        ..spec()
    });
    let (folded, _) = hold(&mut host, 1.5);
    assert!((0.4..0.5).contains(&folded), "{folded}");
    let (current, voltage) = hold(&mut host, 1.0);
    assert!(current < 0.5 && voltage < 0.3, "still folded: {current}");
    let (current, voltage) = hold(&mut host, 0.3);
    assert!((current - 0.3).abs() < 1e-4 && voltage > 3.2);
    let (current, _) = hold(&mut host, 1.0);
    assert!((current - 1.0).abs() < 1e-4);
}

#[test]
fn ripple_shows_in_the_extremes_and_not_in_the_mean() {
    let ripple = Ripple {
        amplitude: Voltage::from_volts(0.02).unwrap(),
        period: Span::from_millis(10),
    };
    let mut host = on_supply(&SupplySpec {
        ripple: Some(ripple),
        ..spec()
    });
    let (_, mean) = hold(&mut host, 0.5);
    assert!((mean - 3.28).abs() < 3e-4, "{mean}");
    let last = host.readbacks().pop().unwrap();
    let swing = last.voltage_max.volts() - last.voltage_min.volts();
    assert!((0.035..=0.0402).contains(&swing), "{swing}");
}

#[test]
fn a_supply_that_folds_back_without_a_limit_is_refused() {
    let refused = Supply::new(&SupplySpec {
        fold_back_to: Some(Text(Current::from_amperes(0.4).unwrap())),
        ..spec()
    });
    assert_eq!(
        refused.unwrap_err().to_string(),
        "the supply folds back to 400 mA without a larger `current_limit`; give one, or leave \
         `fold_back_to` out"
    );
}

#[test]
fn a_low_source_carries_what_its_wall_allows() {
    let mut low = spec();
    low.voltage = Voltage::from_volts(0.3).unwrap();
    let mut host = on_supply(&low);
    let (current, _) = hold(&mut host, 3.0);
    let most = 0.3 / (0.04 + 0.1 + 0.008);
    assert!(
        current < most && current > 0.8 * most,
        "{current} of {most}"
    );
    let last = host.readbacks().pop().unwrap();
    assert_eq!(last.state, SinkState::Saturated);
}

#[test]
fn a_reversed_source_drives_nothing_and_reads_zero() {
    let mut reversed = spec();
    reversed.voltage = Voltage::from_volts(-3.3).unwrap();
    let mut host = on_supply(&reversed);
    let (current, voltage) = hold(&mut host, 1.0);
    assert!(current.abs() < 1e-9 && voltage.abs() < 1e-9);
}

#[test]
fn an_empty_cell_gives_up_without_a_jump_in_energy() {
    let mut host = Host::new(SinkParts::error_free(figures(), cell_m(0.02)));
    host.begin(Span::from_millis(100));
    host.step(amperes(2.6), Span::ZERO, Span::from_secs(400));
    host.wait_s(300);
    let truth = host.sink.truth();
    assert!(host.sink.current_a() < 2.6);
    let spent = truth.inner_j + truth.leads_j + truth.mosfet_j + truth.sense_j;
    assert!((spent / truth.source_j - 1.0).abs() < 1e-9, "{truth:?}");
}
