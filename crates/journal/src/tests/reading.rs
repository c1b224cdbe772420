//! Reading back.

use super::fixture::{SMALL, ended, entry, written};
use crate::{Entry, Record};

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
                body: crate::Body::Event(sequencer::event::Happening::Reading(
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
    let others: Vec<Entry> = record
        .entries_without_readings()
        .collect::<Result<_, _>>()
        .expect("a whole record");
    let wanted: Vec<Entry> = (1..=120)
        .map(entry)
        .filter(|entry| entry.reading().is_none())
        .collect();
    assert_eq!(others, wanted);
}
