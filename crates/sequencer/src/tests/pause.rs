//! Hold and continue, stop, lost links and runs taken up again.

use expect_test::{Expect, expect};
use quantity::{Charge, Span};
use sequence::plan::{Condition, Next, OnInterruption, Op, Plan};
use wire::Cause;

use super::bench::Bench;
use super::plans::{current, draw, head, milliamperes, millis, plan, rest, until};
use crate::Sequencer;
use crate::event::{Command, Ending, Event, Happening, Interlock};
use crate::replay::{Recorded, ReplayError, replay};
use crate::status::Standing;

fn check(bench: &Bench, expected: &Expect) {
    expected.assert_eq(&bench.chronicle());
}

fn two_steps() -> Plan {
    plan(vec![
        draw(1_000, Span::from_secs(10)),
        draw(500, Span::from_secs(2)),
    ])
}

#[test]
fn a_stop_turns_off_and_is_no_trip() {
    let mut bench = Bench::connected(two_steps());
    bench.run(Span::from_secs(3));
    bench.command(Command::Stop);
    assert_eq!(bench.ended, Some(Ending::Stopped));
    check(
        &bench,
        &expect![[r#"
        Readback { interval: Span(100000) }
        step 1 A at 0.000 ramp 0 s hold 10.05 s
        step 500 mA at 10.000 ramp 0 s hold 2 s
          began 0 at 0.000
        off
          ended 0 at 2.500 by Run
        Stopped
    "#]],
    );
}

#[test]
fn a_held_step_goes_on_with_what_is_left_of_it() {
    let mut bench = Bench::connected(two_steps());
    bench.run(Span::from_secs(3));
    bench.command(Command::Hold);
    assert_eq!(bench.sequencer.status().standing, Standing::Held);
    bench.run(Span::from_secs(60));
    assert_eq!(bench.ended, None);
    bench.command(Command::Continue);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    check(
        &bench,
        &expect![[r#"
        Readback { interval: Span(100000) }
        step 1 A at 0.000 ramp 0 s hold 10.05 s
        step 500 mA at 10.000 ramp 0 s hold 2 s
          began 0 at 0.000
        off
        Clear { from: SinkTime(0) }
          Held
          Continued
        step 1 A at 62.895 ramp 0 s hold 7.455 s
        step 500 mA at 70.300 ramp 0 s hold 2 s
          ended 0 at 70.300 by Duration
          began 1 at 70.300
        off
          ended 1 at 72.300 by Duration
        Finished
    "#]],
    );
    // Ten seconds at 1 A and two at 0.5 A, less what the link's delay cut off at the hold.
    let charge = bench.sequencer.status().charge;
    let wanted = Charge::from_millicoulombs(11_000);
    assert!(
        (wanted - charge).abs() <= Charge::from_millicoulombs(10),
        "{charge}"
    );
}

#[test]
fn a_held_loop_keeps_its_time_and_its_count() {
    let mut timed = head(None, 2);
    timed.at_most = Some(Span::from_secs(5));
    let ops = vec![
        Op::LoopBegin(timed),
        draw(1_000, Span::from_secs(2)),
        Op::LoopEnd { begin: 0 },
        rest(millis(500)),
    ];
    let mut bench = Bench::connected(plan(ops));
    bench.run(millis(3_410));
    assert_eq!(bench.sequencer.status().loops[0].round, 2);
    bench.command(Command::Hold);
    bench.run(Span::from_secs(100));
    bench.command(Command::Continue);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let charge = bench.sequencer.status().charge;
    let wanted = Charge::from_millicoulombs(5_000);
    assert!(
        (wanted - charge).abs() <= Charge::from_millicoulombs(10),
        "{charge}"
    );
}

#[test]
fn the_charge_of_a_held_step_goes_on_being_counted() {
    let mut counted = current(1_000, Span::from_secs(100));
    let limit = Charge::from_millicoulombs(8_000);
    counted.until = vec![until(Condition::Charge(limit), Span::ZERO, Next::End)];
    let mut bench = Bench::connected(plan(vec![Op::Step(counted)]));
    bench.run(Span::from_secs(4));
    bench.command(Command::Hold);
    bench.run(Span::from_secs(10));
    bench.command(Command::Continue);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let charge = bench.sequencer.status().charge;
    assert!(
        charge >= limit && charge <= limit + Charge::from_millicoulombs(100),
        "{charge}"
    );
}

#[test]
fn a_run_that_is_held_stays_held_over_a_lost_link_and_begins_held() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.command(Command::Hold);
    bench.run(Span::from_secs(3));
    assert_eq!(bench.sequencer.status().standing, Standing::Held);
    assert!(bench.starts.is_empty());
    bench.command(Command::Continue);
    bench.run(Span::from_secs(3));
    bench.command(Command::Hold);
    bench.run(Span::from_secs(1));
    let starts = bench.starts.len();
    bench.happen(Happening::LinkLost);
    bench.reboot();
    bench.happen(Happening::SinkRebooted);
    bench.connect();
    bench.run(Span::from_secs(10));
    assert_eq!(bench.sequencer.status().standing, Standing::Held);
    assert_eq!(bench.starts.len(), starts);
    bench.command(Command::Continue);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
}

#[test]
fn a_hold_before_the_first_step_and_a_hold_twice_change_nothing_else() {
    let mut bench = Bench::connected(two_steps());
    bench.command(Command::Hold);
    bench.run(millis(250));
    bench.command(Command::Hold);
    bench.command(Command::Hold);
    bench.run(millis(500));
    bench.command(Command::Continue);
    bench.command(Command::Continue);
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let charge = bench.sequencer.status().charge;
    assert_eq!(charge, Charge::from_millicoulombs(11_000));
}

#[test]
fn a_current_that_flows_while_held_trips() {
    let mut bench = Bench::connected(two_steps());
    bench.run(Span::from_secs(3));
    bench.command(Command::Hold);
    bench.leak = milliamperes(900);
    assert_eq!(
        bench.run(Span::from_secs(5)),
        Some(Ending::Tripped(Interlock::NotReleasing))
    );
}

fn resumable(mut plan: Plan) -> Plan {
    plan.on_interruption = OnInterruption::Resume;
    plan
}

#[test]
fn a_lost_link_ends_the_run_unless_it_may_be_taken_up_again() {
    let mut bench = Bench::connected(two_steps());
    bench.run(Span::from_secs(3));
    bench.happen(Happening::LinkLost);
    bench.connect();
    assert_eq!(bench.ended, Some(Ending::Interrupted));
}

#[test]
fn a_lost_link_that_does_not_come_back_is_silence() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.run(Span::from_secs(3));
    bench.happen(Happening::LinkLost);
    bench.lose_readings = true;
    assert_eq!(
        bench.run(Span::from_secs(5)),
        Some(Ending::Tripped(Interlock::Silence))
    );
}

#[test]
fn a_run_is_taken_up_where_the_counters_stand() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.run(Span::from_secs(4));
    // The line is dead for a second in which the sink goes on by itself.
    bench.lose_readings = true;
    bench.run(Span::from_secs(1));
    bench.happen(Happening::LinkLost);
    bench.lose_readings = false;
    bench.connect();
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let charge = bench.sequencer.status().charge;
    let wanted = Charge::from_millicoulombs(11_000);
    assert!(
        (wanted - charge).abs() <= Charge::from_millicoulombs(1),
        "{charge}"
    );
    assert!(bench.chronicle().contains("Continued"));
}

#[test]
fn a_crashed_host_resumes_from_its_record_on_a_sink_that_its_deadman_turned_off() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.run(Span::from_secs(4));
    let record = bench.record.clone();
    // The host is gone; the sink goes on to its deadman and latches.
    let mut fresh = Sequencer::new(bench.sequencer.plan().clone()).unwrap();
    for recorded in &record {
        if let Recorded::Event(event) = recorded {
            fresh.handle(event);
            while fresh.poll_output().is_some() {}
        }
    }
    bench.sequencer = fresh;
    bench.now += Span::from_secs(3_600);
    bench.latched = Some(Cause::Deadman);
    bench.happen(Happening::LinkLost);
    bench.connect();
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    assert!(bench.chronicle().contains("Reset"), "{}", bench.chronicle());
    let status = bench.sequencer.status();
    assert!(
        status.elapsed < Span::from_secs(30),
        "the host's absence is no running time"
    );
}

#[test]
fn a_run_is_taken_up_after_the_sink_has_lost_its_supply_too() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.run(Span::from_secs(4));
    let before = bench.sequencer.status().charge;
    // An hour in which there was no host either.
    bench.happen_after(Span::from_secs(3_600), Happening::LinkLost);
    bench.reboot();
    bench.happen(Happening::SinkRebooted);
    bench.connect();
    assert_eq!(bench.run(Span::from_secs(60)), Some(Ending::Finished));
    let charge = bench.sequencer.status().charge;
    assert!(before > Charge::from_millicoulombs(3_000));
    let wanted = Charge::from_millicoulombs(11_000);
    assert!(
        (wanted - charge).abs() <= Charge::from_millicoulombs(100),
        "{charge}"
    );
}

#[test]
fn a_cell_that_has_become_too_low_meanwhile_is_not_loaded_again() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.run(Span::from_secs(4));
    bench.happen(Happening::LinkLost);
    let starts = bench.starts.len();
    bench.emf = super::plans::millivolts(2_300);
    bench.connect();
    assert_eq!(
        bench.run(Span::from_secs(60)),
        Some(Ending::Tripped(Interlock::Undervoltage))
    );
    assert_eq!(bench.starts.len(), starts);
}

#[test]
fn a_latch_for_another_cause_is_not_reset_by_the_run() {
    let mut bench = Bench::connected(resumable(two_steps()));
    bench.run(Span::from_secs(4));
    bench.happen(Happening::LinkLost);
    bench.latched = Some(Cause::Temperature);
    bench.connect();
    let ended = bench.run(Span::from_secs(60));
    assert_eq!(ended, Some(Ending::Tripped(Interlock::OverTemperature)));
}

#[test]
fn a_record_replays_to_the_same_outputs_and_the_first_difference_is_named() {
    let mut bench = Bench::connected(two_steps());
    bench.run(Span::from_secs(3));
    bench.command(Command::Hold);
    bench.run(Span::from_secs(3));
    bench.command(Command::Continue);
    bench.run(Span::from_secs(60));
    let plan = bench.sequencer.plan().clone();
    let summary = replay(plan.clone(), bench.record.clone()).unwrap();
    assert_eq!(summary.ending, Some(Ending::Finished));
    assert_eq!(summary.unrecorded, 0);
    assert_eq!(
        summary.events + summary.outputs,
        u64::try_from(bench.record.len()).unwrap()
    );
    // A record that a text has been through is still the same.
    let text = serde_json::to_string(&bench.record).unwrap();
    let read: Vec<Recorded> = serde_json::from_str(&text).unwrap();
    assert_eq!(read, bench.record);
    // Leave one output out.
    let place = bench
        .record
        .iter()
        .position(|r| matches!(r, Recorded::Output(_)))
        .unwrap();
    let mut altered = bench.record.clone();
    altered.remove(place + 3);
    let ReplayError::Difference(difference) = replay(plan, altered).unwrap_err() else {
        panic!("the plan is sound");
    };
    assert_eq!(difference.entry, u64::try_from(place + 3 + 1).unwrap());
    assert!(
        difference.to_string().contains("the sequencer gives Order"),
        "{difference}"
    );
}

#[test]
fn time_passing_early_and_often_changes_nothing() {
    let mut bench = Bench::connected(two_steps());
    let mut other = Sequencer::new(bench.sequencer.plan().clone()).unwrap();
    bench.run(Span::from_secs(60));
    for recorded in &bench.record {
        match recorded {
            Recorded::Event(event) => {
                let passed = Event {
                    at: event.at,
                    what: Happening::TimePassed,
                };
                other.handle(&passed);
                assert_eq!(other.poll_output(), None);
                other.handle(event);
            }
            Recorded::Output(output) => assert_eq!(other.poll_output().as_ref(), Some(output)),
        }
    }
}
