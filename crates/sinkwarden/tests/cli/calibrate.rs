//! Calibrating from a table and at the prompt, verifying, listing; resetting a latch.

use std::io::Write as _;
use std::process::Stdio;

use crate::program::{Answer, Desk, SHORT};
use crate::serve::Daemon;

/// A table of a sink that draws 1 % more than it is set to and 1 mA (invented).
const TABLE: &str = "setpoint_a,meter_a,readback_a,meter_v,readback_v\n\
    0.05,0.0515,0.0505,4.2743,4.2871\n0.5,0.506,0.5011,4.047,4.0591\n\
    1,1.011,1.0021,3.7945,3.8059\n2,2.021,2.0041,3.2895,3.2994\n";

fn desk() -> Desk {
    let desk = Desk::new();
    let example = desk
        .run(&["calibrate", "--meters-example"])
        .with_code(0)
        .stdout;
    desk.write("meters.toml", &example);
    desk.write("points.csv", TABLE);
    desk
}

fn from_table(desk: &Desk, identity: &str, more: &[&str]) -> Answer {
    let words = [
        "calibrate",
        "--sink",
        "left",
        "--meters",
        "meters.toml",
        "--from",
        "points.csv",
        "--identity",
        identity,
    ];
    desk.run(&[&words[..], more].concat())
}

#[test]
fn a_table_becomes_a_certificate_that_the_bench_file_can_name() {
    let desk = desk();
    let made = from_table(&desk, "weir-left-1", &["--json"])
        .with_code(0)
        .json();
    assert_eq!(
        made["bench_entry"],
        "certificate = \"certificates/weir-left-1.json\""
    );
    let slope = made["certificate"]["lines"][0]["slope"].as_f64().unwrap();
    assert!((slope - 1.01).abs() < 1e-3, "{made}");
    let again = from_table(&desk, "weir-left-1", &[]).with_code(1);
    assert!(
        again.stderr.contains("none is ever overwritten"),
        "{}",
        again.stderr
    );
    from_table(&desk, "weir-left-2", &[]).with_code(0);

    let listed = desk.run(&["certificates", "--sink", "left"]).with_code(0);
    assert!(
        listed.stdout.contains("weir-left-1 of sink left"),
        "{}",
        listed.stdout
    );
    assert!(
        listed.stdout.contains("since the one before"),
        "{}",
        listed.stdout
    );
    assert!(
        listed.stdout.contains("within the uncertainties"),
        "{}",
        listed.stdout
    );

    let bench = std::fs::read_to_string(desk.path("bench.toml")).unwrap();
    let named = "serial_number = 1\ncertificate = \"certificates/weir-left-1.json\"";
    desk.write("bench.toml", &bench.replacen("serial_number = 1", named, 1));
    desk.run(&["check", "short.json", "--sink", "left"])
        .with_code(0);

    // A file that was altered is told and not used.
    let path = "certificates/weir-left-1.json";
    let text = std::fs::read_to_string(desk.path(path)).unwrap();
    desk.write(path, &text.replacen("506 mA", "516 mA", 1));
    let listed = desk.run(&["certificates"]).with_code(1);
    assert!(
        listed.stdout.contains("do not follow from its points"),
        "{}",
        listed.stdout
    );
}

#[test]
fn a_wrong_table_gets_one_clear_error() {
    let desk = desk();
    desk.write("points.csv", &TABLE.replace("0.506", "about half"));
    let answer = from_table(&desk, "x", &[]).with_code(1);
    assert!(
        answer
            .stderr
            .contains("points.csv: line 3, column `meter_a`: `about half` is no number"),
        "{}",
        answer.stderr
    );
}

/// Answers the dialogue with these lines.
fn answering(desk: &Desk, daemon: &Daemon, more: &[&str], lines: &str) -> Answer {
    let words = [
        "calibrate",
        "--sink",
        "left",
        "--meters",
        "meters.toml",
        "--voltage-min",
        "2.5 V",
        "--voltage-max",
        "4.3 V",
        "--interval",
        "30 s",
        "--daemon",
        &daemon.url,
    ];
    let mut child = desk
        .command(&[&words[..], more].concat())
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    let mut input = child.stdin.take().unwrap();
    input.write_all(lines.as_bytes()).unwrap();
    drop(input);
    child.wait_with_output().unwrap().into()
}

#[test]
fn a_dialogue_leads_to_a_certificate_and_giving_up_turns_off() {
    let desk = desk();
    let daemon = Daemon::start(&desk, "10");
    let points = [
        "--setpoint",
        "100 mA",
        "--setpoint",
        "1 A",
        "--setpoint",
        "2.5 A",
    ];
    let given_up = answering(&desk, &daemon, &points, "\n100\n100.5 mA\noff\n").with_code(4);
    assert!(
        given_up.stderr.contains("has no unit"),
        "{}",
        given_up.stderr
    );
    assert!(
        given_up.stderr.contains("left is off"),
        "{}",
        given_up.stderr
    );

    let lines = "\n101.1 mA\n4.18 V\n1.0065 A\n4.10 V\n2.5155 A\n3.98 V\n";
    let named = [&points[..], &["--identity", "weir-left-3", "--json"]].concat();
    let made = answering(&desk, &daemon, &named, lines).with_code(0).json();
    assert_eq!(made["certificate"]["identity"], "weir-left-3", "{made}");
    assert_eq!(made["certificate"]["lines"][0]["points"], 3);

    let verify = ["--setpoint", "1 A", "--verify", "weir-left-3"];
    let held = answering(&desk, &daemon, &verify, "\n1.0065 A\n\n").with_code(0);
    assert!(held.stdout.contains("2 of 2 passed"), "{}", held.stdout);
    let failed = answering(&desk, &daemon, &verify, "\n1.1 A\n\n").with_code(9);
    assert!(failed.stdout.contains("FAILED"), "{}", failed.stdout);
}

#[test]
fn a_latch_is_reset_from_the_command_line() {
    let desk = Desk::new();
    let sagging = SHORT.replace("\"below\": \"2.5 V\"", "\"below\": \"4.15 V\"");
    desk.write("sagging.json", &sagging.replace("0.2 It", "0.9 It"));
    let daemon = Daemon::start(&desk, "20");
    let run = ["run", "sagging.json", "--sink", "left"];
    daemon.ask(&desk, &run).with_code(5);
    let latched = daemon
        .ask(&desk, &["run", "short.json", "--sink", "left"])
        .with_code(1);
    assert!(
        latched.stderr.contains("sink-latched"),
        "{}",
        latched.stderr
    );
    let reset = daemon.ask(&desk, &["reset", "left"]).with_code(0);
    assert_eq!(reset.stdout, "left is reset and off\n");
    let json = daemon
        .ask(&desk, &["reset", "left", "--json"])
        .with_code(0)
        .json();
    assert_eq!(json["reset"], true);
    daemon
        .ask(&desk, &["run", "short.json", "--sink", "left"])
        .with_code(0);
    let wrong = daemon.ask(&desk, &["reset", "middle"]).with_code(1);
    assert!(
        wrong.stderr.contains("no sink `middle`"),
        "{}",
        wrong.stderr
    );
}
