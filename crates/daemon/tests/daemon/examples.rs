use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use crate::desk::{Desk, SHORT};

fn example(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("../../docs/examples")
        .join(name)
}

/// Runs an example against a daemon, and shows what it said if it fails.
fn run(desk: &Desk, program: &str, example_name: &str) -> Output {
    let sequence = desk.folder.path().join("sequence.json");
    std::fs::write(&sequence, SHORT).unwrap();
    let output = Command::new(program)
        .arg(example(example_name))
        .arg(&desk.url)
        .arg(&sequence)
        .args(["left", "K-01"])
        .current_dir(desk.folder.path())
        .output()
        .unwrap();
    assert!(
        output.status.success(),
        "{}\n{}",
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr)
    );
    output
}

#[test]
fn the_python_example_drives_by_hand() {
    let desk = Desk::open(1);
    let output = Command::new("python3")
        .arg(example("drive_by_hand.py"))
        .args([&desk.url, "left", "0.1 A", "500 mA"])
        .output()
        .unwrap();
    let said = String::from_utf8_lossy(&output.stdout);
    let wrong = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{said}\n{wrong}");
    assert!(
        said.contains("500 mA: 0.4") || said.contains("500 mA: 0.5"),
        "{said}"
    );
    assert!(said.contains("stopped: off was asked for"), "{said}");
}

fn is_one_finished_run_of(desk: &Desk) {
    let records = desk.get("/v1/records?dut=K-01&ending=finished").json();
    assert_eq!(records["records"].as_array().unwrap().len(), 1, "{records}");
}

#[test]
fn the_python_example_carries_a_run_through() {
    let desk = Desk::open(50);
    let output = run(&desk, "python3", "run_overnight.py");
    let said = String::from_utf8(output.stdout).unwrap();
    assert!(said.contains("finished"), "{said}");
    assert!(said.contains("Ah"), "{said}");
    is_one_finished_run_of(&desk);
}

#[test]
fn the_curl_example_carries_a_run_through() {
    let desk = Desk::open(50);
    let output = run(&desk, "sh", "run_overnight.sh");
    let said = String::from_utf8(output.stdout).unwrap();
    assert!(said.contains("finished"), "{said}");
    let csv = std::fs::read_to_string(desk.folder.path().join("readings.csv")).unwrap();
    assert!(csv.starts_with("time_s,"), "{csv}");
    is_one_finished_run_of(&desk);
}
