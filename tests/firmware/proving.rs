//! `prove` on the firmware itself: sound builds pass, and each broken one is found out.

use std::net::TcpListener;
use std::os::fd::OwnedFd;
use std::path::Path;

use prove::{Options, Report};
use quantity::{Current, Span};
use system_tests::bridge::{Bridge, Far, Faults};

use crate::board::Board;
use crate::process::{Process, program};

/// Sinks share this machine with everything else: their ticks are late at times.
fn options() -> Options {
    Options {
        source: Some(Current::from_milliamperes(500)),
        patience: Span::from_secs(10),
        late: Span::from_millis(800),
    }
}

fn prove_behind(far: Far, options: &Options) -> Report {
    let folder = tempfile::tempdir().unwrap();
    let mut bridge =
        Bridge::new(&folder.path().join("sink"), 115_200, Faults::default(), 1).unwrap();
    bridge.attach(far).unwrap();
    let mut port = prove::open(bridge.path().to_str().unwrap(), 115_200).unwrap();
    prove::run(port.as_mut(), options, &mut |_| {}).unwrap()
}

fn prove_process(program: &Path) -> Report {
    let (_process, port) = Process::start(program, &["--source", "cell"]);
    prove_behind(Far::Local(port), &options())
}

#[test]
fn the_sound_firmware_holds_everything_on_a_pseudo_terminal() {
    let report = prove_process(&program(None));
    assert!(report.holds(), "{report}");
    let (holds, _, not_shown) = report.counts();
    assert_eq!(not_shown, 1, "only what needs a reset: {report}");
    assert_eq!(holds + not_shown, prove::guarantees().count());
}

#[test]
fn the_sound_firmware_holds_everything_behind_a_network_port() {
    let listener = TcpListener::bind("127.0.0.1:0").unwrap();
    let address = listener.local_addr().unwrap().to_string();
    let mut port = prove::open(&address, 115_200).unwrap();
    let (stream, _) = listener.accept().unwrap();
    stream.set_nodelay(true).unwrap();
    let _process = Process::start_on(&program(None), &["--source", "cell"], OwnedFd::from(stream));
    let report = prove::run(port.as_mut(), &options(), &mut |_| {}).unwrap();
    assert!(report.holds(), "{report}");
    assert_eq!(report.counts().2, 1, "{report}");
}

#[test]
fn a_sink_with_nothing_connected_is_proven_without_a_current() {
    let without = Options {
        source: None,
        ..options()
    };
    let (_process, port) = Process::start(&program(None), &["--source", "none"]);
    let report = prove_behind(Far::Local(port), &without);
    assert!(report.holds(), "{report}");
}

#[test]
fn the_sound_firmware_holds_everything_on_the_emulated_board() {
    let Some(board) = Board::start("proving the emulated board") else {
        return;
    };
    let report = prove_behind(Far::Local(board.port()), &options());
    assert!(report.holds(), "{report}");
    assert_eq!(report.counts().2, 1, "{report}");
}

/// The build with this fault fails this check, in these words.
#[track_caller]
fn check(broken: &str, name: &str, words: &str) {
    let report = prove_process(&program(Some(broken)));
    let found = report
        .failed()
        .any(|(failed, wrong)| failed == name && wrong.contains(words));
    assert!(
        found,
        "{broken} was not found out by {name}: {words}\n{report}"
    );
}

#[test]
fn no_deadman_is_found_out() {
    check("no-deadman", "deadman", "no trip within 2 s of silence");
}

#[test]
fn a_deadman_three_times_too_slow_is_found_out() {
    check("deadman-three-times-too-slow", "deadman", "too slow");
}

#[test]
fn taking_damaged_lines_is_found_out() {
    check(
        "takes-damaged-lines",
        "damaged-lines",
        "a line with a wrong checksum was answered",
    );
}

#[test]
fn executing_twice_is_found_out() {
    check("executes-twice", "once", "a second `edge`");
}

#[test]
fn ignoring_the_current_limit_is_found_out() {
    check(
        "ignores-the-current-limit",
        "limit-refuses",
        "expected `no limit`",
    );
}

#[test]
fn losing_the_queue_order_is_found_out() {
    check(
        "loses-the-queue-order",
        "edges-in-order",
        "began in the order",
    );
}

#[test]
fn counting_one_percent_too_much_is_found_out() {
    check(
        "counts-one-percent-too-much",
        "charge",
        "ppm apart, at most 1000",
    );
}

#[test]
fn holding_for_ever_is_found_out() {
    check("holds-for-ever", "hold-ends", "no `end` within");
}

#[test]
fn being_on_at_power_up_is_found_out() {
    check("on-at-power-up", "off-at-session", "the state is on");
}

#[test]
fn every_broken_variant_has_its_test_here() {
    let folder = crate::process::reference().join("broken");
    let here = include_str!("proving.rs");
    for entry in std::fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path
            .extension()
            .is_some_and(|extension| extension == "patch")
        {
            let name = path.file_stem().unwrap().to_str().unwrap();
            assert!(here.contains(&format!("\"{name}\"")), "{name}");
        }
    }
}
