//! Leads against the tables.

use expect_test::expect;
use quantity::{Area, Current, Length, Resistance, Temperature, Voltage};

use super::{
    gauge_per_metre, loop_resistance, temperature_factor, two_wire_resistance, two_wire_uncertainty,
};
use crate::bench::{Bench, Conductor, Sensing, Strands};

const ROOM: Temperature = Temperature::from_whole_degrees_celsius(20);

fn copper(length_mm: i64, cross_section: &str, strands: Strands) -> Conductor {
    Conductor::Copper {
        length: Length::from_millimetres(length_mm),
        cross_section: cross_section.parse::<Area>().unwrap(),
        strands,
    }
}

/// IEC 60228, class 5, 1.5 mm2: 13.3 ohm/km; three metres of it at 5 A drop
/// 0.1995 V at 20 degC.
#[test]
fn three_metres_of_flexible_copper_drop_what_the_standard_says() {
    // A loop of three metres is two leads of one and a half.
    let leads = loop_resistance(&copper(1_500, "1.5 mm2", Strands::Flexible), ROOM).unwrap();
    assert_eq!(leads, Resistance::from_microohms(39_900));
    let drop = Current::from_milliamperes(5_000).times_resistance(leads);
    assert_eq!(drop, Voltage::from_microvolts(199_500));
}

#[test]
fn solid_copper_conducts_better_than_flexible() {
    let fixed = loop_resistance(&copper(500, "2.5 mm2", Strands::Fixed), ROOM).unwrap();
    assert_eq!(fixed, Resistance::from_microohms(7_410));
}

/// Wire tables of the trade, ohm per 1000 ft at 20 degC, solid copper.
#[test]
fn the_american_wire_gauge_is_met() {
    for (gauge, per_1000_feet) in [
        (12, 1.588),
        (14, 2.525),
        (16, 4.016),
        (18, 6.385),
        (20, 10.15),
        (22, 16.14),
        (24, 25.67),
        (26, 40.81),
        (28, 64.9),
    ] {
        let is = gauge_per_metre(gauge) * 304.8;
        assert!(
            (is / per_1000_feet - 1.0).abs() < 1e-3,
            "{is} for gauge {gauge}"
        );
    }
}

/// 10 K raise copper by 3.93 %.
#[test]
fn warm_copper_conducts_less() {
    let warm = temperature_factor(Temperature::from_whole_degrees_celsius(30));
    assert!((warm - 1.0393).abs() < 1e-12);
}

#[test]
fn a_cross_section_in_no_table_is_refused_with_those_that_are() {
    let error = loop_resistance(&copper(500, "1.2 mm2", Strands::Flexible), ROOM).unwrap_err();
    expect!["a cross-section of 1.2 mm2 is not in IEC 60228; use 0.5, 0.75, 1, 1.5, 2.5, 4, 6 or 10 mm2, or give the measured resistance"]
        .assert_eq(&error.to_string());
}

/// The right sink of the example bench reads over 42 mohm of measured leads.
#[test]
fn only_a_two_wire_reading_is_corrected_and_less_certain() {
    let bench = Bench::from_toml(include_str!("../bench/weir.toml")).unwrap();
    let mut two = bench.sink("right").unwrap().clone();
    assert_eq!(two.leads.sensing, Sensing::TwoWire);
    assert_eq!(
        two_wire_resistance(&two).unwrap(),
        Resistance::from_milliohms(42)
    );
    let uncertainty = two_wire_uncertainty(&two).unwrap();
    assert!((uncertainty - 0.042 * 0.05 / 3_f64.sqrt()).abs() < 1e-9);
    two.leads.conductor = copper(1_500, "1.5 mm2", Strands::Flexible);
    two.ambient = ROOM;
    let uncertainty = two_wire_uncertainty(&two).unwrap();
    assert!((uncertainty - 0.0399 * 0.1 / 3_f64.sqrt()).abs() < 1e-9);
    two.leads.sensing = Sensing::FourWire;
    assert_eq!(two_wire_resistance(&two).unwrap(), Resistance::ZERO);
    assert!(two_wire_uncertainty(&two).unwrap().abs() < 1e-15);
}
