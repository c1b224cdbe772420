//! Runs by hand: setpoints come as commands, and whoever gives them must go on doing so.

use expect_test::expect;
use quantity::Span;
use sequence::plan::Plan;

use super::bench::Bench;
use super::plans::{draw, milliamperes, millis, plan, rest};
use crate::event::{Command, Ending, Interlock};
use crate::replay::replay;

fn by_hand() -> Plan {
    let mut plan = plan(vec![rest(Span::from_secs(2))]);
    plan.by_hand = true;
    plan
}

fn set(milliampere: i64) -> Command {
    Command::Setpoint {
        setpoint: milliamperes(milliampere),
        interval: Span::from_secs(2),
    }
}

#[test]
fn a_setpoint_holds_for_its_interval_and_no_longer() {
    let mut bench = Bench::connected(by_hand());
    bench.run(millis(900));
    bench.command(set(500));
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Stopped));
    expect![[r#"
        Readback { interval: Span(100000) }
        step 0 A at 0.000 ramp 0 s hold 2 s
          began 0 at 0.000
        step 500 mA at 0.695 ramp 0 s hold 1.8 s
          ended 0 at 0.695 by Duration
          began 0 at 0.695
        off
          ended 0 at 2.495 by Duration
        Stopped
    "#]]
    .assert_eq(&bench.chronicle());
}

#[test]
fn a_setpoint_that_is_asked_for_again_goes_on_without_a_gap() {
    let mut bench = Bench::connected(by_hand());
    bench.run(millis(900));
    for _ in 0..60 {
        bench.command(set(500));
        assert_eq!(bench.run(Span::from_secs(1)), None);
    }
    bench.command(set(0));
    bench.run(Span::from_secs(1));
    assert!(bench.offs.is_empty());
    // From 200 ms after the first command to 200 ms after the last, and the links' delays.
    let charge = bench.sequencer.status().charge.ampere_hours() * 3600.0;
    assert!((charge - 30.0).abs() < 0.01, "{charge} C");
}

#[test]
fn of_commands_that_come_faster_than_steps_the_latest_holds() {
    let mut bench = Bench::connected(by_hand());
    bench.run(millis(900));
    for milliampere in 0..200 {
        bench.command(set(milliampere));
        assert_eq!(bench.run(millis(20)), None);
    }
    bench.run(millis(600));
    let setpoint = bench.sequencer.status().setpoint;
    assert_eq!(setpoint, Some(milliamperes(199)));
    assert!(bench.starts.len() > 10, "{}", bench.starts.len());
}

#[test]
fn a_setpoint_before_the_first_step_is_the_first_step() {
    let mut bench = Bench::new(by_hand());
    bench.command(set(300));
    bench.connect();
    bench.run(Span::from_secs(1));
    let setpoint = bench.sequencer.status().setpoint;
    assert_eq!(setpoint, Some(milliamperes(300)));
}

#[test]
fn a_setpoint_above_the_limit_never_reaches_the_sink() {
    let mut bench = Bench::connected(by_hand());
    bench.run(millis(900));
    let starts = bench.starts.len();
    bench.command(set(1_000_000));
    assert_eq!(bench.ended, Some(Ending::Tripped(Interlock::Refusal)));
    assert_eq!(bench.starts.len(), starts);
}

#[test]
fn a_run_with_a_program_of_its_own_takes_no_setpoint() {
    let mut bench = Bench::connected(plan(vec![draw(100, Span::from_secs(3))]));
    bench.run(Span::from_secs(1));
    bench.command(set(500));
    bench.run(millis(900));
    let setpoint = bench.sequencer.status().setpoint;
    assert_eq!(setpoint, Some(milliamperes(100)));
    assert_eq!(bench.run(Span::from_secs(9)), Some(Ending::Finished));
}

#[test]
fn a_run_by_hand_replays_from_its_record() {
    let mut bench = Bench::connected(by_hand());
    bench.run(millis(900));
    for step in [100, 200, 200, 0, 700] {
        bench.command(set(step));
        bench.run(millis(730));
    }
    bench.command(Command::Stop);
    assert_eq!(bench.ended, Some(Ending::Stopped));
    assert!(bench.starts.len() >= 5);
    replay(by_hand(), bench.record.clone()).unwrap();
}
