//! A short run over a serial port into the emulated board: by the board's own clock and counters.

use quantity::{Charge, SinkTime, Span};
use system_tests::bridge::{Bridge, Far, Faults};
use transport::session::Heard;

use crate::board::Board;
use crate::host::{Host, step};
use crate::process::{Process, program};

/// Runs three steps and holds edges and charge against what the firmware's own source gives.
fn run_three_steps(far: Far) {
    let folder = tempfile::tempdir().unwrap();
    let mut bridge =
        Bridge::new(&folder.path().join("sink"), 115_200, Faults::default(), 1).unwrap();
    bridge.attach(far).unwrap();
    let mut host = Host::open(bridge.path(), 77);
    host.connected();
    host.ready();
    let before = host.reading().counters.unwrap().charge;

    let start = host.sink_time() + Span::from_millis(700);
    // Whole steps of both converters, so that what is set, what flows and what is read are one.
    let plan = [(1_000_i64, 0_u64), (250, 1_000), (500, 2_500)];
    let mut orders = Vec::new();
    for (milliamperes, after) in plan {
        let at = start + Span::from_millis(after);
        orders.push(host.must(step(milliamperes, at, Span::from_millis(1_500))));
    }
    let ended = host.until("the end", |heard| match heard {
        Heard::HoldExpired { time } => Some(*time),
        _ => None,
    });
    let edges: Vec<SinkTime> = orders.iter().map(|order| host.edge(*order)).collect();
    let mut latest = Span::ZERO;
    for (edge, (_, after)) in edges.iter().zip(plan) {
        let due = start + Span::from_millis(after);
        let late = edge.checked_since(due).expect("no edge before its start");
        latest = latest.max(late);
    }
    // One tick where nothing else wants the processor; a busy machine takes it away at times.
    assert!(latest < Span::from_millis(400), "{latest}");
    eprintln!("edges at most {latest} after their starts, tick 1 ms");

    // What the source gave: each current from its edge to the next.
    let ends = edges.iter().skip(1).chain([&ended]);
    let mut expected = Charge::ZERO;
    for ((edge, end), (milliamperes, _)) in edges.iter().zip(ends).zip(plan) {
        let current = quantity::Current::from_milliamperes(milliamperes);
        expected = expected.saturating_add(current.times(end.saturating_since(*edge)));
    }
    let after = loop {
        let reading = host.reading();
        if reading.time > ended {
            break reading.counters.unwrap().charge;
        }
    };
    let counted = after.saturating_sub(before);
    let apart = counted.saturating_sub(expected).microcoulombs().abs();
    // A microcoulomb for the remainder at each end, and one for each product here.
    assert!(apart <= 5, "{counted} counted, {expected} given");
    assert_eq!(host.rebooted(), None);
    assert_eq!(host.session.counts().damaged_here, 0);
}

#[test]
fn three_steps_on_the_emulated_board_begin_in_time_and_lose_no_charge() {
    if let Some(board) = Board::start("a session with the emulated board") {
        run_three_steps(Far::Local(board.port()));
    }
}

#[test]
fn three_steps_on_the_process_begin_in_time_and_lose_no_charge() {
    let (_process, port) = Process::start(&program(None), &["--source", "cell"]);
    run_three_steps(Far::Local(port));
}
