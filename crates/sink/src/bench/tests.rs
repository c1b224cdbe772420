//! The bench file: the example, and what is refused with what words.

use expect_test::{Expect, expect};
use quantity::{Current, Resistance, Span, Temperature};

use super::{Bench, Link, Sensing};
use crate::uncertainty::Stated;

const WEIR: &str = include_str!("weir.toml");

#[expect(
    clippy::needless_pass_by_value,
    reason = "the expectation is written in place"
)]
fn check_refused(text: &str, expected: Expect) {
    let error = Bench::from_toml(text).expect_err("should be refused");
    expected.assert_eq(&error.to_string());
}

const SERIAL: &str = "[sink.link.serial]\npath = \"/dev/ttyACM0\"\n\n";

/// The example on serial ports, so that no place in it depends on how its
/// simulated sources are described.
fn on_serial_ports() -> String {
    let mut text = WEIR.to_owned();
    while let Some(start) = text.find("[sink.link.simulated]") {
        let length = text[start..].find("[sink.front_end]").unwrap();
        text.replace_range(start..start + length, SERIAL);
    }
    text
}

/// That with one piece of its text replaced.
fn weir_with(old: &str, new: &str) -> String {
    let text = on_serial_ports();
    assert!(text.contains(old), "the example has no `{old}`");
    text.replacen(old, new, 1)
}

#[test]
fn the_example_bench_is_read() {
    let bench = Bench::from_toml(WEIR).unwrap_or_else(|error| panic!("{error}"));
    assert_eq!(bench.name, "weir");
    let left = bench.sink("left").unwrap();
    assert_eq!(
        left.front_end.sense_resistor.resistance,
        Resistance::from_milliohms(100)
    );
    assert_eq!(left.limits.current, Current::from_milliamperes(3_000));
    assert_eq!(left.deadman, Span::from_secs(2));
    assert_eq!(
        left.interlocks.over_temperature.threshold,
        Temperature::from_whole_degrees_celsius(75)
    );
    let right = bench.sink("right").unwrap();
    assert!(right.link.is_simulated());
    assert_eq!(right.leads.sensing, Sensing::TwoWire);
    assert!(right.mosfet.soa_dc.is_empty());
    assert_eq!(bench.sink("middle"), None);
}

#[test]
fn a_bench_goes_into_a_record_and_comes_back() {
    let bench = Bench::from_toml(WEIR).unwrap();
    let json = serde_json::to_string(&bench).unwrap();
    assert_eq!(serde_json::from_str::<Bench>(&json).unwrap(), bench);
    let text = toml::to_string(&bench).unwrap();
    assert_eq!(Bench::from_toml(&text).unwrap(), bench);
}

#[test]
fn a_link_is_serial_or_tcp_or_simulated() {
    let bench = Bench::from_toml(&on_serial_ports()).unwrap();
    let expected = Link::Serial {
        path: "/dev/ttyACM0".into(),
        baud: 115_200,
    };
    assert_eq!(bench.sinks[0].link, expected);
    check_refused(
        &weir_with(SERIAL, "[sink.link.tcp]\naddress = \"192.0.2.7\"\n\n"),
        expect![
            "line 17, column 11: sink[0].link.tcp.address: `192.0.2.7` has no port; write host:port, such as 192.0.2.7:4000"
        ],
    );
    check_refused(
        &WEIR.replacen("time_factor = 1", "time_factor = 0", 1),
        expect!["line 17, column 15: invalid value: integer `0`, expected a nonzero u32"],
    );
}

#[test]
fn a_field_of_the_wrong_shape_is_shown_where_it_stands() {
    check_refused(
        &weir_with("\"100 mohm\"", "0.1"),
        expect![[
            r#"line 23, column 14: the number 0.1 has no unit, but a resistance is wanted; write a text with its unit, for example "0.1 ohm""#
        ]],
    );
    check_refused(
        &weir_with("\"100 mohm\"", "\"100 mOhm\""),
        expect![
            "line 23, column 14: `100 mOhm` has an unknown unit `mOhm` at byte 4; write `mohm`: upper and lower case differ in units"
        ],
    );
    check_refused(
        &weir_with("deadman =", "dead_man ="),
        expect![
            "line 10, column 1: unknown field `dead_man`, expected one of `name`, `serial_number`, `certificate`, `link`, `readback`, `deadman`, `ambient`, `isolator`, `front_end`, `gate_drive`, `mosfet`, `heat_sink`, `leads`, `limits`, `interlocks`"
        ],
    );
    check_refused(
        &weir_with("name = \"weir\"", "name = "),
        expect!["line 3, column 8: string values must be quoted, expected literal string"],
    );
    check_refused(
        &weir_with("codes = \"2^N\"", "codes = \"2N\""),
        expect!["line 34, column 9: unknown variant `2N`, expected `2^N` or `2^N-1`"],
    );
}

#[test]
fn a_missing_interlock_is_refused() {
    check_refused(
        &weir_with("silence = { for = \"2 s\" }\n", ""),
        expect!["line 89, column 1: missing field `silence`"],
    );
}

#[test]
fn everything_that_does_not_agree_is_told_at_once() {
    let text = weir_with("name = \"left\"", "name = \"Left sink\"")
        .replacen("deadman = \"2 s\"", "deadman = \"20 s\"", 1)
        .replacen("bits = 12", "bits = 32", 1)
        .replacen("current = \"3 A\"", "current = \"3.5 A\"", 1)
        .replacen("above = \"14 W\"", "above = \"16 W\"", 1)
        .replacen("below = \"-50 mV\"", "below = \"50 mV\"", 1)
        .replacen(
            "{ resistance = \"0.6 K/W\"",
            "{ resistance = \"0.9 K/W\"",
            1,
        )
        .replacen("usual = \"200 ms\"", "usual = \"20 s\"", 1)
        .replacen("name = \"right\"", "name = \"Left sink\"", 1);
    check_refused(
        &text,
        expect![[r"
            line 8, column 8: sink[0].name: the sink's name `Left sink` cannot stand in a path or a URL; use up to 32 lower-case letters, digits and hyphens, beginning with a letter
            line 10, column 11: sink[0].deadman: 20 s is outside 100 ms to 10 s; 2 s suits most benches
            line 12, column 59: sink[0].readback.usual: 20 s is outside 20 ms to 10 s; choose an interval between them
            line 32, column 8: sink[0].front_end.dac.bits: 32 bits; converters have 6 to 24
            line 67, column 10: sink[0].mosfet.foster: the pairs add up to 1300 mK/W, but junction_to_case is 1 K/W; take both from one data sheet
            line 84, column 11: sink[0].limits.current: 3.5 A is above what the converter can set over the sense resistor, 3.3 A; lower it to 3.3 A or less
            line 84, column 11: sink[0].limits.current: 3.5 A is above what the converter can read, 3.3 A; lower it to 3.3 A or less
            line 91, column 24: sink[0].interlocks.over_power.above: 16 W is above the sink's limit, 15 W; lower it to 15 W or less
            line 94, column 31: sink[0].interlocks.reversed_polarity.below: 50 mV is above zero: a voltage of the right polarity, 0 V; lower it to 0 V or less
            line 108, column 8: sink[1].name: a second sink is called `Left sink`; give each its own name
            line 108, column 8: sink[1].name: the sink's name `Left sink` cannot stand in a path or a URL; use up to 32 lower-case letters, digits and hyphens, beginning with a letter"]],
    );
}

#[test]
fn figures_that_physics_forbids_are_refused() {
    let text = weir_with("resistance = \"100 mohm\"", "resistance = \"0 ohm\"")
        .replacen("limit = \"85 degC\"", "limit = \"20 degC\"", 1)
        .replacen("beta_kelvin = 3435", "beta_kelvin = 34.35", 1)
        .replacen(
            "no_rating_at = \"155 degC\"",
            "no_rating_at = \"55 degC\"",
            1,
        )
        .replacen("length = \"0.6 m\"", "length = \"0 m\"", 1);
    check_refused(
        &text,
        expect![[r"
            line 23, column 14: sink[0].front_end.sense_resistor.resistance: 0 ohm is not above zero; give the resistance from the data sheet
            line 28, column 16: sink[0].front_end.sense_resistor.no_rating_at: 55 degC is not above full_rating_up_to, 70 degC; the rating falls from the one to the other
            line 47, column 11: sink[0].front_end.temperature_sensor.element: a Beta of 34.35 K; an NTC's lies between 500 and 10000
            line 77, column 9: sink[0].heat_sink.limit: 20 degC is not above the ambient of 30 degC; nothing could be drawn
            line 81, column 35: sink[0].leads.conductor.copper.length: 0 m is not above zero; give the length from the data sheet
            line 87, column 15: sink[0].limits.temperature: 80 degC is above the heat sink's limit, 20 degC; lower it to 20 degC or less"]],
    );
}

#[test]
fn a_bench_without_a_sink_is_refused() {
    check_refused(
        "name = \"weir\"\nrecords = \"records\"\nsink = []\n",
        expect!["line 1, column 1: no sink; describe at least one under [[sink]]"],
    );
    check_refused(
        "name = \"weir\"\nrecords = \"records\"\n",
        expect!["line 1, column 1: missing field `sink`"],
    );
}

/// A converter that states its errors, in the words of docs/bench-file.md.
#[test]
fn stated_readback_errors_are_read_and_judged() {
    let stated = |error: &str| {
        weir_with(
            "current_full_scale = \"3.3 A\"",
            &format!("current_full_scale = \"3.3 A\"\n{error}"),
        )
    };
    let text = stated(r#"current_error = { of_reading = "0.5 %", constant = "2 mA" }"#);
    let bench = Bench::from_toml(&text).unwrap_or_else(|error| panic!("{error}"));
    let adc = bench.sink("left").unwrap().front_end.adc;
    let error = adc.current_error.unwrap();
    assert_eq!(error.constant, Current::from_milliamperes(2));
    assert_eq!(error.stated, Stated::Rectangular);
    assert_eq!(adc.voltage_error, None);
    let text = stated(
        r#"voltage_error = { of_reading = "0 %", constant = "20 mV", stated = { normal = { coverage_factor = 2.0 } } }"#,
    );
    let bench = Bench::from_toml(&text).unwrap_or_else(|error| panic!("{error}"));
    assert!(
        bench
            .sink("left")
            .unwrap()
            .front_end
            .adc
            .voltage_error
            .is_some()
    );
    let text = stated(r#"current_error = { of_reading = "-1 %", constant = "-2 mA" }"#);
    let refused = Bench::from_toml(&text).unwrap_err().to_string();
    for part in [
        "adc.current_error.of_reading",
        "adc.current_error.constant",
        "give its magnitude",
    ] {
        assert!(refused.contains(part), "no `{part}` in {refused}");
    }
}
