//! Reading back.

use std::fs;

use expect_test::expect;
use quantity::{Charge, SinkTime, Span, Voltage};
use sequencer::event::Happening;
use wire::Counters;

use super::fixture::{SMALL, START, ended, entry, manifest, reading, written};
use crate::{Body, Entry, Near, Options, Record, Writer, export_csv, thin};

#[test]
fn columns_hold_the_same_as_entries() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 333, SMALL);
    writer.seal(ended()).expect("room");
    let record = Record::open(&folder).expect("a record");
    let mut all = Vec::new();
    for chunk in record.chunks().expect("threads") {
        let chunk = chunk.expect("a whole record");
        let mut entries = chunk.others.clone();
        for index in 0..chunk.readings.len() {
            entries.push(Entry {
                number: chunk.readings.number[index],
                at: chunk.readings.at[index],
                body: Body::Event(Happening::Reading(
                    chunk.readings.get(index).expect("in range"),
                )),
            });
        }
        entries.sort_by_key(|entry| entry.number);
        all.extend(entries);
    }
    assert_eq!(all, (1..=333).map(entry).collect::<Vec<_>>());
}

#[test]
fn readbacks_can_be_passed_over() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, _writer) = written(parent.path(), 120, SMALL);
    let record = Record::open(&folder).expect("a record");
    let others = record.others().expect("a whole record");
    assert_eq!(others, but_readings(120));
}

#[test]
fn what_is_no_readback_is_told_by_the_extracts_alone() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 333, SMALL);
    writer.seal(ended()).expect("room");
    let journal = folder.join("journal");
    for segment in crate::segment::list(&crate::Disk, &journal).expect("readable") {
        // The text behind the extract is cut away: whoever needed it would fail.
        let path = journal.join(crate::layout::compressed_name(segment));
        let packed = fs::read(&path).expect("a segment");
        let extract = crate::packed::Extract::of(&packed);
        assert!(matches!(extract, crate::packed::Extract::Lines(_)));
        let length = u32::from_le_bytes(packed[4..8].try_into().expect("four bytes"));
        fs::write(&path, &packed[..8 + length as usize]).expect("room");
    }
    let record = Record::open(&folder).expect("a record");
    assert_eq!(record.others().expect("extracts"), but_readings(333));
    let read: Result<Vec<_>, _> = record.chunks().expect("threads").collect();
    assert!(read.is_err());
}

fn but_readings(entries: u64) -> Vec<Entry> {
    let all = (1..=entries).map(entry);
    all.filter(|entry| entry.reading().is_none()).collect()
}

#[test]
fn an_export_has_true_and_nominal_values_with_units_and_labels() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, _writer) = written(parent.path(), 12, SMALL);
    let record = Record::open(&folder).expect("a record");
    let mut csv = Vec::new();
    let mut steps = Vec::new();
    let rows = export_csv(&record, &mut csv, |progress| steps.push(progress)).expect("room");
    assert_eq!(rows, 8);
    assert_eq!(
        steps.last().map(|last| (last.segments_done, last.rows)),
        Some((1, 8))
    );
    let text = String::from_utf8(csv).expect("text");
    let head: String = text.split_inclusive('\n').take(3).collect();
    // True current: 2 mA + 0.97 times the nominal one, as the invented plan says.
    expect![[r#"
        time_s,current_a,current_min_a,current_max_a,voltage_v,voltage_min_v,voltage_max_v,temperature_degc,charge_ah,energy_wh,label,state,sensor_fault,current_nominal_a,current_min_nominal_a,current_max_nominal_a,voltage_nominal_v,voltage_min_nominal_v,voltage_max_nominal_v,charge_nominal_c,energy_nominal_j,sink_time_us,host_time_us,lost,entry
        0.000000,0.623280,0.622312,0.624202,3.900390,3.898695,3.901990,31.645,0.000000000,0.000000000,"discharge, ""0.2 It""",on,,0.640495,0.639497,0.641445,3.900390,3.898695,3.901990,0.320050,1.248000,5500000,1796155200500000,0,5
        0.100000,0.623202,0.622273,0.624123,3.900308,3.898694,3.901908,31.564,0.000017303,0.000067470,"discharge, ""0.2 It""",on,,0.640414,0.639457,0.641364,3.900308,3.898694,3.901908,0.384060,1.497600,5600000,1796155200600000,0,6
    "#]].assert_eq(&head);
}

#[test]
fn charge_and_time_go_on_over_a_restart_of_the_sink() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let mut writer = Writer::create(&folder, manifest(), SMALL).expect("room");
    // One ampere-hour before, half of one after: 1 A nominal, counters from zero again.
    let points = [
        (10, 0, 0),
        (3_610, 3_600, 3_600),
        (2, 0, 5_400),
        (1_802, 1_800, 7_200),
    ];
    for (number, (sink_s, charge_c, host_s)) in (1..).zip(points) {
        let mut reading = reading(1);
        reading.time = SinkTime::from_micros(sink_s * 1_000_000);
        reading.counters = reading.counters.map(|counters| Counters {
            time: reading.time,
            charge: Charge::from_microcoulombs(charge_c * 1_000_000),
            ..counters
        });
        let at = START + Span::from_secs(host_s);
        let body = Body::Event(Happening::Reading(reading));
        writer.append(&Entry { number, at, body }).expect("room");
    }
    writer.commit().expect("room");
    let record = Record::open(&folder).expect("a record");
    let mut csv = Vec::new();
    export_csv(&record, &mut csv, |_| {}).expect("room");
    let text = String::from_utf8(csv).expect("text");
    let cells: Vec<(&str, &str)> = text
        .lines()
        .skip(1)
        .map(|line| {
            let cells: Vec<&str> = line.split(',').collect();
            (cells[0], cells[8])
        })
        .collect();
    // By hand: 0.97 Ah + 2 mA for 1 h = 0.972 Ah; then 0.97 * 0.5 Ah + 2 mA for 0.5 h more.
    assert_eq!(
        cells,
        [
            ("0.000000", "0.000000000"),
            ("3600.000000", "0.972000000"),
            ("5400.000000", "0.972000000"),
            ("7200.000000", "1.458000000"),
        ]
    );
}

#[test]
fn thinning_keeps_a_dip_that_one_readback_in_thousands_saw() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let mut writer = Writer::create(
        &folder,
        manifest(),
        Options {
            segment_bytes: 20_000,
        },
    )
    .expect("room");
    for number in 1..=3_000 {
        let mut reading = reading(number);
        if number == 1_234 {
            reading.values.voltage_min = Voltage::from_microvolts(2_700_000);
        }
        let at = START + Span::from_millis(number * 100);
        let body = Body::Event(Happening::Reading(reading));
        writer.append(&Entry { number, at, body }).expect("room");
    }
    writer.seal(ended()).expect("room");
    let record = Record::open(&folder).expect("a record");
    let stretch = START..START + Span::from_secs(301);
    let buckets = thin(&record, stretch, 10).expect("a whole record");
    assert_eq!(buckets.len(), 10);
    assert_eq!(
        buckets.iter().map(|bucket| bucket.count).sum::<u64>(),
        3_000
    );
    let dips = buckets
        .iter()
        .filter(|bucket| bucket.voltage.min == Voltage::from_microvolts(2_700_000))
        .count();
    assert_eq!(dips, 1);
    for bucket in &buckets {
        assert!(bucket.current.min <= bucket.current.mean);
        assert!(bucket.current.mean <= bucket.current.max);
    }

    // Part of it: only what arrived then, as if by reading everything.
    let part = START + Span::from_secs(100)..START + Span::from_secs(120);
    let buckets = thin(&record, part.clone(), 1_000).expect("a whole record");
    assert_eq!(buckets.len(), 200);
    assert!(
        buckets
            .iter()
            .all(|bucket| bucket.count == 1 && part.contains(&bucket.first_at))
    );
    assert_eq!(thin(&record, START..START, 10).expect("nothing asked"), []);
}

#[test]
fn what_is_kept_of_a_record_answers_as_the_record_itself() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let options = Options {
        segment_bytes: 20_000,
    };
    let mut writer = Writer::create(&folder, manifest(), options).expect("room");
    let at = |number: u64| START + Span::from_millis(number * 100);
    let write = |writer: &mut Writer, numbers: std::ops::RangeInclusive<u64>| {
        for number in numbers {
            let body = Body::Event(Happening::Reading(reading(number)));
            let at = at(number);
            writer.append(&Entry { number, at, body }).expect("room");
        }
        writer.commit().expect("room");
    };
    let mut near = Near::default();
    let mut check = |from: u64, to: u64| {
        let record = Record::open(&folder).expect("a record");
        for buckets in [1, 7, 400] {
            let stretch = at(from)..at(to);
            let kept = near
                .thin(&record, &stretch, buckets)
                .expect("a whole record");
            let read = thin(&record, stretch, buckets).expect("a whole record");
            assert_eq!(kept, read, "{buckets} buckets from {from} to {to}");
        }
    };
    write(&mut writer, 1..=1_000);
    check(900, 1_100);
    // The segment that still grew is asked again.
    write(&mut writer, 1_001..=2_000);
    for (from, to) in [
        (900, 1_100),
        (1, 50),
        (0, 2_000),
        (30, 40),
        (1_990, 2_500),
        (7, 7),
    ] {
        check(from, to);
    }
    writer.seal(ended()).expect("room");
    check(1_900, 2_100);
    // A look at a segment that is kept reads nothing: its file may be gone.
    let record = Record::open(&folder).expect("a record");
    let mut near = Near::default();
    let close = at(100)..at(120);
    let read = near.thin(&record, &close, 20).expect("a whole record");
    assert!(near.points() > 20);
    for file in std::fs::read_dir(folder.join("journal")).expect("a folder") {
        std::fs::remove_file(file.expect("a file").path()).expect("allowed");
    }
    let closer = at(105)..at(110);
    assert_eq!(near.thin(&record, &close, 20).expect("kept"), read);
    assert_eq!(near.thin(&record, &closer, 5).expect("kept").len(), 5);
    assert!(near.thin(&record, &(at(1_500)..at(1_510)), 5).is_err());
    near.clear();
    assert!(near.thin(&record, &close, 20).is_err());
}

#[test]
fn a_record_on_a_disk_gone_bad_is_an_error_and_no_short_answer() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 200, SMALL);
    writer.seal(ended()).expect("room");
    let record = Record::open(&folder).expect("a record");
    let path = folder.join("journal/000002.jsonl.zst");
    let mut bytes = std::fs::read(&path).expect("a segment");
    let middle = bytes.len() / 2;
    bytes[middle] ^= 0x10;
    std::fs::write(&path, bytes).expect("room");
    assert!(record.entries().any(|entry| entry.is_err()));
    assert!(
        record
            .chunks()
            .expect("threads")
            .any(|chunk| chunk.is_err())
    );
    assert!(export_csv(&record, &mut std::io::sink(), |_| {}).is_err());
    assert!(thin(&record, START..START + Span::from_secs(90), 10).is_err());
}
