//! What happens to cables and boards at night, to the real daemon on a real pseudo-terminal: each
//! as `docs/wiring-and-ports.md` tells.

use std::time::Duration;

use journal::{Body, Record};
use quantity::Charge;
use sequencer::event::Happening;
use serde_json::Value;
use system_tests::bridge::{Bridge, Far, Faults};
use system_tests::daemon_process::Daemon;
use system_tests::sequences::{bench_on_reference, discharge, patient};
use tempfile::TempDir;

use crate::board::{Board, pause};
use crate::process::{Process, program};

/// Set by the ports' figures: `serial` in their `board.c`.
const SERIAL_PROCESS: u32 = 1;
const SERIAL_BOARD: u32 = 385;

/// Longer than anything takes on a busy machine.
const PATIENCE: Duration = Duration::from_secs(30);

struct Night {
    daemon: Daemon,
    bridge: Bridge,
    folder: TempDir,
}

impl Night {
    /// With the bench's usual silence of 2 s, like the deadman.
    fn begin(far: Far, serial: u32) -> Self {
        Self::begin_with(far, serial, str::to_owned)
    }

    fn begin_with(far: Far, serial: u32, change: impl Fn(&str) -> String) -> Self {
        let folder = tempfile::tempdir().unwrap();
        let port = folder.path().join("sink");
        let mut bridge = Bridge::new(&port, 115_200, Faults::default(), 1).unwrap();
        bridge.attach(far).unwrap();
        let bench = folder.path().join("bench.toml");
        std::fs::write(&bench, change(&bench_on_reference(&port, serial))).unwrap();
        let daemon = Daemon::start(&bench, &folder.path().join("records"));
        let night = Self {
            daemon,
            bridge,
            folder,
        };
        night.connected();
        night
    }

    fn connected(&self) -> Value {
        self.daemon.wait_for("/v1/sinks/left", PATIENCE, |left| {
            left["description"].is_object() && left["reading"].is_object()
        })
    }

    /// Starts a run and waits until it draws.
    fn drawing(&self, seconds: u32, on_interruption: &str) -> String {
        let id = self
            .daemon
            .run(&discharge(seconds, on_interruption), "left");
        self.daemon.wait_for("/v1/sinks/left", PATIENCE, |left| {
            left["reading"]["current_a"].as_f64() > Some(0.45)
        });
        id
    }

    /// Waits for a readback that shows no current.
    fn off(&self) {
        self.daemon.wait_for("/v1/sinks/left", PATIENCE, |left| {
            left["reading"]["current_a"].as_f64() < Some(0.01)
        });
    }

    fn reset(&self) {
        let answer = self.daemon.post_empty("/v1/sinks/left/reset");
        self.daemon.wait_for("/v1/sinks/left", PATIENCE, |left| {
            left["latched_by"].is_null() && left["link"]["state"] == "connected"
        });
        assert_eq!(answer["reset"], true);
    }

    fn ended(&self, id: &str) -> Value {
        let run = self
            .daemon
            .wait_for(&format!("/v1/runs/{id}"), PATIENCE, |run| {
                run["state"] == "ended"
            });
        run["ending"].clone()
    }

    fn record(&self) -> Record {
        let folder = std::fs::read_dir(self.folder.path().join("records"))
            .unwrap()
            .map(|entry| entry.unwrap().path())
            .find(|path| path.join("manifest.json").exists());
        Record::open(&folder.unwrap()).unwrap()
    }

    /// What the sink counted over the run, from the first readback to the last.
    fn counted(&self) -> Charge {
        let mut counted = self.record().entries().filter_map(|entry| {
            let counters = entry.unwrap().reading()?.counters?;
            Some(counters.charge)
        });
        let first = counted.next().unwrap();
        counted.last().unwrap() - first
    }
}

/// The host bears more than the sink's deadman.
fn longer_silence(bench: &str) -> String {
    bench.replace(
        "silence = { for = \"2 s\" }",
        "silence = { for = \"30 s\" }",
    )
}

fn process() -> (Process, Far) {
    let (process, port) = Process::start(&program(None), &["--source", "cell"]);
    (process, Far::Local(port))
}

/// `discharge` draws 500 mA: 4 C in 8 s. All in microcoulomb.
fn assert_drawn(charge: Charge, planned: i64, within: i64) {
    let apart = (charge.microcoulombs() - planned).abs();
    assert!(apart <= within, "{charge} of {planned} uC");
}

#[test]
fn a_cable_out_for_less_than_the_deadman_costs_a_run_neither_its_time_nor_its_charge() {
    let (_process, far) = process();
    let mut night = Night::begin_with(far, SERIAL_PROCESS, |bench| patient(bench, 10));
    let id = night.drawing(8, "end");
    night.bridge.unplug();
    pause(Duration::from_millis(400));
    night.bridge.plug().unwrap();
    let ending = night.ended(&id);
    assert_eq!(ending["how"], "finished", "{ending:#}");
    assert_drawn(night.counted(), 4_000_000, 5_000);
}

#[test]
fn a_cable_out_for_longer_than_the_silence_borne_trips() {
    let (_process, far) = process();
    let mut night = Night::begin(far, SERIAL_PROCESS);
    let id = night.drawing(60, "resume");
    night.bridge.unplug();
    let ending = night.ended(&id);
    assert_eq!(ending["interlock"], "silence", "{ending:#}");
    night.bridge.plug().unwrap();
    night.off();
}

#[test]
fn a_cable_out_for_longer_than_the_deadman_trips_it_and_the_sink_is_off() {
    let (_process, far) = process();
    let mut night = Night::begin_with(far, SERIAL_PROCESS, longer_silence);
    let id = night.drawing(60, "end");
    night.bridge.unplug();
    pause(Duration::from_secs(4));
    night.bridge.plug().unwrap();
    let ending = night.ended(&id);
    assert_eq!(ending["how"], "tripped", "{ending:#}");
    assert_eq!(ending["interlock"], "silence", "{ending:#}");
    night.off();
}

#[test]
fn a_cable_out_for_longer_is_made_up_for_if_the_sequence_says_so() {
    let (_process, far) = process();
    let mut night = Night::begin_with(far, SERIAL_PROCESS, longer_silence);
    let id = night.drawing(8, "resume");
    night.bridge.unplug();
    pause(Duration::from_secs(4));
    night.bridge.plug().unwrap();
    let ending = night.ended(&id);
    assert_eq!(ending["how"], "finished", "{ending:#}");
    // The deadman let it draw for up to 2 s after the last line; that counts.
    assert_drawn(night.counted(), 4_000_000, 350_000);
}

#[test]
fn noise_on_the_cable_in_mid_run_trips_silence_and_the_sinks_own_deadman() {
    let (_process, far) = process();
    let mut night = Night::begin(far, SERIAL_PROCESS);
    let id = night.drawing(60, "end");
    let noise = Faults {
        corrupt_ppm: 500_000,
        ..Faults::default()
    };
    night.bridge.set_faults(noise).unwrap();
    let ending = night.ended(&id);
    assert_eq!(ending["how"], "tripped", "{ending:#}");
    assert_eq!(ending["interlock"], "silence", "{ending:#}");
    night.bridge.set_faults(Faults::default()).unwrap();
    night.off();
    // Once a person has reset it, it takes the next run.
    night.reset();
    let id = night.drawing(2, "end");
    assert_eq!(night.ended(&id)["how"], "finished");
}

#[test]
fn a_board_that_lost_power_in_mid_run_trips_the_run_and_draws_nothing_afterwards() {
    let Some(mut board) = Board::start("cutting the board's power in mid-run") else {
        return;
    };
    let mut night = Night::begin(Far::Local(board.port()), SERIAL_BOARD);
    let id = night.drawing(60, "end");
    night.bridge.detach();
    board.restart();
    night.bridge.attach(Far::Local(board.port())).unwrap();
    let ending = night.ended(&id);
    assert_eq!(ending["how"], "tripped", "{ending:#}");
    // The restart, or, where the emulator takes longer to start than that, the silence before.
    let by = &ending["interlock"];
    assert!(by == "clock" || by == "silence", "{ending:#}");
    night.off();
    // Of what had been ordered before nothing began in the board's new life.
    let mut reborn = false;
    for entry in night.record().entries() {
        match entry.unwrap().body {
            Body::Event(Happening::SinkRebooted) => reborn = true,
            Body::Event(Happening::Edge { .. }) => assert!(!reborn, "a step began after it"),
            _ => {}
        }
    }
    night.reset();
    let id = night.drawing(2, "end");
    assert_eq!(night.ended(&id)["how"], "finished");
}
