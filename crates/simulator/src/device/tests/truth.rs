//! What the sink counts and reads, against what truly flowed.

use super::*;

#[test]
fn an_error_free_front_end_gives_exact_readings() {
    let mut host = Host::new(SinkParts::error_free(figures(), cell_k(0.8)));
    host.begin(Span::from_millis(100));
    // 0.64 A is 10 240 codes of 62.5 uA, exactly.
    host.step(amperes(0.64), Span::ZERO, Span::from_secs(60));
    host.wait_s(2);
    let last = host.readbacks().pop().unwrap();
    assert_eq!(last.current, Current::from_microamperes(640_000));
    assert_eq!(last.current_min, last.current_max);
    let Source::Cell(cell) = host.sink.source() else {
        panic!("a cell was connected")
    };
    let off = last.voltage_min.volts() - cell.terminal_voltage_v(0.64);
    assert!(off.abs() < 8.192 / 65536.0, "{off} V");
}

#[test]
fn the_counters_count_what_truly_flowed() {
    let mut host = Host::new(SinkParts::error_free(figures(), cell_k(1.0)));
    host.begin(Span::from_millis(100));
    host.step(amperes(0.64), Span::ZERO, Span::from_secs(600));
    host.wait_s(601);
    host.wait_ms(100);
    let (counters, truth) = (host.counters(), host.sink.truth());
    // The step lasts 600 s to the tick and the codes are exact.
    assert!((truth.charge_c - 384.0).abs() < 1e-9, "{}", truth.charge_c);
    assert!((counters.charge.coulombs() - truth.charge_c).abs() < 2e-6);
    let off = counters.energy.joules() / truth.terminal_j - 1.0;
    assert!(off.abs() < 1e-5, "{off}");
}

#[test]
fn noise_averages_out_of_the_counters() {
    let errors = Errors {
        current_noise_a: 2e-3,
        voltage_noise_v: 2e-3,
        loop_time_constant_s: 2e-4,
        ..Errors::default()
    };
    let mut host = Host::new(SinkParts {
        errors,
        ..SinkParts::error_free(figures(), cell_k(1.0))
    });
    host.begin(Span::from_millis(100));
    host.step(amperes(0.64), Span::ZERO, Span::from_secs(100));
    host.wait_s(102);
    let (counters, truth) = (host.counters(), host.sink.truth());
    // 100 000 samples of 2 mA over 1 ms: a standard deviation of 0.63 mC. While off the
    // converter clips the noise's lower half: 0.8 mA in the mean, over 2 s.
    let off = counters.charge.coulombs() - truth.charge_c;
    assert!((-0.003..0.006).contains(&off), "{off} C");
    let last = host.readbacks();
    assert!(
        last.iter()
            .any(|values| values.current_max > values.current_min)
    );
}

#[test]
fn gains_and_offsets_show_where_they_were_put() {
    let errors = Errors {
        set_gain: 0.02,
        set_offset_a: 0.003,
        current_gain: -0.01,
        current_offset_a: 0.002,
        voltage_gain: 0.005,
        voltage_offset_v: -0.004,
        ..Errors::default()
    };
    let mut host = Host::new(SinkParts {
        errors,
        ..SinkParts::error_free(figures(), cell_k(0.8))
    });
    host.begin(Span::from_millis(100));
    host.step(amperes(1.0), Span::ZERO, Span::from_secs(60));
    host.wait_s(1);
    let true_a = host.sink.current_a();
    assert!((true_a - 1.023).abs() < 1e-12, "{true_a}");
    let last = host.readbacks().pop().unwrap();
    assert!((last.current.amperes() - (1.023 * 0.99 + 0.002)).abs() < 1e-4);
    let Source::Cell(cell) = host.sink.source() else {
        panic!("a cell was connected")
    };
    let expected = cell.terminal_voltage_v(true_a) * 1.005 - 0.004;
    assert!((last.voltage.volts() - expected).abs() < 1e-3);
}

#[test]
fn the_converters_floor_holds_while_the_gate_is_on() {
    let errors = Errors {
        drive_floor_v: 0.001,
        ..Errors::default()
    };
    let mut host = Host::new(SinkParts {
        errors,
        ..SinkParts::error_free(figures(), cell_k(0.8))
    });
    host.begin(Span::from_millis(100));
    host.step(amperes(0.002), Span::ZERO, Span::from_secs(60));
    host.wait_s(1);
    assert!((host.sink.current_a() - 0.01).abs() < 1e-12);
    host.step(amperes(0.0), Span::ZERO, Span::from_secs(60));
    host.wait_s(1);
    assert!(host.sink.current_a().abs() < 1e-15);
}

#[test]
fn two_wire_sensing_reads_the_leads_drop_as_well() {
    let read = |four_wire| {
        let mut parts = SinkParts::error_free(figures(), cell_k(0.8));
        parts.path.lead_ohm = 0.05;
        parts.four_wire = four_wire;
        let mut host = Host::new(parts);
        host.begin(Span::from_millis(100));
        host.step(amperes(2.0), Span::ZERO, Span::from_secs(60));
        host.wait_s(1);
        host.readbacks().pop().unwrap().voltage.volts()
    };
    assert!((read(true) - read(false) - 0.1).abs() < 2e-4);
}

#[test]
fn every_joule_of_the_source_is_accounted_for() {
    let mut parts = SinkParts::error_free(figures(), cell_m(0.6));
    parts.path.lead_ohm = 0.03;
    parts.errors.loop_time_constant_s = 3e-3;
    let mut host = Host::new(parts);
    host.begin(Span::from_millis(500));
    let power = Mode::Power(Power::from_watts(6.0).unwrap());
    for mode in [amperes(2.5), power, amperes(0.0), amperes(0.4)] {
        host.step(mode, Span::from_millis(200), Span::from_secs(60));
        host.wait_s(20);
    }
    let truth = host.sink.truth();
    let spent = truth.inner_j + truth.leads_j + truth.mosfet_j + truth.sense_j;
    assert!(truth.source_j > 300.0);
    assert!((spent / truth.source_j - 1.0).abs() < 1e-10, "{truth:?}");
    assert!(truth.inner_j > 0.0 && truth.leads_j > 0.0 && truth.sense_j > 0.0);
}

#[test]
fn the_heat_sink_settles_where_power_and_resistance_say() {
    let mut host = Host::new(SinkParts::error_free(figures(), cell_k(1.0)));
    host.begin(Span::from_secs(1));
    host.step(amperes(1.5), Span::ZERO, Span::from_secs(4000));
    host.wait_s(3000);
    let before = host.sink.truth();
    host.wait_s(60);
    let after = host.sink.truth();
    let power = (after.mosfet_j - before.mosfet_j) / (after.time_s - before.time_s);
    let settled = 23.0 + power * 3.2;
    assert!((host.sink.heat_sink_degc() - settled).abs() < 0.3);
    let junction = host.sink.mosfet_degc() - host.sink.heat_sink_degc();
    assert!((junction - power * 1.3).abs() < 0.01);
}

#[test]
fn a_watched_voltage_is_timed_to_the_tick() {
    let mut host = Host::new(SinkParts::error_free(figures(), cell_m(0.3)));
    host.sink.watch_voltage(3.4);
    host.begin(Span::from_millis(100));
    host.step(amperes(2.6), Span::ZERO, Span::from_secs(4000));
    let mut ticking = host.clone();
    host.wait_s(800);
    let at = host.sink.crossings()[0].at_s.unwrap();
    // The same run again, tick by tick from ten seconds before.
    let begun = ticking.sink.truth().time_s;
    while ticking.sink.truth().time_s < at - 10.0 {
        ticking.wait_s(5);
    }
    for _ in 0..20_000 {
        if ticking.sink.crossings()[0].at_s.is_some() {
            break;
        }
        ticking.say(&HostLine::Clock { token: 2 });
        ticking.wait_ms(1);
    }
    let crossed = ticking.sink.truth().time_s;
    assert!(
        (crossed - at).abs() < 1e-9 && at > begun + 10.0,
        "{crossed} {at}"
    );
    assert_eq!(ticking.sink.crossings()[0].at_s, Some(at));
}

#[test]
fn a_fast_oscillator_makes_the_sinks_time_run_ahead() {
    let errors = Errors {
        oscillator_ppb: 100_000,
        ..Errors::default()
    };
    let mut host = Host::new(SinkParts {
        errors,
        ..SinkParts::error_free(figures(), cell_k(1.0))
    });
    host.begin(Span::from_millis(100));
    host.step(amperes(0.64), Span::ZERO, Span::from_secs(4000));
    host.wait_s(1000);
    let ahead = host.sink.sink_time().micros() - host.sink.now().micros();
    assert_eq!(ahead, host.sink.now().micros() / 10_000);
    // The counter takes its own seconds for true ones.
    let ratio = host.counters().charge.coulombs() / host.sink.truth().charge_c;
    assert!((ratio - 1.0001).abs() < 2e-4, "{ratio}");
}
