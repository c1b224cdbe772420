//! Calibrations of an invented sink whose true errors are known.

use expect_test::expect;
use quantity::{Current, Quantity, Ratio, Temperature, TemperatureCoefficient, Text, Voltage};

use super::{
    CalibrationError, Certificate, CertificateError, CurrentPoint, Measurements, ReferenceMeter,
    Spread, Validity, VerificationPoint, VoltagePoint, calibrate, computed, drift, micro, verify,
};
use crate::correction::Curve;
use crate::montecarlo::Random;
use crate::uncertainty::{Stated, coverage_factor};

fn current(microamperes: f64) -> Text<Current> {
    Text(Current::from_amperes(microamperes / 1e6).unwrap())
}

fn voltage(microvolts: f64) -> Text<Voltage> {
    Text(Voltage::from_volts(microvolts / 1e6).unwrap())
}

fn meter<T>(range: T, resolution: T) -> ReferenceMeter<T> {
    ReferenceMeter {
        identity: "invented reference meter, no. 1".to_owned(),
        range,
        of_reading: Text(Ratio::from_parts_per_million(500)),
        of_range: Text(Ratio::from_parts_per_million(50)),
        stated: Stated::Rectangular,
        resolution,
    }
}

/// A sink that draws 1 mA and 97 % of its setpoint, reads 2 mA less and 1 %
/// less than flows, and has `bend` of curvature (µA per A^2 nominal).
fn measurements(bend: f64, noise: f64, seed: u64) -> Measurements {
    let mut random = Random::from_seed(seed);
    let current_points = (1..=12)
        .map(|step| {
            let setpoint = f64::from(step) * 250_000.0;
            let flowing = 1_000.0 + 0.97 * setpoint + bend * (setpoint / 1e6).powi(2);
            let mut reading = |value: f64| current(value + noise * random.normal());
            CurrentPoint {
                setpoint: current(setpoint).0,
                reference: (0..4).map(|_| reading(flowing)).collect(),
                readback: (0..4)
                    .map(|_| reading((flowing - 2_000.0) / 1.01))
                    .collect(),
                spread: None,
            }
        })
        .collect();
    let voltage_points = (1..=8)
        .map(|step| {
            let true_value = f64::from(step) * 1e6;
            VoltagePoint {
                reference: vec![voltage(true_value)],
                readback: vec![voltage((true_value + 4_000.0) * 1.002)],
                spread: None,
            }
        })
        .collect();
    Measurements {
        identity: "weir-left-1".to_owned(),
        sink: "left".to_owned(),
        serial_number: Some(1),
        operator: "invented".to_owned(),
        issued_unix_s: 1_800_000_000,
        valid_until_unix_s: 1_831_536_000,
        ambient: Temperature::from_whole_degrees_celsius(23),
        temperature_spread_k: 20.0,
        temperature_coefficient: TemperatureCoefficient::from_ppm_per_kelvin(50),
        set_step: Current::from_microamperes(806),
        current_step: Current::from_microamperes(806),
        voltage_step: Voltage::from_microvolts(2_417),
        current_meter: meter(
            Current::from_milliamperes(3_000),
            Current::from_microamperes(10),
        ),
        voltage_meter: Some(meter(
            Voltage::from_millivolts(10_000),
            Voltage::from_microvolts(100),
        )),
        record: None,
        current_points,
        voltage_points,
    }
}

#[test]
fn the_errors_of_a_sink_are_found_and_corrected() {
    let certificate = calibrate(measurements(0.0, 0.0, 1)).unwrap();
    let correction = certificate.correction;
    let near = |is: Current, expected: i64| {
        assert!(
            (is.microamperes() - expected).abs() <= 3,
            "{is} is not {expected} uA"
        );
    };
    near(
        correction.current_from_setpoint(Current::from_milliamperes(1_000)),
        971_000,
    );
    near(
        correction.to_nominal_setpoint(Current::from_microamperes(971_000)),
        1_000_000,
    );
    near(
        correction.current_from_readback(Current::from_milliamperes(1_000)),
        1_012_000,
    );
    let volts = correction.terminal_voltage(Voltage::from_microvolts(4_012_008));
    assert!((volts.microvolts() - 4_000_000).abs() <= 5, "{volts}");
    assert!(!certificate.current_set.second_order.demanded);
    assert!(certificate.current_set.outliers.is_empty());
}

/// 3 mA per A^2 of curvature, found by the F-test and corrected; a straight
/// sink keeps its straight line.
#[test]
fn a_bend_that_the_f_test_demands_is_corrected_by_a_curve() {
    let straight = calibrate(measurements(0.0, 300.0, 2)).unwrap();
    let bent = calibrate(measurements(3_000.0, 300.0, 2)).unwrap();
    assert!(!straight.current_set.second_order.demanded);
    assert_eq!(straight.correction.current_set.bend(), None);
    assert_eq!(straight.current_set.curvature, None);
    let second = bent.current_set.second_order;
    assert!(second.demanded && second.probability < 1e-3);
    // The bend of 3 mA per A^2 departs from its own line by up to a few mA.
    assert!((1_000.0..6_000.0).contains(&second.departure_micro));
    let curvature = bent.current_set.curvature.unwrap();
    let error = (curvature.per_unit - 0.003).abs();
    assert!(
        error < 3.0 * curvature.uncertainty_per_unit,
        "{curvature:?}"
    );
    assert!(curvature.uncertainty_per_unit < 5e-4);
    // Between the points and a little beyond, set values lie within what the fit claims.
    let channels = bent.channels().unwrap();
    for milliamperes in [250_i32, 700, 1_500, 2_400, 3_000] {
        let nominal = f64::from(milliamperes) * 1e3;
        let truth = 1_000.0 + 0.97 * nominal + 3_000.0 * (nominal / 1e6).powi(2);
        let fit = channels.current_set.predict(nominal);
        assert!((fit.value - truth).abs() < 3.0 * fit.standard_uncertainty);
        let set = bent
            .correction
            .current_from_setpoint(Current::from_milliamperes(milliamperes.into()));
        assert!((micro(set) - fit.value).abs() < 2.0);
    }
    // The curve costs a little certainty, and beyond the points a lot.
    let u = |certificate: &Certificate, nominal: f64| {
        let channels = certificate.channels().unwrap();
        channels.current_set.predict(nominal).standard_uncertainty
    };
    assert!(u(&bent, 3e6) > u(&straight, 3e6));
    assert!(u(&bent, 6e6) > 3.0 * u(&bent, 3e6));
}

/// At a level of 1 %, about one straight sink in a hundred gets a curve: of
/// 1,000, fewer than 3 or more than 23 are found once in a thousand times each.
#[test]
fn a_straight_sink_gets_a_curve_as_rarely_as_the_test_s_level_says() {
    let curves = (0..1_000)
        .filter(|seed| {
            let mut inputs = measurements(0.0, 2_000.0, 5_000 + seed);
            inputs.set_step = Current::from_microamperes(1);
            let certificate = calibrate(inputs).unwrap();
            certificate.correction.current_set.bend().is_some()
        })
        .count();
    assert!((3..=23).contains(&curves), "{curves} of 1,000");
}

#[test]
fn a_bent_certificate_survives_its_file_and_its_bend_is_guarded() {
    let certificate = calibrate(measurements(3_000.0, 300.0, 4)).unwrap();
    let json = certificate.to_json().unwrap();
    assert_eq!(Certificate::from_json(&json).unwrap(), certificate);
    let bend = certificate.correction.current_set.bend().unwrap();
    let stated = bend.curvature_ppb_per_unit;
    let altered = json.replacen(&stated.to_string(), &(stated + 1_000).to_string(), 1);
    assert_ne!(altered, json);
    assert!(matches!(
        Certificate::from_json(&altered),
        Err(CertificateError::Altered)
    ));
}

#[test]
fn a_budget_names_what_contributes() {
    let certificate = calibrate(measurements(0.0, 300.0, 3)).unwrap();
    let channels = certificate.channels().unwrap();
    let budget = channels.current_read.budget(2e6);
    // The readbacks scatter by 244 uA, some of the step's 233 uA among them.
    expect![[r"
                                            type            u            c         |c|u       dof
        fit (offset and slope, correlated)  A        7.7917e1     1.0000e0     7.7917e1      10.0
        reference meter                     B        6.7031e2     1.0000e0     6.7031e2  infinite
        converter's resolution              B        1.3483e2     1.0000e0     1.3483e2  infinite
        repeatability of one reading        A        2.4404e2     1.0000e0     2.4404e2      36.0
        sense resistor's temperature        B        1.1674e3     1.0000e0     1.1674e3  infinite
        combined                                                               1.3770e3   35171.7"]]
    .assert_eq(&budget.to_string());
    // The bound of the temperature, 2.022 mA, and the rest as a normal distribution of 731 uA.
    let half_width = budget.expanded(0.95).unwrap().half_width;
    assert!((half_width - 2_547.0).abs() < 0.2, "{half_width}");
    // 20 K at 50 ppm/K of 2.022 A, rectangular.
    let drift = budget
        .contributions
        .iter()
        .find(|line| line.name.contains("temperature"));
    assert!((drift.unwrap().share() - 2_022_000.0 * 1e-3 / 3_f64.sqrt()).abs() < 1.0);
    let on_voltage = channels.voltage_read.unwrap().budget(4e6);
    assert!(
        on_voltage
            .contributions
            .iter()
            .all(|line| !line.name.contains("temperature"))
    );
    assert!(channels.current_read.vouches_for(2e6));
    assert!(!channels.current_read.vouches_for(4e6));
}

/// In the first form the converter's step counted whole, whatever the noise: a certificate from
/// then is computed again as it was, and says what it said.
#[test]
fn a_certificate_of_the_first_form_is_read_as_it_was_written() {
    let mut inputs = measurements(0.0, 300.0, 3);
    // Unequal weights, which the form decides on.
    inputs.current_points[0].readback.truncate(1);
    let first = computed(1, inputs.clone()).unwrap();
    assert_ne!(first.correction, calibrate(inputs).unwrap().correction);
    let read = Certificate::from_json(&first.to_json().unwrap()).unwrap();
    assert_eq!(read, first);
    let first = computed(1, measurements(0.0, 300.0, 3)).unwrap();
    expect![[r"
                                            type            u            c         |c|u       dof
        fit (offset and slope, correlated)  A        9.9568e1     1.0000e0     9.9568e1      10.0
        reference meter                     B        6.7031e2     1.0000e0     6.7031e2  infinite
        converter's resolution              B        2.3267e2     1.0000e0     2.3267e2  infinite
        repeatability of one reading        A        2.4404e2     1.0000e0     2.4404e2      36.0
        sense resistor's temperature        B        1.1674e3     1.0000e0     1.1674e3  infinite
        combined                                                               1.3913e3   34585.4"]]
    .assert_eq(
        &first
            .channels()
            .unwrap()
            .current_read
            .budget(2e6)
            .to_string(),
    );
}

/// The samples behind the readbacks reached over four codes and more: nothing of the step is left.
#[test]
fn extremes_tell_that_the_step_was_averaged_away() {
    let mut inputs = measurements(0.0, 50.0, 3);
    let share = |inputs: &Measurements| {
        let certificate = calibrate(inputs.clone()).unwrap();
        certificate
            .channels()
            .unwrap()
            .current_read
            .budget(2e6)
            .contributions[2]
            .share()
    };
    let whole = 806.0 / 12_f64.sqrt();
    assert!((0.85 * whole..whole).contains(&share(&inputs)));
    for point in &mut inputs.current_points {
        point.spread = Some(Spread {
            range: Current::from_microamperes(3_200),
            samples: 100,
        });
    }
    assert!(share(&inputs) < 1.0);
    let certificate = calibrate(inputs).unwrap();
    let json = certificate.to_json().unwrap();
    assert_eq!(Certificate::from_json(&json).unwrap(), certificate);
}

/// The intervals of the fit must cover the truth as often as they claim:
/// 95 % of many calibrations, within what chance allows.
#[test]
fn the_intervals_of_the_fit_cover_the_truth_as_often_as_they_claim() {
    let trials: u32 = 400;
    let covered = (0..trials)
        .filter(|&trial| {
            let mut inputs = measurements(0.0, 2_000.0, u64::from(trial) + 100);
            // Large noise against the steps: the weights are then the spread's.
            inputs.set_step = Current::from_microamperes(1);
            inputs.current_step = Current::from_microamperes(1);
            let certificate = calibrate(inputs).unwrap();
            let channels = certificate.channels().unwrap();
            let budget = channels.current_set.budget(2.9e6);
            let fit = &budget.contributions[0];
            let factor = coverage_factor(0.95, fit.degrees_of_freedom).unwrap();
            let truth = 1_000.0 + 0.97 * 2.9e6;
            let found =
                certificate.current_set.offset_micro + certificate.current_set.slope * 2.9e6;
            (found - truth).abs() <= factor * fit.share()
        })
        .count();
    assert!((360..=398).contains(&covered), "{covered} of {trials}");
}

#[test]
fn a_certificate_survives_its_file_and_an_altered_one_is_refused() {
    let certificate = calibrate(measurements(0.0, 300.0, 4)).unwrap();
    let json = certificate.to_json().unwrap();
    assert_eq!(Certificate::from_json(&json).unwrap(), certificate);
    let offset = certificate.correction.current_set.offset();
    let altered = json.replacen(
        &format!("\"offset_micro\": {offset},"),
        &format!("\"offset_micro\": {},", offset + 100),
        1,
    );
    assert_ne!(altered, json);
    assert!(matches!(
        Certificate::from_json(&altered),
        Err(CertificateError::Altered)
    ));
    let later = json.replacen("\"form\": 2", "\"form\": 3", 1);
    assert!(matches!(
        Certificate::from_json(&later),
        Err(CertificateError::Form { found: 3 })
    ));
    assert!(matches!(
        Certificate::from_json("{}"),
        Err(CertificateError::Json(_))
    ));
}

#[test]
fn a_certificate_holds_from_its_date_to_its_end() {
    let certificate = calibrate(measurements(0.0, 0.0, 5)).unwrap();
    assert_eq!(certificate.validity(1_799_999_999), Validity::NotYet);
    assert_eq!(certificate.validity(1_800_000_000), Validity::Valid);
    assert_eq!(certificate.validity(1_831_536_001), Validity::Expired);
    assert!(certificate.covers(1_800_000_000, 1_831_536_000));
    // A night that the end of validity falls into.
    assert!(!certificate.covers(1_831_500_000, 1_831_540_000));
}

#[test]
fn an_outlier_is_named_and_not_dropped() {
    let mut inputs = measurements(0.0, 100.0, 6);
    for reading in &mut inputs.current_points[4].reference {
        *reading = Text(reading.0 + Current::from_milliamperes(20));
    }
    let certificate = calibrate(inputs).unwrap();
    assert!(certificate.current_set.outliers.contains(&5));
    assert_eq!(certificate.current_set.residuals_micro.len(), 12);
    // The scatter enlarges the uncertainty of the line.
    let clean = calibrate(measurements(0.0, 100.0, 6)).unwrap();
    assert!(certificate.current_set.slope_uncertainty > 2.0 * clean.current_set.slope_uncertainty);
}

#[test]
fn what_gives_no_certificate_is_refused_with_the_reason() {
    let refused = |change: fn(&mut Measurements)| {
        let mut inputs = measurements(0.0, 0.0, 7);
        change(&mut inputs);
        calibrate(inputs).unwrap_err().to_string()
    };
    let messages = [
        refused(|inputs| inputs.current_points.truncate(1)),
        refused(|inputs| inputs.voltage_points[2].readback.clear()),
        refused(|inputs| inputs.current_meter.range = Current::from_milliamperes(1_000)),
        refused(|inputs| inputs.temperature_spread_k = f64::NAN),
        refused(|inputs| inputs.current_step = Current::ZERO),
        refused(|inputs| inputs.valid_until_unix_s = 0),
        refused(|inputs| {
            for point in &mut inputs.current_points {
                point.setpoint = Current::from_milliamperes(1);
            }
        }),
        refused(|inputs| {
            for point in &mut inputs.current_points {
                point.setpoint = Current::from_microamperes(point.setpoint.microamperes() * 3);
            }
        }),
    ];
    expect![[r"
        current set: 1 points; two make a line, and five or more, spread over the range, show whether it is one
        voltage read: point 3 has no reading; measure it or leave it out
        current set: point 5 reads 1.2135 A, above the meter's range of 1 A; use a higher range
        temperature_spread_k is not a finite number of zero or more; correct it
        current read: the converter's step and the meter's resolution are not above zero; state them
        the certificate would end before it begins; correct its dates
        current set: the points lie at too few different abscissas; spread them over the range
        current set: a gain error of -676666667 ppb is beyond the 500000000 ppb that a correction may be; check the sense resistor and the calibration points"]].assert_eq(&messages.join("\n"));
    let mut inputs = measurements(0.0, 0.0, 8);
    inputs.voltage_points.truncate(1);
    assert!(matches!(
        calibrate(inputs),
        Err(CalibrationError::TooFewPoints { points: 1, .. })
    ));
    let unknown = Measurements {
        voltage_meter: None,
        ..measurements(0.0, 0.0, 8)
    };
    assert_eq!(calibrate(unknown), Err(CalibrationError::NoVoltageMeter));
}

/// A builder with one meter: the current is corrected, and voltages stay nominal.
#[test]
fn the_current_alone_can_be_calibrated() {
    let certificate = calibrate(Measurements {
        voltage_points: Vec::new(),
        voltage_meter: None,
        ..measurements(0.0, 0.0, 1)
    })
    .unwrap();
    assert_eq!(certificate.voltage_read, None);
    assert_eq!(certificate.correction.voltage_read, Curve::IDENTITY);
    let both = calibrate(measurements(0.0, 0.0, 1)).unwrap();
    assert_eq!(
        certificate.correction.current_set,
        both.correction.current_set
    );
    let json = certificate.to_json().unwrap();
    assert!(!json.contains("voltage_meter") && !json.contains("voltage_points"));
    assert_eq!(Certificate::from_json(&json).unwrap(), certificate);
    // The voltage cannot have drifted from what was never known.
    let changes = drift(&certificate, &both).unwrap();
    assert_eq!(changes.len(), 2);
}

/// |E_n| <= 1 (ISO/IEC 17043): a sink as calibrated passes, one that has
/// drifted by a percent does not.
#[test]
fn a_verification_tells_a_sound_sink_from_a_drifted_one() {
    let certificate = calibrate(measurements(0.0, 0.0, 9)).unwrap();
    let channels = certificate.channels().unwrap();
    let point = |nominal: f64, flowing: f64| {
        let nominal = current(nominal);
        VerificationPoint {
            nominal,
            corrected: Text(certificate.correction.current_from_readback(nominal.0)),
            reference: current(flowing),
        }
    };
    let sound = point(1e6, 1_012_000.0);
    let drifted = point(1e6, 1_022_000.0);
    let meter = &certificate.measurements.current_meter;
    let verdicts = verify(&channels.current_read, meter, &[sound, drifted]).unwrap();
    assert!(verdicts[0].passed && verdicts[0].normalised_error.abs() < 0.1);
    assert!(!verdicts[1].passed && verdicts[1].normalised_error < -1.0);
    // The meter's own: 0.05 % of 1.022 A and 0.005 % of 3 A, rectangular, so 95 % of that, and
    // next to nothing for 10 uA of resolution.
    let expected = 0.95 * (511.0 + 150.0);
    assert!((verdicts[1].reference_expanded_micro - expected).abs() < 0.1);
    assert!(drifted.nominal.0.base_units() > 0);
}

#[test]
fn two_points_make_a_line_on_the_stated_word_of_the_meter_alone() {
    let mut inputs = measurements(0.0, 0.0, 8);
    inputs.current_points = vec![
        inputs.current_points[0].clone(),
        inputs.current_points[11].clone(),
    ];
    let certificate = calibrate(inputs).unwrap();
    let set = &certificate.current_set;
    assert!((set.slope - 0.97).abs() < 1e-6 && (set.offset_micro - 1_000.0).abs() < 2.0);
    // Both resolutions at both ends: by hand, u(slope) = sqrt(2) u / (3 A - 0.25 A).
    let u = (806.0_f64 / 12_f64.sqrt()).hypot(10.0 / 12_f64.sqrt());
    let by_hand = u * 2_f64.sqrt() / 2.75e6;
    assert!((set.slope_uncertainty / by_hand - 1.0).abs() < 1e-6);
    assert!(!set.second_order.demanded);
    let json = certificate.to_json().unwrap();
    assert_eq!(Certificate::from_json(&json).unwrap(), certificate);
}

#[test]
fn what_has_changed_between_two_certificates_is_put_against_their_uncertainties() {
    let first = calibrate(measurements(0.0, 300.0, 9)).unwrap();
    let again = calibrate(measurements(0.0, 300.0, 10)).unwrap();
    let same = drift(&first, &again).unwrap();
    assert_eq!(same.len(), 3);
    assert!(same.iter().all(|drift| !drift.significant), "{same:?}");
    // The sense resistor has aged: 2 % more current flows at each setpoint, 60 mA at 3 A.
    let mut aged = measurements(0.0, 300.0, 11);
    for point in &mut aged.current_points {
        for reading in &mut point.reference {
            *reading = current(reading.0.amperes() * 1.02e6);
        }
    }
    aged.current_meter.range = Current::from_milliamperes(4_000);
    let changes = drift(&first, &calibrate(aged).unwrap()).unwrap();
    let set = changes
        .iter()
        .find(|drift| drift.channel == "current set")
        .unwrap();
    assert!(set.significant && set.normalised_change > 5.0, "{set:?}");
    assert!((set.change_micro - 58_220.0).abs() < 2_000.0, "{set:?}");
    let other = Certificate {
        measurements: Measurements {
            sink: "right".to_owned(),
            ..first.measurements.clone()
        },
        ..first.clone()
    };
    assert!(drift(&first, &other).is_err());
}
