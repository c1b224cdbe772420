//! The Parquet file says what the CSV says.

use std::fs::File;

use journal::{Body, Entry, Manifest, Options, Record, Writer, export_csv};
use parquet::file::reader::{FileReader as _, SerializedFileReader};
use parquet::record::Field;
use quantity::{Charge, Current, Energy, HostTime, SinkTime, Temperature, Voltage};
use sequencer::event::Happening;
use wire::{Counters, OrderNumber, Readback, Reading, SinkState, TemperatureReading};

use crate::{GROUP_ROWS, export_parquet};

const MANIFEST: &str = include_str!("../../journal/examples/throughput/manifest.json");

/// An invented readback; one in seven has no counters, one in eleven no temperature.
fn entry(number: u64) -> Entry {
    let n = i64::try_from(number).unwrap();
    let time = SinkTime::from_micros(number * 100_000);
    let counters = Counters {
        time,
        charge: Charge::from_microcoulombs(64_013 * n),
        energy: Energy::from_microjoules(249_601 * n),
        step: OrderNumber(1),
        queued: 1,
        damaged: 0,
    };
    let temperature = if number.is_multiple_of(11) {
        TemperatureReading::Open
    } else {
        TemperatureReading::Value(Temperature::from_millidegrees_celsius(-31_250 + n))
    };
    let reading = Reading {
        readback: u16::try_from(number % 65_536).unwrap(),
        time,
        values: Readback {
            current: Current::from_microamperes(640_100 + n % 977),
            current_min: Current::from_microamperes(-3),
            current_max: Current::from_microamperes(641_050),
            voltage: Voltage::from_microvolts(4_100_000 - n),
            voltage_min: Voltage::from_microvolts(4_099_000 - n),
            voltage_max: Voltage::from_microvolts(4_101_000 - n),
            temperature,
            state: SinkState::On,
        },
        counters: (!number.is_multiple_of(7)).then_some(counters),
        lost: 0,
    };
    Entry {
        number,
        at: HostTime::from_micros(1_796_155_200_000_000 + n * 100_000),
        body: Body::Event(Happening::Reading(reading)),
    }
}

/// A cell as the CSV would have to be read: a number, a text, or nothing.
fn as_read_from_csv(field: &Field, cell: &str) -> bool {
    let number = cell.parse::<f64>().ok();
    if let Field::Str(words) = field {
        words == cell
    } else if let Field::Double(value) = field {
        Some(*value) == number
    } else if let Field::Long(value) = field {
        cell == value.to_string()
    } else {
        matches!(field, Field::Null) && cell.is_empty()
    }
}

#[test]
fn every_cell_is_that_of_the_csv() {
    let parent = tempfile::tempdir().unwrap();
    let folder = parent.path().join("record");
    let manifest: Manifest = serde_json::from_str(MANIFEST).unwrap();
    let mut writer = Writer::create(&folder, manifest, Options::default()).unwrap();
    let rows = u64::try_from(GROUP_ROWS + 5).unwrap();
    for number in 1..=rows {
        writer.append(&entry(number)).unwrap();
    }
    writer.commit().unwrap();
    drop(writer);

    let record = Record::open(&folder).unwrap();
    let mut csv = Vec::new();
    export_csv(&record, &mut csv, |_| {}).unwrap();
    let path = parent.path().join("readbacks.parquet");
    let target = File::create(&path).unwrap();
    assert_eq!(export_parquet(&record, target, |_| {}).unwrap(), rows);

    let reader = SerializedFileReader::new(File::open(&path).unwrap()).unwrap();
    assert_eq!(reader.num_row_groups(), 2);
    let facts = reader.metadata().file_metadata().key_value_metadata();
    assert!(
        facts.unwrap().iter().any(|fact| {
            fact.key == "meaning of current_a" && fact.value.as_deref() == Some("Mean current.")
        }),
        "{facts:?}"
    );

    let text = String::from_utf8(csv).unwrap();
    let mut lines = text.lines();
    let names: Vec<&str> = lines.next().unwrap().split(',').collect();
    let mut compared = 0;
    for (line, row) in lines.zip(reader) {
        let row = row.unwrap();
        for ((name, cell), (column, field)) in
            names.iter().zip(line.split(',')).zip(row.get_column_iter())
        {
            assert_eq!(name, column);
            assert!(
                as_read_from_csv(field, cell),
                "{name}: {field} for {cell:?}"
            );
            compared += 1;
        }
    }
    assert_eq!(compared, (GROUP_ROWS + 5) * names.len());
}

#[test]
fn a_target_that_is_full_is_told() {
    struct Full;
    impl std::io::Write for Full {
        fn write(&mut self, _: &[u8]) -> std::io::Result<usize> {
            Err(std::io::ErrorKind::StorageFull.into())
        }
        fn flush(&mut self) -> std::io::Result<()> {
            Ok(())
        }
    }
    let parent = tempfile::tempdir().unwrap();
    let folder = parent.path().join("record");
    let manifest: Manifest = serde_json::from_str(MANIFEST).unwrap();
    drop(Writer::create(&folder, manifest, Options::default()).unwrap());
    let record = Record::open(&folder).unwrap();
    let error = export_parquet(&record, Full, |_| {}).unwrap_err();
    assert!(error.to_string().contains("cannot be written"), "{error}");
}
