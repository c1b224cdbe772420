//! Five minutes of pulses with captures, a ramp, a constant power and a product's cycle: the real
//! daemon, a real pseudo-terminal, the emulated board.
//!
//! What the daemon orders is held against the rehearsal of the same sequence, when the steps
//! begin against their orders by the board's own counter, and what the sink counted against the
//! ledger of the source that gave it.

use std::path::Path;
use std::process::{Command, Stdio};
use std::time::Duration;

use journal::{Body, Note, Record};
use quantity::{SinkTime, Span};
use sequencer::event::{Ending, Finding, Happening};
use serde_json::Value;
use system_tests::bridge::{Bridge, Far, Faults};
use system_tests::daemon_process::{Daemon, program};
use system_tests::sequences::{bench_on_reference, patient};
use wire::{Mode, Order, OrderId};

use crate::board::Board;

/// Set by the port's figures: `serial` in `mps2-an385/board.c`.
const SERIAL: u32 = 385;
/// The board's tick of 1 ms, and what waking up may take.
const TICK_WOKEN: Span = Span::from_micros(1_250);

/// Captures that the sequence asks for.
const CAPTURES: usize = 10;
/// Samples of each: 10 before the edge and 50 after it, one a tick.
const SAMPLES: usize = 60;

/// 5 + 100 + 60 + 60 + 10 + 50 + 10 + 5 = 300 s. All currents are whole steps of both converters.
const SEQUENCE: &str = r#"{ "sequence": 1, "title": "Five minutes on the emulated board (invented)",
  "dut": { "label": "K-01", "kind": "cell", "rated_capacity": "3.2 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "6.4 A" },
  "readback": "100 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V" }, "over_voltage": { "above": "4.25 V" } },
  "steps": [
    { "rest": "5 s", "label": "settle" },
    { "repeat": { "times": 10, "steps": [
      { "draw": "100 mA", "for": "8 s", "label": "idle" },
      { "draw": "2 A", "for": "2 s", "burst": { "before": "10 ms", "after": "50 ms" }, "label": "pulse" } ] } },
    { "ramp": { "from": "0 A", "to": "1.5 A", "over": "60 s" }, "label": "ramp" },
    { "draw_power": "4 W", "for": "60 s", "label": "power" },
    { "rest": "10 s", "label": "recovery" },
    { "repeat": { "times": 5, "steps": [
      { "draw": "4 mA", "for": "8 s", "label": "sleep" },
      { "draw": "35 mA", "for": "1880 ms", "label": "sample" },
      { "draw": "420 mA", "for": "120 ms", "label": "transmit" } ] } },
    { "draw": "250 mA", "for": "10 s", "label": "end" },
    { "rest": "5 s", "label": "rest" } ] }"#;

#[test]
fn five_minutes_on_the_emulated_board_are_as_rehearsed_and_lose_no_charge() {
    let Some(board) = Board::start_with_ledger("five minutes on the emulated board") else {
        return;
    };
    let folder = tempfile::tempdir().unwrap();
    let port = folder.path().join("sink");
    let mut bridge = Bridge::new(&port, 115_200, Faults::default(), 1).unwrap();
    bridge.attach(Far::Local(board.port())).unwrap();
    let bench = folder.path().join("bench.toml");
    let text = patient(&bench_on_reference(&port, SERIAL), 10);
    std::fs::write(&bench, text).unwrap();
    let rehearsed = rehearse(folder.path(), &bench);

    let daemon = Daemon::start(&bench, &folder.path().join("records"));
    daemon.wait_for("/v1/sinks/left", Duration::from_secs(20), |sink| {
        sink["description"].is_object()
    });
    let id = daemon.run(SEQUENCE, "left");
    let run = daemon.wait_for(
        &format!("/v1/runs/{id}"),
        Duration::from_secs(400),
        |answer| answer["ending"].is_object(),
    );
    let given_pc = board.ledger();

    let seen = Seen::of(&record_of(&folder.path().join("records")));
    assert_eq!(
        seen.ending,
        Some(Ending::Finished),
        "{run:#}\n{:?}",
        seen.notes
    );
    assert_eq!(seen.rescheduled, 0, "the schedule had to move");
    assert_eq!(seen.orders(), rehearsed.orders());
    assert_edges_in_time(&seen);
    assert_charge(&seen, given_pc);
    assert_captures(&seen);
    assert_figures(&daemon.get(&format!("/v1/records/{id}/figures")));
    assert_eq!(
        daemon.get(&format!("/v1/records/{id}/verify"))["intact"],
        true
    );
}

fn rehearse(folder: &Path, bench: &Path) -> Seen {
    let sequence = folder.join("sequence.json");
    std::fs::write(&sequence, SEQUENCE).unwrap();
    let kept = folder.join("rehearsed");
    let output = Command::new(program())
        .arg("rehearse")
        .arg(&sequence)
        .arg("--bench")
        .arg(bench)
        .args(["--sink", "left", "--keep"])
        .arg(&kept)
        .stdin(Stdio::null())
        .output()
        .unwrap();
    let words = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{words}");
    Seen::of(&Record::open(&kept).unwrap())
}

fn record_of(records: &Path) -> Record {
    let folder = std::fs::read_dir(records)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .find(|path| path.join("manifest.json").exists());
    Record::open(&folder.unwrap()).unwrap()
}

/// What a record says of a run.
#[derive(Default)]
struct Seen {
    ordered: Vec<(OrderId, Order)>,
    edges: Vec<(OrderId, SinkTime)>,
    ending: Option<Ending>,
    rescheduled: u32,
    captured: Vec<usize>,
    /// What the record says in words.
    notes: Vec<String>,
    /// Counters of the last readback, in microcoulomb.
    charge_uc: i64,
}

impl Seen {
    fn of(record: &Record) -> Self {
        let mut seen = Self::default();
        for entry in record.entries() {
            match entry.unwrap().body {
                Body::Order { id, order } => seen.ordered.push((id, order)),
                Body::Event(Happening::Edge { time, order }) => seen.edges.push((order, time)),
                Body::Event(Happening::Reading(reading)) => {
                    if let Some(counters) = reading.counters {
                        seen.charge_uc = counters.charge.microcoulombs();
                    }
                }
                Body::Note(Note::Burst { index, samples, .. }) => {
                    if index == 0 {
                        seen.captured.push(0);
                    }
                    *seen.captured.last_mut().unwrap() += samples.len();
                }
                Body::Note(Note::Text(words)) => seen.notes.push(words),
                Body::Finding(Finding::Rescheduled { .. }) => seen.rescheduled += 1,
                Body::Ended(ending) => seen.ending = Some(ending),
                _ => {}
            }
        }
        seen
    }

    /// When the first step was to begin.
    fn start(&self) -> SinkTime {
        self.steps().next().unwrap().1
    }

    fn steps(&self) -> impl Iterator<Item = (OrderId, SinkTime)> {
        self.ordered.iter().filter_map(|(id, order)| match order {
            Order::Step(step) => Some((*id, step.start)),
            _ => None,
        })
    }

    /// The orders in words, with times from the first step's beginning on, kind by kind: steps
    /// follow each other in time, and so do captures; where a capture is ordered among the
    /// steps is the link's affair.
    ///
    /// The sink is told a power through the current that it is at the voltage of the moment
    /// (`sequencer::orders`), which rounds to a microampere: so power is compared to 0.1 mW.
    fn orders(&self) -> [Vec<String>; 3] {
        let start = self.start();
        let mut kinds = [Vec::new(), Vec::new(), Vec::new()];
        for (_, order) in &self.ordered {
            match order {
                Order::Step(step) => {
                    let mode = match step.mode {
                        Mode::Power(power) => {
                            format!("power {} x 0.1 mW", (power.microwatts() + 50) / 100)
                        }
                        mode => format!("{mode:?}"),
                    };
                    let after = step.start.saturating_since(start);
                    kinds[0].push(format!("{after}: {mode} {} {}", step.ramp, step.hold));
                }
                Order::Burst { at, before, after } => {
                    let at = at.saturating_since(start);
                    kinds[1].push(format!("{at}: {before} {after}"));
                }
                other => kinds[2].push(other.to_string()),
            }
        }
        kinds
    }
}

/// Each step begins at the board's first tick at or after its start: no edge is early, and none
/// is late by more than the tick, where the board ticks. An emulator is woken late, and misses
/// ticks, when the machine gives its processor to another; so most edges are held to the tick and
/// a quarter, and all to what a machine with other tests on it takes. (That every edge is within
/// one tick is shown in virtual time, on the same logic.)
fn assert_edges_in_time(seen: &Seen) {
    let mut late: Vec<Span> = Vec::new();
    for (order, start) in seen.steps() {
        let edges: Vec<SinkTime> = seen
            .edges
            .iter()
            .filter(|(of, _)| *of == order)
            .map(|(_, time)| *time)
            .collect();
        assert_eq!(edges.len(), 1, "{order:?} began {} times", edges.len());
        late.push(edges[0].checked_since(start).expect("an edge is early"));
    }
    late.sort_unstable();
    let in_tick = late.iter().filter(|late| **late <= TICK_WOKEN).count();
    eprintln!(
        "{in_tick} of {} edges within the tick, median {}, latest {}",
        late.len(),
        late[late.len() / 2],
        late[late.len() - 1]
    );
    assert!(in_tick * 2 > late.len(), "{late:?}");
    assert!(late[late.len() - 1] < Span::from_millis(400), "{late:?}");
}

/// The counter of the sink against the ledger of the source, since power-up.
///
/// Both multiply the same currents by times from the same counter, but the source looks at it a
/// moment before the sink does. At a change of current that moment is charge: a few microseconds
/// at an edge, more where the emulator was stopped just there.
fn assert_charge(seen: &Seen, given_pc: u128) {
    let counted_pc = i128::from(seen.charge_uc) * 1_000_000;
    let apart_uc = (counted_pc - i128::try_from(given_pc).unwrap()) / 1_000_000;
    eprintln!("{} uC counted, {apart_uc} uC apart", seen.charge_uc);
    assert!(seen.charge_uc > 100_000_000, "{} uC", seen.charge_uc);
    assert!(apart_uc.abs() <= 1_000, "{apart_uc} uC apart");
}

fn assert_captures(seen: &Seen) {
    assert_eq!(seen.captured, [SAMPLES; CAPTURES]);
}

/// The resistance of the source's model is 60 mohm; 10 ms after an edge only a capture shows it.
fn assert_figures(answer: &Value) {
    let resistances: Vec<&Value> = answer["figures"]["figures"]
        .as_array()
        .unwrap()
        .iter()
        .filter(|figure| figure["name"] == "resistance_at_10_ms" && figure["label"] == "pulse")
        .collect();
    // A pulse that begins later than a tick after its order has no capture of its own.
    assert!(resistances.len() > CAPTURES / 2, "{answer:#}");
    for figure in resistances {
        let how = figure["method"]["how"].as_str().unwrap();
        assert!(how.contains("captured samples"), "{figure:#}");
        let value = figure["value"].as_f64().unwrap();
        let expanded = figure["expanded"]["half_width"].as_f64().unwrap();
        assert!((value - 0.060).abs() <= expanded, "{figure:#}");
        assert!(expanded < 0.010, "{figure:#}");
    }
}
