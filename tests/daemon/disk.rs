//! A disk that runs full in mid-run.

use std::path::Path;
use std::process::Command;
use std::time::Duration;

use journal::Record;
use system_tests::daemon_process::{Daemon, program};
use system_tests::pty_sink::PtySink;
use system_tests::sequences::{bench_on, discharge, left_parts};

/// A command that runs the program with a small file system of its own mounted at `at`.
fn with_small_disk(at: &Path, kilobytes: u32) -> Command {
    let mut command = Command::new("unshare");
    let script = format!(
        "mount -t tmpfs -o size={kilobytes}k none {} && exec \"$@\"",
        at.display()
    );
    command.args([
        "--user",
        "--map-root-user",
        "--mount",
        "sh",
        "-c",
        &script,
        "sh",
    ]);
    command.arg(program());
    command
}

#[test]
fn a_full_disk_trips_the_record_interlock_and_leaves_a_readable_record() {
    let sink = PtySink::start(left_parts());
    let folder = tempfile::tempdir().unwrap();
    let bench = folder.path().join("bench.toml");
    std::fs::write(&bench, bench_on(sink.path())).unwrap();
    let records = folder.path().join("records");
    std::fs::create_dir(&records).unwrap();
    let daemon = Daemon::start_by(with_small_disk(&records, 4096), &bench, &records);
    let id = daemon.run(&discharge(120, "end"), "left");
    sink.wait_for_current(Duration::from_secs(10), |current| current > 0.4);
    // The check has seen room enough; then somebody else takes all of it. The file system lives
    // in the daemon's own name space and is reached through it.
    let seen = format!("/proc/{}/root{}", daemon.process_id(), records.display());
    let taken = std::fs::write(format!("{seen}/ballast"), vec![0; 8 << 20]);
    assert!(taken.is_err(), "8 MiB fit on a disk of 4 MiB");
    sink.wait_for_current(Duration::from_secs(60), |current| current < 0.01);
    let run = daemon.wait_for(
        &format!("/v1/runs/{id}"),
        Duration::from_secs(20),
        |answer| answer.to_string().contains("tripped"),
    );
    assert!(run.to_string().contains("record"), "{run:#}");
    let record = std::fs::read_dir(seen)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .find(|path| path.join("manifest.json").exists())
        .unwrap();
    let record = Record::open(&record).unwrap();
    let readings = record
        .entries()
        .filter(|entry| entry.as_ref().is_ok_and(|entry| entry.reading().is_some()));
    assert!(readings.count() > 0);
}
