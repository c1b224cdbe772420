use quantity::{Current, Text, Voltage};

use super::*;

#[test]
fn rows_of_one_setpoint_are_readings_of_one_point() {
    let table = Table::from_csv(
        "# invented\nsetpoint_ma,meter_ma,readback_a,meter_v,readback_v\n\
         100,98.5,0.0991,3.7012,3.704\n100,98.6,0.0993,,\n500,486.1,0.4891,3.6510,3.653\n",
    )
    .unwrap();
    let milli = |value: f64| Text(Current::from_amperes(value / 1e3).unwrap());
    assert_eq!(table.current_points.len(), 2);
    let first = &table.current_points[0];
    assert_eq!(first.setpoint, Current::from_milliamperes(100));
    assert_eq!(first.reference, [milli(98.5), milli(98.6)]);
    assert_eq!(first.readback, [milli(99.1), milli(99.3)]);
    assert_eq!(table.voltage_points.len(), 2);
    let volts = Text(Voltage::from_microvolts(3_651_000));
    assert_eq!(table.voltage_points[1].reference, [volts]);
}

#[test]
fn a_spreadsheet_with_decimal_commas_is_understood() {
    let table = Table::from_csv(
        "\u{feff}\"setpoint_a\";\"meter_a\";\"readback_a\"\r\n\"0,1\";\"0,0985\";\"0,0991\"\r\n",
    )
    .unwrap();
    assert_eq!(
        table.current_points[0].setpoint,
        Current::from_milliamperes(100)
    );
}

#[test]
fn a_voltage_alone_is_a_point_of_its_own() {
    let table =
        Table::from_csv("setpoint_a,meter_a,readback_a,meter_v,readback_v\n,,,2,2.01\n,,,4,4.02\n")
            .unwrap();
    assert_eq!(
        (table.current_points.len(), table.voltage_points.len()),
        (0, 2)
    );
}

/// The one error that a table gets.
fn check(text: &str, expected: &str) {
    let error = Table::from_csv(text).unwrap_err().to_string();
    assert!(error.contains(expected), "{error}");
}

#[test]
fn what_is_wrong_is_told_with_its_place() {
    check("", "lacks");
    check(
        "setpoint,meter_a,readback_a\n",
        "`setpoint` is without a unit",
    );
    check("setpoint_a,meter_a\n", "lacks the sink's current readback");
    check(
        "setpoint_a,meter_a,readback_a,meter_v\n",
        "one of meter_v and readback_v",
    );
    check(
        "setpoint_a,meter_a,readback_a,meter_ma\n",
        "`meter_ma` is there twice",
    );
    check("setpoint_a,meter_a,readback_oz\n", "in a unit that is not");
    check(
        "setpoint_a,meter_a,readback_a\n1,0.99,0.98\n2,two,1.99\n",
        "line 3, column `meter_a`: `two` is no number",
    );
    check(
        "setpoint_a,meter_a,readback_a\n1,nan,1\n",
        "`nan` is no number",
    );
    check(
        "setpoint_a,meter_a,readback_a\n1,0.99,\n",
        "line 2: a current needs",
    );
    check(
        "setpoint_a,meter_a,readback_a\n,0.99,1\n",
        "without the setpoint",
    );
    check(
        "setpoint_a,meter_a,readback_a\n1,1,1,1\n",
        "beyond the last column",
    );
    check(
        "setpoint_a,meter_a,readback_a\n1e12,1,1\n",
        "is out of range",
    );
}
