//! How long *off* and a trip take with the real daemon, and what many sinks cost it:
//! `cargo run --release -p system-tests --example reaction` (build the command line first).
//!
//! One line of JSON a measurement: what it took, and what a reference took in the same run.
#![expect(
    clippy::print_stdout,
    clippy::disallowed_methods,
    reason = "a benchmark prints what it found, and reads the clock that it measures by"
)]

use std::path::Path;
use std::time::{Duration, Instant};

use serde_json::{Value, json};
use system_tests::daemon_process::{Daemon, program};
use system_tests::pty_sink::PtySink;
use system_tests::sequences::{bench_of, bench_on, discharge, left_parts};

type Outcome<T> = Result<T, Box<dyn std::error::Error>>;

/// How often a reaction is measured; the middle one counts.
const TIMES: usize = 11;
/// How long the cost of many sinks is watched.
const WATCH: Duration = Duration::from_secs(10);
/// Within this a sink does what it should, or the benchmark fails.
const AT_MOST: Duration = Duration::from_secs(10);
/// The readback interval of the trip, which is what it can be measured against.
const READBACK: Duration = Duration::from_millis(50);
/// What the trip allows, as the bench's nominal sink draws it: 0.14 mAh and half an ampere.
const CHARGE_C: f64 = 0.14 * 3.6;
const CURRENT_A: f64 = 0.5;
/// The readback interval of many sinks, the fastest that the bench allows.
const FAST: Duration = Duration::from_millis(20);

fn main() -> Outcome<()> {
    if !program().exists() {
        return Err("the daemon is not built: cargo build --release -p sinkwarden".into());
    }
    reactions()?;
    many_sinks()
}

/// From a request or a crossing to no current in the sink, over a pseudo-terminal.
fn reactions() -> Outcome<()> {
    let sink = PtySink::start(left_parts());
    let folder = tempfile::tempdir()?;
    let daemon = start(folder.path(), &bench_on(sink.path()))?;
    let (mut asked, mut off, mut trip) = (Vec::new(), Vec::new(), Vec::new());
    for _ in 0..TIMES {
        let begun = Instant::now();
        daemon.get("/v1/sinks/left");
        asked.push(begun.elapsed());

        daemon.run(&discharge(60, "end"), "left");
        sink.wait_for_current(AT_MOST, |current| current > 0.4);
        let begun = Instant::now();
        daemon.post_empty("/v1/sinks/left/off");
        sink.wait_for_current(AT_MOST, |current| current < 0.01);
        off.push(begun.elapsed());
        free(&daemon);

        let before = sink.charge_c();
        daemon.run(&trips_by_charge(), "left");
        sink.wait_for_current(AT_MOST, |current| current > 0.4);
        sink.wait_for_current(AT_MOST, |current| current < 0.01);
        let beyond = sink.charge_c() - before - CHARGE_C;
        trip.push(Duration::try_from_secs_f64(beyond / CURRENT_A)?);
        free(&daemon);
        daemon.post_empty("/v1/sinks/left/reset");
    }
    tell(
        "off, from the request to no current",
        middle(off),
        "a request for the sink's state",
        middle(asked),
    );
    tell(
        "trip, from the crossing to no current",
        middle(trip),
        "the readback interval",
        READBACK,
    );
    Ok(())
}

/// Processor time of the daemon with eight sinks that draw, against that with one.
fn many_sinks() -> Outcome<()> {
    let one = processor_time(1)?;
    let eight = processor_time(8)?;
    tell(
        "processor time of 8 sinks at 20 ms readbacks, for 10 s",
        eight,
        "of one sink",
        one,
    );
    Ok(())
}

fn processor_time(sinks: usize) -> Outcome<Duration> {
    let folder = tempfile::tempdir()?;
    let daemon = start(folder.path(), &bench_of(sinks))?;
    for number in 1..=sinks {
        daemon.run(
            &read_back_every(FAST, &discharge(60, "end")),
            &format!("sink-{number}"),
        );
    }
    daemon.wait_for("/v1/sinks", AT_MOST, |answer| {
        every_sink(answer, |sink| sink.get("run").is_some_and(Value::is_object))
    });
    let before = spent(daemon.process_id())?;
    std::thread::sleep(WATCH);
    Ok(spent(daemon.process_id())?.saturating_sub(before))
}

/// What a process has used of the processors, user and system (Linux, hundredths of a second).
fn spent(process: u32) -> Outcome<Duration> {
    let stat = std::fs::read_to_string(format!("/proc/{process}/stat"))?;
    let after_name = stat.rsplit_once(')').ok_or("no name in stat")?.1;
    let fields: Vec<&str> = after_name.split_whitespace().collect();
    let field =
        |place: usize| -> Outcome<u64> { Ok(fields.get(place).ok_or("a short stat")?.parse()?) };
    Ok(Duration::from_millis((field(11)? + field(12)?) * 10))
}

fn start(folder: &Path, bench: &str) -> Outcome<Daemon> {
    let file = folder.join("bench.toml");
    std::fs::write(&file, bench)?;
    let daemon = Daemon::start(&file, &folder.join("records"));
    daemon.wait_for("/v1/sinks", AT_MOST, |answer| {
        every_sink(answer, |sink| {
            sink.pointer("/link/state")
                .is_some_and(|state| state == "connected")
        })
    });
    Ok(daemon)
}

fn free(daemon: &Daemon) {
    daemon.wait_for("/v1/sinks/left", AT_MOST, |sink| {
        sink.get("run").is_none_or(Value::is_null)
    });
}

fn every_sink(answer: &Value, meets: impl Fn(&Value) -> bool) -> bool {
    let sinks = answer.get("sinks").and_then(Value::as_array);
    sinks.is_some_and(|sinks| sinks.iter().all(meets))
}

/// The same sequence with another readback interval than its 100 ms.
fn read_back_every(interval: Duration, sequence: &str) -> String {
    sequence.replace("\"100 ms\"", &format!("\"{} ms\"", interval.as_millis()))
}

/// Crosses its limit of charge after a second: an interlock that only the host knows of.
fn trips_by_charge() -> String {
    read_back_every(READBACK, &discharge(60, "end")).replace(
        r#""interlocks": {"#,
        r#""interlocks": { "charge": "0.14 mAh","#,
    )
}

fn middle(mut took: Vec<Duration>) -> Duration {
    took.sort_unstable();
    took.get(took.len() / 2).copied().unwrap_or_default()
}

fn tell(measured: &str, took: Duration, reference: &str, reference_took: Duration) {
    let line: Value = json!({
        "measured": measured,
        "seconds": took.as_secs_f64(),
        "reference": reference,
        "reference_seconds": reference_took.as_secs_f64(),
    });
    println!("{line}");
}
