//! The envelope: which limit binds where, and that none is exceeded.

use expect_test::expect;
use proptest::prelude::*;
use quantity::{Current, Power, Resistance, Span, Temperature, Voltage};

use super::{Duration, Envelope, Limit, Warning, usual_durations};
use crate::bench::{Bench, SinkEntry};

fn sink(name: &str) -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../bench/weir.toml")).unwrap();
    bench.sink(name).unwrap().clone()
}

/// The left sink with its stated limits out of the way.
fn bare() -> SinkEntry {
    let mut sink = sink("left");
    sink.limits.current = Current::from_milliamperes(100_000);
    sink.limits.power = Power::from_milliwatts(1_000_000);
    sink.limits.voltage = Voltage::from_millivolts(100_000);
    sink.limits.temperature = Temperature::from_whole_degrees_celsius(140);
    sink.heat_sink.limit = Temperature::from_whole_degrees_celsius(140);
    sink
}

fn binding(sink: &SinkEntry, volts: i64, duration: Duration) -> (Limit, f64) {
    let envelope = Envelope::of(sink).unwrap();
    let ceiling = envelope.ceiling(
        Voltage::from_millivolts(volts * 1_000),
        Resistance::ZERO,
        duration,
    );
    (ceiling.binding, ceiling.current.amperes())
}

#[test]
fn the_example_bench_has_this_envelope() {
    let voltages: Vec<Voltage> = [500, 1_000, 2_500, 3_700, 4_200, 6_000, 9_000, 12_000]
        .map(Voltage::from_millivolts)
        .into();
    let tables: Vec<String> = ["left", "right"]
        .map(|name| {
            let envelope = Envelope::of(&sink(name)).unwrap();
            let table = envelope.table(&voltages, Resistance::ZERO, &usual_durations());
            let lines: Vec<String> = table
                .to_string()
                .lines()
                .map(|line| line.trim_end().to_owned())
                .collect();
            format!("{name}\n{}", lines.join("\n"))
        })
        .into();
    expect![[r"
        left
            source  continuous, mA                for 10 ms, mA                 for 1 s, mA                   for 10 s, mA                  for 5 min, mA
            500 mV    3000 stated current           3000 stated current           3000 stated current           3000 stated current           3000 stated current
               1 V    3000 stated current           3000 stated current           3000 stated current           3000 stated current           3000 stated current
             2.5 V    3000 stated current           3000 stated current           3000 stated current           3000 stated current           3000 stated current
             3.7 V    3000 stated current           3000 stated current           3000 stated current           3000 stated current           3000 stated current
             4.2 V    3000 stated current           3000 stated current           3000 stated current           3000 stated current           3000 stated current
               6 V    2500 stated power             2500 stated power             2500 stated power             2500 stated power             2500 stated power
               9 V    1666 stated power             1666 stated power             1666 stated power             1666 stated power             1666 stated power
              12 V       0 voltage                     0 voltage                     0 voltage                     0 voltage                     0 voltage

        right
            source  continuous, mA                for 10 ms, mA                 for 1 s, mA                   for 10 s, mA                  for 5 min, mA
            500 mV     457 source                    457 source                    457 source                    457 source                    457 source
               1 V     500 stated current            500 stated current            500 stated current            500 stated current            500 stated current
             2.5 V     500 stated current            500 stated current            500 stated current            500 stated current            500 stated current
             3.7 V     500 stated current            500 stated current            500 stated current            500 stated current            500 stated current
             4.2 V     500 stated current            500 stated current            500 stated current            500 stated current            500 stated current
               6 V     500 stated current            500 stated current            500 stated current            500 stated current            500 stated current
               9 V     500 stated current            500 stated current            500 stated current            500 stated current            500 stated current
              12 V     416 stated power              416 stated power              416 stated power              416 stated power              416 stated power"]].assert_eq(&tables.join("\n\n"));
}

#[test]
fn each_limit_binds_where_its_own_formula_says() {
    let close = |is: (Limit, f64), limit: Limit, amperes: f64| {
        assert_eq!(is.0, limit);
        assert!((is.1 - amperes).abs() < 2e-6, "{} is not {amperes}", is.1);
    };
    // Converter: 4095 / 4096 * 0.33 V / 0.1 ohm.
    close(
        binding(&bare(), 5, Duration::Continuous),
        Limit::Converter,
        3.299_194,
    );
    // Sense resistor: 0.5 W over 0.1 ohm with 1 % of tolerance.
    let mut weak = bare();
    weak.front_end.sense_resistor.rating = Power::from_milliwatts(500);
    close(
        binding(&weak, 5, Duration::Continuous),
        Limit::SenseResistor,
        (0.5_f64 / 0.101).sqrt(),
    );
    // Half of the way from 70 to 155 degC half of the rating is left.
    weak.ambient = Temperature::from_millidegrees_celsius(112_500);
    weak.mosfet.junction_max = Temperature::from_whole_degrees_celsius(1_000);
    weak.heat_sink.limit = Temperature::from_whole_degrees_celsius(900);
    weak.limits.temperature = weak.heat_sink.limit;
    close(
        binding(&weak, 5, Duration::Continuous),
        Limit::SenseResistor,
        (0.25_f64 / 0.101).sqrt(),
    );
    // Stated power at the terminals: 15 W over 9 V.
    let mut stated = bare();
    stated.limits.power = Power::from_milliwatts(15_000);
    close(
        binding(&stated, 9, Duration::Continuous),
        Limit::StatedPower,
        15.0 / 9.0,
    );
    // Heat sink: 50 K over 2.5 K/W is 20 W in the MOSFET.
    let mut cool = bare();
    cool.heat_sink.limit = Temperature::from_whole_degrees_celsius(80);
    let (limit, amperes) = binding(&cool, 9, Duration::Continuous);
    assert_eq!(limit, Limit::HeatSink);
    let leads = Envelope::of(&cool).unwrap().leads_ohms();
    assert!((amperes * (9.0 - amperes * (0.1 + leads)) - 20.0).abs() < 1e-4);
    // Above what the MOSFET stands nothing may flow.
    close(
        binding(&bare(), 101, Duration::Continuous),
        Limit::Voltage,
        0.0,
    );
}

#[test]
fn a_junction_takes_more_for_a_pulse() {
    let mut sink = bare();
    sink.front_end.dac.full_scale = Voltage::from_millivolts(10_000);
    sink.front_end.sense_resistor.rating = Power::from_milliwatts(1_000_000);
    sink.mosfet.current_max = Current::from_milliamperes(100_000);
    for corner in &mut sink.mosfet.soa_dc {
        corner.current = Current::from_milliamperes(100_000_000);
    }
    sink.mosfet.junction_to_case = quantity::ThermalResistance::from_millikelvins_per_watt(10);
    sink.mosfet.foster.clear();
    sink.heat_sink.limit = Temperature::from_whole_degrees_celsius(1_000);
    sink.limits.temperature = sink.heat_sink.limit;
    let (limit, steady) = binding(&sink, 20, Duration::Continuous);
    assert_eq!(limit, Limit::Junction);
    let leads = Envelope::of(&sink).unwrap().leads_ohms();
    // (150 - 30) K over 0.01 + 0.5 + 2.5 K/W.
    let watts = steady * (20.0 - steady * (0.1 + leads));
    assert!((watts - 120.0 / 3.01).abs() < 1e-3);
    let (_, pulse) = binding(&sink, 20, Duration::Pulse(Span::from_secs(60)));
    assert!(pulse > 1.5 * steady);
}

/// The conservative limit without a d.c. line is marked (common practice, no
/// source): a quarter of the rated power, derated with the case.
#[test]
fn a_mosfet_without_a_dc_line_is_held_low_and_said_so() {
    let mut sink = bare();
    sink.mosfet.soa_dc.clear();
    let envelope = Envelope::of(&sink).unwrap();
    assert_eq!(envelope.warnings(), [Warning::NoDcLine]);
    let (limit, amperes) = binding(&sink, 20, Duration::Continuous);
    assert_eq!(limit, Limit::NoDcLine);
    let leads = envelope.leads_ohms();
    let watts = amperes * (20.0 - amperes * (0.1 + leads));
    // P = 31.25 W * (150 - 30 - 3 P) / 125.
    assert!((watts - 31.25 * 120.0 / (125.0 + 3.0 * 31.25)).abs() < 1e-3);
    assert!(Warning::NoDcLine.to_string().contains("no source"));
}

/// Between (5 V, 20 A) and (20 V, 4 A) the line is straight in log-log.
#[test]
fn the_dc_line_is_straight_between_its_corners_in_log_log() {
    let line = [(5.0, 20.0), (20.0, 4.0)];
    assert!((super::limit::log_log(&line, 10.0) - 80_f64.sqrt()).abs() < 1e-12);
    assert!((super::limit::log_log(&line, 1.0) - 20.0).abs() < 1e-12);
    assert!(super::limit::log_log(&line, 21.0).abs() < 1e-12);
}

#[test]
fn a_weak_source_bounds_the_current_itself() {
    let envelope = Envelope::of(&bare()).unwrap();
    let ceiling = envelope.ceiling(
        Voltage::from_millivolts(300),
        Resistance::from_milliohms(200),
        Duration::Continuous,
    );
    assert_eq!(ceiling.binding, Limit::Source);
    let all = 0.2 + 0.1 + 0.03 + envelope.leads_ohms();
    assert!(ceiling.current.amperes() < 0.3 / all);
    assert!(ceiling.current.amperes() > 0.9 * 0.3 / all);
}

proptest! {
    #[test]
    fn a_shorter_pulse_is_never_allowed_less(
        volts in 100_i64..9_000, ohms in 0_i64..500, first in 1_u64..1_000_000_000, second in 1_u64..1_000_000_000
    ) {
        let envelope = Envelope::of(&bare()).unwrap();
        let at = |duration| {
            envelope
                .ceiling(Voltage::from_millivolts(volts), Resistance::from_milliohms(ohms), duration)
                .current
        };
        let short = at(Duration::Pulse(Span::from_micros(first.min(second))));
        let long = at(Duration::Pulse(Span::from_micros(first.max(second))));
        prop_assert!(short >= long);
        prop_assert!(long >= at(Duration::Continuous));
    }

    #[test]
    fn the_ceiling_is_the_least_of_all_limits(volts in 0_i64..20_000, ohms in 0_i64..500) {
        let envelope = Envelope::of(&sink("right")).unwrap();
        let ceiling = envelope.ceiling(
            Voltage::from_millivolts(volts),
            Resistance::from_milliohms(ohms),
            Duration::Continuous,
        );
        prop_assert!(ceiling.limits.iter().all(|(_, current)| *current >= ceiling.current));
        prop_assert!(ceiling.current >= Current::ZERO);
        prop_assert_eq!(ceiling.limits.len(), 10);
    }
}
