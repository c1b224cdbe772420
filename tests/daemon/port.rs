//! A port, and who may have it.

use std::io::{Read as _, Write as _};
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

use serialport::SerialPort as _;
use system_tests::daemon_process::{Daemon, program};
use system_tests::pty;
use system_tests::pty_sink::PtySink;
use system_tests::sequences::{bench_on, discharge, left_parts};

#[expect(
    clippy::disallowed_methods,
    reason = "real time is what is tested here"
)]
fn now() -> Instant {
    Instant::now()
}

#[expect(
    clippy::disallowed_methods,
    reason = "real time is what is tested here"
)]
fn pause() {
    std::thread::sleep(Duration::from_millis(5));
}

#[test]
fn off_reaches_a_sink_on_a_serial_port_within_a_tenth_of_a_second() {
    let sink = PtySink::start(left_parts());
    let folder = tempfile::tempdir().unwrap();
    let bench = folder.path().join("bench.toml");
    std::fs::write(&bench, bench_on(sink.path())).unwrap();
    let daemon = Daemon::start(&bench, &folder.path().join("records"));
    daemon.run(&discharge(60, "end"), "left");
    sink.wait_for_current(Duration::from_secs(10), |current| current > 0.4);
    let answer = daemon.post_empty("/v1/off");
    assert_eq!(answer["acknowledged"], true, "{answer:#}");
    // The sink acknowledges as it sets its converter to zero; the loop follows within a tick.
    sink.wait_for_current(Duration::from_millis(100), |current| current < 0.01);
    daemon.wait_for("/v1/records", Duration::from_secs(10), |answer| {
        answer.to_string().contains("stopped")
    });
}

#[test]
fn a_second_daemon_on_the_same_records_is_refused_with_the_mend() {
    let sink = PtySink::start(left_parts());
    let folder = tempfile::tempdir().unwrap();
    let bench = folder.path().join("bench.toml");
    let records = folder.path().join("records");
    std::fs::write(&bench, bench_on(sink.path())).unwrap();
    let _first = Daemon::start(&bench, &records);
    let second = Command::new(program())
        .arg("serve")
        .arg("--bench")
        .arg(&bench)
        .arg("--records")
        .arg(&records)
        .args(["--listen", "127.0.0.1:0"])
        .stdin(Stdio::null())
        .output()
        .unwrap();
    assert!(!second.status.success());
    let words = String::from_utf8_lossy(&second.stderr);
    assert!(words.contains("another daemon"), "{words}");
}

/// Starts a daemon on a bench with `left` on this port, its records in a folder of this name.
fn daemon_on(folder: &Path, port: &Path, records: &str) -> Daemon {
    let bench = folder.join("bench.toml");
    std::fs::write(&bench, bench_on(port)).unwrap();
    Daemon::start(&bench, &folder.join(records))
}

#[test]
fn a_second_daemon_on_the_same_port_is_kept_out_and_told_why_until_the_first_is_gone() {
    let sink = PtySink::start(left_parts());
    let folder = tempfile::tempdir().unwrap();
    let first = daemon_on(folder.path(), sink.path(), "first");
    first.run(&discharge(60, "end"), "left");
    sink.wait_for_current(Duration::from_secs(10), |current| current > 0.4);

    let second = daemon_on(folder.path(), sink.path(), "second");
    let left = second.wait_for("/v1/sinks/left", Duration::from_secs(10), |left| {
        left["link"]["reason"].is_string()
    });
    let reason = left["link"]["reason"].as_str().unwrap();
    assert!(reason.contains("in use by another program"), "{left:#}");
    assert!(left["description"].is_null(), "{left:#}");
    // Not even an `off` of the second one gets between the first and its sink.
    second.post_empty("/v1/off");
    assert!(sink.current_a() > 0.4, "{} A", sink.current_a());
    assert!(first.get("/v1/runs").to_string().contains("running"));

    first.kill();
    second.wait_for("/v1/sinks/left", Duration::from_secs(10), |left| {
        left["description"].is_object()
    });
    // Its greeting turns the sink off.
    sink.wait_for_current(Duration::from_secs(3), |current| current < 0.01);
}

/// A port on which something talks that is no sink: as much of it as the port takes, for ever.
struct Babbler {
    path: PathBuf,
    stop: Arc<AtomicBool>,
    thread: Option<JoinHandle<Vec<u8>>>,
}

impl Babbler {
    fn start(words: impl Fn(u32) -> Vec<u8> + Send + 'static) -> Self {
        let (mut master, slave) = pty::pair().unwrap();
        let path = PathBuf::from(slave.name().unwrap());
        master.set_timeout(Duration::from_millis(1)).unwrap();
        let stop = Arc::new(AtomicBool::new(false));
        let ends = Arc::clone(&stop);
        let thread = std::thread::spawn(move || {
            // Held open, so that the port stands before the daemon comes.
            let _slave = slave;
            let (mut heard, mut piece) = (Vec::new(), [0; 4096]);
            for turn in 0.. {
                if ends.load(Ordering::Relaxed) {
                    break;
                }
                // What the port does not take now is lost, as on a line.
                let _ = master.write(&words(turn));
                if let Ok(count) = master.read(&mut piece) {
                    heard.extend_from_slice(&piece[..count]);
                }
            }
            heard
        });
        Self {
            path,
            stop,
            thread: Some(thread),
        }
    }

    /// What it heard meanwhile, as lines.
    fn end(mut self) -> Vec<String> {
        self.stop.store(true, Ordering::Relaxed);
        let heard = self.thread.take().unwrap().join().unwrap();
        let text = String::from_utf8(heard).unwrap();
        text.lines().map(str::to_owned).collect()
    }
}

/// The daemon neither takes it for a sink nor suffers from it: it answers at once, does not grow,
/// and says nothing but its greetings.
fn bears(words: impl Fn(u32) -> Vec<u8> + Send + 'static) {
    let babbler = Babbler::start(words);
    let folder = tempfile::tempdir().unwrap();
    let daemon = daemon_on(folder.path(), &babbler.path, "records");
    let settled = Duration::from_secs(2);
    let begun = now();
    while now() - begun < settled {
        daemon.get("/v1/sinks/left");
    }
    let before = daemon.resident_kb();
    let (mut slowest, begun) = (Duration::ZERO, now());
    while now() - begun < 2 * settled {
        let asked = now();
        let left = daemon.get("/v1/sinks/left");
        slowest = slowest.max(now() - asked);
        assert!(left["description"].is_null(), "{left:#}");
    }
    let grown = daemon.resident_kb().saturating_sub(before);
    assert!(slowest < Duration::from_secs(1), "{slowest:?}");
    assert!(grown < 4_096, "grown by {grown} kB");
    let refused = daemon.post_refused("/v1/runs", &discharge(60, "end"), "left");
    assert!(refused.contains("sink-not-connected"), "{refused}");
    let asked = now();
    let off = daemon.post_empty("/v1/off");
    assert_eq!(off["acknowledged"], false, "{off:#}");
    assert!(now() - asked < Duration::from_secs(3), "{off:#}");
    drop(daemon);
    for line in babbler.end() {
        let kind = line.split(' ').next().unwrap();
        assert!(["", "hello", "off", "clock"].contains(&kind), "{line}");
    }
}

#[test]
fn a_port_that_sends_binary_noise_is_no_sink_and_does_no_harm() {
    // Marsaglia's xorshift32 (Journal of Statistical Software 8(14), 2003), seeded by the turn.
    bears(|turn| {
        let mut state = turn.wrapping_mul(0x9E37_79B9) | 1;
        let mut byte = || {
            state ^= state << 13;
            state ^= state >> 17;
            state ^= state << 5;
            state.to_be_bytes()[0]
        };
        (0..256).map(|_| byte()).collect()
    });
}

#[test]
fn a_port_that_floods_with_sound_lines_of_no_session_is_no_sink_and_does_no_harm() {
    bears(|_| {
        let body = "r 1 1000 0 0 0 4000000 4000000 4000000 25000 0";
        let line = format!("{body} {:04X}\n", wire::checksum(body.as_bytes()));
        line.repeat(60).into_bytes()
    });
}

#[test]
fn a_host_that_is_suspended_leaves_the_sink_to_its_deadman_and_ends_the_run_when_it_wakes() {
    let sink = PtySink::start(left_parts());
    let folder = tempfile::tempdir().unwrap();
    let daemon = daemon_on(folder.path(), sink.path(), "records");
    let id = daemon.run(&discharge(60, "end"), "left");
    sink.wait_for_current(Duration::from_secs(10), |current| current > 0.4);
    daemon.suspend();
    let off_after = sink.wait_for_current(Duration::from_millis(2_500), |current| current < 0.01);
    assert!(off_after > Duration::from_secs(1), "{off_after:?}");
    let charge = sink.charge_c();
    // Longer than the deadman and than the host's own silence: it wakes to a sink that is off.
    let begun = now();
    while now() - begun < Duration::from_secs(3) {
        assert!(sink.current_a() < 0.01, "{} A", sink.current_a());
        pause();
    }
    daemon.wake();
    let run = daemon.wait_for(
        &format!("/v1/runs/{id}"),
        Duration::from_secs(20),
        |answer| answer["ending"].is_object(),
    );
    assert_eq!(run["ending"]["interlock"], "silence", "{run:#}");
    assert!(sink.current_a() < 0.01, "{} A", sink.current_a());
    assert!((sink.charge_c() - charge).abs() < 0.01);
}
