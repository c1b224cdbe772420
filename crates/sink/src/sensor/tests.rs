//! Sensors against IEC 60751, a maker's table and recomputed values.

use quantity::{Resistance, Temperature, Voltage};

use super::{Law, Sensor, SensorFault};
use crate::bench::{Element, ResistancePoint, SensorDivider, SensorSide, TemperatureSensor};

/// IEC 60751:2008, table of the Pt100.
#[test]
fn platinum_is_that_of_the_standard_both_ways() {
    let law = Law::of(&Element::Pt100).unwrap();
    for (celsius, ohms) in [
        (-200.0, 18.52),
        (-100.0, 60.26),
        (-50.0, 80.31),
        (-10.0, 96.09),
        (0.0, 100.0),
        (10.0, 103.90),
        (50.0, 119.40),
        (100.0, 138.51),
        (150.0, 157.33),
        (200.0, 175.86),
        (300.0, 212.05),
        (400.0, 247.09),
        (600.0, 313.71),
        (850.0, 390.48),
    ] {
        assert!((law.ohms(celsius) - ohms).abs() <= 0.005, "{celsius} degC");
        assert!((law.celsius(law.ohms(celsius)) - celsius).abs() < 1e-9);
    }
    let thousand = Law::of(&Element::Pt1000).unwrap();
    assert!((thousand.ohms(100.0) - 1_385.1).abs() <= 0.05);
}

/// Recomputed: Beta 3435, 10 kohm at 25 degC.
#[test]
fn the_beta_equation_is_met_both_ways() {
    let law = Law::Beta {
        resistance_25: 10_000.0,
        beta: 3_435.0,
    };
    assert!((law.ohms(0.0) - 28_704.29).abs() < 0.01);
    assert!((law.ohms(50.0) - 4_101.19).abs() < 0.01);
    assert!((law.celsius(4_101.19) - 50.0).abs() < 1e-4);
}

fn point(celsius: i64, milliohms: i64) -> ResistancePoint {
    ResistancePoint {
        at: Temperature::from_whole_degrees_celsius(celsius),
        resistance: Resistance::from_milliohms(milliohms),
    }
}

/// Recomputed: 25 kohm at 5 degC, 10 kohm at 25 degC, 4 kohm at 45 degC.
#[test]
fn three_points_give_the_coefficients_of_steinhart_and_hart() {
    let law = Law::through(&[
        point(5, 25_000_000),
        point(25, 10_000_000),
        point(45, 4_000_000),
    ]);
    let Some(Law::SteinhartHart { a, b, c }) = law else {
        panic!("no law")
    };
    assert!((a / 2.108_508_17e-3 - 1.0).abs() < 1e-8);
    assert!((b / 7.979_204_73e-5 - 1.0).abs() < 1e-8);
    assert!((c / 6.535_076_31e-7 - 1.0).abs() < 1e-8);
    let law = law.unwrap();
    assert!((law.celsius(10_000.0) - 25.0).abs() < 1e-9);
    assert!((law.ohms(25.0) - 10_000.0).abs() < 1e-5);
}

/// A component maker's published table of a 10 kohm NTC: a curve through three
/// of its points meets every other point from 0 to 100 degC within 0.1 K.
#[test]
fn three_points_of_a_maker_s_table_give_the_rest() {
    let table: Vec<(f64, f64)> = include_str!("../../tests/data/ntc_10k_r_t.csv")
        .lines()
        .skip(1)
        .map(|line| {
            let (celsius, ratio) = line.split_once(',').unwrap();
            (
                celsius.parse().unwrap(),
                ratio.parse::<f64>().unwrap() * 10_000.0,
            )
        })
        .collect();
    let at = |wanted: f64| {
        let (celsius, ohms) = table
            .iter()
            .find(|(celsius, _)| (celsius - wanted).abs() < 0.1)
            .unwrap();
        ResistancePoint {
            at: Temperature::from_degrees_celsius(*celsius).unwrap(),
            resistance: Resistance::from_ohms(*ohms).unwrap(),
        }
    };
    let law = Law::through(&[at(0.0), at(45.0), at(90.0)]).unwrap();
    let mut compared = 0;
    for (celsius, ohms) in table
        .iter()
        .filter(|(celsius, _)| (0.0..=100.0).contains(celsius))
    {
        let is = law.celsius(*ohms);
        assert!((is - celsius).abs() < 0.1, "{is} is not {celsius}");
        compared += 1;
    }
    assert!(compared >= 20);
}

fn sensor(side: SensorSide) -> Sensor {
    Sensor::of(&TemperatureSensor {
        element: Element::NtcBeta {
            resistance_25: Resistance::from_milliohms(10_000_000),
            beta_kelvin: 3_435.0,
        },
        divider: SensorDivider {
            series: Resistance::from_milliohms(10_000_000),
            sensor: side,
            supply: Voltage::from_millivolts(3_300),
            full_scale: Voltage::from_millivolts(3_300),
        },
    })
    .unwrap()
}

#[test]
fn a_divider_is_read_back_to_its_temperature() {
    for side in [SensorSide::ToGround, SensorSide::ToSupply] {
        let sensor = sensor(side);
        for celsius in [-20, 0, 25, 60, 85, 120] {
            let at = Temperature::from_whole_degrees_celsius(celsius);
            let read = sensor.temperature(sensor.voltage(at)).unwrap();
            assert!((read - at).abs() <= Temperature::from_millidegrees_celsius(2));
        }
    }
    let half = sensor(SensorSide::ToGround).temperature(Voltage::from_millivolts(1_650));
    assert_eq!(half, Ok(Temperature::from_whole_degrees_celsius(25)));
}

#[test]
fn a_broken_wire_is_no_temperature() {
    let (ground, supply) = (Voltage::ZERO, Voltage::from_millivolts(3_300));
    let to_ground = sensor(SensorSide::ToGround);
    assert_eq!(to_ground.temperature(supply), Err(SensorFault::Open));
    assert_eq!(to_ground.temperature(ground), Err(SensorFault::Short));
    let to_supply = sensor(SensorSide::ToSupply);
    assert_eq!(to_supply.temperature(ground), Err(SensorFault::Open));
    assert_eq!(to_supply.temperature(supply), Err(SensorFault::Short));
    // Beyond its supply a divider is broken, too.
    assert_eq!(
        to_ground.temperature(Voltage::from_millivolts(3_400)),
        Err(SensorFault::Open)
    );
    assert_eq!(
        to_ground.temperature(Voltage::from_millivolts(-10)),
        Err(SensorFault::Short)
    );
}
