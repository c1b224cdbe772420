//! Figures of a calibrated sink: standing, correction, covariance.

use quantity::{Current, Ratio, Resistance, Temperature, TemperatureCoefficient, Text, Voltage};
use simulator::front_end::Errors;
use sink::bench::{Conductor, Leads, ReadError, Sensing};
use sink::calibration::{
    Certificate, CurrentPoint, Measurements, ReferenceMeter, Spread, VoltagePoint, calibrate,
};
use sink::montecarlo::Random;
use sink::uncertainty::{Contribution, DegreesOfFreedom, Evaluation, Stated};

use super::bench::{Setup, left, only};
use crate::channel::Instrument;
use crate::{Figures, Name, Standing, work_out};

/// 2026-12-01T20:00:00Z, when the rehearsals begin.
const EVENING_UNIX_S: i64 = 1_796_155_200;

/// Samples of a readback.
const SAMPLES: u32 = 100;

/// How a reference meter errs, within what it states: 500 ppm of the reading, 50 ppm of the range.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct MeterErrors {
    /// -1 to 1 of its accuracy.
    pub(crate) current: f64,
    pub(crate) voltage: f64,
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

/// What a converter makes of one value: four readbacks, each the mean of a hundred samples with
/// this much noise, rounded to steps; and least and largest sample of each.
fn read(value: f64, noise: f64, step: f64, random: &mut Random) -> [(f64, f64, f64); 4] {
    [(); 4].map(|()| {
        let (mut sum, mut least, mut largest) = (0.0, f64::INFINITY, f64::NEG_INFINITY);
        for _ in 0..SAMPLES {
            let sample = ((value + noise * random.normal()) / step).round() * step;
            (sum, least, largest) = (sum + sample, least.min(sample), largest.max(sample));
        }
        (sum / f64::from(SAMPLES), least, largest)
    })
}

/// A calibration of a sink that errs so, on a 3 A and a 10 V range.
pub(crate) fn certificate(errors: &Errors, meter_errors: MeterErrors, seed: u64) -> Certificate {
    let mut random = Random::from_seed(seed);
    let amperes = |value: f64| Text(Current::from_amperes(value).unwrap());
    let volts = |value: f64| Text(Voltage::from_volts(value).unwrap());
    let current_points = (1..=12)
        .map(|step| {
            // No setpoint is met to a code, so each point lies somewhere between two.
            let flowing = 0.24 * f64::from(step) + 806e-6 * random.unit();
            let shown = flowing + meter_errors.current * (500e-6 * flowing + 50e-6 * 3.0);
            let there = flowing * (1.0 + errors.current_gain) + errors.current_offset_a;
            let read = read(there, errors.current_noise_a, 806e-6, &mut random);
            let extremes = read.map(|(_, least, largest)| (amperes(least).0, amperes(largest).0));
            CurrentPoint {
                setpoint: amperes(flowing).0,
                reference: (0..4)
                    .map(|_| amperes(shown + 20e-6 * random.normal()))
                    .collect(),
                readback: read.map(|(mean, ..)| amperes(mean)).to_vec(),
                spread: Spread::of(extremes.into_iter(), SAMPLES),
            }
        })
        .collect();
    let voltage_points = (2..=9)
        .map(|step| {
            let terminal = 0.5 * f64::from(step) + 2417e-6 * random.unit();
            let shown = terminal + meter_errors.voltage * (500e-6 * terminal + 50e-6 * 10.0);
            let there = terminal * (1.0 + errors.voltage_gain) + errors.voltage_offset_v;
            let read = read(there, errors.voltage_noise_v, 2417e-6, &mut random);
            let extremes = read.map(|(_, least, largest)| (volts(least).0, volts(largest).0));
            VoltagePoint {
                reference: vec![volts(shown)],
                readback: read.map(|(mean, ..)| volts(mean)).to_vec(),
                spread: Spread::of(extremes.into_iter(), SAMPLES),
            }
        })
        .collect();
    calibrate(Measurements {
        identity: "weir-left-2026-11".to_owned(),
        sink: "left".to_owned(),
        serial_number: Some(1),
        operator: "invented".to_owned(),
        issued_unix_s: EVENING_UNIX_S - 30 * 86_400,
        valid_until_unix_s: EVENING_UNIX_S + 335 * 86_400,
        ambient: Temperature::from_whole_degrees_celsius(23),
        temperature_spread_k: 5.0,
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
    })
    .unwrap()
}

/// Re-issues a certificate with another statement; its points stay.
fn restated(certificate: &Certificate, change: impl Fn(&mut Measurements)) -> Certificate {
    let mut measurements = certificate.measurements.clone();
    change(&mut measurements);
    calibrate(measurements).unwrap()
}

const SEQUENCE: &str = r#"{ "sequence": 1, "title": "One hour",
  "dut": { "label": "K-01", "kind": "cell", "rated_capacity": "3.2 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "6.4 A" },
  "readback": "1 s",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [ { "rest": "10 s" }, { "draw": "1 A", "for": "1 h", "label": "hour" } ] }"#;

/// The figures of an hour by a sink with large errors, and the charge that truly flowed.
fn hour(change: impl Fn(&Certificate) -> Certificate) -> (Figures, f64) {
    let entry = left();
    let mut setup = Setup::new(SEQUENCE, &entry);
    setup.parts.errors = Errors {
        current_gain: -0.03,
        current_offset_a: 0.005,
        voltage_gain: 0.01,
        voltage_offset_v: 0.004,
        ..Errors::default()
    };
    let issued = certificate(&setup.parts.errors, MeterErrors::default(), 7);
    setup.certificate = Some(change(&issued));
    let night = setup.night();
    (
        work_out(&night.record).unwrap(),
        night.truth.charge_c / 3600.0,
    )
}

#[test]
fn a_valid_certificate_makes_figures_calibrated_and_right() {
    let (figures, truth_ah) = hour(Certificate::clone);
    assert_eq!(figures.standing, Standing::Calibrated);
    assert!(figures.warnings.is_empty(), "{:?}", figures.warnings);
    let charge = figures
        .figures
        .iter()
        .find(|figure| figure.name == Name::DeliveredCharge && figure.label.is_none())
        .unwrap();
    let standard = charge.uncertainty.unwrap().standard_uncertainty;
    // 500 ppm of 1 A and 50 ppm of 3 A, rectangular, for an hour: 375 uAh, and no more than
    // a few hundred beside it.
    assert!((375e-6..700e-6).contains(&standard), "u = {standard} Ah");
    assert!(
        (charge.value - truth_ah).abs() < 2.0 * standard,
        "{} Ah, truth {truth_ah} Ah",
        charge.value
    );
    assert_eq!(
        charge.dominated_by.as_deref(),
        Some("reference meter, current")
    );
    assert!((only(&figures, Name::Duration).value - 3600.0).abs() < 0.01);
}

/// Charge is calibrated and as certain as before; what needs the voltage is nominal, and said to be.
#[test]
fn a_certificate_of_the_current_alone_leaves_voltages_nominal() {
    let whole = |figures: &Figures, name| {
        let found = figures.figures.iter().find(|figure| figure.name == name);
        found.unwrap().clone()
    };
    let (both, _) = hour(Certificate::clone);
    let (figures, _) = hour(|issued| {
        restated(issued, |stated| {
            stated.voltage_points.clear();
            stated.voltage_meter = None;
        })
    });
    assert_eq!(figures.standing, Standing::CurrentCalibrated);
    let warned = &figures.warnings;
    assert!(
        warned
            .iter()
            .any(|warning| warning.contains("current alone"))
    );
    let charge = whole(&figures, Name::DeliveredCharge);
    assert_eq!(charge.budget, whole(&both, Name::DeliveredCharge).budget);
    let mean = whole(&figures, Name::MeanVoltage);
    let lines = mean.budget.contributions;
    assert!(
        lines.iter().all(|line| !line.name.contains("meter")),
        "{lines:?}"
    );
}

/// `Q = a T + b Q_nominal`: with the covariance of the fit, offset and slope together are better
/// known than each alone would let expect, and as well as the fit predicts at the mean current.
#[test]
fn offset_and_slope_enter_with_their_covariance() {
    let certificate = certificate(&Errors::default(), MeterErrors::default(), 3);
    let instrument = Instrument::certified(&certificate, &left()).unwrap();
    let summary = &certificate.current_read;
    for (amperes, hours) in [(0.3, 5.0), (1.5, 2.0), (2.8, 1.0)] {
        let lines = instrument.current.over(hours, amperes * hours);
        let fit = lines
            .iter()
            .find(|line| line.evaluation == Evaluation::TypeA)
            .unwrap();
        let nominal = (amperes - summary.offset_micro * 1e-6) / summary.slope;
        let predicted = certificate
            .channels()
            .unwrap()
            .current_read
            .budget(nominal * 1e6);
        let expected = predicted.contributions[0].share() * 1e-6 * hours;
        assert!(
            (fit.share() / expected - 1.0).abs() < 1e-6,
            "{amperes} A: {} Ah, the fit predicts {expected} Ah",
            fit.share()
        );
        assert_eq!(fit.degrees_of_freedom, DegreesOfFreedom::finite(10.0));
    }
}

/// A readback that bends by 3 mA per A^2: the fit's own prediction stands behind a charge, and a
/// difference of readings is as uncertain as the slope where it is known least.
#[test]
fn a_bent_certificate_enters_as_its_fit_predicts() {
    let straight = certificate(&Errors::default(), MeterErrors::default(), 3);
    let bent = restated(&straight, |measurements| {
        for point in &mut measurements.current_points {
            for reading in &mut point.readback {
                let amperes = reading.0.amperes();
                *reading =
                    Text(Current::from_amperes(amperes + 0.003 * amperes * amperes).unwrap());
            }
        }
    });
    assert!(bent.current_read.second_order.demanded);
    let instrument = Instrument::certified(&bent, &left()).unwrap();
    let fit = bent.channels().unwrap().current_read;
    for (amperes, hours) in [(0.3, 5.0), (1.5, 2.0), (2.8, 1.0)] {
        let lines = instrument.current.over(hours, amperes * hours);
        let line = &lines[0];
        assert_eq!(line.name, "certificate, current: curve");
        let nominal = amperes + 0.003 * amperes * amperes;
        let expected = fit.predict(nominal * 1e6).standard_uncertainty * 1e-6 * hours;
        assert!((line.share() / expected - 1.0).abs() < 0.01);
        assert_eq!(line.degrees_of_freedom, DegreesOfFreedom::finite(9.0));
    }
    let difference = &instrument.current.of_difference(2.0, 1.0, 1.0)[0];
    assert!((difference.share() - 2.0 * fit.slope_uncertainty_max()).abs() < 1e-12);
    let (low, high) = instrument.current.range.unwrap();
    assert!((low - 0.24).abs() < 1e-3 && (high - 2.88).abs() < 1e-3);
}

/// A reading converter that states 0.5 % of the reading and 2 mA: at 1 A for an hour, and with the
/// 1 % of the sense resistor beside it.
#[test]
fn the_errors_that_a_bench_file_states_stand_behind_nominal_figures() {
    let mut entry = left();
    entry.front_end.adc.current_error = Some(ReadError {
        of_reading: Text(Ratio::from_parts_per_million(5_000)),
        constant: Current::from_milliamperes(2),
        stated: Stated::Rectangular,
    });
    entry.front_end.adc.voltage_error = Some(ReadError {
        of_reading: Text(Ratio::ZERO),
        constant: Voltage::from_millivolts(20),
        stated: Stated::Normal {
            coverage_factor: 2.0,
        },
    });
    let instrument = Instrument::nominal(&entry, None);
    let share = |lines: &[Contribution], name: &str| {
        let line = lines.iter().find(|line| line.name == name);
        line.unwrap().share()
    };
    let lines = instrument.current.over(1.0, 1.0);
    let stated = share(&lines, "reading converter, current");
    assert!((stated - 0.007 / 3_f64.sqrt()).abs() < 1e-12);
    let resistor = share(&lines, "sense resistor, tolerance");
    assert!((resistor - 0.01 / 3_f64.sqrt()).abs() < 1e-12);
    let lines = instrument.voltage.of_reading(3.7);
    assert!((share(&lines, "reading converter, voltage") - 0.01).abs() < 1e-12);
}

/// The same discharge read over two wires of 42 mohm: the energy is the device's, to what is known
/// of the leads.
#[test]
fn two_wire_leads_are_corrected_and_stand_in_the_budget() {
    let mut entry = left();
    entry.leads = Leads {
        sensing: Sensing::TwoWire,
        conductor: Conductor::Measured {
            resistance: Resistance::from_milliohms(42),
        },
    };
    let mut setup = Setup::new(SEQUENCE, &entry);
    setup.parts.errors = Errors::default();
    setup.parts.four_wire = false;
    setup.parts.path.lead_ohm = 0.042;
    let night = setup.night();
    let figures = work_out(&night.record).unwrap();
    let whole = |name| {
        figures
            .figures
            .iter()
            .find(|figure| figure.name == name && figure.label.is_none())
            .unwrap()
    };
    let energy = whole(Name::DeliveredEnergy);
    let leads = energy
        .budget
        .contributions
        .iter()
        .find(|line| line.name == "leads")
        .unwrap();
    // 2.1 mohm, rectangular, times 1 A squared for an hour.
    assert!((leads.share() - 0.0021 / 3_f64.sqrt()).abs() < 2e-5);
    let mean = whole(Name::MeanVoltage);
    let outside = (night.truth.mosfet_j + night.truth.sense_j + night.truth.leads_j) / 3600.0;
    assert!(
        (energy.value - outside).abs() < 0.003,
        "{} Wh, truth {outside} Wh",
        energy.value
    );
    let charge_ah = night.truth.charge_c / 3600.0;
    assert!((mean.value - outside / charge_ah).abs() < 0.003);
    let without = outside - night.truth.leads_j / 3600.0;
    assert!(energy.value - without > 0.035);
}

#[test]
fn a_certificate_that_does_not_hold_leaves_figures_nominal_and_says_why() {
    type Change = fn(&mut Measurements);
    let cases: [(Change, &str); 3] = [
        (
            |stated| stated.valid_until_unix_s = EVENING_UNIX_S + 60,
            "before the run did; calibrate again",
        ),
        (
            |stated| stated.issued_unix_s = EVENING_UNIX_S + 60,
            "after the run began",
        ),
        (
            |stated| stated.sink = "right".to_owned(),
            "it is of sink `right`, and the record of sink `left`",
        ),
    ];
    for (change, reason) in cases {
        let (figures, _) = hour(|issued| restated(issued, change));
        assert_eq!(figures.standing, Standing::NominalUncalibrated);
        assert!(
            figures
                .warnings
                .iter()
                .any(|warning| warning.contains(reason)),
            "{:?}",
            figures.warnings
        );
        let duration = only(&figures, Name::Duration);
        assert!(duration.value > 3599.0);
    }
}
