//! A daemon process and the commands that talk to it.

use std::io::{BufRead as _, BufReader};
use std::process::{Child, Stdio};

use crate::program::{Answer, Desk, SHORT};

/// A daemon that ends with the test, however the test ends.
pub(crate) struct Daemon {
    child: Child,
    pub(crate) url: String,
}

impl Daemon {
    pub(crate) fn start(desk: &Desk, factor: &str) -> Self {
        let mut child = desk
            .command(&["serve", "--listen", "127.0.0.1:0", "--time-factor", factor])
            .args(["--log", "error"])
            .stdout(Stdio::piped())
            .stderr(Stdio::null())
            .spawn()
            .unwrap();
        let mut line = String::new();
        let mut output = BufReader::new(child.stdout.take().unwrap());
        output.read_line(&mut line).unwrap();
        let url = line
            .trim()
            .strip_prefix("sinkwarden listening on ")
            .unwrap_or_else(|| panic!("the daemon said {line:?}"))
            .to_owned();
        Self { child, url }
    }

    pub(crate) fn ask(&self, desk: &Desk, words: &[&str]) -> Answer {
        desk.run(&[words, &["--daemon", &self.url]].concat())
    }
}

impl Drop for Daemon {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

#[test]
fn a_run_is_followed_to_its_end_and_its_record_stands_for_itself() {
    let desk = Desk::new();
    let daemon = Daemon::start(&desk, "20");
    let run = ["run", "short.json", "--sink", "left", "--dut", "K-01"];
    let answer = daemon.ask(&desk, &run).with_code(0);
    assert!(
        answer.stdout.starts_with("finished after "),
        "{}",
        answer.stdout
    );
    assert!(answer.stdout.contains("undervoltage"), "{}", answer.stdout);
    desk.run(&["verify", "latest"]).with_code(0);
    desk.run(&["replay", "latest"]).with_code(0);
    let figures = desk.run(&["figures", "latest"]).with_code(0);
    assert!(
        figures.stdout.contains("delivered charge"),
        "{}",
        figures.stdout
    );
}

#[test]
fn off_stops_a_run_that_was_left_to_itself() {
    let desk = Desk::new();
    let long = SHORT.replace("\"for\": \"20 s\"", "\"for\": \"2 h\"");
    desk.write("long.json", &long);
    let daemon = Daemon::start(&desk, "1");
    let run = ["run", "long.json", "--sink", "left", "--detach", "--json"];
    let begun = daemon.ask(&desk, &run).with_code(0).json();
    assert_eq!(begun["sink"], "left");
    let status = daemon.ask(&desk, &["status", "left"]).with_code(0);
    assert!(status.stdout.contains("on K-01"), "{}", status.stdout);
    let busy = daemon
        .ask(&desk, &["run", "long.json", "--sink", "left"])
        .with_code(1);
    assert!(
        busy.stderr.contains("hint: follow it with"),
        "{}",
        busy.stderr
    );
    let off = daemon.ask(&desk, &["off"]).with_code(0);
    assert!(
        off.stdout.contains("left: off, said so after"),
        "{}",
        off.stdout
    );
    assert!(
        off.stdout.contains("right: off, said so after"),
        "{}",
        off.stdout
    );
}

#[test]
fn a_refused_sequence_is_not_run_and_a_wrong_sink_is_named() {
    let desk = Desk::new();
    desk.write("bad.json", &SHORT.replace("0.2 It", "9 It"));
    let daemon = Daemon::start(&desk, "20");
    let answer = daemon
        .ask(&desk, &["run", "bad.json", "--sink", "left"])
        .with_code(3);
    assert!(answer.stderr.contains("bad.json:"), "{}", answer.stderr);
    let answer = daemon.ask(&desk, &["off", "middle"]).with_code(1);
    assert!(
        answer.stderr.contains("[no-such-sink]"),
        "{}",
        answer.stderr
    );
}

#[cfg(unix)]
#[test]
fn an_interrupt_stops_the_run_and_says_what_happened() {
    let desk = Desk::new();
    let long = SHORT.replace("\"for\": \"20 s\"", "\"for\": \"2 h\"");
    desk.write("long.json", &long);
    let daemon = Daemon::start(&desk, "1");
    let mut child = desk
        .command(&[
            "run",
            "long.json",
            "--sink",
            "left",
            "--daemon",
            &daemon.url,
        ])
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    // The run has begun when the program says so.
    let mut stderr = BufReader::new(child.stderr.take().unwrap());
    let mut line = String::new();
    stderr.read_line(&mut line).unwrap();
    assert!(line.contains("has begun on `left` with K-01"), "{line}");
    let killed = std::process::Command::new("kill")
        .args(["-INT", &child.id().to_string()])
        .status()
        .unwrap();
    assert!(killed.success());
    let answer = Answer::from(child.wait_with_output().unwrap()).with_code(4);
    assert!(
        answer.stdout.starts_with("stopped after "),
        "{}",
        answer.stdout
    );
    desk.run(&["verify", "latest"]).with_code(0);
}
