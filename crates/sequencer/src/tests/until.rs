//! Conditions of steps and loops.

use expect_test::{Expect, expect};
use quantity::{Charge, Power, Resistance, Span, Temperature, Voltage};
use sequence::plan::{Action, Condition, Next, Op, Plan};
use wire::TemperatureReading;

use super::bench::Bench;
use super::plans::{
    current, draw, head, milliamperes, millis, millivolts, plan, rest, step, until,
};
use crate::event::Ending;

/// A discharge that ends below 3 V, then a rest.
fn discharge(persistence: Span, then: Next) -> Plan {
    let mut discharge = current(1_000, Span::from_secs(3_600));
    discharge.until = vec![until(
        Condition::VoltageBelow(millivolts(3_000)),
        persistence,
        then,
    )];
    plan(vec![
        Op::Step(discharge),
        rest(millis(1_000)),
        draw(100, millis(1_000)),
    ])
}

fn falling(plan: Plan) -> Bench {
    let mut bench = Bench::connected(plan);
    bench.droop_per_coulomb = 10_000;
    bench
}

fn check(mut bench: Bench, expected: &Expect) {
    bench.run(Span::from_secs(7_200));
    expected.assert_eq(&bench.chronicle());
}

#[test]
fn a_cut_off_without_persistence_is_met_by_the_extreme() {
    check(
        falling(discharge(Span::ZERO, Next::GoOn)),
        &expect![[r#"
        Readback { interval: Span(100000) }
        step 1 A at 0.000 ramp 0 s hold 3600.05 s
        step 0 A at 3600.000 ramp 0 s hold 1.05 s
        step 100 mA at 3601.000 ramp 0 s hold 1 s
          began 0 at 0.000
        Clear { from: SinkTime(0) }
          ended 0 at 66.200 by Until(0)
        step 0 A at 66.200 ramp 0 s hold 1.05 s
        step 100 mA at 67.200 ramp 0 s hold 1 s
          began 1 at 66.200
          ended 1 at 67.200 by Duration
          began 2 at 67.200
        off
          ended 2 at 68.200 by Duration
        Finished
    "#]],
    );
}

#[test]
fn a_cut_off_with_persistence_waits_for_whole_intervals() {
    check(
        falling(discharge(millis(500), Next::SkipTo(2))),
        &expect![[r#"
        Readback { interval: Span(100000) }
        step 1 A at 0.000 ramp 0 s hold 3600.05 s
        step 0 A at 3600.000 ramp 0 s hold 1.05 s
        step 100 mA at 3601.000 ramp 0 s hold 1 s
          began 0 at 0.000
        Clear { from: SinkTime(0) }
          ended 0 at 66.600 by Until(0)
        step 100 mA at 66.600 ramp 0 s hold 1 s
          began 2 at 66.600
        off
          ended 2 at 67.600 by Duration
        Finished
    "#]],
    );
}

#[test]
fn a_condition_that_ends_the_run_turns_off_first() {
    check(
        falling(discharge(Span::ZERO, Next::End)),
        &expect![[r#"
        Readback { interval: Span(100000) }
        step 1 A at 0.000 ramp 0 s hold 3600.05 s
        step 0 A at 3600.000 ramp 0 s hold 1.05 s
        step 100 mA at 3601.000 ramp 0 s hold 1 s
          began 0 at 0.000
        off
          ended 0 at 66.000 by Until(0)
        Finished
    "#]],
    );
}

#[test]
fn a_dip_between_two_readbacks_does_not_meet_a_persistence() {
    let mut bench = Bench::connected(discharge(millis(300), Next::GoOn));
    bench.run(Span::from_secs(3));
    for _ in 0..5 {
        bench.emf = millivolts(2_900);
        bench.run(millis(40));
        bench.emf = millivolts(3_700);
        bench.run(Span::from_secs(1));
    }
    assert!(!bench.chronicle().contains("ended 0"));
}

#[test]
fn an_interval_that_straddles_the_beginning_does_not_count() {
    // The voltage is low before the step begins and not in it.
    let mut second = current(100, Span::from_secs(2));
    second.until = vec![until(
        Condition::VoltageBelow(millivolts(3_600)),
        Span::ZERO,
        Next::GoOn,
    )];
    let ops = vec![
        draw(2_500, millis(1_050)),
        Op::Step(second),
        rest(millis(200)),
    ];
    let mut bench = Bench::connected(plan(ops));
    bench.run(Span::from_secs(30));
    assert!(
        bench.chronicle().contains("ended 1 at 3.050 by Duration"),
        "{}",
        bench.chronicle()
    );
}

#[test]
fn charge_counts_from_the_steps_own_beginning() {
    let mut second = current(1_000, Span::from_secs(100));
    let limit = Charge::from_millicoulombs(5_000);
    second.until = vec![until(Condition::Charge(limit), Span::ZERO, Next::GoOn)];
    let ops = vec![
        draw(2_000, millis(3_030)),
        Op::Step(second),
        rest(millis(500)),
    ];
    let mut bench = Bench::connected(plan(ops));
    bench.run(Span::from_secs(30));
    // Five seconds from 3.030, seen at the next readback, plus the reaction.
    let text = bench.chronicle();
    assert!(
        text.contains("ended 1 at 8.2") || text.contains("ended 1 at 8.3"),
        "{text}"
    );
}

#[test]
fn a_loop_ends_at_any_place_in_its_body() {
    let mut loop_head = head(None, 3);
    loop_head.at_most = Some(Span::from_secs(1_000));
    loop_head.until = vec![until(
        Condition::VoltageBelow(millivolts(3_400)),
        Span::ZERO,
        Next::GoOn,
    )];
    let ops = vec![
        Op::LoopBegin(loop_head),
        draw(2_000, millis(2_000)),
        rest(millis(1_000)),
        Op::LoopEnd { begin: 0 },
        draw(50, millis(500)),
    ];
    check(
        falling(plan(ops)),
        &expect![[r#"
        Readback { interval: Span(100000) }
        step 2 A at 0.000 ramp 0 s hold 2.05 s
        step 0 A at 2.000 ramp 0 s hold 1.05 s
        step 2 A at 3.000 ramp 0 s hold 2.05 s
        step 0 A at 5.000 ramp 0 s hold 1.05 s
        step 2 A at 6.000 ramp 0 s hold 2.05 s
        step 0 A at 8.000 ramp 0 s hold 1.05 s
        step 2 A at 9.000 ramp 0 s hold 2.05 s
        step 0 A at 11.000 ramp 0 s hold 1.05 s
        step 2 A at 12.000 ramp 0 s hold 2.05 s
        step 0 A at 14.000 ramp 0 s hold 1.05 s
        step 2 A at 15.000 ramp 0 s hold 2.05 s
        step 0 A at 17.000 ramp 0 s hold 1.05 s
        step 2 A at 18.000 ramp 0 s hold 2.05 s
        step 0 A at 20.000 ramp 0 s hold 1.05 s
        step 2 A at 21.000 ramp 0 s hold 2.05 s
          began 1 at 0.000
        step 0 A at 23.000 ramp 0 s hold 1.05 s
          ended 1 at 2.000 by Duration
          began 2 at 2.000
        step 2 A at 24.000 ramp 0 s hold 2.05 s
          ended 2 at 3.000 by Duration
          began 1 at 3.000
        step 0 A at 26.000 ramp 0 s hold 1.05 s
          ended 1 at 5.000 by Duration
          began 2 at 5.000
        step 2 A at 27.000 ramp 0 s hold 2.05 s
          ended 2 at 6.000 by Duration
          began 1 at 6.000
        step 0 A at 29.000 ramp 0 s hold 1.05 s
          ended 1 at 8.000 by Duration
          began 2 at 8.000
        step 2 A at 30.000 ramp 0 s hold 2.05 s
          ended 2 at 9.000 by Duration
          began 1 at 9.000
        step 0 A at 32.000 ramp 0 s hold 1.05 s
          ended 1 at 11.000 by Duration
          began 2 at 11.000
        step 2 A at 33.000 ramp 0 s hold 2.05 s
          ended 2 at 12.000 by Duration
          began 1 at 12.000
        step 0 A at 35.000 ramp 0 s hold 1.05 s
          ended 1 at 14.000 by Duration
          began 2 at 14.000
        step 2 A at 36.000 ramp 0 s hold 2.05 s
          ended 2 at 15.000 by Duration
          began 1 at 15.000
        Clear { from: SinkTime(0) }
          ended 1 at 15.700 by Loop
        step 50 mA at 15.700 ramp 0 s hold 500 ms
          began 4 at 15.700
        off
          ended 4 at 16.200 by Duration
        Finished
    "#]],
    );
}

#[test]
fn a_settled_voltage_ends_a_rest_only_after_a_whole_window() {
    let mut relax = step(Action::Rest, Span::from_secs(600));
    let settled = Condition::VoltageSettled {
        change: millivolts(2),
        window: Span::from_secs(10),
    };
    relax.until = vec![until(settled, Span::ZERO, Next::GoOn)];
    let mut bench = Bench::connected(plan(vec![Op::Step(relax), draw(10, millis(300))]));
    for _ in 0..100 {
        // Recovers by 1 mV in every 200 ms for 20 s.
        bench.emf += Voltage::from_millivolts(1);
        bench.run(millis(200));
    }
    assert!(!bench.chronicle().contains("ended 0"));
    bench.run(Span::from_secs(60));
    let text = bench.chronicle();
    assert!(text.contains("ended 0 at 29."), "{text}");
}

#[test]
fn a_temperature_ends_a_soak() {
    let mut soak = current(500, Span::from_secs(600));
    let limit = Temperature::from_whole_degrees_celsius(40);
    soak.until = vec![until(
        Condition::TemperatureAbove(limit),
        millis(300),
        Next::End,
    )];
    let mut bench = Bench::connected(plan(vec![Op::Step(soak)]));
    bench.run(Span::from_secs(2));
    bench.temperature = TemperatureReading::Value(Temperature::from_whole_degrees_celsius(41));
    assert_eq!(bench.run(Span::from_secs(2)), Some(Ending::Finished));
}

#[test]
fn a_source_that_may_give_up_ends_its_step_and_does_not_trip() {
    let mut knee = current(2_000, Span::from_secs(60));
    knee.may_give_up = true;
    let mut bench = Bench::connected(plan(vec![Op::Step(knee), draw(100, millis(1_000))]));
    bench.limit = milliamperes(1_500);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    assert!(
        bench.chronicle().contains("GaveUp"),
        "{}",
        bench.chronicle()
    );
}

#[test]
fn a_regulated_step_is_followed_and_ended_by_its_current() {
    let power = step(
        Action::Power {
            target: Power::from_milliwatts(3_700),
        },
        millis(2_000),
    );
    let mut resistance = step(
        Action::Resistance {
            target: Resistance::from_milliohms(3_700),
        },
        Span::from_secs(100),
    );
    resistance.until = vec![until(
        Condition::CurrentBelow(milliamperes(900)),
        millis(200),
        Next::GoOn,
    )];
    let ops = vec![Op::Step(power), Op::Step(resistance), rest(millis(300))];
    let mut bench = Bench::connected(plan(ops));
    bench.resistance_milliohm = 0;
    bench.run(Span::from_secs(4));
    bench.emf = millivolts(3_000);
    assert_eq!(bench.run(Span::from_secs(30)), Some(Ending::Finished));
    assert!(
        bench.chronicle().contains("ended 1 at 4.0"),
        "{}",
        bench.chronicle()
    );
}
