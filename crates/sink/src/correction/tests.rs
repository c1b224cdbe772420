//! The correction: exactness, safe sides, and the trade's own example.

use proptest::prelude::*;
use quantity::{Charge, Current, Energy, Power, Span, Voltage};

use super::{Bound, Correction, Line};

fn line(offset: i64, gain_ppb: i64) -> Line {
    Line::new(offset, gain_ppb).unwrap()
}

fn correction(set: Line, read: Line, voltage: Line) -> Correction {
    Correction {
        current_set: set,
        current_read: read,
        voltage_read: voltage,
    }
}

#[test]
fn an_uncalibrated_sink_takes_nominal_for_true() {
    let current = Current::from_microamperes(123_457);
    let identity = Correction::IDENTITY;
    assert_eq!(identity, Correction::default());
    assert_eq!(identity.to_nominal_setpoint(current), current);
    assert_eq!(identity.current_from_readback(current), current);
    assert_eq!(
        identity.current_limit_to_nominal(current, Bound::Upper),
        current
    );
}

/// Common practice, no source: a sink that draws 194 mA at a nominal 200 mA and
/// 11 mA at a nominal 10.3 mA. The line through both is corrected away.
#[test]
fn a_sink_that_is_three_percent_off_is_set_right() {
    // Slope (194 - 11) / (200 - 10.3125) and the offset that goes with it.
    let set = line(1_050, -35_256_178);
    let correction = correction(set, Line::IDENTITY, Line::IDENTITY);
    let drawn = |nominal: i64| {
        correction
            .current_from_setpoint(Current::from_microamperes(nominal))
            .microamperes()
    };
    assert_eq!(drawn(200_000), 193_999);
    assert_eq!(drawn(10_313), 10_999);
    let nominal = correction.to_nominal_setpoint(Current::from_milliamperes(200));
    assert_eq!(nominal.microamperes(), 206_221);
    assert_eq!(drawn(206_221), 200_000);
}

#[test]
fn a_setpoint_below_the_offset_is_the_lowest_there_is() {
    let correction = correction(line(5_000, 0), Line::IDENTITY, Line::IDENTITY);
    let lowest = correction.to_nominal_setpoint(Current::from_milliamperes(4));
    assert_eq!(lowest, Current::ZERO);
    assert_eq!(
        correction.setpoint_limit_to_nominal(Current::from_milliamperes(4)),
        Current::ZERO
    );
}

#[test]
fn a_line_that_no_working_sink_has_is_refused() {
    assert!(Line::new(0, 500_000_001).is_err());
    assert!(Line::new(0, -500_000_001).is_err());
    let error = serde_json::from_str::<Line>(r#"{"offset_micro": 0, "gain_ppb": -1000000000}"#);
    assert!(
        error
            .unwrap_err()
            .to_string()
            .contains("check the sense resistor")
    );
}

#[test]
fn a_correction_in_a_file_is_read_back_as_it_was() {
    let correction = correction(line(-12, 3_400_000), line(7, -20), line(0, 1));
    let json = serde_json::to_string(&correction).unwrap();
    assert!(json.starts_with(r#"{"current_set":{"offset_micro":-12,"gain_ppb":3400000}"#));
    assert_eq!(
        serde_json::from_str::<Correction>(&json).unwrap(),
        correction
    );
}

#[test]
fn an_offset_error_of_the_charge_grows_with_time_and_a_gain_error_with_charge() {
    let correction = correction(Line::IDENTITY, line(1_000, 10_000_000), Line::IDENTITY);
    // 1 mA for an hour is 3.6 C; 1 % of 100 C is 1 C.
    let charge = correction.charge_from_counter(
        Charge::from_microcoulombs(100_000_000),
        Span::from_secs(3_600),
    );
    assert_eq!(charge.microcoulombs(), 104_600_000);
}

#[test]
fn the_energy_of_a_constant_load_is_that_of_its_true_values() {
    let correction = correction(
        Line::IDENTITY,
        line(1_000, 10_000_000),
        line(-2_000, 5_000_000),
    );
    let (voltage, current) = (
        Voltage::from_millivolts(3_700),
        Current::from_milliamperes(640),
    );
    let span = Span::from_secs(1_000);
    let energy = correction.energy_from_counter(
        voltage.times(current).times(span),
        current.times(span),
        voltage,
        span,
    );
    let direct = correction
        .voltage_from_readback(voltage)
        .times(correction.current_from_readback(current))
        .times(span);
    assert!((energy - direct).abs() <= Energy::from_microjoules(2_000));
}

#[test]
fn no_line_makes_the_conversion_panic_at_the_end_of_the_range() {
    for offset in [i64::MIN, 0, i64::MAX] {
        for gain in [-500_000_000, 0, 500_000_000] {
            let line = line(offset, gain);
            let correction = correction(line, line, line);
            for value in [i64::MIN, 0, i64::MAX] {
                let current = Current::from_microamperes(value);
                let voltage = Voltage::from_microvolts(value);
                let power = Power::from_microwatts(value);
                let _ = correction.to_nominal_setpoint(current);
                let _ = correction.power_from_readback(voltage, current);
                let _ = correction.power_limit_to_nominal(power, voltage, current);
                let _ = correction.energy_from_counter(
                    Energy::from_microjoules(value),
                    Charge::from_microcoulombs(value),
                    voltage,
                    Span::MAX,
                );
            }
        }
    }
}

fn any_line() -> impl Strategy<Value = Line> {
    (-50_000_i64..50_000, -200_000_000_i64..200_000_000)
        .prop_map(|(offset, gain)| line(offset, gain))
}

proptest! {
    #[test]
    fn a_limit_never_rounds_to_the_unsafe_side(
        read in any_line(), limit in -1_000_000_i64..20_000_000, nominal in -1_000_000_i64..20_000_000
    ) {
        let correction = correction(read, read, read);
        // The true value, unrounded, in parts in 10^9 of a microampere.
        let exact = i128::from(read.offset()) * 1_000_000_000
            + i128::from(nominal) * (1_000_000_000 + i128::from(read.gain_ppb()));
        let exact_limit = i128::from(limit) * 1_000_000_000;
        let upper = correction
            .current_limit_to_nominal(Current::from_microamperes(limit), Bound::Upper)
            .microamperes();
        let lower = correction
            .voltage_limit_to_nominal(Voltage::from_microvolts(limit), Bound::Lower)
            .microvolts();
        prop_assert_eq!(exact > exact_limit, nominal > upper);
        prop_assert_eq!(exact < exact_limit, nominal < lower);
    }

    #[test]
    fn a_true_power_above_its_limit_is_above_the_nominal_limit(
        amperes in any_line(), volts in any_line(),
        limit in 0_i64..100_000_000,
        voltage in 0_i64..20_000_000, current in 0_i64..10_000_000
    ) {
        let correction = correction(Line::IDENTITY, amperes, volts);
        let (voltage, current) =
            (Voltage::from_microvolts(voltage), Current::from_microamperes(current));
        let limit = Power::from_microwatts(limit);
        let nominal_limit = correction.power_limit_to_nominal(
            limit, Voltage::from_millivolts(20_000), Current::from_milliamperes(10_000));
        if correction.power_from_readback(voltage, current) > limit {
            // The true readings are rounded before they are multiplied: half a microvolt at
            // 16 A and half a microampere at 30 V, over a gain of 0.64.
            prop_assert!(voltage.times(current).microwatts() + 40 > nominal_limit.microwatts());
        }
    }

    #[test]
    fn a_setpoint_is_met_to_the_microampere(set in any_line(), wanted in 100_000_i64..20_000_000) {
        let correction = correction(set, Line::IDENTITY, Line::IDENTITY);
        let wanted = Current::from_microamperes(wanted);
        let drawn = correction.current_from_setpoint(correction.to_nominal_setpoint(wanted));
        prop_assert!((drawn - wanted).abs().microamperes() <= 1);
        let limited = correction.setpoint_limit_to_nominal(wanted);
        prop_assert!(correction.current_from_setpoint(limited) <= wanted);
    }
}
