//! Times the overnight discharge in virtual time, a line of JSON a night:
//! `cargo run --release -p run --example rehearsal`.
//!
//! The whole is sequencer, session, line protocol, firmware, front end and cell. The reference is
//! what the sink alone takes: the very lines that the host had sent are given to it again at the
//! same times, with nobody to listen.
#![expect(
    clippy::print_stdout,
    clippy::disallowed_methods,
    reason = "a benchmark prints what it found, and reads the clock that it measures by"
)]

use std::collections::BTreeMap;
use std::time::Instant;

use journal::Entry;
use quantity::{HostTime, Span};
use run::{Effect, Keeper, KeeperConfig};
use sequence::{Options, compile};
use sequencer::Sequencer;
use sequencer::event::Ending;
use serde_json::{Map, Value, json};
use simulator::bench_source::sink_parts;
use simulator::device::SimulatedSink;
use simulator::front_end::Errors;
use sink::bench::{Bench, SinkEntry};

type Outcome<T> = Result<T, Box<dyn std::error::Error>>;

const BENCH: &str = include_str!("../../sink/src/bench/weir.toml");
const NIGHT: &str = include_str!("../../../sequences/capacity-0.2-it.json");
const HOURS: u64 = 12;
const EVENING: HostTime = HostTime::from_micros(1_796_155_200_000_000);

fn main() -> Outcome<()> {
    for noise in [false, true] {
        for (readback, hertz) in [("100 ms", 10), ("10 ms", 100)] {
            println!("{}", night(noise, readback, hertz)?);
        }
    }
    Ok(())
}

/// A discharge at a fifteenth of the rated capacity, which the cell bears for the whole night.
fn sequence(readback: &str) -> Outcome<String> {
    let mut sequence: Map<String, Value> = serde_json::from_str(NIGHT)?;
    sequence.insert("readback".into(), json!(readback));
    let steps = json!([
        { "rest": "10 min" },
        { "draw": "213 mA", "for": "690 min", "label": "discharge" },
        { "rest": "20 min" }
    ]);
    sequence.insert("steps".into(), steps);
    Ok(Value::Object(sequence).to_string())
}

fn sink(noise: bool, readback: &str) -> Outcome<(SinkEntry, SimulatedSink)> {
    let bench = BENCH.replace(
        "fastest = \"20 ms\"",
        &format!(
            "fastest = \"{}\"",
            if readback == "10 ms" {
                "10 ms"
            } else {
                "20 ms"
            }
        ),
    );
    let bench = Bench::from_toml(&bench)?;
    let entry = bench.sink("left").ok_or("no sink `left`")?.clone();
    let mut parts = sink_parts(&entry)?;
    if !noise {
        parts.errors = Errors::default();
    }
    Ok((entry, SimulatedSink::new(parts)?))
}

/// Lines of the host with the times at which they were sent.
type Sent = Vec<(Span, Vec<u8>)>;

fn night(noise: bool, readback: &str, hertz: u64) -> Outcome<Value> {
    let (entry, mut device) = sink(noise, readback)?;
    let compiled = compile(
        &sequence(readback)?,
        &entry,
        &BTreeMap::new(),
        &Options::default(),
    )
    .map_err(|refused| refused.to_string())?;
    let mut keeper = Keeper::new(KeeperConfig::for_sink(&entry)?, 1);
    let mut sent = Sent::new();
    let begun = Instant::now();
    keeper.begin(Sequencer::new(compiled.plan)?, 0, EVENING)?;
    let (ending, readings) = drive(&mut keeper, &mut device, &mut sent);
    let all = begun.elapsed().as_secs_f64();
    if ending != Some(Ending::Finished) {
        return Err(format!("the night did not finish: {ending:?}").into());
    }
    let until = device.now();
    let (_, mut alone) = sink(noise, readback)?;
    let begun = Instant::now();
    let mut out = Vec::new();
    for (at, bytes) in &sent {
        alone.advance(*at, &mut out);
        alone.receive(bytes);
        out.clear();
    }
    alone.advance(until, &mut out);
    let device_s = begun.elapsed().as_secs_f64();
    let converters = if noise { "noisy" } else { "noise-free" };
    Ok(json!({
        "measured": format!(
            "rehearsal of {HOURS} h at {hertz} Hz, {converters} ({readings} readbacks)"
        ),
        "seconds": all,
        "reference": "the sink alone, in the same virtual time",
        "reference_seconds": device_s,
    }))
}

/// Drives the keeper to the end of its run; gives how it ended and how many readings came.
fn drive(
    keeper: &mut Keeper,
    device: &mut SimulatedSink,
    sent: &mut Sent,
) -> (Option<Ending>, u64) {
    let limit = Span::from_secs((HOURS + 1) * 3600);
    let (mut inbound, mut outbound) = (Vec::new(), Vec::new());
    let mut readings = 0;
    let mut closed = None;
    while device.now() < limit {
        let now = EVENING.saturating_add(device.now());
        while let Some(effect) = keeper.poll_effect() {
            match effect {
                Effect::Append(entry) => {
                    readings += u64::from(Entry::reading(&entry).is_some());
                    keeper.durable(entry.number, now);
                }
                Effect::Closed { ending, .. } => closed = Some(ending),
                Effect::NotTheSinkDescribed(_) | Effect::Reset(_) | Effect::OffAcknowledged => {}
            }
        }
        if closed.is_some() {
            break;
        }
        outbound.clear();
        keeper.take_transmit(&mut outbound);
        if !outbound.is_empty() {
            sent.push((device.now(), outbound.clone()));
            device.receive(&outbound);
        }
        let until = keeper
            .deadline()
            .map_or(limit, |at| at.saturating_since(EVENING));
        inbound.clear();
        device.advance_to_output(until, &mut inbound);
        let now = EVENING.saturating_add(device.now());
        if inbound.is_empty() {
            keeper.tick(now);
        } else {
            keeper.receive(&inbound, now);
        }
    }
    (closed, readings)
}
