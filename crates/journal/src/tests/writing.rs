//! Writing, and taking up again, on a real disk.

use std::sync::mpsc;
use std::time::Duration;

use super::fixture::{SMALL, START, ended, entry, manifest, written};
use crate::layout::{self, Named};
use crate::{
    Entry, Failure, JournalError, JournalNews, NotTaken, Options, Record, Timing, Writer,
    WriterThread,
};

fn read(record: &Record) -> Vec<Entry> {
    record
        .entries()
        .collect::<Result<_, _>>()
        .expect("a whole record")
}

fn expected(last: u64) -> Vec<Entry> {
    (1..=last).map(entry).collect()
}

#[test]
fn what_was_written_reads_back_the_same_before_and_after_sealing() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 200, SMALL);
    let record = Record::open(&folder).expect("a record");
    assert_eq!(record.manifest(), &manifest());
    assert!(
        record.segments().len() > 3,
        "the record has several segments"
    );
    assert_eq!(read(&record), expected(200));
    writer.seal(ended()).expect("a whole record");
    let record = Record::open(&folder).expect("a record");
    assert!(record.is_sealed());
    assert_eq!(record.manifest().ended, Some(ended()));
    assert_eq!(read(&record), expected(200));
}

#[test]
fn an_entry_out_of_order_is_refused_and_ends_the_writing() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, mut writer) = written(parent.path(), 5, SMALL);
    assert!(matches!(
        writer.append(&entry(7)),
        Err(JournalError::OutOfOrder {
            expected: 6,
            given: 7
        })
    ));
    assert!(matches!(
        writer.append(&entry(6)),
        Err(JournalError::Poisoned(Failure::OutOfOrder(_)))
    ));
    assert_eq!(read(&Record::open(&folder).expect("a record")), expected(5));
}

#[test]
fn two_writers_cannot_hold_one_record() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 5, SMALL);
    assert!(matches!(
        Writer::recover(&folder, SMALL),
        Err(JournalError::Locked { .. })
    ));
    assert!(matches!(
        Writer::create(&folder, manifest(), SMALL),
        Err(JournalError::Exists { .. })
    ));
    drop(writer);
    let (writer, found) = Writer::recover(&folder, SMALL).expect("nobody holds it");
    assert_eq!((found.last_number, found.last_at), (5, Some(entry(5).at)));
    assert_eq!(writer.next_number(), 6);
}

#[test]
fn a_record_is_taken_up_where_it_stands_and_not_after_sealing() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 37, SMALL);
    drop(writer);
    let (mut writer, found) = Writer::recover(&folder, SMALL).expect("nobody holds it");
    assert_eq!(found.set_aside, None);
    for number in 38..=80 {
        writer.append(&entry(number)).expect("room");
    }
    writer.seal(ended()).expect("room");
    assert_eq!(
        read(&Record::open(&folder).expect("a record")),
        expected(80)
    );
    assert!(matches!(
        Writer::recover(&folder, SMALL),
        Err(JournalError::Sealed { .. })
    ));
    assert!(matches!(
        crate::seal(&folder),
        Err(JournalError::Sealed { .. })
    ));
}

#[test]
fn an_empty_record_opens_and_can_be_sealed() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 0, SMALL);
    assert_eq!(read(&Record::open(&folder).expect("a record")), []);
    drop(writer);
    let (writer, found) = Writer::recover(&folder, SMALL).expect("nobody holds it");
    assert_eq!((found.last_number, found.last_at), (0, None));
    assert_eq!(writer.seal(ended()).expect("room").entries, 0);
}

#[test]
fn a_folder_without_a_manifest_is_no_record() {
    let parent = tempfile::tempdir().expect("a folder");
    assert!(matches!(
        Record::open(parent.path()),
        Err(JournalError::NoRecord { .. })
    ));
    assert!(matches!(
        Writer::recover(parent.path(), SMALL),
        Err(JournalError::NoRecord { .. })
    ));
}

#[test]
fn a_reader_sees_what_is_there_while_the_writer_goes_on() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, mut writer) = written(parent.path(), 60, SMALL);
    let record = Record::open(&folder).expect("a record");
    for number in 61..=90 {
        writer.append(&entry(number)).expect("room");
    }
    writer.commit().expect("room");
    let seen = read(&record);
    assert!(seen.len() >= 60);
    assert_eq!(seen, expected(seen.len() as u64));
    assert_eq!(
        read(&Record::open(&folder).expect("a record")),
        expected(90)
    );
}

#[test]
fn the_thread_makes_urgent_entries_durable_at_once_and_others_in_time() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let writer = Writer::create(&folder, manifest(), Options::default()).expect("room");
    let (news, heard) = mpsc::channel();
    let timing = Timing {
        commit_within: Duration::from_millis(50),
        free_bytes_min: 0,
    };
    let thread = WriterThread::start(
        writer,
        timing,
        Box::new(move |item| news.send(item).expect("the test listens")),
    )
    .expect("a thread");
    let patience = Duration::from_secs(20);

    thread.submit(vec![entry(1)], false).expect("room");
    assert_eq!(heard.recv_timeout(patience), Ok(JournalNews::Durable(1)));
    thread.submit(vec![entry(2)], true).expect("room");
    assert_eq!(heard.recv_timeout(patience), Ok(JournalNews::Durable(2)));
    thread
        .submit(vec![entry(3), entry(4)], false)
        .expect("room");
    thread
        .update_manifest(Box::new(|manifest| manifest.resumed.push("later".into())))
        .expect("the thread lives");
    let writer = thread.close();
    assert_eq!(heard.try_iter().last(), Some(JournalNews::Durable(4)));
    assert_eq!(writer.durable(), 4);
    assert_eq!(writer.manifest().resumed, ["later"]);
    writer.seal(ended()).expect("room");
    assert_eq!(read(&Record::open(&folder).expect("a record")), expected(4));
}

#[test]
fn the_thread_compresses_closed_segments_while_it_writes() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let writer = Writer::create(&folder, manifest(), SMALL).expect("room");
    let thread = WriterThread::start(writer, Timing::default(), Box::new(drop)).expect("a thread");
    for number in 1..=300 {
        thread
            .submit(vec![entry(number)], number % 10 == 0)
            .expect("room");
    }
    let writer = thread.close();
    let names: Vec<String> = crate::Storage::names(&crate::Disk, &folder.join("journal"))
        .expect("a folder")
        .into_iter()
        .filter(|name| matches!(layout::named(name), Named::Plain(_)))
        .collect();
    assert_eq!(
        names,
        [format!("{:06}.jsonl", writer.segment())],
        "only the open one is plain"
    );
    assert_eq!(
        read(&Record::open(&folder).expect("a record")),
        expected(300)
    );
}

#[test]
fn the_thread_tells_a_failure_once_and_takes_nothing_after_it() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let writer = Writer::create(&folder, manifest(), SMALL).expect("room");
    let (news, heard) = mpsc::channel();
    let thread = WriterThread::start(
        writer,
        Timing {
            free_bytes_min: u64::MAX,
            ..Timing::default()
        },
        Box::new(move |item| news.send(item).expect("the test listens")),
    )
    .expect("a thread");
    let patience = Duration::from_secs(20);
    assert!(matches!(
        heard.recv_timeout(patience),
        Ok(JournalNews::DiskLow { .. })
    ));
    let wrong = Entry {
        number: 2,
        at: START,
        ..entry(2)
    };
    thread.submit(vec![wrong], true).expect("not yet failed");
    assert!(matches!(
        heard.recv_timeout(patience),
        Ok(JournalNews::Failed(Failure::OutOfOrder(_)))
    ));
    assert_eq!(thread.submit(vec![entry(1)], true), Err(NotTaken::Failed));
    assert!(thread.close().failure().is_some());
    assert_eq!(heard.try_iter().count(), 0);
}

#[test]
fn the_throughput_example_s_manifest_is_one() {
    let text = include_str!("../../examples/throughput/manifest.json");
    let example: crate::Manifest = serde_json::from_str(text).expect("a manifest");
    assert_eq!(example, manifest());
}
