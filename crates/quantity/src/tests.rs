//! Behaviour of the quantities across the crate's modules.

use std::format;
use std::string::{String, ToString};
use std::vec::Vec;

use expect_test::{Expect, expect};
use proptest::prelude::*;

use crate::unit::Dimension;
use crate::{
    Area, Charge, Current, CurrentSpec, Energy, HostTime, Length, ParseError, Power, Quantity,
    Ratio, Resistance, SinkTime, Span, SquareLawFactor, Temperature, TemperatureCoefficient, Text,
    Textual, ThermalResistance, Voltage,
};

fn check_error<T: Textual + core::fmt::Debug>(text: &str, expected: &Expect) {
    let error: ParseError = text.parse::<T>().expect_err("should be refused");
    expected.assert_eq(&error.to_string());
}

#[test]
fn a_quantity_is_read_exactly_from_its_text() {
    let current = |text: &str| text.parse::<Current>().unwrap().microamperes();
    assert_eq!(current("500 mA"), 500_000);
    assert_eq!(current("0.5A"), 500_000);
    assert_eq!(current("  +1.000000 A "), 1_000_000);
    assert_eq!(current("-250 µA"), -250);
    assert_eq!(current("250 \u{3bc}A"), 250);
    assert_eq!("2.75 V".parse::<Voltage>().unwrap().microvolts(), 2_750_000);
    assert_eq!(
        "0.1 ohm".parse::<Resistance>().unwrap().microohms(),
        100_000
    );
    assert_eq!("0.1 Ω".parse::<Resistance>().unwrap().microohms(), 100_000);
    assert_eq!(
        "0.1 \u{2126}".parse::<Resistance>().unwrap().microohms(),
        100_000
    );
    assert_eq!(
        "100 mohm".parse::<Resistance>().unwrap().microohms(),
        100_000
    );
    assert_eq!(
        "10 kohm".parse::<Resistance>().unwrap().microohms(),
        10_000_000_000
    );
    assert_eq!(
        "1.2 Wh".parse::<Energy>().unwrap().microjoules(),
        4_320_000_000
    );
    assert_eq!(
        "3.2 Ah".parse::<Charge>().unwrap().microcoulombs(),
        11_520_000_000
    );
    assert_eq!(
        "40 degC"
            .parse::<Temperature>()
            .unwrap()
            .millidegrees_celsius(),
        40_000
    );
    assert_eq!(
        "-0.5 °C"
            .parse::<Temperature>()
            .unwrap()
            .millidegrees_celsius(),
        -500
    );
    assert_eq!("250 us".parse::<Span>().unwrap().micros(), 250);
    assert_eq!("1.5 h".parse::<Span>().unwrap(), Span::from_secs(5_400));
    assert_eq!("2 d".parse::<Span>().unwrap(), Span::from_secs(172_800));
    assert_eq!("10 min".parse::<Span>().unwrap(), Span::from_secs(600));
}

#[test]
fn a_decimal_that_no_float_holds_is_read_exactly() {
    // 2^63 - 1 microamperes: a float would round the last digits away.
    assert_eq!(
        "9223372036854.775807 A".parse::<Current>(),
        Ok(Current::MAX)
    );
    assert_eq!(
        "-9223372036854.775808 A".parse::<Current>(),
        Ok(Current::MIN)
    );
    assert_eq!("18446744073709551615 us".parse::<Span>(), Ok(Span::MAX));
}

#[test]
fn a_bare_number_is_refused() {
    check_error::<Current>(
        "500",
        &expect![
            "`500` has no unit; write the unit after the number, for example `500 mA` (units of a current: A, mA, uA, kA)"
        ],
    );
    check_error::<Energy>(
        "1.2 ",
        &expect![
            "`1.2 ` has no unit; write the unit after the number, for example `1.2 Wh` (units of an energy: Wh, mWh, uWh, kWh, J, mJ, uJ, kJ)"
        ],
    );
}

#[test]
fn a_decimal_comma_is_refused_with_the_point_written_out() {
    check_error::<Voltage>(
        "2,75 V",
        &expect!["`2,75 V` has a comma at byte 1; write a decimal point: `2.75 V`"],
    );
}

#[test]
fn what_is_no_number_is_refused() {
    check_error::<Voltage>(
        "",
        &expect![
            "an empty text is no voltage; write a decimal number and a unit, for example `2.75 V`"
        ],
    );
    check_error::<Voltage>(
        "V",
        &expect![
            "`V` has no number at byte 0; write a decimal number and a unit, for example `2.75 V`"
        ],
    );
    check_error::<Voltage>(
        ".5 V",
        &expect![
            "`.5 V` has no number at byte 0; write a decimal number and a unit, for example `2.75 V`"
        ],
    );
    check_error::<Voltage>(
        "5. V",
        &expect![
            "`5. V` has no digit after the point at byte 2; write a decimal number and a unit, for example `2.75 V`"
        ],
    );
    check_error::<Voltage>(
        "NaN V",
        &expect![
            "`NaN V` has no number at byte 0; write a decimal number and a unit, for example `2.75 V`"
        ],
    );
    check_error::<Voltage>(
        "1e3 V",
        &expect![
            "`1e3 V` has an unknown unit `e3 V` at byte 1; write the number without an exponent, for example `2.75 V`"
        ],
    );
}

#[test]
fn a_unit_that_does_not_fit_is_refused_with_those_that_do() {
    check_error::<Resistance>(
        "5 MOHM",
        &expect![
            "`5 MOHM` has an unknown unit `MOHM` at byte 2; write `mohm`: upper and lower case differ in units"
        ],
    );
    check_error::<Current>(
        "5 amps",
        &expect![
            "`5 amps` has an unknown unit `amps` at byte 2; units of a current: A, mA, uA, kA"
        ],
    );
    check_error::<Current>(
        "5 V",
        &expect![
            "`5 V` is a voltage (unit `V` at byte 2), but a current is wanted; units of a current: A, mA, uA, kA"
        ],
    );
    check_error::<Temperature>(
        "40 C",
        &expect![
            "`40 C` is a charge (unit `C` at byte 3), but a temperature is wanted; write `degC` for degrees Celsius; `C` is the coulomb"
        ],
    );
    check_error::<CurrentSpec>(
        "0.2 C",
        &expect![
            "`0.2 C` is a charge (unit `C` at byte 4), but a current is wanted; for a multiple of the rated capacity write `It`, for example `0.2 It`; otherwise a unit of current, for example `500 mA`"
        ],
    );
}

#[test]
fn what_would_be_rounded_or_does_not_fit_is_refused() {
    check_error::<Current>(
        "0.5 uA",
        &expect!["`0.5 uA` is finer than one uA; round it to whole multiples of one uA"],
    );
    check_error::<Temperature>(
        "20.0005 degC",
        &expect![
            "`20.0005 degC` is finer than one thousandth of a degC; round it to whole multiples of one thousandth of a degC"
        ],
    );
    check_error::<Current>(
        "99999999999999 A",
        &expect![
            "`99999999999999 A` is beyond the range of a current; check the number and its unit, for example `500 mA`"
        ],
    );
    check_error::<Current>(
        "9223372036854775808 uA",
        &expect![
            "`9223372036854775808 uA` is beyond the range of a current; check the number and its unit, for example `500 mA`"
        ],
    );
    check_error::<Span>(
        "-1 s",
        &expect![
            "`-1 s` is below zero, which no length of time is; write it without the minus sign"
        ],
    );
    check_error::<CurrentSpec>(
        "-0.2 It",
        &expect!["`-0.2 It` is below zero, which no current is; write it without the minus sign"],
    );
}

#[test]
fn zeros_at_either_end_do_not_count_as_digits() {
    let text = format!("{}1.5{} A", "0".repeat(40), "0".repeat(40));
    assert_eq!(
        text.parse::<Current>(),
        Ok(Current::from_milliamperes(1_500))
    );
}

#[test]
fn printing_picks_a_unit_for_the_eye() {
    let printed: Vec<String> = [
        Current::from_milliamperes(500).to_string(),
        Current::from_microamperes(1_234_567).to_string(),
        Current::from_microamperes(-250).to_string(),
        Current::ZERO.to_string(),
        Voltage::from_millivolts(2_750).to_string(),
        Resistance::from_milliohms(100).to_string(),
        Resistance::from_microohms(10_000_000_000).to_string(),
        Charge::from_microcoulombs(11_520_000_000).to_string(),
        Charge::from_microcoulombs(11_520_000_001).to_string(),
        Charge::from_microcoulombs(36_000_000).to_string(),
        Energy::from_microjoules(4_320_000_000).to_string(),
        Temperature::from_millidegrees_celsius(-40_500).to_string(),
        Span::from_secs(12).to_string(),
        Span::from_millis(500).to_string(),
        Span::from_secs(90).to_string(),
        Span::from_secs(91).to_string(),
        Span::from_secs(5_400).to_string(),
        Span::from_secs(15_120).to_string(),
        Span::from_secs(172_800).to_string(),
        SinkTime::from_micros(12_500_000).to_string(),
        HostTime::from_micros(-1).to_string(),
    ]
    .into();
    expect![[r"
        500 mA
        1.234567 A
        -250 uA
        0 A
        2.75 V
        100 mohm
        10 kohm
        3.2 Ah
        11520.000001 C
        10 mAh
        1.2 Wh
        -40.5 degC
        12 s
        500 ms
        1.5 min
        91 s
        1.5 h
        252 min
        2 d
        12.500000 s on the sink's clock
        -0.000001 s since 1970-01-01T00:00:00Z"]]
    .assert_eq(&printed.join("\n"));
    assert_eq!(
        format!("[{:>8}]", Current::from_milliamperes(500)),
        "[  500 mA]"
    );
}

#[test]
fn every_printable_unit_is_in_the_table() {
    for exponent in 0..63 {
        for value in [
            1_i64 << exponent,
            (1 << exponent) - 1,
            3_600 * (1 << (exponent % 40)),
        ] {
            assert!(Charge::from_microcoulombs(value).to_string().contains(' '));
            assert!(Energy::from_microjoules(value).to_string().contains(' '));
            assert!(Resistance::from_microohms(value).to_string().contains(' '));
        }
    }
}

#[test]
fn the_figures_of_a_data_sheet_keep_their_unit() {
    assert_eq!(
        "1.5 K/W".parse::<ThermalResistance>().unwrap().to_string(),
        "1.5 K/W"
    );
    assert_eq!("0.5 %".parse::<Ratio>().unwrap().parts_per_million(), 5_000);
    assert_eq!("0.5%".parse::<Ratio>().unwrap().to_string(), "0.5 %");
    assert_eq!("15 ppm".parse::<Ratio>().unwrap().to_string(), "15 ppm");
    assert_eq!(
        "50 ppm/K".parse::<TemperatureCoefficient>().unwrap(),
        TemperatureCoefficient::from_ppm_per_kelvin(50)
    );
    assert_eq!(
        "4 A/V^2".parse::<SquareLawFactor>().unwrap().to_string(),
        "4 A/V2"
    );
    assert_eq!("120 cm".parse::<Length>().unwrap().to_string(), "1.2 m");
    assert_eq!(
        "1.5 mm²".parse::<Area>().unwrap().square_micrometres(),
        1_500_000
    );
}

#[test]
fn no_spelling_belongs_to_two_units() {
    let mut seen = std::collections::BTreeSet::new();
    for dimension in Dimension::ALL {
        for spelling in dimension.units().iter().flat_map(|unit| unit.spellings) {
            assert!(seen.insert(*spelling), "{spelling} stands twice");
        }
    }
}

#[test]
fn a_rated_multiple_resolves_to_the_microampere() {
    let spec: CurrentSpec = "0.2 It".parse().unwrap();
    assert_eq!(
        spec,
        CurrentSpec::RatedMultiple {
            parts_per_million: 200_000
        }
    );
    let rated: Charge = "3.2 Ah".parse().unwrap();
    assert_eq!(spec.resolve(rated), Some(Current::from_milliamperes(640)));
    assert_eq!(spec.to_string(), "0.2 It");
    // A third of 1 Ah is no whole number of microamperes: the nearest is taken.
    let third: CurrentSpec = "0.333333 It".parse().unwrap();
    assert_eq!(
        third.resolve("1 Ah".parse().unwrap()),
        Some(Current::from_microamperes(333_333))
    );
    let absolute: CurrentSpec = "250 mA".parse().unwrap();
    assert_eq!(
        absolute.resolve(Charge::ZERO),
        Some(Current::from_milliamperes(250))
    );
    let huge = CurrentSpec::RatedMultiple {
        parts_per_million: u64::MAX,
    };
    assert_eq!(huge.resolve(Charge::MAX), None);
}

#[test]
fn products_round_half_away_from_zero() {
    let volt = Voltage::from_microvolts;
    let ampere = Current::from_microamperes;
    assert_eq!(volt(1_000).times(ampere(500)).microwatts(), 1);
    assert_eq!(volt(1_000).times(ampere(499)).microwatts(), 0);
    assert_eq!(volt(-1_000).times(ampere(500)).microwatts(), -1);
    assert_eq!(
        volt(3_700_000).times(ampere(640_000)).microwatts(),
        2_368_000
    );
    assert_eq!(
        Power::from_microwatts(2_368_000)
            .times(Span::from_secs(3_600))
            .microjoules(),
        8_524_800_000
    );
    assert_eq!(
        ampere(640_000).times(Span::from_secs(18_000)),
        "3.2 Ah".parse().unwrap()
    );
    assert_eq!(
        ampere(3_000_000).times_resistance(Resistance::from_milliohms(100)),
        volt(300_000)
    );
}

#[test]
fn products_hold_at_the_end_of_the_range() {
    assert_eq!(Current::MAX.times(Span::MAX), Charge::MAX);
    assert_eq!(Current::MIN.times(Span::MAX), Charge::MIN);
    assert_eq!(Voltage::MIN.times(Current::MIN), Power::MAX);
    assert_eq!(Power::MIN.times(Span::MAX), Energy::MIN);
}

#[test]
fn quotients_refuse_a_divisor_of_zero() {
    let volt = Voltage::from_millivolts(3_300);
    assert_eq!(volt.over(Resistance::ZERO), None);
    assert_eq!(
        volt.over(Resistance::from_milliohms(43_000)),
        Some(Current::from_microamperes(76_744))
    );
    assert_eq!(volt.over_current(Current::ZERO), None);
    assert_eq!(Power::from_milliwatts(650).over(Voltage::ZERO), None);
    assert_eq!(
        Power::from_milliwatts(650).over(volt),
        Some(Current::from_microamperes(196_970))
    );
    assert_eq!(Power::MAX.over(Voltage::from_microvolts(1)), None);
    assert_eq!(Charge::MAX.over(Span::ZERO), None);
    let rated: Charge = "3.2 Ah".parse().unwrap();
    assert_eq!(
        rated.over_current(Current::from_milliamperes(640)),
        Some(Span::from_secs(18_000))
    );
    assert_eq!(rated.over_current(Current::from_milliamperes(-640)), None);
}

#[test]
fn floats_that_are_not_finite_or_do_not_fit_are_refused() {
    for value in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY, 1e300, 9.3e12] {
        assert!(
            Current::from_amperes(value).is_err(),
            "{value} should be refused"
        );
    }
    assert!(Span::from_seconds(-1.0).is_err());
    assert_eq!(
        Current::from_amperes(0.5),
        Ok(Current::from_milliamperes(500))
    );
    assert_eq!(
        Current::from_amperes(-2.5e-6),
        Ok(Current::from_microamperes(-3))
    );
    assert_eq!(
        Current::from_amperes(2.5e-6),
        Ok(Current::from_microamperes(3))
    );
    assert_eq!(
        Charge::from_ampere_hours(3.2),
        Ok("3.2 Ah".parse().unwrap())
    );
    assert_eq!(
        Temperature::from_degrees_celsius(24.9996).unwrap(),
        "25 degC".parse().unwrap()
    );
    expect!["NaN V is no voltage that can be held; give a finite number within the range"]
        .assert_eq(&Voltage::from_volts(f64::NAN).unwrap_err().to_string());
}

#[test]
fn a_clock_that_steps_back_is_noticed() {
    let early = SinkTime::from_micros(10);
    let late = early + Span::from_micros(5);
    assert_eq!(late.checked_since(early), Some(Span::from_micros(5)));
    assert_eq!(early.checked_since(late), None);
    assert_eq!(early.saturating_since(late), Span::ZERO);
    assert_eq!(HostTime::MAX.checked_since(HostTime::MIN), Some(Span::MAX));
    assert_eq!(HostTime::ZERO.checked_sub(Span::MAX), None);
    assert_eq!(SinkTime::MAX.checked_add(Span::from_micros(1)), None);
}

#[test]
#[should_panic(expected = "sum of Current out of range")]
fn an_overflowing_operator_is_a_broken_invariant() {
    let _ = Current::MAX + Current::from_microamperes(1);
}

#[derive(serde::Serialize, serde::Deserialize, Debug, PartialEq)]
struct Step {
    draw: Text<Current>,
    #[serde(with = "crate::text")]
    cut_off: Voltage,
    #[serde(with = "crate::text::option", default)]
    at_most: Option<Span>,
}

#[test]
fn a_field_in_a_file_is_text_with_its_unit() {
    let step: Step = serde_json::from_str(r#"{"draw": "640 mA", "cut_off": "2.5 V"}"#).unwrap();
    assert_eq!(step.draw.0, Current::from_milliamperes(640));
    assert_eq!(step.at_most, None);
    expect![[r#"{"draw":"640 mA","cut_off":"2.5 V","at_most":null}"#]]
        .assert_eq(&serde_json::to_string(&step).unwrap());
    let error = serde_json::from_str::<Step>(r#"{"draw": 640, "cut_off": "2.5 V"}"#).unwrap_err();
    expect![[r#"the number 640 has no unit, but a current is wanted; write a text with its unit, for example "500 mA" at line 1 column 12"#]]
        .assert_eq(&error.to_string());
}

#[test]
fn in_the_record_a_quantity_is_a_plain_integer() {
    let json = serde_json::to_string(&(Current::from_milliamperes(1), SinkTime::from_micros(7)));
    assert_eq!(json.unwrap(), "[1000,7]");
}

#[test]
fn the_schema_lists_the_units() {
    let schema = schemars::schema_for!(Text<Temperature>);
    expect![[r#"{"$schema":"https://json-schema.org/draft/2020-12/schema","title":"TemperatureText","description":"The text of a temperature with its unit; a bare number is refused.","type":"string","examples":["40 degC"],"pattern":"^[+-]?[0-9]+(\\.[0-9]+)? ?(degC|°C)$"}"#]]
        .assert_eq(&serde_json::to_string(&schema).unwrap());
}

fn check_round_trip<T: Quantity + Textual + PartialEq + core::fmt::Debug>(units: i128) {
    if let Some(quantity) = T::from_base_units(units) {
        assert_eq!(quantity.to_string().parse::<T>(), Ok(quantity));
    }
}

proptest! {
    #[test]
    fn what_is_printed_is_read_back_to_the_last_unit(
        raw: i64, shift in 0_u32..63, step in prop::sample::select(std::vec![1_i64, 1_000, 360_000, 3_600_000, 30_000_000])
    ) {
        let units = i128::from((raw >> shift).saturating_mul(step));
        check_round_trip::<Current>(units);
        check_round_trip::<Voltage>(units);
        check_round_trip::<Power>(units);
        check_round_trip::<Resistance>(units);
        check_round_trip::<Charge>(units);
        check_round_trip::<Energy>(units);
        check_round_trip::<Temperature>(units);
        check_round_trip::<Span>(units.abs());
        check_round_trip::<ThermalResistance>(units);
        check_round_trip::<Ratio>(units);
        check_round_trip::<TemperatureCoefficient>(units);
        check_round_trip::<SquareLawFactor>(units);
        check_round_trip::<Length>(units);
        check_round_trip::<Area>(units);
        let spec = CurrentSpec::RatedMultiple { parts_per_million: (raw >> shift).unsigned_abs() };
        prop_assert_eq!(spec.to_string().parse::<CurrentSpec>(), Ok(spec));
    }

    #[test]
    fn no_text_makes_the_reader_panic(text in ".{0,40}") {
        let _ = text.parse::<Current>();
        let _ = text.parse::<Span>();
        let _ = text.parse::<CurrentSpec>();
    }

    #[test]
    fn no_number_makes_the_reader_panic(text in "[+-]?[0-9]{0,45}[.,]?[0-9]{0,45} ?(A|Mohm|d|kWh|It|us)") {
        let _ = text.parse::<Resistance>();
        let _ = text.parse::<Span>();
        let _ = text.parse::<Energy>();
        let _ = text.parse::<CurrentSpec>();
    }

    #[test]
    fn a_float_goes_out_and_comes_back(units in -(1_i64 << 50)..(1 << 50)) {
        let current = Current::from_microamperes(units);
        prop_assert_eq!(Current::from_amperes(current.amperes()), Ok(current));
    }

    #[test]
    fn division_is_the_nearest_whole_number(numerator: i64, denominator in 1_i64..=i64::MAX) {
        let (n, d) = (i128::from(numerator), i128::from(denominator));
        let q = crate::product::divide_rounded(n, d);
        prop_assert!(2 * (n - q * d).abs() <= d);
        prop_assert_eq!(crate::product::divide_rounded(-n, d), -q);
        prop_assert_eq!(crate::product::divide_rounded(n, -d), -q);
    }
}
