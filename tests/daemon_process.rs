//! The daemon as a process of its own, driven as a script would drive it.

use std::io::{BufRead as _, BufReader};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

use serde_json::Value;

use crate::pty;

/// A daemon process. Dropping it kills it.
pub struct Daemon {
    child: Child,
    /// Where it listens, such as `http://127.0.0.1:40123`.
    pub url: String,
}

/// The program, built beside the tests.
///
/// # Panics
/// If it was not built: `cargo xtask test` builds it first.
pub fn program() -> PathBuf {
    let mut folder = std::env::current_exe().unwrap_or_default();
    folder.pop();
    if folder.ends_with("deps") || folder.ends_with("examples") {
        folder.pop();
    }
    let program = folder.join(format!("sinkwarden{}", std::env::consts::EXE_SUFFIX));
    assert!(
        program.exists(),
        "{} is missing; `cargo build --package sinkwarden` makes it",
        program.display()
    );
    program
}

impl Daemon {
    /// Starts a daemon on a bench file and a folder for records, and waits until it listens.
    pub fn start(bench: &Path, records: &Path) -> Self {
        Self::start_by(Command::new(program()), bench, records)
    }

    /// Starts a daemon by a command that takes the daemon's own arguments.
    ///
    /// # Panics
    /// If it does not come up: a test cannot go on.
    #[expect(
        clippy::unwrap_used,
        reason = "a test that cannot start its daemon has failed"
    )]
    pub fn start_by(mut command: Command, bench: &Path, records: &Path) -> Self {
        command
            .arg("serve")
            .arg("--bench")
            .arg(bench)
            .arg("--records")
            .arg(records)
            .args(["--listen", "127.0.0.1:0"])
            .stdout(Stdio::piped());
        let alone = pty::alone();
        let mut child = command.spawn().unwrap();
        drop(alone);
        let mut line = String::new();
        BufReader::new(child.stdout.take().unwrap())
            .read_line(&mut line)
            .unwrap();
        let url = line
            .split_whitespace()
            .find(|word| word.starts_with("http://"))
            .unwrap_or_else(|| panic!("the daemon did not say where it listens, but {line:?}"))
            .to_owned();
        Self { child, url }
    }

    /// The process's number.
    pub fn process_id(&self) -> u32 {
        self.child.id()
    }

    /// Suspends the process, as a host that goes to sleep does to all of its own.
    pub fn suspend(&self) {
        self.signal("-STOP");
    }

    /// Wakes it again.
    pub fn wake(&self) {
        self.signal("-CONT");
    }

    /// Memory that it has in the machine, kilobyte.
    ///
    /// # Panics
    /// If the process is gone.
    #[expect(clippy::unwrap_used, reason = "a test whose daemon is gone has failed")]
    pub fn resident_kb(&self) -> u64 {
        let status = std::fs::read_to_string(format!("/proc/{}/status", self.child.id())).unwrap();
        let line = status.lines().find(|line| line.starts_with("VmRSS:"));
        let number = line.and_then(|line| line.split_whitespace().nth(1));
        number.unwrap().parse().unwrap()
    }

    fn signal(&self, signal: &str) {
        let done = Command::new("kill")
            .args([signal, &self.child.id().to_string()])
            .status();
        assert!(done.is_ok_and(|status| status.success()), "kill {signal}");
    }

    /// Kills the daemon as a power cut would: it gets no chance to do anything.
    pub fn kill(mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }

    /// `GET` of a resource, as JSON.
    ///
    /// # Panics
    /// If the daemon does not answer with success.
    #[expect(
        clippy::unwrap_used,
        reason = "a test whose daemon does not answer has failed"
    )]
    pub fn get(&self, path: &str) -> Value {
        let mut answer = ureq::get(format!("{}{path}", self.url)).call().unwrap();
        answer.body_mut().read_json().unwrap()
    }

    /// `POST` of a JSON body; the answer's JSON.
    ///
    /// # Panics
    /// If the daemon does not answer with success.
    #[expect(
        clippy::unwrap_used,
        reason = "a test whose daemon does not answer has failed"
    )]
    pub fn post(&self, path: &str, body: &Value) -> Value {
        let mut answer = ureq::post(format!("{}{path}", self.url))
            .config()
            .http_status_as_error(false)
            .build()
            .send_json(body)
            .unwrap();
        let status = answer.status();
        let text = answer.body_mut().read_to_string().unwrap();
        assert!(status.is_success(), "{path}: {status}: {text}");
        serde_json::from_str(&text).unwrap()
    }

    /// Asks for a run that the daemon must refuse; its answer.
    ///
    /// # Panics
    /// If it does not refuse.
    #[expect(
        clippy::unwrap_used,
        reason = "a test whose daemon does not answer has failed"
    )]
    pub fn post_refused(&self, path: &str, sequence: &str, sink: &str) -> String {
        let mut answer = ureq::post(format!("{}{path}", self.url))
            .config()
            .http_status_as_error(false)
            .build()
            .send_json(serde_json::json!({ "sequence": sequence, "sink": sink }))
            .unwrap();
        let text = answer.body_mut().read_to_string().unwrap();
        assert!(!answer.status().is_success(), "not refused: {text}");
        text
    }

    /// `POST` without a body.
    ///
    /// # Panics
    /// If the daemon does not answer.
    #[expect(
        clippy::unwrap_used,
        reason = "a test whose daemon does not answer has failed"
    )]
    pub fn post_empty(&self, path: &str) -> Value {
        let mut answer = ureq::post(format!("{}{path}", self.url))
            .send_empty()
            .unwrap();
        answer.body_mut().read_json().unwrap()
    }

    /// Starts a run of a sequence on a sink; its id.
    ///
    /// # Panics
    /// If the daemon refuses it.
    #[expect(clippy::unwrap_used, reason = "a test whose run is refused has failed")]
    pub fn run(&self, sequence: &str, sink: &str) -> String {
        let body = serde_json::json!({ "sequence": sequence, "sink": sink });
        let answer = self.post("/v1/runs", &body);
        answer.get("id").and_then(Value::as_str).unwrap().to_owned()
    }

    /// Asks for a resource until the answer meets a condition, and gives that answer.
    ///
    /// # Panics
    /// If it does not within `at_most`.
    #[expect(
        clippy::disallowed_methods,
        reason = "real time is what is tested here"
    )]
    pub fn wait_for(&self, path: &str, at_most: Duration, meets: impl Fn(&Value) -> bool) -> Value {
        let begun = Instant::now();
        loop {
            let answer = self.get(path);
            if meets(&answer) {
                return answer;
            }
            assert!(begun.elapsed() < at_most, "after {at_most:?}: {answer:#}");
            std::thread::sleep(Duration::from_millis(20));
        }
    }
}

impl Drop for Daemon {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}
