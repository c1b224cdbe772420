//! How fast a record is written and read back on this machine, a line of JSON a measurement.
//!
//! `cargo run --release -p journal --example throughput -- [readbacks]`
//!
//! The references do what a script would: the same entries as lines of JSON into a file with one
//! sync at the end; the same readbacks as CSV, split at the commas, each field read as a number.

#![expect(
    clippy::print_stdout,
    reason = "an example that prints what it measured"
)]
#![expect(
    clippy::disallowed_methods,
    reason = "measuring time is what it is for"
)]

use std::error::Error;
use std::fs::File;
use std::io::{BufRead as _, BufReader, BufWriter, Write as _};
use std::path::Path;
use std::time::{Duration, Instant};

use journal::{Body, Entry, Manifest, Options, Record, Timing, Writer, WriterThread};
use quantity::{Charge, Current, Energy, HostTime, SinkTime, Temperature, Voltage};
use sequencer::event::{Ending, Happening};
use wire::{Counters, OrderNumber, Readback, Reading, SinkState, TemperatureReading};

fn main() -> Result<(), Box<dyn Error>> {
    let readbacks: u64 = match std::env::args().nth(1) {
        Some(count) => count.parse()?,
        None => 1_000_000,
    };
    let parent = tempfile::tempdir()?;
    let folder = parent.path().join("record");
    let manifest: Manifest = serde_json::from_str(include_str!("throughput/manifest.json"))?;
    let writer = Writer::create(&folder, manifest, Options::default())?;
    let ended = journal::Ended {
        how: Ending::Finished,
        at: String::new(),
        reason: None,
    };

    let begun = Instant::now();
    let thread = WriterThread::start(writer, Timing::default(), Box::new(drop))?;
    let mut number = 1;
    while number <= readbacks {
        let end = readbacks.min(number + 999);
        let entries = (number..=end).map(entry).collect::<Result<Vec<_>, _>>()?;
        while thread.submit(entries.clone(), false).is_err() {
            std::thread::yield_now();
        }
        number = end + 1;
    }
    let seal = thread.close().seal(ended)?;
    let written = begun.elapsed();
    let plain: u64 = seal
        .segments
        .iter()
        .map(|segment| segment.plain_bytes)
        .sum();
    if plain == 0 {
        return Err("nothing was written".into());
    }
    tell(
        &format!("journal: {readbacks} readbacks written and sealed"),
        written,
        "the same as lines of JSON, one sync",
        write_as_lines(readbacks, &parent.path().join("lines"))?,
    );

    let begun = Instant::now();
    let record = Record::open(&folder)?;
    let mut sum = 0_i64;
    for chunk in record.chunks()? {
        let currents = chunk?.readings.current;
        sum += currents
            .iter()
            .map(|current| current.microamperes())
            .sum::<i64>();
    }
    let read = begun.elapsed();

    let begun = Instant::now();
    let verified = journal::verify(&folder)?;
    let verifying = begun.elapsed();
    if sum == 0 || !verified.findings.is_empty() {
        return Err("the record is not what was written".into());
    }

    let csv = parent.path().join("readbacks.csv");
    let begun = Instant::now();
    let mut out = BufWriter::new(File::create(&csv)?);
    journal::export_csv(&record, &mut out, |_| {})?;
    out.flush()?;
    let exporting = begun.elapsed();

    let reference = "the same as CSV, read by field";
    let by_field = read_fields(&csv)?;
    tell(
        &format!("journal: {readbacks} readbacks read back"),
        read,
        reference,
        by_field,
    );
    tell("journal: verified", verifying, reference, by_field);
    tell("journal: exported as CSV", exporting, reference, by_field);
    Ok(())
}

fn write_as_lines(readbacks: u64, path: &Path) -> Result<Duration, Box<dyn Error>> {
    let begun = Instant::now();
    let mut out = BufWriter::new(File::create(path)?);
    for number in 1..=readbacks {
        let entry = entry(number)?;
        let reading = entry.reading().ok_or("an entry without a reading")?;
        let line = (entry.number, entry.at.micros(), reading);
        serde_json::to_writer(&mut out, &line)?;
        out.write_all(b"\n")?;
    }
    out.into_inner()?.sync_all()?;
    Ok(begun.elapsed())
}

fn read_fields(path: &Path) -> Result<Duration, Box<dyn Error>> {
    let begun = Instant::now();
    let mut sum = 0.0;
    for line in BufReader::new(File::open(path)?).lines() {
        let line = line?;
        let fields = line
            .split(',')
            .filter_map(|field| field.parse::<f64>().ok());
        sum += fields.sum::<f64>();
    }
    let took = begun.elapsed();
    if sum > 0.0 {
        Ok(took)
    } else {
        Err("the export holds no number".into())
    }
}

fn tell(measured: &str, took: Duration, reference: &str, reference_took: Duration) {
    let line = serde_json::json!({
        "measured": measured,
        "seconds": took.as_secs_f64(),
        "reference": reference,
        "reference_seconds": reference_took.as_secs_f64(),
    });
    println!("{line}");
}

/// An invented readback of a 10 Hz discharge.
fn entry(number: u64) -> Result<Entry, Box<dyn Error>> {
    let signed = i64::try_from(number)?;
    let noise = (signed * 7_919) % 400;
    let time = SinkTime::from_micros(number * 100_000);
    let volts = 4_100_000 - (signed / 8) % 1_400_000;
    let reading = Reading {
        readback: u16::try_from(number % 65_536)?,
        time,
        values: Readback {
            current: Current::from_microamperes(640_100 + noise),
            current_min: Current::from_microamperes(639_300 + noise / 2),
            current_max: Current::from_microamperes(641_050 + noise),
            voltage: Voltage::from_microvolts(volts + noise),
            voltage_min: Voltage::from_microvolts(volts - 1_300),
            voltage_max: Voltage::from_microvolts(volts + 1_600 + noise / 3),
            temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(
                31_250 + noise,
            )),
            state: SinkState::On,
        },
        counters: Some(Counters {
            time,
            charge: Charge::from_microcoulombs(64_010 * signed + noise),
            energy: Energy::from_microjoules(249_600 * signed + noise),
            step: OrderNumber(12),
            queued: 1,
            damaged: 0,
        }),
        lost: 0,
    };
    let at = HostTime::from_micros(1_796_155_200_000_000 + signed * 100_000 + noise);
    Ok(Entry {
        number,
        at,
        body: Body::Event(Happening::Reading(reading)),
    })
}
