//! A port, and who may have it.

use std::process::{Command, Stdio};
use std::time::Duration;

use system_tests::daemon_process::{Daemon, program};
use system_tests::pty_sink::PtySink;
use system_tests::sequences::{bench_on, discharge, left_parts};

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
