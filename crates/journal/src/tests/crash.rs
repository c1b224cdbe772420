//! Whatever dies, and whenever: the record opens, and everything durable is in it.

use std::env;
use std::fs;
use std::io::{self, BufRead, BufReader};
use std::path::Path;
use std::process::{Command, Stdio};
use std::sync::Arc;

use proptest::prelude::*;

use super::fixture::{SMALL, ended, entry, manifest, written};
use crate::storage::faulty::{Faults, FaultyDisk};
use crate::{Disk, Entry, Failure, JournalError, Options, Record, Writer, verify};

/// Writes until the disk fails or so many entries are durable; tells what was told durable.
fn write_until_it_fails(disk: &FaultyDisk, folder: &Path, each: u64) -> (u64, Option<Failure>) {
    let storage = Arc::new(disk.clone());
    let Ok(mut writer) = Writer::create_on(storage, folder, manifest(), SMALL) else {
        return (0, None);
    };
    for number in 1..=120 {
        if writer.append(&entry(number)).is_err() {
            break;
        }
        if number % each == 0 && writer.commit().is_err() {
            break;
        }
        if number % 40 == 0
            && crate::writer::compress_closed(disk, folder, writer.segment()).is_err()
        {
            break;
        }
    }
    (writer.durable(), writer.failure().cloned())
}

/// Recovers a real folder and checks all that is promised; returns how many entries survived.
fn recover_and_check(folder: &Path, durable: u64) -> u64 {
    let (writer, found) = Writer::recover(folder, SMALL).expect("a record that can be taken up");
    assert!(
        found.last_number >= durable,
        "entries up to {durable} were told durable, {} are there",
        found.last_number
    );
    if let Some(set_aside) = &found.set_aside {
        let kept = fs::read(folder.join("journal").join(&set_aside.file)).expect("set aside");
        assert_eq!(
            kept.len() as u64,
            set_aside.bytes,
            "the torn end is kept whole"
        );
    }
    drop(writer);
    let record = Record::open(folder).expect("a record");
    let entries: Vec<Entry> = record
        .entries()
        .collect::<Result<_, _>>()
        .expect("what is left holds");
    let prefix: Vec<Entry> = (1..=found.last_number).map(entry).collect();
    assert_eq!(
        entries, prefix,
        "what is left is a prefix of what was appended"
    );
    let report = verify(folder).expect("readable");
    assert_eq!(report.findings, [], "a recovered record has nothing wrong");
    // And the run goes on as if nothing had been.
    let (mut writer, _) = Writer::recover(folder, SMALL).expect("again");
    for number in found.last_number + 1..=found.last_number + 30 {
        writer.append(&entry(number)).expect("room");
    }
    writer.seal(ended()).expect("room");
    let report = verify(folder).expect("readable");
    assert_eq!(
        (report.findings, report.entries),
        (vec![], found.last_number + 30)
    );
    found.last_number
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(96))]

    #[test]
    fn at_whatever_point_the_power_goes_everything_durable_is_there(
        crash_at in 0.0..1.0_f64,
        each in 1_u64..12,
        write_at_most in prop_oneof![Just(None), (1_usize..400).prop_map(Some)],
        seed in any::<u64>(),
    ) {
        let parent = tempfile::tempdir().expect("a folder");
        let folder = parent.path().join("record");
        // How many operations a whole run takes, to crash anywhere within.
        let faults = Faults { write_at_most, ..Faults::default() };
        let whole = FaultyDisk::new(faults);
        write_until_it_fails(&whole, &folder, each);
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            clippy::cast_precision_loss,
            reason = "a place within a few thousand operations"
        )]
        let crash_after = (crash_at * whole.operations() as f64) as u64;
        let disk = FaultyDisk::new(Faults { crash_after: Some(crash_after), ..faults });
        let (durable, _) = write_until_it_fails(&disk, &folder, each);
        disk.crash_into(&folder, &folder, seed);
        if folder.join("manifest.json").exists() {
            recover_and_check(&folder, durable);
        } else {
            prop_assert_eq!(durable, 0, "without a manifest nothing was told durable");
        }
    }

    #[test]
    fn a_full_disk_is_named_and_leaves_a_record(room in 6_000_u64..30_000, seed in any::<u64>()) {
        let parent = tempfile::tempdir().expect("a folder");
        let folder = parent.path().join("record");
        let disk = FaultyDisk::new(Faults { room: Some(room), ..Faults::default() });
        let (durable, failure) = write_until_it_fails(&disk, &folder, 5);
        disk.crash_into(&folder, &folder, seed);
        if folder.join("manifest.json").exists() {
            recover_and_check(&folder, durable);
        }
        // Compressing may be what finds the disk full; the writer then has not failed.
        if let Some(failure) = failure {
            prop_assert!(matches!(failure, Failure::DiskFull(_)), "{failure}");
        }
    }

    #[test]
    fn after_a_failed_flush_nothing_more_is_taken(sync in 2_u64..20, seed in any::<u64>()) {
        let parent = tempfile::tempdir().expect("a folder");
        let folder = parent.path().join("record");
        let disk = FaultyDisk::new(Faults { failing_sync: Some(sync), ..Faults::default() });
        let storage = Arc::new(disk.clone());
        let mut writer =
            Writer::create_on(storage, &folder, manifest(), SMALL).expect("the first flush works");
        let mut told = 0;
        let mut failed = false;
        for number in 1..=60 {
            match writer.append(&entry(number)).and_then(|()| writer.commit()) {
                Ok(durable) => {
                    prop_assert!(!failed, "nothing is taken after a failure");
                    told = durable;
                }
                Err(_) => failed = true,
            }
        }
        prop_assert!(failed);
        prop_assert!(matches!(writer.failure(), Some(Failure::Io(_))));
        prop_assert_eq!(writer.durable(), told);
        drop(writer);
        disk.crash_into(&folder, &folder, seed);
        recover_and_check(&folder, told);
    }
}

#[test]
fn a_torn_last_line_is_set_aside_and_told() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 8, Options::default());
    drop(writer);
    let path = folder.join("journal/000001.jsonl");
    let whole = fs::read(&path).expect("a segment");
    fs::write(&path, &whole[..whole.len() - 9]).expect("room");

    let record = Record::open(&folder).expect("a record");
    let mut entries = record.entries();
    assert_eq!(entries.by_ref().flatten().count(), 7);
    assert_eq!(entries.tail().map(|tail| tail.line), Some(9));

    let (writer, found) = Writer::recover(&folder, Options::default()).expect("recoverable");
    assert_eq!((found.last_number, writer.next_number()), (7, 8));
    let set_aside = found.set_aside.expect("a torn end");
    assert_eq!((set_aside.why.line, set_aside.whole_lines), (9, 0));
    let kept = fs::read(folder.join("journal").join(&set_aside.file)).expect("kept");
    assert!(
        whole.windows(kept.len()).any(|part| part == kept),
        "the torn bytes as they were"
    );
    let seal = writer.seal(ended()).expect("room");
    assert_eq!(seal.set_aside.len(), 1);
    assert_eq!(verify(&folder).expect("readable").set_aside.len(), 1);
}

#[test]
fn damage_before_whole_lines_is_no_torn_end() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, writer) = written(parent.path(), 20, Options::default());
    drop(writer);
    let path = folder.join("journal/000001.jsonl");
    let mut bytes = fs::read(&path).expect("a segment");
    let middle = bytes.len() * 3 / 4;
    bytes[middle] ^= 1;
    fs::write(&path, bytes).expect("room");
    let record = Record::open(&folder).expect("a record");
    assert!(matches!(
        record.entries().find_map(Result::err),
        Some(JournalError::Damaged(_))
    ));
    assert!(
        record
            .chunks()
            .expect("threads")
            .any(|chunk| chunk.is_err())
    );
    let (_, found) = Writer::recover(&folder, Options::default()).expect("recoverable");
    assert!(found.set_aside.expect("an end set aside").whole_lines > 0);
}

/// The environment variable that makes this test's process the writer that is killed.
const WRITE_TO: &str = "JOURNAL_TEST_WRITES_TO";

/// Runs this test again as a process of its own that writes a record and says what is durable.
fn writing_process(test: &str, folder: &Path, before: &str) -> Command {
    let mut command = Command::new("sh");
    command
        .args(["-c", &format!("{before} exec \"$0\" \"$@\"")])
        .arg(env::current_exe().expect("this test"))
        .args(["--exact", test, "--nocapture", "--test-threads=1"])
        .env(WRITE_TO, folder)
        .stdout(Stdio::piped());
    command
}

fn write_and_tell(folder: &Path, options: Options) {
    let mut writer = Writer::create(folder, manifest(), options).expect("room");
    for number in 1..=50_000 {
        let durable = writer.append(&entry(number)).and_then(|()| writer.commit());
        match durable {
            Ok(durable) => println!("\ndurable {durable}"),
            Err(JournalError::DiskFull { .. }) => {
                println!("\nfull");
                return;
            }
            Err(other) => panic!("{other}"),
        }
    }
}

fn told_durable(line: &str) -> Option<u64> {
    line.strip_prefix("durable ")?.parse().ok()
}

#[test]
fn a_killed_process_leaves_everything_it_had_told_durable() {
    if let Some(folder) = env::var_os(WRITE_TO) {
        return write_and_tell(Path::new(&folder), SMALL);
    }
    let parent = tempfile::tempdir().expect("a folder");
    for kill_after in [1, 40, 333] {
        let folder = parent.path().join(format!("record-{kill_after}"));
        let name = "tests::crash::a_killed_process_leaves_everything_it_had_told_durable";
        let mut child = writing_process(name, &folder, "")
            .spawn()
            .expect("a process");
        let output = BufReader::new(child.stdout.take().expect("piped"));
        let mut durable = 0;
        for line in output.lines() {
            durable = line
                .ok()
                .as_deref()
                .and_then(told_durable)
                .unwrap_or(durable);
            if durable >= kill_after {
                break;
            }
        }
        assert!(
            durable >= kill_after,
            "the process wrote before it was killed"
        );
        // SIGKILL on Unix: nothing in the process gets to run any more.
        child.kill().expect("a process to kill");
        child.wait().expect("a dead process");
        recover_and_check(&folder, durable);
    }
}

#[test]
#[cfg(target_os = "linux")]
fn a_file_size_limit_of_the_system_is_a_full_disk() {
    if let Some(folder) = env::var_os(WRITE_TO) {
        return write_and_tell(Path::new(&folder), Options::default());
    }
    let parent = tempfile::tempdir().expect("a folder");
    let folder = parent.path().join("record");
    let name = "tests::crash::a_file_size_limit_of_the_system_is_a_full_disk";
    // 64 blocks hold the manifest, but not a segment of the usual size.
    let before = "trap '' XFSZ; ulimit -f 64;";
    let output = writing_process(name, &folder, before)
        .output()
        .expect("a process");
    let text = String::from_utf8_lossy(&output.stdout);
    assert!(text.lines().any(|line| line == "full"), "{text}");
    recover_and_check(
        &folder,
        text.lines().rev().find_map(told_durable).unwrap_or(0),
    );
}

#[test]
#[cfg(target_os = "linux")]
fn the_system_s_own_full_device_is_a_full_disk() {
    use std::io::Write;
    let path = Path::new("/dev/full");
    let error: io::Error = fs::OpenOptions::new()
        .write(true)
        .open(path)
        .and_then(|mut full| full.write_all(b"x"))
        .expect_err("it is always full");
    assert!(matches!(
        JournalError::io("writing", path, error),
        JournalError::DiskFull { .. }
    ));
    let free = crate::Storage::free_bytes(&Disk, Path::new("/")).expect("known on Linux");
    assert!(free.is_some());
}
