//! How the tests start the program, in a folder of their own with the starting bench file.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

use tempfile::TempDir;

/// A sequence of half a minute (invented): rest, draw, rest.
pub(crate) const SHORT: &str = r#"{
  "sequence": 1,
  "title": "Half a minute (invented)",
  "dut": {
    "label": "K-01",
    "kind": "cell",
    "rated_capacity": "3.2 Ah",
    "voltage_min": "2.5 V",
    "voltage_max": "4.2 V",
    "current_max": "6.4 A"
  },
  "readback": "100 ms",
  "interlocks": {
    "undervoltage": { "below": "2.5 V", "for": "0 s" },
    "over_voltage": { "above": "4.3 V" }
  },
  "steps": [
    { "rest": "5 s" },
    { "draw": "0.2 It", "for": "20 s", "label": "discharge" },
    { "rest": "5 s" }
  ]
}
"#;

/// What a command gave.
pub(crate) struct Answer {
    pub(crate) code: Option<i32>,
    pub(crate) stdout: String,
    pub(crate) stderr: String,
}

impl From<Output> for Answer {
    fn from(output: Output) -> Self {
        Self {
            code: output.status.code(),
            stdout: String::from_utf8(output.stdout).unwrap(),
            stderr: String::from_utf8(output.stderr).unwrap(),
        }
    }
}

impl Answer {
    /// The answer, provided it came with this exit code.
    #[track_caller]
    pub(crate) fn with_code(self, code: i32) -> Self {
        assert_eq!(
            self.code,
            Some(code),
            "stdout:\n{}\nstderr:\n{}",
            self.stdout,
            self.stderr
        );
        self
    }

    pub(crate) fn json(&self) -> serde_json::Value {
        serde_json::from_str(&self.stdout).unwrap()
    }
}

/// The program, as if started by a user with nothing set.
pub(crate) fn sinkwarden() -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_sinkwarden"));
    for name in ["BENCH", "DAEMON", "LOG", "RECORDS", "TOKEN_FILE"] {
        command.env_remove(format!("SINKWARDEN_{name}"));
    }
    command.stdin(Stdio::null());
    command
}

/// A folder with a bench file and files of the test's own.
pub(crate) struct Desk {
    folder: TempDir,
}

impl Desk {
    pub(crate) fn new() -> Self {
        let desk = Self {
            folder: TempDir::new().unwrap(),
        };
        let bench = Answer::from(sinkwarden().arg("bench").output().unwrap()).with_code(0);
        desk.write("bench.toml", &bench.stdout);
        desk.write("short.json", SHORT);
        desk
    }

    pub(crate) fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    pub(crate) fn write(&self, name: &str, text: &str) {
        fs::write(self.path(name), text).unwrap();
    }

    /// The program in this folder.
    /// The text of a file on the desk.
    pub(crate) fn read(&self, name: &str) -> String {
        std::fs::read_to_string(self.path(name)).unwrap()
    }

    pub(crate) fn command(&self, words: &[&str]) -> Command {
        let mut command = sinkwarden();
        command.current_dir(self.folder.path()).args(words);
        command
    }

    pub(crate) fn run(&self, words: &[&str]) -> Answer {
        self.command(words).output().unwrap().into()
    }

    /// A record of the rehearsal of [`SHORT`], under the name `kept`.
    pub(crate) fn kept() -> Self {
        let desk = Self::new();
        desk.run(&["rehearse", "short.json", "--sink", "left", "--keep", "kept"])
            .with_code(0);
        desk
    }
}

/// The first file in a folder whose name ends so.
pub(crate) fn file_ending_in(folder: &Path, end: &str) -> PathBuf {
    let mut found: Vec<PathBuf> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.to_str().unwrap().ends_with(end))
        .collect();
    found.sort();
    found.into_iter().next().unwrap()
}
