//! `cargo xtask demo`: the main job on the simulated bench, from the check to the figures.
//!
//! Everything goes through the program as a user would use it: a daemon process, the command
//! line, HTTP, files. Nothing is left running and nothing outside `target/demo` is written.

use std::fs;
use std::io::{BufRead as _, BufReader};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};

use anyhow::{Context as _, Result, bail};

use crate::command::{cargo, root, run, show};
use crate::page;

/// The invented scenario: an overnight capacity test of cell K-01 on the sink `left`.
const SINK: &str = "left";
const CELL: &str = "K-01";
const SEQUENCE: &str = "sequences/capacity-0.2-it.json";
/// How much faster than real time the simulated night passes: some twenty seconds.
const TIME_FACTOR: &str = "1000";

/// Runs the demo.
#[expect(
    clippy::print_stdout,
    reason = "the demo talks to the person who started it"
)]
pub(crate) fn run_through() -> Result<()> {
    println!("Building (five minutes on two cores the first time, then seconds) ...");
    page::build_if_possible()?;
    run(&mut cargo(&["build", "--quiet", "--package", "sinkwarden"]))?;
    let program = program();
    let folder = root().join("target").join("demo");
    fs::create_dir_all(&folder).with_context(|| format!("cannot make {}", folder.display()))?;
    let bench = folder.join("bench.toml");
    let text = output(Command::new(&program).arg("bench"))?;
    fs::write(&bench, text).with_context(|| format!("cannot write {}", bench.display()))?;

    heading("Check: is the sequence within what the sink and the cell can take?");
    step(
        Command::new(&program)
            .args(["check", SEQUENCE, "--sink", SINK, "--dut", CELL])
            .arg("--bench")
            .arg(&bench),
    )?;

    heading("Rehearse: the whole night in virtual time, on the real firmware logic");
    step(
        Command::new(&program)
            .args(["rehearse", SEQUENCE, "--sink", SINK, "--dut", CELL])
            .arg("--bench")
            .arg(&bench),
    )?;

    heading("Run: the daemon on the simulated bench, in time-lapse");
    let records = folder.join("records");
    let daemon = Daemon::start(&program, &bench, &records)?;
    let before = list(&records)?;
    step(
        Command::new(&program)
            .args(["run", SEQUENCE, "--sink", SINK, "--dut", CELL])
            .args(["--daemon", &daemon.url]),
    )?;
    let record = newest(&records, &before)?;

    heading("Figures: from the record alone");
    step(Command::new(&program).arg("figures").arg(&record))?;

    heading("Verify: was anything altered?");
    step(Command::new(&program).arg("verify").arg(&record))?;
    drop(daemon);

    println!();
    println!("The record is {}", record.display());
    println!(
        "Everything above ran on a simulated sink and an invented cell. Next: README.md, \"A first session\"."
    );
    Ok(())
}

/// A daemon that ends with the demo, however the demo ends.
struct Daemon {
    child: Child,
    url: String,
}

impl Daemon {
    fn start(program: &Path, bench: &Path, records: &Path) -> Result<Self> {
        let mut command = Command::new(program);
        command
            .arg("serve")
            .arg("--bench")
            .arg(bench)
            .arg("--records")
            .arg(records)
            .args(["--listen", "127.0.0.1:0"])
            .args(["--time-factor", TIME_FACTOR])
            .args(["--log", "warn"])
            .stdout(Stdio::piped());
        let mut child = command
            .spawn()
            .with_context(|| format!("cannot start `{}`", show(&command)))?;
        let output = child.stdout.take().context("the daemon has no output")?;
        let mut line = String::new();
        BufReader::new(output).read_line(&mut line)?;
        let Some(url) = line
            .split_whitespace()
            .find(|word| word.starts_with("http://"))
        else {
            let _ = child.kill();
            bail!("the daemon did not say where it listens, but: {line:?}");
        };
        let url = url.to_owned();
        Ok(Self { child, url })
    }
}

impl Drop for Daemon {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// The command line, built beside this program.
fn program() -> PathBuf {
    let target =
        std::env::var_os("CARGO_TARGET_DIR").map_or_else(|| root().join("target"), PathBuf::from);
    target
        .join("debug")
        .join(format!("sinkwarden{}", std::env::consts::EXE_SUFFIX))
}

#[expect(
    clippy::print_stdout,
    reason = "the demo talks to the person who started it"
)]
fn heading(text: &str) {
    println!("\n-- {text}\n");
}

/// Shows a command as one would type it, then runs it.
#[expect(
    clippy::print_stdout,
    reason = "the demo talks to the person who started it"
)]
fn step(command: &mut Command) -> Result<()> {
    println!("$ {}\n", show(command));
    run(command.current_dir(root()))
}

fn output(command: &mut Command) -> Result<Vec<u8>> {
    let output = command
        .output()
        .with_context(|| format!("cannot start `{}`", show(command)))?;
    if !output.status.success() {
        bail!(
            "`{}` failed: {}",
            show(command),
            String::from_utf8_lossy(&output.stderr)
        );
    }
    Ok(output.stdout)
}

fn list(records: &Path) -> Result<Vec<PathBuf>> {
    if !records.exists() {
        return Ok(Vec::new());
    }
    let mut found = Vec::new();
    for entry in fs::read_dir(records)? {
        found.push(entry?.path());
    }
    found.sort();
    Ok(found)
}

/// The record that was not there before.
fn newest(records: &Path, before: &[PathBuf]) -> Result<PathBuf> {
    list(records)?
        .into_iter()
        .rfind(|path| !before.contains(path))
        .with_context(|| format!("no new record in {}", records.display()))
}
