//! A firmware is made unsound by changing what passes between it and the host; each check must
//! name what it then sees.

use wire::Reset;

use super::bench::{Tamper, Tampered, figures, prove, sink, untouched, with_source};
use crate::{Options, Report};

fn report(options: &Options, from_host: Tamper, from_sink: Tamper) -> Report {
    let sink = sink(figures(), Reset::Power);
    prove(Tampered::new(sink, from_host, from_sink), options)
}

/// The fault is found by this check, in these words.
#[track_caller]
fn check(report: &Report, name: &str, words: &str) {
    let found = report
        .failed()
        .find(|(failed, wrong)| *failed == name && wrong.contains(words));
    assert!(found.is_some(), "{name}: {words}\n{report}");
}

fn fields(line: &str) -> Vec<&str> {
    line.split(' ').collect()
}

#[test]
fn a_trip_that_is_not_told() {
    let report = report(&Options::default(), untouched, |line| {
        let silent = line.starts_with("trip ") && line.contains(" deadman ");
        if silent {
            vec![]
        } else {
            vec![line.to_owned()]
        }
    });
    check(&report, "deadman", "no trip within 2 s of silence");
    check(&report, "deadman-untold", "agreed was 2 s");
}

#[test]
fn a_deadman_three_times_too_slow() {
    let report = report(
        &Options::default(),
        |line| match fields(line)[..] {
            ["deadman", number, interval] => {
                let slow = interval.parse::<u64>().unwrap() * 3;
                vec![format!("deadman {number} {slow}")]
            }
            _ => vec![line.to_owned()],
        },
        untouched,
    );
    check(&report, "deadman", "too slow");
    check(&report, "deadman-queued", "too slow");
}

#[test]
fn a_limit_that_is_set_wider_than_ordered() {
    let report = report(
        &Options::default(),
        |line| match fields(line)[..] {
            ["limit", number, "current", _, persist] => {
                vec![format!("limit {number} current 3000000 {persist}")]
            }
            _ => vec![line.to_owned()],
        },
        untouched,
    );
    check(
        &report,
        "limit-refuses",
        "answered `ok`, expected `no limit`",
    );
}

#[test]
fn an_edge_that_is_told_twice() {
    let report = report(&Options::default(), untouched, |line| {
        let times = if line.starts_with("edge ") { 2 } else { 1 };
        vec![line.to_owned(); times]
    });
    check(&report, "once", "executed 2 times");
    check(&report, "edges-in-order", "began in the order");
}

#[test]
fn a_hold_without_an_end() {
    let report = report(
        &Options::default(),
        |line| match fields(line)[..] {
            ["step", number, mode, start, target, ramp, _] => {
                vec![format!(
                    "step {number} {mode} {start} {target} {ramp} 60000000"
                )]
            }
            _ => vec![line.to_owned()],
        },
        untouched,
    );
    check(&report, "hold-ends", "no `end` within");
}

#[test]
fn a_charge_one_percent_too_large() {
    let report = report(&with_source(), untouched, |line| match fields(line)[..] {
        ["c", count, time, charge, energy, step, queued, damaged] => {
            let more = charge.parse::<i64>().unwrap() * 101 / 100;
            vec![format!(
                "c {count} {time} {more} {energy} {step} {queued} {damaged}"
            )]
        }
        _ => vec![line.to_owned()],
    });
    check(&report, "charge", "ppm apart");
}

#[test]
fn a_sink_that_is_on_without_a_step() {
    let report = report(&Options::default(), untouched, |line| {
        match line.strip_suffix(" 0") {
            Some(start) if line.starts_with("r ") => vec![format!("{start} 1")],
            _ => vec![line.to_owned()],
        }
    });
    check(&report, "off-at-session", "the state is on");
}

#[test]
fn orders_out_of_turn_that_are_not_refused() {
    let report = report(&Options::default(), untouched, |line| {
        match fields(line)[..] {
            ["no", number, "gap", _] => vec![format!("ok {number}")],
            _ => vec![line.to_owned()],
        }
    });
    check(&report, "in-turn", "expected `no gap");
}

#[test]
fn damaged_lines_that_are_not_counted() {
    let report = report(&Options::default(), untouched, |line| {
        match line.rsplit_once(' ') {
            Some((start, _)) if line.starts_with("c ") => vec![format!("{start} 0")],
            _ => vec![line.to_owned()],
        }
    });
    check(
        &report,
        "damaged-lines",
        "10 damaged lines were sent and 0 counted",
    );
    check(
        &report,
        "faulty-lines",
        "faulty lines were sent and 0 counted",
    );
}

#[test]
fn a_sink_that_says_nothing() {
    let report = report(&Options::default(), untouched, |_| vec![]);
    check(
        &report,
        "description",
        "is a sink on this port, at this baud rate?",
    );
    let (holds, _, _) = report.counts();
    assert_eq!(holds, 0, "{report}");
}

#[test]
fn a_failure_is_printed_with_its_lines() {
    let report = report(&Options::default(), untouched, |line| {
        match fields(line)[..] {
            ["no", number, "gap", _] => vec![format!("ok {number}")],
            _ => vec![line.to_owned()],
        }
    });
    let text = report.to_string();
    assert!(
        text.contains("FAILS      in-turn: an order out of turn"),
        "{text}"
    );
    assert!(text.contains("s  sent      deadman "), "{text}");
    assert!(text.contains("s  received  ok "), "{text}");
}
