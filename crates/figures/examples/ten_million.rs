//! How fast a long record gives its figures, a line of JSON a measurement.
//!
//! `cargo run --release -p figures --example ten_million -- [readbacks]`
//!
//! The reference is what a notebook does with the same readbacks: pandas reads them as CSV and
//! numpy integrates the current over the time, nothing more. Where pandas is not installed the
//! line says so.

#![expect(
    clippy::print_stdout,
    reason = "an example that prints what it measured"
)]
#![expect(
    clippy::disallowed_methods,
    reason = "measuring time is what it is for"
)]

use std::collections::BTreeMap;
use std::error::Error;
use std::fs::File;
use std::io::{BufWriter, Write as _};
use std::path::Path;
use std::process::Command;
use std::time::{Duration, Instant};

use figures::{Name, work_out};
use journal::{
    Body, ClockKind, Ended, Entry, Manifest, Options, Record, SequenceText, Writer, export_csv,
};
use quantity::{Charge, Current, Energy, HostTime, SinkTime, Temperature, Voltage};
use sequencer::event::{Ending, Finding, Happening, StepEnd};
use sink::bench::Bench;
use wire::{Counters, OrderNumber, Readback, Reading, SinkState, TemperatureReading};

/// Microseconds between readbacks.
const INTERVAL: u64 = 20_000;
/// When the record begins, microseconds.
const EVENING: i64 = 1_796_155_200_000_000;
/// Entries between two flushes of the record.
const FLUSH_EVERY: u64 = 50_000;

const SEQUENCE: &str = r#"{ "sequence": 1, "title": "A long discharge (invented)",
  "dut": { "label": "K-01", "kind": "cell", "rated_capacity": "3.2 Ah",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "6.4 A" },
  "readback": "20 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V" } },
  "steps": [ { "draw": "40 mA", "until": [ { "voltage_below": "2.75 V" } ], "at_most": "10 d",
               "label": "discharge" } ] }"#;

const NOTEBOOK: &str = "
import sys, time
try:
    import numpy, pandas
except ImportError:
    sys.exit(3)
begun = time.perf_counter()
table = pandas.read_csv(sys.argv[1])
integrate = getattr(numpy, 'trapezoid', None) or numpy.trapz
charge = integrate(table['current_a'], table['time_s']) / 3600
energy = integrate(table['current_a'] * table['voltage_v'], table['time_s']) / 3600
print(time.perf_counter() - begun, charge, energy)
";

fn main() -> Result<(), Box<dyn Error>> {
    let readbacks: u64 = match std::env::args().nth(1) {
        Some(count) => count.parse()?,
        None => 10_000_000,
    };
    let parent = tempfile::tempdir()?;
    let folder = parent.path().join("record");
    write(&folder, readbacks)?;

    let begun = Instant::now();
    let record = Record::open(&folder)?;
    let figures = work_out(&record)?;
    let took = begun.elapsed();
    let charge = figures
        .of_whole_run(Name::DeliveredCharge)
        .ok_or("no charge")?
        .value;

    let table = parent.path().join("readbacks.csv");
    let mut out = BufWriter::new(File::create(&table)?);
    export_csv(&record, &mut out, |_| {})?;
    out.flush()?;
    let output = Command::new("python3")
        .args(["-c", NOTEBOOK])
        .arg(&table)
        .output();
    let (reference, seconds) = match output {
        Ok(output) if output.status.success() => {
            let text = String::from_utf8(output.stdout)?;
            let mut numbers = text.split_whitespace().map(str::parse::<f64>);
            let (Some(Ok(seconds)), Some(Ok(theirs))) = (numbers.next(), numbers.next()) else {
                return Err("the notebook's answer cannot be read".into());
            };
            if (theirs / charge - 1.0).abs() > 1e-3 {
                return Err(format!("{charge} Ah here, {theirs} Ah there").into());
            }
            let what = "the same as CSV, read by pandas and integrated by numpy".to_owned();
            (what, Some(seconds))
        }
        Ok(_) | Err(_) => (
            "ABSENT: pandas for python3 is not installed (`pip install pandas`)".to_owned(),
            None,
        ),
    };
    let line = serde_json::json!({
        "measured": format!("figures: {readbacks} readbacks read and {} figures worked out",
                            figures.figures.len()),
        "seconds": seconds_of(took),
        "reference": reference,
        "reference_seconds": seconds,
    });
    println!("{line}");
    Ok(())
}

fn seconds_of(took: Duration) -> f64 {
    took.as_secs_f64()
}

/// A cell's voltage that falls in a straight line, with a ripple, while a steady current flows.
fn write(folder: &Path, readbacks: u64) -> Result<(), Box<dyn Error>> {
    let bench = Bench::from_toml(include_str!("../../sink/src/bench/weir.toml"))?;
    let entry = bench.sink("left").ok_or("no sink `left`")?;
    let options = sequence::Options::default();
    let plan = sequence::compile(SEQUENCE, entry, &BTreeMap::new(), &options)
        .map_err(|refused| refused.to_string())?
        .plan;
    let manifest = Manifest {
        format: journal::FORMAT,
        record: "long".to_owned(),
        created: "2026-12-01T20:00:00Z".to_owned(),
        host: "bench".to_owned(),
        software: "bench".to_owned(),
        sink: entry.name.clone(),
        clock: ClockKind::Virtual,
        bench: serde_json::to_value(entry)?,
        sequence: SequenceText {
            text: SEQUENCE.to_owned(),
            files: BTreeMap::new(),
        },
        plan,
        certificate: None,
        description: None,
        resumed: Vec::new(),
        ended: None,
    };
    let mut writer = Writer::create(folder, manifest, Options::default())?;
    let mut number = 0;
    let mut enter = |micros: u64, body: Body| -> Result<(), Box<dyn Error>> {
        number += 1;
        let at = HostTime::from_micros(EVENING + i64::try_from(micros)?);
        writer.append(&Entry { number, at, body })?;
        if number % FLUSH_EVERY == 0 {
            writer.commit()?;
        }
        Ok(())
    };
    let first = Happening::Reading(reading(0, readbacks)?);
    enter(0, Body::Event(first))?;
    let begun = Finding::StepBegan {
        op: 0,
        time: time(0),
    };
    enter(0, Body::Finding(begun))?;
    for index in 1..=readbacks {
        let reading = Happening::Reading(reading(index, readbacks)?);
        enter(index * INTERVAL, Body::Event(reading))?;
    }
    let end = readbacks * INTERVAL;
    let ended = Finding::StepEnded {
        op: 0,
        time: time(end),
        by: StepEnd::Until(0),
    };
    enter(end, Body::Finding(ended))?;
    enter(end, Body::Ended(Ending::Finished))?;
    writer.seal(Ended {
        how: Ending::Finished,
        at: "2026-12-03T20:00:00Z".to_owned(),
        reason: None,
    })?;
    Ok(())
}

fn reading(index: u64, readbacks: u64) -> Result<Reading, Box<dyn Error>> {
    let whole = i64::try_from(readbacks)?.max(1);
    let place = i64::try_from(index)?;
    let ripple = place * 7_919 % 1_601 - 800;
    let current = Current::from_microamperes(40_000 + ripple / 4);
    let voltage = Voltage::from_microvolts(4_150_000 - 1_402_000 * place / whole + ripple);
    let spread = Current::from_microamperes(400);
    let micros = index * INTERVAL;
    let at = time(micros);
    Ok(Reading {
        readback: u16::try_from(index % 65_535)? + 1,
        time: at,
        values: Readback {
            current,
            current_min: current.saturating_sub(spread),
            current_max: current.saturating_add(spread),
            voltage,
            voltage_min: voltage.saturating_sub(Voltage::from_microvolts(900)),
            voltage_max: voltage.saturating_add(Voltage::from_microvolts(900)),
            temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(
                23_000 + ripple / 100,
            )),
            state: SinkState::On,
        },
        counters: Some(Counters {
            time: at,
            charge: Charge::from_coulombs(0.04 * f64::from(u32::try_from(micros / 1000)?) * 1e-3)?,
            energy: Energy::from_joules(0.14 * f64::from(u32::try_from(micros / 1000)?) * 1e-3)?,
            step: OrderNumber(1),
            queued: 0,
            damaged: 0,
        }),
        lost: 0,
    })
}

fn time(micros: u64) -> SinkTime {
    SinkTime::from_micros(1_000_000 + micros)
}
