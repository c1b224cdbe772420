//! The reference firmware as a process, in real time: the port around the core, and the builds
//! with one fault each, which must go on building as the core changes.

use std::fs::{self, File};
use std::io::{BufRead, BufReader, Read, Write};
use std::os::fd::OwnedFd;
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::{OnceLock, mpsc};
use std::time::Duration;

use wire::checksum;

use crate::bench::line;

/// Long beyond any answer's time on a busy machine; only a broken port takes it.
const PATIENCE: Duration = Duration::from_secs(20);

fn reference() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../../firmware-protocol/reference")
}

fn make(build: &Path, arguments: &[&str]) {
    let output = Command::new("make")
        .current_dir(reference().join("ports/posix"))
        .arg(format!("BUILD={}", build.display()))
        .arg("CFLAGS=-O1")
        .args(arguments)
        .output()
        .expect("make");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
}

/// The program, built once for all tests here.
fn program() -> &'static Path {
    static PROGRAM: OnceLock<PathBuf> = OnceLock::new();
    PROGRAM.get_or_init(|| {
        let build = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("sink-posix");
        make(&build, &[]);
        build.join("sink-posix")
    })
}

/// Ends with the test, however that ends.
struct Sink {
    process: Child,
    port: UnixStream,
    lines: BufReader<UnixStream>,
}

impl Drop for Sink {
    fn drop(&mut self) {
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}

impl Sink {
    fn start(arguments: &[&str]) -> Self {
        let (near, far) = UnixStream::pair().unwrap();
        let process = Command::new(program())
            .args(["--fd", "0"])
            .args(arguments)
            .stdin(Stdio::from(OwnedFd::from(far)))
            .spawn()
            .unwrap();
        near.set_read_timeout(Some(PATIENCE)).unwrap();
        let lines = BufReader::new(near.try_clone().unwrap());
        Self {
            process,
            port: near,
            lines,
        }
    }

    fn send(&mut self, text: &str) {
        self.port.write_all(&line(text)).unwrap();
    }

    /// The next line, its checksum checked.
    fn hear(&mut self) -> String {
        let mut text = String::new();
        self.lines.read_line(&mut text).expect("a line in time");
        let (body, crc) = text.trim_end().rsplit_once(' ').unwrap();
        assert_eq!(crc, format!("{:04X}", checksum(body.as_bytes())));
        body.to_owned()
    }

    /// The next line that begins so.
    fn await_line(&mut self, start: &str) -> String {
        loop {
            let heard = self.hear();
            if heard.starts_with(start) {
                return heard;
            }
        }
    }

    fn get_ready(&mut self) {
        self.send("hello 1 9");
        self.await_line("ready ");
        for (i, limit) in [
            "current 3000000",
            "power 15000000",
            "voltage-high 5000000",
            "voltage-low 2000000",
            "temperature 80000",
            "excess 200000",
        ]
        .iter()
        .enumerate()
        {
            let (which, value) = limit.split_once(' ').unwrap();
            self.send(&format!("limit {} {which} {value} 0", i + 1));
            self.await_line(&format!("ok {}", i + 1));
        }
    }
}

fn numbers(text: &str) -> Vec<i64> {
    text.split(' ')
        .filter_map(|field| field.parse().ok())
        .collect()
}

#[test]
fn the_process_draws_counts_and_ends_by_the_protocol() {
    let mut sink = Sink::start(&["--serial", "31"]);
    sink.send("hello 1 9");
    assert_eq!(sink.hear(), "about 1 1 10000 31 power");
    sink.get_ready();
    sink.send("step 7 current 0 1000000 0 200000");
    sink.send("readback 8 50000");
    let begun = numbers(&sink.await_line("edge "))[1];
    let ended = numbers(&sink.await_line("end "))[1];
    assert!(ended >= begun + 200_000);
    // The counters of the first pair after the end: all of the step and nothing else.
    let charge = numbers(&sink.await_line("c "))[2];
    let expected = ended - begun;
    assert!(
        (charge - expected).abs() <= expected / 50,
        "{charge} uC, {expected} us at 1 A"
    );
}

#[test]
fn the_process_turns_itself_off_when_nobody_speaks() {
    let mut sink = Sink::start(&["--source", "supply"]);
    sink.get_ready();
    sink.send("deadman 7 100000");
    sink.send("step 8 current 0 100000 0 60000000");
    let begun = numbers(&sink.await_line("edge "))[1];
    let trip = sink.await_line("trip ");
    assert!(trip.contains(" deadman "), "{trip}");
    assert!(numbers(&trip)[1] < begun + 1_000_000, "{trip}");
}

#[test]
fn a_watchdog_reset_is_the_first_thing_it_says() {
    let mut sink = Sink::start(&["--reset", "watchdog"]);
    assert_eq!(sink.hear(), "trip 1 0 watchdog 0");
}

#[test]
fn its_pseudo_terminal_is_printed_and_answers() {
    let mut process = Command::new(program())
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let mut path = String::new();
    BufReader::new(process.stdout.take().unwrap())
        .read_line(&mut path)
        .unwrap();
    let mut port: File = fs::OpenOptions::new()
        .read(true)
        .write(true)
        .open(path.trim_end())
        .unwrap();
    port.write_all(&line("clock 77")).unwrap();
    // A terminal has no read timeout in std: another thread waits.
    let (send, receive) = mpsc::channel();
    std::thread::spawn(move || {
        let mut bytes = [0_u8; 9];
        let _ = send.send(port.read_exact(&mut bytes).map(|()| bytes));
    });
    let answer = receive.recv_timeout(PATIENCE);
    process.kill().unwrap();
    process.wait().unwrap();
    assert_eq!(&answer.expect("an answer in time").unwrap(), b"clock 77 ");
}

#[test]
fn wrong_arguments_are_refused_with_the_usage() {
    for arguments in [["--source", "dynamo"], ["--serial", "x"], ["--wobble", "1"]] {
        let output = Command::new(program()).args(arguments).output().unwrap();
        assert_eq!(output.status.code(), Some(2));
        let text = String::from_utf8(output.stderr).unwrap();
        assert!(text.contains("usage: sink-posix"), "{text}");
    }
}

#[test]
fn every_patch_of_the_broken_builds_still_fits_the_core() {
    let core = reference().join("core");
    let mut patches = 0;
    for entry in fs::read_dir(reference().join("broken")).unwrap() {
        let patch = entry.unwrap().path();
        if patch
            .extension()
            .is_none_or(|extension| extension != "patch")
        {
            continue;
        }
        let status = Command::new("patch")
            .args(["--dry-run", "--quiet", "--fuzz=0", "-p1", "-d"])
            .arg(&core)
            .stdin(File::open(&patch).unwrap())
            .status()
            .expect("patch");
        assert!(status.success(), "{}", patch.display());
        patches += 1;
    }
    assert_eq!(patches, 9);
}
