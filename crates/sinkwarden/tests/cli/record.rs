//! A kept rehearsal's record: figures, export, replay, verify, and one altered byte.

use std::fs;

use crate::program::{Desk, file_ending_in};

#[test]
fn a_record_is_intact_replays_and_exports_a_row_a_readback() {
    let desk = Desk::kept();
    let verify = desk.run(&["verify", "kept"]).with_code(0);
    assert!(verify.stdout.starts_with("intact"), "{}", verify.stdout);
    let replay = desk.run(&["replay", "kept"]).with_code(0);
    assert!(
        replay.stdout.starts_with("the same, bit for bit"),
        "{}",
        replay.stdout
    );

    let export = desk.run(&["export", "kept"]).with_code(0);
    let mut lines = export.stdout.lines();
    let header = lines.next().unwrap();
    assert!(
        header.contains("voltage_v") && header.contains("current_a"),
        "{header}"
    );
    // Half a minute at a readback each 100 ms, and the few before and after.
    let rows = lines.count();
    assert!((300..400).contains(&rows), "{rows} rows");
    assert_eq!(export.stderr, "");

    let to_file = desk
        .run(&["export", "kept", "--output", "out.csv"])
        .with_code(0);
    assert_eq!(to_file.stdout, "");
    assert_eq!(
        fs::read_to_string(desk.path("out.csv")).unwrap(),
        export.stdout
    );
    let table = [
        "export",
        "kept",
        "--as",
        "parquet",
        "--output",
        "out.parquet",
    ];
    let told = desk.run(&table).with_code(0).stderr;
    assert!(told.contains("readbacks in out.parquet"), "{told}");
    let written = fs::read(desk.path("out.parquet")).unwrap();
    assert!(written.starts_with(b"PAR1") && written.ends_with(b"PAR1"));
    desk.run(&["export", "kept", "--output", "out.csv"])
        .with_code(1);
}

#[test]
fn figures_have_uncertainties_and_say_that_they_are_nominal() {
    let desk = Desk::kept();
    let answer = desk.run(&["figures", "kept", "--budget"]).with_code(0);
    for part in [
        "nominal, uncalibrated",
        "delivered charge",
        "Ah",
        "sense resistor, tolerance",
    ] {
        assert!(
            answer.stdout.contains(part),
            "no `{part}` in:\n{}",
            answer.stdout
        );
    }
    let figures = desk.run(&["figures", "kept", "--json"]).with_code(0).json();
    assert_eq!(figures["standing"], "nominal_uncalibrated");
}

#[test]
fn a_record_is_found_by_the_beginning_of_its_name_and_as_the_latest() {
    let desk = Desk::kept();
    fs::create_dir(desk.path("records")).unwrap();
    fs::rename(desk.path("kept"), desk.path("records/night-one")).unwrap();
    desk.run(&["verify", "night"]).with_code(0);
    desk.run(&["verify", "latest"]).with_code(0);
    let answer = desk.run(&["verify", "day"]).with_code(1);
    assert!(
        answer
            .stderr
            .contains("hint: list them with `sinkwarden records`"),
        "{}",
        answer.stderr
    );
    let list = desk
        .run(&["records", "--dut", "K-01", "--json"])
        .with_code(0)
        .json();
    assert_eq!(list["records"][0]["folder"], "night-one");
    assert_eq!(list["records"][0]["ending"]["how"], "finished");
    assert_eq!(list["records"][0]["clock"], "virtual");
    let none = desk.run(&["records", "--dut", "M-01"]).with_code(0);
    assert_eq!(none.stdout, "no records\n");
}

#[test]
fn one_altered_byte_is_found_and_located() {
    let desk = Desk::kept();
    let segment = file_ending_in(&desk.path("kept/journal"), ".jsonl.zst");
    let mut bytes = fs::read(&segment).unwrap();
    let middle = bytes.len() / 2;
    bytes[middle] ^= 0x01;
    fs::write(&segment, bytes).unwrap();
    let answer = desk.run(&["verify", "kept"]).with_code(7);
    assert!(answer.stdout.starts_with("ALTERED"), "{}", answer.stdout);
    assert!(
        answer.stdout.contains("000001.jsonl.zst"),
        "{}",
        answer.stdout
    );
    let report = desk.run(&["verify", "kept", "--json"]).with_code(7).json();
    assert!(!report["findings"].as_array().unwrap().is_empty());
}

#[test]
fn a_record_is_never_written_over() {
    let desk = Desk::kept();
    let answer = desk
        .run(&["rehearse", "short.json", "--sink", "left", "--keep", "kept"])
        .with_code(1);
    assert!(
        answer
            .stderr
            .contains("hint: give --keep a folder that does not exist yet"),
        "{}",
        answer.stderr
    );
    desk.run(&["verify", "kept"]).with_code(0);
}
