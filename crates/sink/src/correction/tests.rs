//! The correction: exactness, safe sides, and the trade's own example.

use proptest::prelude::*;
use quantity::{Charge, Current, Energy, Power, Span, Voltage};

use super::{Bend, Bound, Correction, Curve, CurveError};

fn line(offset: i64, gain_ppb: i64) -> Curve {
    Curve::line(offset, gain_ppb).unwrap()
}

fn bent(offset: i64, gain_ppb: i64, curvature_ppb_per_unit: i64, to_micro: i64) -> Curve {
    let bend = Bend {
        curvature_ppb_per_unit,
        from_micro: 0,
        to_micro,
    };
    Curve::bent(offset, gain_ppb, bend).unwrap()
}

fn correction(set: Curve, read: Curve, voltage: Curve) -> Correction {
    Correction {
        current_set: set,
        current_read: read,
        voltage_read: voltage,
        ..Correction::IDENTITY
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
    let correction = correction(set, Curve::IDENTITY, Curve::IDENTITY);
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
    let correction = correction(line(5_000, 0), Curve::IDENTITY, Curve::IDENTITY);
    let lowest = correction.to_nominal_setpoint(Current::from_milliamperes(4));
    assert_eq!(lowest, Current::ZERO);
    assert_eq!(
        correction.setpoint_limit_to_nominal(Current::from_milliamperes(4)),
        Current::ZERO
    );
}

#[test]
fn a_line_that_no_working_sink_has_is_refused() {
    assert!(Curve::line(0, 500_000_001).is_err());
    assert!(Curve::line(0, -500_000_001).is_err());
    let error = serde_json::from_str::<Curve>(r#"{"offset_micro": 0, "gain_ppb": -1000000000}"#);
    assert!(
        error
            .unwrap_err()
            .to_string()
            .contains("check the sense resistor")
    );
}

/// 1 mA + 1.01 I + 0.002 / A I^2, worked out by hand.
#[test]
fn a_bent_curve_follows_its_formula_between_its_ends_and_its_tangents_beyond() {
    let curve = bent(1_000, 10_000_000, 2_000_000, 3_000_000);
    let correction = correction(curve, curve, Curve::IDENTITY);
    let drawn = |nominal: i64| {
        correction
            .current_from_setpoint(Current::from_microamperes(nominal))
            .microamperes()
    };
    assert_eq!(drawn(0), 1_000);
    assert_eq!(drawn(1_000_000), 1_013_000);
    assert_eq!(drawn(3_000_000), 3_049_000);
    // Slope at 3 A: 1.01 + 2 * 0.002 * 3; at 0 A: 1.01.
    assert_eq!(drawn(4_000_000), 3_049_000 + 1_022_000);
    assert_eq!(drawn(-1_000_000), 1_000 - 1_010_000);
    for nominal in [-1_000_000, 0, 17, 1_000_000, 2_999_999, 4_000_000] {
        let back = correction.to_nominal_setpoint(Current::from_microamperes(drawn(nominal)));
        assert_eq!(back.microamperes(), nominal.max(0));
    }
    // 0.002 / A * (3 A)^2 / 4.
    assert_eq!(curve.departure_micro(0, 3_000_000), 4_500);
    assert_eq!(curve.departure_micro(1_000_000, 1_000_000), 0);
    assert_eq!(Curve::IDENTITY.departure_micro(0, 3_000_000), 0);
}

/// A steady current's charge and energy are those of its true values; of one
/// that goes to and fro, the mean of the curve differs by at most the departure.
#[test]
fn a_bent_curve_s_sums_are_exact_for_a_steady_current_and_bounded_for_any() {
    let read = bent(1_000, 10_000_000, 2_000_000, 3_000_000);
    let volts = bent(-2_000, 5_000_000, -300_000, 10_000_000);
    let correction = correction(Curve::IDENTITY, read, volts);
    let span = Span::from_secs(1_000);
    let (voltage, current) = (
        Voltage::from_millivolts(3_700),
        Current::from_milliamperes(640),
    );
    let through = correction.current_from_readback(current);
    let charge = correction.charge_from_counter(current.times(span), span);
    assert!((charge - through.times(span)).abs() <= Charge::from_microcoulombs(500));
    let energy = correction.energy_from_counter(
        voltage.times(current).times(span),
        current.times(span),
        voltage,
        span,
    );
    let direct = correction
        .terminal_voltage(voltage)
        .times(through)
        .times(span);
    assert!((energy - direct).abs() <= Energy::from_microjoules(4_000));
    // Half of the time nothing, half of it 3 A.
    let nominal = Charge::from_microcoulombs(1_500_000_000);
    let truth = (i64::from(1_000) + 3_049_000) * 500;
    let found = correction
        .charge_from_counter(nominal, span)
        .microcoulombs();
    let bound = read.departure_micro(0, 3_000_000) * 1_000;
    assert_eq!(truth - found, bound);
}

/// 42 mohm and 500 mA: 21 mV more at the device than at the terminals, and 10.5 mW lost on the
/// way there.
#[test]
fn two_wires_add_the_drop_and_the_loss_of_the_leads() {
    let correction = Correction::IDENTITY.with_leads(quantity::Resistance::from_milliohms(42));
    let (voltage, current) = (
        Voltage::from_millivolts(3_679),
        Current::from_milliamperes(500),
    );
    assert_eq!(
        correction.voltage_from_readback(voltage, current),
        Voltage::from_millivolts(3_700)
    );
    assert_eq!(correction.terminal_voltage(voltage), voltage);
    // The power in the sink is that at its terminals.
    assert_eq!(
        correction.power_from_readback(voltage, current),
        voltage.times(current)
    );
    let span = Span::from_secs(3_600);
    let energy = correction.energy_from_counter(
        voltage.times(current).times(span),
        current.times(span),
        voltage,
        span,
    );
    assert_eq!(
        energy,
        Voltage::from_millivolts(3_700).times(current).times(span)
    );
    let json = serde_json::to_string(&correction).unwrap();
    assert!(json.contains(r#""leads":"42 mohm""#), "{json}");
    assert_eq!(
        serde_json::from_str::<Correction>(&json).unwrap(),
        correction
    );
    assert!(
        !serde_json::to_string(&Correction::IDENTITY)
            .unwrap()
            .contains("leads")
    );
}

#[test]
fn a_bend_that_no_working_sink_has_is_refused() {
    let bend = |curvature_ppb_per_unit, from_micro, to_micro| {
        let bend = Bend {
            curvature_ppb_per_unit,
            from_micro,
            to_micro,
        };
        Curve::bent(0, 0, bend)
    };
    // 2 * 0.1 / A * 3 A is a slope of 1.6 at the end.
    assert_eq!(
        bend(100_000_000, 0, 3_000_000),
        Err(CurveError::Gain {
            gain_ppb: 600_000_000
        })
    );
    assert!(bend(1_000, 3_000_000, 3_000_000).is_err());
    assert!(bend(1, 0, i64::MAX).is_err());
    let json = r#"{"offset_micro": 0, "gain_ppb": 0,
        "bend": {"curvature_ppb_per_unit": 5, "from_micro": 9, "to_micro": 1}}"#;
    let error = serde_json::from_str::<Curve>(json).unwrap_err().to_string();
    assert!(error.contains("check the calibration points"), "{error}");
    let curve = bent(5, -3, 7, 100);
    let json = serde_json::to_string(&curve).unwrap();
    assert_eq!(serde_json::from_str::<Curve>(&json).unwrap(), curve);
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
    let correction = correction(Curve::IDENTITY, line(1_000, 10_000_000), Curve::IDENTITY);
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
        Curve::IDENTITY,
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
        .terminal_voltage(voltage)
        .times(correction.current_from_readback(current))
        .times(span);
    assert!((energy - direct).abs() <= Energy::from_microjoules(2_000));
}

#[test]
fn no_line_makes_the_conversion_panic_at_the_end_of_the_range() {
    for offset in [i64::MIN, 0, i64::MAX] {
        for gain in [-500_000_000, 0, 500_000_000] {
            let straight = line(offset, gain);
            let bend = Bend {
                curvature_ppb_per_unit: -gain / 10,
                from_micro: -1_000_000,
                to_micro: 1_000_000,
            };
            let curve = Curve::bent(offset, 0, bend).unwrap();
            let correction = correction(straight, curve, curve);
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

fn any_line() -> impl Strategy<Value = Curve> {
    (-50_000_i64..50_000, -200_000_000_i64..200_000_000)
        .prop_map(|(offset, gain)| line(offset, gain))
}

/// Straight or bent by up to 20 % of its slope at either end.
fn any_curve() -> impl Strategy<Value = Curve> {
    let ends = (-2_000_000_i64..5_000_000, 1_i64..20_000_000);
    let bend = (any_line(), -1.0..1.0_f64, ends).prop_map(|(line, share, (from, width))| {
        let reach = from.abs().max((from + width).abs());
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_precision_loss,
            reason = "both are below 10^15"
        )]
        let curvature_ppb_per_unit = (share * 1e14 / reach as f64) as i64;
        let bend = Bend {
            curvature_ppb_per_unit,
            from_micro: from,
            to_micro: from + width,
        };
        Curve::bent(line.offset(), line.gain_ppb(), bend).unwrap()
    });
    prop_oneof![any_line(), bend]
}

/// The true value, unrounded, in parts in 10^15 of a micro-unit, by the formula
/// as it is written.
fn exact(curve: Curve, nominal: i64) -> i128 {
    let unity = 1_000_000_000_000_000;
    let gain = 1_000_000 * (1_000_000_000 + i128::from(curve.gain_ppb()));
    let nominal = i128::from(nominal);
    let straight = i128::from(curve.offset()) * unity + nominal * gain;
    let Some(bend) = curve.bend() else {
        return straight;
    };
    let end = nominal.clamp(bend.from_micro.into(), bend.to_micro.into());
    let curvature = i128::from(bend.curvature_ppb_per_unit);
    straight + curvature * end * end + 2 * curvature * end * (nominal - end)
}

proptest! {
    #[test]
    fn a_limit_never_rounds_to_the_unsafe_side(
        read in any_curve(), limit in -1_000_000_i64..20_000_000, nominal in -1_000_000_i64..20_000_000
    ) {
        let correction = correction(read, read, read);
        let exact_limit = i128::from(limit) * 1_000_000_000_000_000;
        let upper = correction
            .current_limit_to_nominal(Current::from_microamperes(limit), Bound::Upper)
            .microamperes();
        let lower = correction
            .voltage_limit_to_nominal(Voltage::from_microvolts(limit), Bound::Lower)
            .microvolts();
        for nominal in [nominal, upper, upper + 1, lower, lower - 1] {
            prop_assert_eq!(exact(read, nominal) > exact_limit, nominal > upper);
            prop_assert_eq!(exact(read, nominal) < exact_limit, nominal < lower);
        }
    }

    #[test]
    fn a_true_power_above_its_limit_is_above_the_nominal_limit(
        amperes in any_curve(), volts in any_curve(),
        limit in 0_i64..100_000_000,
        voltage in 0_i64..20_000_000, current in 0_i64..10_000_000
    ) {
        let correction = correction(Curve::IDENTITY, amperes, volts);
        let (voltage, current) =
            (Voltage::from_microvolts(voltage), Current::from_microamperes(current));
        let limit = Power::from_microwatts(limit);
        let nominal_limit = correction.power_limit_to_nominal(
            limit, Voltage::from_millivolts(20_000), Current::from_milliamperes(10_000));
        // The true readings are rounded before they are multiplied: half a microvolt at
        // 16 A and half a microampere at 30 V, over a gain of 0.5.
        let rounding = 60;
        if correction.power_from_readback(voltage, current) > limit + Power::from_microwatts(rounding)
            && nominal_limit > Power::ZERO
        {
            prop_assert!(voltage.times(current).microwatts() + rounding > nominal_limit.microwatts());
        }
    }

    #[test]
    fn a_setpoint_is_met_to_the_microampere(set in any_curve(), wanted in 100_000_i64..20_000_000) {
        let correction = correction(set, Curve::IDENTITY, Curve::IDENTITY);
        let wanted = Current::from_microamperes(wanted);
        let nominal = correction.to_nominal_setpoint(wanted);
        let drawn = correction.current_from_setpoint(nominal);
        prop_assert!(nominal == Current::ZERO || (drawn - wanted).abs().microamperes() <= 1);
        let limited = correction.setpoint_limit_to_nominal(wanted);
        prop_assert!(limited == Current::ZERO || correction.current_from_setpoint(limited) <= wanted);
    }
}
