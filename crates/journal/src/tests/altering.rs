//! Any alteration is found, and named with its place.

use std::fs;
use std::path::{Path, PathBuf};

use proptest::prelude::*;

use super::fixture::{SMALL, ended, entry, written};
use crate::{FindingKind, Options, VerifyReport, Writer, verify};

fn files(folder: &Path) -> Vec<PathBuf> {
    let mut files: Vec<PathBuf> = ["", "journal"]
        .iter()
        .flat_map(|sub| fs::read_dir(folder.join(sub)).expect("a folder"))
        .map(|item| item.expect("readable").path())
        .filter(|path| path.is_file() && fs::metadata(path).is_ok_and(|file| file.len() > 0))
        .collect();
    files.sort();
    files
}

fn sealed(parent: &Path) -> PathBuf {
    // A torn end, too, so that one that was set aside is under the seal.
    let (folder, writer) = written(parent, 60, SMALL);
    let open = folder
        .join("journal")
        .join(crate::layout::plain_name(writer.segment()));
    drop(writer);
    let mut bytes = fs::read(&open).expect("a segment");
    bytes.extend_from_slice(b"[61,torn");
    fs::write(&open, bytes).expect("room");
    let (mut writer, found) = Writer::recover(&folder, SMALL).expect("recoverable");
    assert!(found.set_aside.is_some());
    for number in 61..=100 {
        writer.append(&entry(number)).expect("room");
    }
    let seal = writer.seal(ended()).expect("room");
    let report = verify(&folder).expect("readable");
    assert_eq!(report.findings, []);
    assert_eq!((report.hash, report.entries), (seal.hash, 100));
    folder
}

fn flip(file: &Path, place: usize, bits: u8) {
    let mut bytes = fs::read(file).expect("a file");
    bytes[place] ^= bits;
    fs::write(file, bytes).expect("room");
}

/// Flips bits of one byte somewhere in a record; the finding must name the file.
fn check_flip(folder: &Path, which: prop::sample::Index, place: prop::sample::Index, bits: u8) {
    let files = files(folder);
    let file = which.get(&files);
    let length = usize::try_from(fs::metadata(file).expect("a file").len()).expect("small");
    let place = place.index(length);
    flip(file, place, bits);
    let report = verify(folder).expect("readable");
    flip(file, place, bits);
    let name = file
        .strip_prefix(folder)
        .expect("inside")
        .display()
        .to_string();
    assert!(
        report
            .findings
            .iter()
            .any(|finding| finding.place.file == name),
        "byte {place} of {name}: {:?}",
        report.findings
    );
    assert!(!report.is_intact());
    assert!(
        report.findings.len() <= 3,
        "one altered byte makes no flood of findings: {:?}",
        report.findings
    );
}

#[test]
fn any_byte_altered_anywhere_in_a_sealed_record_is_found_and_named() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = sealed(parent.path());
    proptest!(ProptestConfig::with_cases(600), |(
        which in any::<prop::sample::Index>(),
        place in any::<prop::sample::Index>(),
        bits in 1_u8..=255,
    )| check_flip(&folder, which, place, bits));
    assert!(verify(&folder).expect("readable").is_intact());
}

#[test]
fn any_byte_altered_in_an_unsealed_record_is_found_and_named() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, _writer) = written(parent.path(), 60, SMALL);
    proptest!(ProptestConfig::with_cases(300), |(
        which in any::<prop::sample::Index>(),
        place in any::<prop::sample::Index>(),
        bits in 1_u8..=255,
    )| check_flip(&folder, which, place, bits));
}

fn kinds(report: &VerifyReport) -> Vec<FindingKind> {
    report.findings.iter().map(|finding| finding.kind).collect()
}

#[test]
fn an_altered_line_is_told_with_its_line_and_byte() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, _writer) = written(parent.path(), 20, Options::default());
    let path = folder.join("journal/000001.jsonl");
    let text = fs::read_to_string(&path).expect("a segment");
    let offset: usize = text.lines().take(10).map(|line| line.len() + 1).sum();
    flip(&path, offset + 30, 1);
    let report = verify(&folder).expect("readable");
    assert_eq!(kinds(&report), [FindingKind::Line]);
    let place = &report.findings[0].place;
    assert_eq!(place.file, "journal/000001.jsonl");
    assert_eq!((place.line, place.offset), (Some(11), Some(offset as u64)));
    assert!(
        report.findings[0]
            .to_string()
            .starts_with("journal/000001.jsonl, line 11, byte ")
    );
}

#[test]
fn a_line_taken_out_or_doubled_is_told_by_the_numbers() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, _writer) = written(parent.path(), 20, Options::default());
    let path = folder.join("journal/000001.jsonl");
    let text = fs::read_to_string(&path).expect("a segment");
    let lines: Vec<&str> = text.split_inclusive('\n').collect();

    let without = [&lines[..8], &lines[9..]].concat().concat();
    fs::write(&path, without).expect("room");
    let report = verify(&folder).expect("readable");
    assert_eq!(kinds(&report), [FindingKind::Numbers]);
    assert_eq!(report.findings[0].place.line, Some(9));

    let doubled = [&lines[..9], &lines[8..]].concat().concat();
    fs::write(&path, doubled).expect("room");
    let report = verify(&folder).expect("readable");
    assert_eq!(report.findings[0].kind, FindingKind::Numbers);
    assert_eq!(report.findings[0].place.line, Some(10));
}

#[test]
fn a_rewritten_line_with_a_checksum_of_its_own_breaks_the_chain() {
    let parent = tempfile::tempdir().expect("a folder");
    let (folder, _writer) = written(parent.path(), 60, SMALL);
    let path = folder.join("journal/000001.jsonl");
    let text = fs::read_to_string(&path).expect("a segment");
    let last = text.lines().last().expect("a line");
    let header = text.lines().next().expect("a line");
    let base = crate::line::decode_object::<crate::segment::Header>(header.as_bytes())
        .expect("a first line")
        .at;
    let mut forged = crate::line::decode(last.as_bytes(), base).expect("an entry");
    forged.at += quantity::Span::from_micros(1);
    let mut bytes = text.as_bytes()[..text.len() - last.len() - 1].to_vec();
    crate::line::encode(&mut bytes, base, &forged);
    fs::write(&path, bytes).expect("room");
    let report = verify(&folder).expect("readable");
    assert_eq!(kinds(&report), [FindingKind::SegmentHash]);
    assert_eq!(report.findings[0].place.file, "journal/000001.jsonl");
}

#[test]
fn an_extract_that_leaves_something_out_is_told() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = sealed(parent.path());
    let path = folder
        .join("journal")
        .join(crate::layout::compressed_name(1));
    let (text, why) = crate::packed::unpack(&fs::read(&path).expect("a segment"));
    assert_eq!(why, None);
    // The extract of another text, every line of which holds, in front of the true one.
    let kept: Vec<u8> = text
        .split_inclusive(|byte| *byte == b'\n')
        .enumerate()
        .filter(|(index, line)| *index == 0 || line.starts_with(b"["))
        .flat_map(|(_, line)| line)
        .copied()
        .collect();
    let frame_of = |packed: &[u8]| {
        let length = u32::from_le_bytes(packed[4..8].try_into().expect("four bytes"));
        8 + length as usize
    };
    let (false_one, true_one) = (
        crate::packed::pack(&kept).expect("memory"),
        crate::packed::pack(&text).expect("memory"),
    );
    let mut forged = false_one[..frame_of(&false_one)].to_vec();
    forged.extend_from_slice(&true_one[frame_of(&true_one)..]);
    fs::write(&path, forged).expect("room");

    let report = verify(&folder).expect("readable");
    assert!(
        report.findings.iter().any(|finding| {
            finding.place.file == "journal/000001.jsonl.zst" && finding.detail.contains("extract")
        }),
        "{report:?}"
    );
    let record = crate::Record::open(&folder).expect("a record");
    let read: Result<Vec<_>, _> = record.chunks().expect("threads").collect();
    assert!(
        read.expect_err("it is altered")
            .to_string()
            .contains("extract")
    );
}

#[test]
fn segments_missing_or_too_many_are_told() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = sealed(parent.path());
    let journal = folder.join("journal");
    let second = journal.join(crate::layout::compressed_name(2));
    let bytes = fs::read(&second).expect("a segment");

    fs::remove_file(&second).expect("it is there");
    let report = verify(&folder).expect("readable");
    assert_eq!(kinds(&report), [FindingKind::SegmentMissing]);
    assert_eq!(report.findings[0].place.file, "journal/000002.jsonl.zst");
    assert!(crate::Record::open(&folder).is_err());
    fs::write(&second, &bytes).expect("room");

    let extra = journal.join(crate::layout::compressed_name(90));
    fs::write(&extra, &bytes).expect("room");
    let report = verify(&folder).expect("readable");
    assert!(kinds(&report).contains(&FindingKind::SegmentExtra));
    fs::remove_file(&extra).expect("it is there");
    assert!(verify(&folder).expect("readable").is_intact());
}

#[test]
fn another_manifest_with_a_checksum_of_its_own_is_told() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = sealed(parent.path());
    let mut other = super::fixture::manifest();
    other.host = "elsewhere".into();
    fs::write(folder.join("manifest.json"), other.to_bytes()).expect("room");
    assert_eq!(
        kinds(&verify(&folder).expect("readable")),
        [FindingKind::Manifest]
    );
}

#[test]
fn what_others_put_beside_the_record_is_named_as_not_covered() {
    let parent = tempfile::tempdir().expect("a folder");
    let folder = sealed(parent.path());
    fs::write(folder.join("figures.json"), "{}").expect("room");
    let report = verify(&folder).expect("readable");
    assert!(report.is_intact());
    assert_eq!(report.not_covered, ["figures.json"]);
}
