//! A sink that dies and comes back, and a cable that is pulled.

use quantity::{SinkTime, Span};
use system_tests::bridge::{Bridge, Far, Faults};
use tempfile::TempDir;
use transport::session::{Heard, RebootEvidence};

use crate::board::Board;
use crate::host::{Host, step};
use crate::process::{Process, program};

fn cable() -> (TempDir, Bridge) {
    let folder = tempfile::tempdir().unwrap();
    let bridge = Bridge::new(&folder.path().join("sink"), 115_200, Faults::default(), 1).unwrap();
    (folder, bridge)
}

fn drawing(host: &mut Host) {
    host.connected();
    host.ready();
    let order = host.must(step(500, SinkTime::ZERO, Span::from_secs(600)));
    host.edge(order);
}

/// With its power cut the sink forgets all; what the host wrote meanwhile reaches the next life.
fn outlives(host: &mut Host, mut rise: impl FnMut()) {
    host.heard.clear();
    // Written to a port behind which nobody is; it is delivered after the restart.
    let stale = host.order(step(900, SinkTime::ZERO, Span::from_secs(600)));
    host.pass(Span::from_millis(300));
    rise();
    let evidence = host.until("the reboot", |heard| match heard {
        Heard::SinkRebooted { evidence } => Some(*evidence),
        _ => None,
    });
    assert!(
        matches!(
            evidence,
            RebootEvidence::NoSession | RebootEvidence::ClockWentBack { .. }
        ),
        "{evidence:?}"
    );
    assert!(host.heard.contains(&Heard::Abandoned { order: stale }));
    // The next session finds it off, and no step of the one before begins in it.
    host.heard.clear();
    host.restart(78);
    host.connected();
    host.ready();
    let reading = host.reading();
    assert_eq!(reading.values.state, wire::SinkState::Off);
    assert_eq!(reading.counters.unwrap().charge.microcoulombs(), 0);
    host.pass(Span::from_millis(300));
    let begun = host
        .heard
        .iter()
        .any(|heard| matches!(heard, Heard::Edge { .. } | Heard::StepSeen { .. }));
    assert!(!begun, "{:?}", host.heard);
}

#[test]
fn an_emulated_board_that_lost_power_is_noticed_and_obeys_no_stale_line() {
    let Some(mut board) = Board::start("cutting the emulated board's power") else {
        return;
    };
    let (_folder, mut bridge) = cable();
    bridge.attach(Far::Local(board.port())).unwrap();
    let mut host = Host::open(bridge.path(), 77);
    drawing(&mut host);
    bridge.detach();
    board.kill();
    outlives(&mut host, || {
        board.restart();
        bridge.attach(Far::Local(board.port())).unwrap();
    });
}

#[test]
fn a_process_that_was_killed_is_noticed_and_obeys_no_stale_line() {
    let program = program(None);
    let (mut process, port) = Process::start(&program, &[]);
    let (_folder, mut bridge) = cable();
    bridge.attach(Far::Local(port)).unwrap();
    let mut host = Host::open(bridge.path(), 77);
    drawing(&mut host);
    bridge.detach();
    process.kill();
    let mut reborn = None;
    outlives(&mut host, || {
        let (process, port) = Process::start(&program, &[]);
        reborn = Some(process);
        bridge.attach(Far::Local(port)).unwrap();
    });
}

#[test]
fn a_run_outlives_a_cable_that_was_pulled_and_plugged_again() {
    let (_process, port) = Process::start(&program(None), &[]);
    let (_folder, mut bridge) = cable();
    bridge.attach(Far::Local(port)).unwrap();
    let mut host = Host::open(bridge.path(), 77);
    drawing(&mut host);
    let before = host.reading();
    bridge.unplug();
    host.pass(Span::from_millis(500));
    bridge.plug().unwrap();
    host.until("the session again", |heard| {
        matches!(heard, Heard::Resumed { .. }).then_some(())
    });
    assert_eq!(host.rebooted(), None);
    let after = host.reading();
    assert_eq!(after.values.state, wire::SinkState::On);
    // Readbacks were lost, and no charge: 500 mA all the time.
    let charge = after.counters.unwrap().charge - before.counters.unwrap().charge;
    let passed = after.time.saturating_since(before.time);
    let expected = quantity::Current::from_milliamperes(500).times(passed);
    let apart = charge.saturating_sub(expected).microcoulombs().abs();
    assert!(apart <= 3, "{charge} counted, {expected} drawn");
    host.off();
}
