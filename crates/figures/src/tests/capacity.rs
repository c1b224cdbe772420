//! Capacity and energy against the simulated cell's own ledger.

use sequencer::event::Ending;

use super::bench::{exact, left, night};
use crate::{Figure, Figures, Name, work_out};

const SEQUENCE: &str = include_str!("../../../../sequences/capacity-0.2-it.json");

fn of(figures: &Figures, name: Name) -> &Figure {
    let found = figures
        .figures
        .iter()
        .find(|figure| figure.name == name && figure.label.is_none());
    found.unwrap_or_else(|| panic!("no {name:?} in {figures:#?}"))
}

/// With converters that err by nothing but their steps, charge is the cell's own to a
/// microcoulomb, and energy within half a step of the voltage.
#[test]
fn an_error_free_front_end_gives_the_cells_own_charge_exactly() {
    let night = night(SEQUENCE, &exact(), true, 1);
    assert_eq!(night.rehearsal.ending, Ending::Finished);
    let figures = work_out(&night.record).unwrap();
    let charge = of(&figures, Name::DeliveredCharge).value * 3600.0;
    assert!(
        (charge - night.truth.charge_c).abs() < 3e-6,
        "counted {charge} C, the cell gave {} C",
        night.truth.charge_c
    );
    let energy = of(&figures, Name::DeliveredEnergy).value * 3600.0;
    let half_a_step = 50e-6 * night.truth.charge_c;
    assert!(
        (energy - night.truth.terminal_j).abs() < half_a_step,
        "counted {energy} J, the cell gave {} J",
        night.truth.terminal_j
    );
}

/// The cut-off's instant is found between readbacks: the capacity is the charge that the cell
/// had truly given when its voltage fell below the cut-off.
#[test]
fn capacity_ends_where_the_voltage_crossed_and_not_where_the_step_ended() {
    let night = night(SEQUENCE, &exact(), true, 1);
    let figures = work_out(&night.record).unwrap();
    let capacity = of(&figures, Name::Capacity);
    let crossed_s = night.device.crossings().first().unwrap().at_s.unwrap();
    // 0,2 It of 3.2 Ah is 640 mA, which is a whole number of this converter's steps.
    let truth_ah = 0.64 * (crossed_s - night.step_began_s(1)) / 3600.0;
    let standard = capacity.uncertainty.unwrap().standard_uncertainty;
    assert!(
        (capacity.value - truth_ah).abs() < 2e-6,
        "{} Ah, truth {truth_ah} Ah",
        capacity.value
    );
    assert!(standard > 0.0 && standard < 0.05, "u = {standard} Ah");
}

/// The demo's sink errs within its stated tolerances; so must its figures.
#[test]
fn a_front_end_that_errs_gives_a_capacity_within_its_stated_uncertainty() {
    for seed in 1..=3 {
        let night = night(SEQUENCE, &left(), false, seed);
        assert_eq!(night.rehearsal.ending, Ending::Finished);
        let figures = work_out(&night.record).unwrap();
        let capacity = of(&figures, Name::DeliveredCharge);
        let truth_ah = night.truth.charge_c / 3600.0;
        let half_width = capacity.expanded.unwrap().half_width;
        assert!(
            (capacity.value - truth_ah).abs() < half_width,
            "{} Ah +- {half_width}, truth {truth_ah}",
            capacity.value
        );
    }
}

#[test]
fn the_trapezoid_agrees_with_the_counters() {
    let night = night(SEQUENCE, &left(), false, 7);
    let figures = work_out(&night.record).unwrap();
    let counted = of(&figures, Name::DeliveredCharge).value;
    let trapezoid = of(&figures, Name::ChargeByTrapezoid);
    let lines = &trapezoid.budget.contributions;
    let jumps = lines.iter().find(|line| line.name.starts_with("jumps"));
    let doubt = jumps.unwrap().share();
    assert!((counted - trapezoid.value).abs() < 3.0 * doubt + 1e-6);
    assert!(
        !figures
            .warnings
            .iter()
            .any(|warning| warning.contains("differ"))
    );
}
