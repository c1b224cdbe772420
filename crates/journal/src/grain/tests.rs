use std::ops::Range;

use super::*;
use crate::tests::fixture::{SMALL, ended, written};
use crate::{Record, thin};

/// A record of many small segments, and its grains.
fn record(entries: u64) -> (tempfile::TempDir, Record, Grains) {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), entries, SMALL);
    writer.seal(ended()).expect("room");
    let record = Record::open(&folder).expect("a record");
    let mut grains = Grains::new(record.manifest().plan.correction);
    for chunk in record.chunks().expect("threads") {
        grains.take(&chunk.expect("a whole record").readings);
    }
    (parent, record, grains)
}

fn all(grains: &Grains) -> Vec<Grain> {
    grains.full().iter().copied().chain(grains.last()).collect()
}

/// From the first readback to behind the last.
fn whole(grains: &[Grain]) -> Range<HostTime> {
    let last = grains.last().expect("readbacks").bucket.last_at;
    let end = HostTime::from_micros(last.micros() + 1);
    grains[0].bucket.first_at..end
}

#[test]
fn grains_hold_every_readback_once_with_its_extremes() {
    let (_parent, record, grains) = record(1000);
    let all = all(&grains);
    let stretch = whole(&all);
    // One bucket over all: the grains and the readbacks must say the same.
    let from_grains = gather(all.iter().copied(), &stretch, 1);
    let from_record = thin(&record, stretch, 1).expect("a whole record");
    assert_eq!(from_grains.len(), 1);
    let (made, wanted) = (from_grains[0].bucket, from_record[0]);
    assert_eq!(made.count, wanted.count);
    assert_eq!(
        (made.first_at, made.last_at),
        (wanted.first_at, wanted.last_at)
    );
    assert_eq!(
        (made.current.min, made.current.max),
        (wanted.current.min, wanted.current.max)
    );
    assert_eq!(
        (made.voltage.min, made.voltage.max),
        (wanted.voltage.min, wanted.voltage.max)
    );
    // A mean of rounded means is within the rounding.
    let apart = made.voltage.mean.microvolts() - wanted.voltage.mean.microvolts();
    assert!(apart.abs() <= 1, "{apart}");
}

#[test]
fn buckets_lose_no_readback_and_keep_the_least_and_the_largest() {
    let (_parent, record, grains) = record(2000);
    let all = all(&grains);
    let stretch = whole(&all);
    let gathered = gather(all.iter().copied(), &stretch, 7);
    assert!(gathered.len() <= 7);
    let thinned = thin(&record, stretch, 7).expect("a whole record");
    let count = |buckets: &[u64]| buckets.iter().sum::<u64>();
    let made: Vec<u64> = gathered.iter().map(|grain| grain.bucket.count).collect();
    let wanted: Vec<u64> = thinned.iter().map(|bucket| bucket.count).collect();
    assert_eq!(count(&made), count(&wanted));
    let least =
        |buckets: &mut dyn Iterator<Item = Bucket>| buckets.map(|bucket| bucket.voltage.min).min();
    assert_eq!(
        least(&mut gathered.iter().map(|grain| grain.bucket)),
        least(&mut thinned.iter().copied())
    );
}

#[test]
fn a_record_that_grows_is_gone_on_with_where_it_was_left() {
    let (_parent, record, at_once) = record(1000);
    let chunks: Vec<_> = record
        .chunks()
        .expect("threads")
        .collect::<Result<_, _>>()
        .expect("a whole record");
    let mut complete = Grains::new(record.manifest().plan.correction);
    let half = chunks.len() / 2;
    for chunk in &chunks[..half] {
        complete.take(&chunk.readings);
    }
    let mut rest = complete.continued();
    for chunk in &chunks[half..] {
        rest.take(&chunk.readings);
    }
    let joined: Vec<Grain> = complete.full().iter().copied().chain(all(&rest)).collect();
    assert_eq!(joined, all(&at_once));
}

#[test]
fn charge_is_the_counters_own() {
    let (_parent, record, grains) = record(600);
    let mut csv = Vec::new();
    crate::export_csv(&record, &mut csv, |_| {}).expect("room");
    let mut table = csv::Reader::from_reader(csv.as_slice());
    let column = table
        .headers()
        .expect("names")
        .iter()
        .position(|name| name == "charge_ah")
        .expect("a column of charge");
    let rows: Vec<String> = table
        .records()
        .map(|row| row.expect("a row")[column].to_owned())
        .collect();
    let grains = all(&grains);
    assert!(grains.len() > 2);
    for (index, grain) in grains.iter().enumerate() {
        let text = &rows[index * GRAIN as usize];
        if text.is_empty() {
            // The counters' line was lost: the charge is as it was before.
            continue;
        }
        let wanted: f64 = text.parse().expect("a number");
        let apart = grain.charge.ampere_hours() - wanted;
        assert!(apart.abs() < 1e-9, "grain {index}: {apart}");
    }
}

#[test]
fn bytes_come_back_as_the_same_grains_and_damage_is_seen() {
    let (_parent, _record, grains) = record(700);
    let bytes = Grains::bytes_of(&all(&grains));
    assert_eq!(Grains::from_bytes(&bytes), Some(all(&grains)));
    for place in [0, 9, 17, bytes.len() - 1] {
        let mut damaged = bytes.clone();
        damaged[place] ^= 1;
        assert_eq!(Grains::from_bytes(&damaged), None, "byte {place}");
    }
    assert_eq!(Grains::from_bytes(&bytes[..bytes.len() / 2]), None);
    assert_eq!(Grains::from_bytes(b""), None);
}
