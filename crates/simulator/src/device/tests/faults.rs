//! Broken hardware: what a host sees of it.

use super::*;
use crate::supply::{Supply, SupplySpec};
use quantity::Text;
use wire::{Cause, SinkState};

fn host_with(faults: &[(u64, Happening)]) -> Host {
    host_on(cell_k(0.9), faults)
}

/// A supply that gives no more than 2 A, so that no converter reaches its stop.
fn weak_supply() -> Source {
    let spec = SupplySpec {
        voltage: Voltage::from_volts(3.3).unwrap(),
        output_resistance: Resistance::from_ohms(0.04).unwrap(),
        undershoot: None,
        sag: None,
        current_limit: Some(Text(Current::from_amperes(2.0).unwrap())),
        fold_back_to: None,
        ripple: None,
    };
    Source::Supply(Box::new(Supply::new(&spec).unwrap()))
}

fn host_on(source: Source, faults: &[(u64, Happening)]) -> Host {
    let mut parts = SinkParts::error_free(figures(), source);
    parts.faults = faults
        .iter()
        .map(|(seconds, what)| Fault {
            at: Span::from_secs(*seconds),
            what: *what,
        })
        .collect();
    let mut host = Host::new(parts);
    host.begin(Span::from_millis(100));
    host.step(amperes(0.5), Span::ZERO, Span::from_secs(60));
    host
}

fn check_trip(source: Source, what: Happening, cause: Cause) -> Host {
    let mut host = host_on(source, &[(3, what)]);
    host.wait_s(2);
    assert_eq!(host.trip(), None);
    host.wait_s(3);
    assert_eq!(host.trip().map(|(cause, _)| cause), Some(cause));
    host
}

#[test]
fn a_shorted_mosfet_trips_and_goes_on_drawing() {
    let host = check_trip(weak_supply(), Happening::MosfetShorted, Cause::Excess);
    let last = host.readbacks().pop().unwrap();
    assert_eq!(last.state, SinkState::Latched(Cause::Excess));
    assert!((host.sink.current_a() - 2.0).abs() < 1e-9);
}

#[test]
fn a_shorted_mosfet_on_a_strong_source_drives_the_converter_to_its_stop() {
    let host = check_trip(cell_k(0.9), Happening::MosfetShorted, Cause::Sensor);
    assert!(host.sink.current_a() > 10.0, "{}", host.sink.current_a());
}

#[test]
fn a_lost_sense_connection_trips_and_the_gate_still_turns_off() {
    let host = check_trip(weak_supply(), Happening::FeedbackLost, Cause::Excess);
    assert!(host.sink.current_a().abs() < 1e-12);
}

#[test]
fn a_broken_or_shorted_temperature_sensor_trips() {
    check_trip(cell_k(0.9), Happening::TemperatureOpen, Cause::Sensor);
    check_trip(cell_k(0.9), Happening::TemperatureShort, Cause::Sensor);
}

#[test]
fn a_lost_voltage_sense_wire_reads_zero() {
    let mut host = host_with(&[(3, Happening::VoltageSenseLost)]);
    host.wait_s(5);
    let zero = host
        .readbacks()
        .iter()
        .any(|values| values.voltage_min.volts() <= 0.0);
    assert!(zero || host.trip().is_some());
}

#[test]
fn an_open_mosfet_reads_no_current() {
    let mut host = host_with(&[(3, Happening::MosfetOpen)]);
    host.wait_s(5);
    let last = host.readbacks().pop().unwrap();
    assert_eq!(last.current, Current::ZERO);
    assert_eq!(last.state, SinkState::Saturated);
}

#[test]
fn a_stuck_reading_stays_and_mends() {
    let mut host = host_with(&[(3, Happening::CurrentStuck), (6, Happening::Mended)]);
    host.wait_s(4);
    host.step(amperes(1.0), Span::ZERO, Span::from_secs(60));
    host.wait_s(1);
    let stuck = host.readbacks().pop().unwrap();
    assert_eq!(stuck.current, Current::from_amperes(0.5).unwrap());
    assert!((host.sink.current_a() - 1.0).abs() < 1e-12);
    host.wait_s(2);
    let mended = host.readbacks().pop().unwrap();
    assert_eq!(mended.current, Current::from_amperes(1.0).unwrap());
}

#[test]
fn a_restart_turns_off_and_says_why() {
    let mut host = host_with(&[(3, Happening::Restart(Reset::Watchdog))]);
    host.wait_s(4);
    assert!(host.sink.current_a().abs() < 1e-15);
    assert!(host.sink.sink_time().micros() < 2_000_000);
    host.say(&HostLine::Hello {
        token: 9,
        session: 8,
    });
    host.wait_ms(10);
    assert!(host.heard().iter().any(|line| matches!(
        line,
        SinkLine::About {
            token: 9,
            reset: Reset::Watchdog,
            ..
        }
    )));
}

#[test]
fn a_hung_processor_goes_on_drawing_until_it_restarts() {
    let mut host = host_with(&[
        (3, Happening::Hang),
        (40, Happening::Restart(Reset::Watchdog)),
    ]);
    host.wait_s(4);
    let heard = host.bytes.len();
    host.wait_s(25);
    assert_eq!(host.bytes.len(), heard);
    assert!((host.sink.current_a() - 0.5).abs() < 1e-12);
    host.wait_s(20);
    assert!(host.sink.current_a().abs() < 1e-15);
}

#[test]
fn a_clock_jump_shows_in_the_sinks_time() {
    let jump = Span::from_secs(5);
    let mut host = host_with(&[(3, Happening::OscillatorJump(jump))]);
    host.wait_s(4);
    let ahead = host.sink.sink_time().micros() - host.sink.now().micros();
    assert_eq!(ahead, 5_000_000);
}

#[test]
fn an_isolator_cuts_even_a_shorted_mosfet() {
    let mut figures = figures();
    figures.abilities.isolator = true;
    let mut parts = SinkParts::error_free(figures, cell_k(0.9));
    parts.faults.push(Fault {
        at: Span::from_secs(3),
        what: Happening::MosfetShorted,
    });
    let mut host = Host::new(parts);
    host.begin(Span::from_millis(100));
    host.order(Order::Isolator { closed: true });
    host.step(amperes(0.5), Span::ZERO, Span::from_secs(60));
    host.wait_s(2);
    assert!((host.sink.current_a() - 0.5).abs() < 1e-12);
    host.wait_s(3);
    assert!(host.trip().is_some());
    assert!(host.sink.current_a().abs() < 1e-15);
}

#[test]
fn warm_air_warms_the_heat_sink() {
    let ambient = Temperature::from_degrees_celsius(60.0).unwrap();
    let mut host = host_with(&[(1, Happening::Ambient(ambient))]);
    host.wait_s(2400);
    assert!((host.sink.heat_sink_degc() - 60.0).abs() < 0.2);
}

#[test]
fn values_that_cannot_be_are_refused_by_name() {
    let mut parts = SinkParts::error_free(figures(), cell_k(0.9));
    parts.errors.voltage_noise_v = f64::NAN;
    let error = SimulatedSink::new(parts).unwrap_err().to_string();
    assert_eq!(
        error,
        "`voltage_noise_v` of the simulated sink is NaN; give a finite number that is not below \
         zero"
    );
}
