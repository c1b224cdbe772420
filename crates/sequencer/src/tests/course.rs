//! Steps, loops and the schedule.

use std::time::{Duration, Instant};

use expect_test::{Expect, expect};
use quantity::{SinkTime, Span};
use sequence::plan::{Action, BurstRequest, Condition, Next, Op, Plan};

use super::bench::Bench;
use super::plans::{
    current, draw, head, milliamperes, millis, millivolts, plan, pulses, rest, step, until,
};
use crate::event::{Ending, Event, Happening};
use crate::status::Standing;

fn check(plan: Plan, expected: &Expect) {
    let mut bench = Bench::connected(plan);
    bench.run(Span::from_secs(3_600));
    expected.assert_eq(&bench.chronicle());
}

#[test]
fn steps_follow_each_other_at_their_times_and_the_last_holds_exactly() {
    check(
        plan(vec![
            draw(500, millis(1_000)),
            rest(millis(500)),
            draw(1_000, millis(250)),
        ]),
        &expect![[r#"
            Readback { interval: Span(100000) }
            step 500 mA at 0.000 ramp 0 s hold 1.05 s
            step 0 A at 1.000 ramp 0 s hold 550 ms
            step 1 A at 1.500 ramp 0 s hold 250 ms
              began 0 at 0.000
              ended 0 at 1.000 by Duration
              began 1 at 1.000
              ended 1 at 1.500 by Duration
              began 2 at 1.500
            off
              ended 2 at 1.750 by Duration
            Finished
        "#]],
    );
}

#[test]
fn loops_nest_and_a_time_limit_cuts_the_step_that_runs() {
    let mut outer = head(Some(2), 5);
    outer.at_most = Some(millis(2_500));
    check(
        plan(vec![
            Op::LoopBegin(outer),
            Op::LoopBegin(head(Some(2), 3)),
            draw(100, millis(400)),
            Op::LoopEnd { begin: 1 },
            rest(millis(600)),
            Op::LoopEnd { begin: 0 },
            draw(200, millis(300)),
        ]),
        &expect![[r#"
            Readback { interval: Span(100000) }
            step 100 mA at 0.000 ramp 0 s hold 450 ms
            step 100 mA at 0.400 ramp 0 s hold 450 ms
            step 0 A at 0.800 ramp 0 s hold 650 ms
            step 100 mA at 1.400 ramp 0 s hold 450 ms
            step 100 mA at 1.800 ramp 0 s hold 450 ms
            step 0 A at 2.200 ramp 0 s hold 350 ms
            step 200 mA at 2.500 ramp 0 s hold 300 ms
              began 2 at 0.000
              ended 2 at 0.400 by Duration
              began 2 at 0.400
              ended 2 at 0.800 by Duration
              began 4 at 0.800
              ended 4 at 1.400 by Duration
              began 2 at 1.400
              ended 2 at 1.800 by Duration
              began 2 at 1.800
              ended 2 at 2.200 by Duration
              began 4 at 2.200
              ended 4 at 2.500 by Loop
              began 6 at 2.500
            off
              ended 6 at 2.800 by Duration
            Finished
        "#]],
    );
}

#[test]
fn a_skip_leaves_the_loops_that_it_is_not_in() {
    let mut first = current(100, millis(300));
    first.then = Next::SkipTo(4);
    check(
        plan(vec![
            Op::LoopBegin(head(Some(5), 3)),
            Op::Step(first),
            draw(700, millis(300)),
            Op::LoopEnd { begin: 0 },
            draw(200, millis(300)),
        ]),
        &expect![[r#"
            Readback { interval: Span(100000) }
            step 100 mA at 0.000 ramp 0 s hold 350 ms
            step 200 mA at 0.300 ramp 0 s hold 300 ms
              began 1 at 0.000
              ended 1 at 0.300 by Duration
              began 4 at 0.300
            off
              ended 4 at 0.600 by Duration
            Finished
        "#]],
    );
}

#[test]
fn ten_thousand_pulses_begin_exactly_on_schedule() {
    let mut bench = Bench::connected(plan(pulses(10_000)));
    assert_eq!(bench.run(Span::from_secs(20_000)), Some(Ending::Finished));
    let zero = bench.starts[0].1;
    assert_eq!(bench.starts.len(), 20_000);
    for (index, (_, start)) in (0_u64..).zip(&bench.starts) {
        let due = index / 2 * 550 + index % 2 * 50;
        assert_eq!(start.saturating_since(zero), millis(due));
    }
    // The last one is held to its end and not a microsecond longer.
    assert!(bench.now.saturating_since(zero) >= millis(5_500_000));
}

#[test]
fn a_ramp_is_ordered_whole_and_followed() {
    let ramp = step(
        Action::Current {
            target: milliamperes(2_000),
            ramp: millis(4_000),
        },
        millis(5_000),
    );
    let mut bench = Bench::connected(plan(vec![draw(500, millis(1_000)), Op::Step(ramp)]));
    assert_eq!(bench.run(Span::from_secs(20)), Some(Ending::Finished));
}

#[test]
fn the_queue_stays_filled_when_edges_are_lost() {
    let mut bench = Bench::connected(plan(pulses(200)));
    bench.lose_edges = true;
    assert_eq!(bench.run(Span::from_secs(200)), Some(Ending::Finished));
    let zero = bench.starts[0].1;
    let last = bench.starts[399].1;
    assert_eq!(last.saturating_since(zero), millis(199 * 550 + 50));
}

#[test]
fn a_stalled_link_moves_the_schedule_and_says_so() {
    let mut bench = Bench::connected(plan(pulses(40)));
    bench.run(Span::from_secs(5));
    bench.latency = millis(6_000);
    bench.run(Span::from_secs(1));
    bench.latency = millis(5);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    assert_eq!(bench.starts.len(), 80);
    assert!(bench.chronicle().contains("Rescheduled"));
}

#[test]
fn a_disk_that_is_always_slow_costs_a_few_tries_and_no_livelock() {
    // Each order needs longer than is left to it before the first step.
    for latency in [250, 1_000, 5_000] {
        let steps = vec![rest(millis(20_000)), draw(420, millis(20_000))];
        let mut bench = Bench::connected(plan(steps));
        bench.latency = millis(latency);
        assert_eq!(
            bench.run(Span::from_secs(120)),
            Some(Ending::Finished),
            "{latency} ms"
        );
        assert_eq!(bench.starts.len(), 2, "each step once: {latency} ms");
    }
}

#[test]
fn charge_is_shared_out_at_an_edge_by_what_was_asked_for() {
    // 1000 mA from 50 ms after a readback on: half an interval of it belongs to the step.
    let mut bench = Bench::connected(plan(vec![rest(millis(1_050)), draw(1_000, millis(10_000))]));
    bench.run(millis(8_000));
    let status = bench.sequencer.status();
    let zero = bench.starts[1].1;
    let span = bench.sequencer.status().sink_time.saturating_since(zero);
    assert_eq!(status.step_charge.unwrap(), milliamperes(1_000).times(span));
    assert!(status.sink_time > SinkTime::ZERO);
}

/// Reports what a reading costs; the bound is wide, for a busy machine.
#[test]
#[expect(
    clippy::disallowed_methods,
    reason = "measures what the code costs, not what it does"
)]
fn a_night_of_readings_takes_no_time() {
    let mut long = current(1, Span::from_secs(43_300));
    long.until = vec![
        until(
            Condition::VoltageBelow(millivolts(2_700)),
            millis(500),
            Next::End,
        ),
        until(
            Condition::VoltageSettled {
                change: millivolts(-1),
                window: Span::from_secs(60),
            },
            Span::ZERO,
            Next::End,
        ),
    ];
    let mut bench = Bench::connected(plan(vec![Op::Step(long)]));
    bench.run(Span::from_secs(3));
    let mut sequencer = bench.sequencer.clone();
    let mut reading = bench.latest_reading();
    let mut at = bench.host_time();
    let mut events = Vec::new();
    for _ in 0..432_000 {
        at += millis(100);
        reading.time += millis(100);
        let counters = reading.counters.as_mut().unwrap();
        counters.time = reading.time;
        counters.charge += quantity::Charge::from_microcoulombs(100);
        counters.energy += quantity::Energy::from_microjoules(370);
        events.push(Event {
            at,
            what: Happening::Reading(reading),
        });
    }
    let began = Instant::now();
    for event in &events {
        sequencer.handle(event);
        assert_eq!(sequencer.poll_output(), None);
        assert!(sequencer.deadline().is_some());
    }
    let took = began.elapsed();
    assert_eq!(sequencer.ending(), None);
    println!("432 000 readings in {took:?}, {:?} each", took / 432_000);
    assert!(took < Duration::from_secs(20), "{took:?}");
}

#[test]
fn a_faster_readback_is_ordered_before_its_step_begins_and_a_slower_one_after() {
    let mut slow = current(10, millis(5_000));
    slow.readback = Some(millis(1_000));
    let mut fast = current(500, millis(2_000));
    fast.readback = Some(millis(20));
    let ops = vec![
        Op::Step(slow.clone()),
        Op::Step(fast),
        Op::Step(slow),
        rest(millis(10)),
    ];
    let mut bench = Bench::connected(plan(ops));
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let zero = bench.starts[0].1;
    let ordered: Vec<(u64, u64)> = bench
        .readbacks
        .iter()
        .filter(|(at, _)| *at >= zero)
        .map(|(at, interval)| {
            let after = at.saturating_since(zero).micros() / 1000;
            (after, interval.micros() / 1000)
        })
        .collect();
    // Slow with the first step, fast before 5.000, slow after 7.000, the plan's own for the rest.
    assert_eq!(
        ordered
            .iter()
            .map(|(_, interval)| *interval)
            .collect::<Vec<_>>(),
        [1_000, 20, 1_000, 100]
    );
    assert!(ordered[1].0 < 5_000, "{ordered:?}");
    assert!(ordered[2].0 >= 7_000, "{ordered:?}");
}

#[test]
fn captures_are_armed_one_at_a_time_and_a_missed_one_is_told() {
    let mut pulse = current(420, millis(50));
    pulse.burst = Some(BurstRequest {
        before: millis(5),
        after: millis(45),
    });
    // Fifty samples take a fifth of a second on their way: every pulse can be captured.
    let unhurried = vec![
        Op::LoopBegin(head(Some(6), 3)),
        Op::Step(pulse.clone()),
        draw(4, millis(950)),
        Op::LoopEnd { begin: 0 },
    ];
    let mut bench = Bench::connected(plan(unhurried));
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let text = bench.chronicle();
    assert_eq!(text.matches("Burst {").count(), 6, "{text}");
    assert_eq!(text.matches("before: 5, after: 45").count(), 6);
    // Every 100 ms there is no time to send one before the next.
    let hurried = vec![
        Op::LoopBegin(head(Some(40), 3)),
        Op::Step(pulse),
        draw(4, millis(50)),
        Op::LoopEnd { begin: 0 },
    ];
    let mut bench = Bench::connected(plan(hurried));
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let text = bench.chronicle();
    let (armed, missed) = (
        text.matches("Burst {").count(),
        text.matches("BurstMissed").count(),
    );
    assert_eq!(armed + missed, 40, "{text}");
    assert!(armed >= 10 && missed >= 10, "{armed} and {missed}");
}

#[test]
fn a_status_tells_where_the_run_stands_and_how_long_it_takes_at_most() {
    let mut labelled = head(Some(4), 3);
    labelled.label = Some(1);
    let ops = vec![
        Op::LoopBegin(labelled),
        draw(1_000, millis(2_000)),
        rest(millis(1_000)),
        Op::LoopEnd { begin: 0 },
        draw(100, millis(500)),
    ];
    let mut bench = Bench::new(plan(ops));
    assert_eq!(bench.sequencer.status().standing, Standing::Waiting);
    let whole = Some(millis(12_500));
    assert_eq!(bench.sequencer.status().left_at_most, whole);
    bench.connect();
    assert_eq!(bench.sequencer.status().standing, Standing::Connecting);
    bench.run(millis(250));
    assert_eq!(bench.sequencer.status().standing, Standing::Starting);
    bench.run(millis(4_260));
    let status = bench.sequencer.status();
    assert!(matches!(status.standing, Standing::Running { op: 1, .. }));
    assert_eq!(status.setpoint, Some(milliamperes(1_000)));
    assert_eq!(status.loops.len(), 1);
    assert_eq!((status.loops[0].round, status.loops[0].times), (2, Some(4)));
    assert_eq!(status.loops[0].label.as_deref(), Some("pulse"));
    let gone = status.sink_time.saturating_since(bench.starts[0].1);
    assert_eq!(status.left_at_most, whole.map(|whole| whole - gone));
    bench.run(Span::from_secs(60));
    let status = bench.sequencer.status();
    assert_eq!(status.standing, Standing::Ended(Ending::Finished));
    assert_eq!(status.charge, milliamperes(1_000).times(millis(8_050)));
    assert_eq!(status.left_at_most, Some(Span::ZERO));
}
