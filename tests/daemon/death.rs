//! The daemon is killed in mid-run, as by a power cut.

use std::time::Duration;

use journal::{Body, Record};
use system_tests::daemon_process::Daemon;
use system_tests::pty_sink::PtySink;
use system_tests::sequences::{bench_on, discharge, left_parts};
use wire::{Mode, Order};

/// The deadman of the bench file, what the sink may take over it, and room for a busy machine.
const DEADMAN: Duration = Duration::from_millis(2_000 + 500);

struct Bench {
    folder: tempfile::TempDir,
    sink: PtySink,
}

impl Bench {
    fn new() -> Self {
        let sink = PtySink::start(left_parts());
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(folder.path().join("bench.toml"), bench_on(sink.path())).unwrap();
        Self { folder, sink }
    }

    fn daemon(&self) -> Daemon {
        Daemon::start(
            &self.folder.path().join("bench.toml"),
            &self.folder.path().join("records"),
        )
    }

    fn record(&self) -> Record {
        let folders: Vec<_> = std::fs::read_dir(self.folder.path().join("records"))
            .unwrap()
            .map(|entry| entry.unwrap().path())
            .filter(|path| path.join("manifest.json").exists())
            .collect();
        assert_eq!(folders.len(), 1, "one run, one record: {folders:?}");
        Record::open(&folders[0]).unwrap()
    }
}

/// Every step the sink was ever told stands in the record: target and start.
fn assert_every_step_is_recorded(sink: &PtySink, record: &Record) {
    let recorded: Vec<(i64, u64)> = record
        .entries()
        .filter_map(|entry| {
            if let Body::Order {
                order: Order::Step(step),
                ..
            } = entry.unwrap().body
                && let Mode::Current(target) = step.mode
            {
                Some((target.microamperes(), step.start.micros()))
            } else {
                None
            }
        })
        .collect();
    let mut told = 0;
    for line in sink.heard() {
        let words: Vec<&str> = line.split(' ').collect();
        if words.first() == Some(&"step") && words.get(2) == Some(&"current") {
            let step = (words[4].parse().unwrap(), words[3].parse().unwrap());
            assert!(
                recorded.contains(&step),
                "{line} is not in the record: {recorded:?}"
            );
            told += 1;
        }
    }
    assert!(told > 0, "the sink was told no step");
}

#[test]
fn a_killed_daemon_leaves_the_sink_to_its_deadman_and_the_next_one_ends_the_run() {
    let bench = Bench::new();
    let daemon = bench.daemon();
    daemon.run(&discharge(60, "end"), "left");
    bench
        .sink
        .wait_for_current(Duration::from_secs(10), |current| current > 0.4);
    daemon.kill();
    let off_after = bench
        .sink
        .wait_for_current(DEADMAN, |current| current < 0.01);
    assert!(
        off_after > Duration::from_secs(1),
        "off after {off_after:?} only by the deadman"
    );
    let record = bench.record();
    assert!(
        record.entries().all(|entry| entry.is_ok()),
        "an unsealed record reads to its end"
    );
    assert_every_step_is_recorded(&bench.sink, &record);

    let daemon = bench.daemon();
    let records = daemon.wait_for("/v1/records", Duration::from_secs(10), |answer| {
        answer.to_string().contains("interrupted")
    });
    assert!(bench.sink.current_a() < 0.01, "{records:#}");
    let record = bench.record();
    assert!(record.is_sealed());
    assert!(journal::verify(record.folder()).unwrap().is_intact());
}

#[test]
fn a_killed_daemons_run_is_taken_up_where_the_record_stands_if_its_sequence_says_so() {
    let bench = Bench::new();
    let daemon = bench.daemon();
    daemon.run(&discharge(8, "resume"), "left");
    bench
        .sink
        .wait_for_current(Duration::from_secs(10), |current| current > 0.4);
    bench.sink.wait_for_charge(Duration::from_secs(5), 1.0);
    daemon.kill();
    bench
        .sink
        .wait_for_current(DEADMAN, |current| current < 0.01);
    let given_before = bench.sink.charge_c();

    let daemon = bench.daemon();
    bench
        .sink
        .wait_for_current(Duration::from_secs(15), |current| current > 0.4);
    bench
        .sink
        .wait_for_current(Duration::from_secs(15), |current| current < 0.01);
    let given = bench.sink.charge_c();
    assert!(
        given > given_before + 0.5,
        "{given_before} C before, {given} C in all"
    );
    // 8 s at 500 mA are 4 C; what the deadman let flow after the host's death is accounted, so
    // the whole stays within a readback and an edge of that.
    assert!((given - 4.0).abs() < 0.35, "{given} C in all, of 4 C");
    daemon.wait_for("/v1/records", Duration::from_secs(10), |answer| {
        answer.to_string().contains("finished")
    });
    let record = bench.record();
    assert_every_step_is_recorded(&bench.sink, &record);
    assert!(journal::verify(record.folder()).unwrap().is_intact());
}
