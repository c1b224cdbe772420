//! How fast a record is written and read back on this machine.
//!
//! `cargo run --release -p journal --example throughput -- [readbacks]`

#![expect(
    clippy::print_stdout,
    reason = "an example that prints what it measured"
)]
#![expect(
    clippy::disallowed_methods,
    reason = "measuring time is what it is for"
)]

use std::error::Error;
use std::time::Instant;

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
    let writer = thread.close();
    report("written", readbacks, begun);
    let begun = Instant::now();
    let seal = writer.seal(ended)?;
    report("sealed", readbacks, begun);
    let plain: u64 = seal
        .segments
        .iter()
        .map(|segment| segment.plain_bytes)
        .sum();
    println!("{plain} plain bytes in {} segments", seal.segments.len());

    let begun = Instant::now();
    let record = Record::open(&folder)?;
    let mut rows = 0_u64;
    let mut sum = 0_i64;
    for chunk in record.chunks()? {
        let readings = chunk?.readings;
        rows += readings.len() as u64;
        sum += readings
            .current
            .iter()
            .map(|current| current.microamperes())
            .sum::<i64>();
    }
    println!("{rows} rows, sum of currents {sum} uA");
    report("read back", rows, begun);

    let begun = Instant::now();
    let verified = journal::verify(&folder)?;
    println!("{} findings", verified.findings.len());
    report("verified", verified.entries, begun);

    let begun = Instant::now();
    let rows = journal::export_csv(&record, &mut std::io::sink(), |_| {})?;
    report("exported as CSV", rows, begun);
    Ok(())
}

#[expect(clippy::cast_precision_loss, reason = "a rate in a few digits")]
fn report(what: &str, count: u64, begun: Instant) {
    let seconds = begun.elapsed().as_secs_f64();
    println!(
        "{what}: {seconds:.2} s, {:.0} a second",
        count as f64 / seconds
    );
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
