//! `cargo xtask bench`: what must be fast, measured on release builds. Prints; judges nothing.
//!
//! Each benchmark is an example of the crate it measures. It prints a line of JSON a measurement:
//! what was measured, the seconds it took, and the same of a reference taken in the same run. The
//! ratio of the two is what may be compared between machines and between days.

use std::io::{BufRead as _, BufReader};
use std::process::Stdio;

use anyhow::{Context as _, Result, bail};
use clap::Args;
use serde_json::Value;

use crate::command::{cargo, run, show};

/// What to measure, and how to say it.
#[derive(Args)]
pub(crate) struct Options {
    /// Only the benchmark of this name.
    #[arg(value_parser = clap::builder::PossibleValuesParser::new(BENCHMARKS.iter().map(|one| one.example)))]
    only: Option<String>,
    /// Print the lines of JSON as they come.
    #[arg(long)]
    json: bool,
}

struct Benchmark {
    package: &'static str,
    example: &'static str,
    arguments: &'static [&'static str],
}

const BENCHMARKS: &[Benchmark] = &[
    // A twelve-hour night through core, protocol and sequencer, and the device alone.
    Benchmark {
        package: "run",
        example: "rehearsal",
        arguments: &[],
    },
    // The record: writing, sealing, reading back, verifying, exporting.
    Benchmark {
        package: "journal",
        example: "throughput",
        arguments: &["1000000"],
    },
    // All figures of a record of so many readbacks, beside pandas and numpy.
    Benchmark {
        package: "figures",
        example: "ten_million",
        arguments: &["10000000"],
    },
    // A measured current of so many rows into the fewest steps.
    Benchmark {
        package: "sequence",
        example: "import",
        arguments: &["10000000"],
    },
    // Off and a trip over a pseudo-terminal, eight sinks against one.
    Benchmark {
        package: "system-tests",
        example: "reaction",
        arguments: &[],
    },
];

/// Builds the benchmarks as a user's build would be, and runs them one after the other.
pub(crate) fn measure(options: &Options) -> Result<()> {
    run(&mut cargo(&[
        "build",
        "--release",
        "--quiet",
        "--package",
        "sinkwarden",
    ]))?;
    for benchmark in BENCHMARKS {
        if options
            .only
            .as_ref()
            .is_none_or(|only| only == benchmark.example)
        {
            run_one(benchmark, options.json)?;
        }
    }
    Ok(())
}

fn run_one(benchmark: &Benchmark, as_json: bool) -> Result<()> {
    let mut command = cargo(&["run", "--release", "--quiet"]);
    command
        .args([
            "--package",
            benchmark.package,
            "--example",
            benchmark.example,
            "--",
        ])
        .args(benchmark.arguments)
        .stdout(Stdio::piped());
    let shown = show(&command);
    let mut child = command
        .spawn()
        .with_context(|| format!("cannot start `{shown}`"))?;
    let output = child.stdout.take().context("no output to read")?;
    for line in BufReader::new(output).lines() {
        say(&line?, as_json)?;
    }
    let status = child.wait()?;
    if !status.success() {
        bail!("`{shown}` failed: {status}");
    }
    Ok(())
}

#[expect(
    clippy::print_stdout,
    reason = "a chore talks to the person who started it"
)]
fn say(line: &str, as_json: bool) -> Result<()> {
    if as_json {
        println!("{line}");
        return Ok(());
    }
    let value: Value = serde_json::from_str(line).with_context(|| format!("not JSON: {line}"))?;
    let text = |name: &str| value.get(name).and_then(Value::as_str).unwrap_or("?");
    let number = |name: &str| value.get(name).and_then(Value::as_f64).unwrap_or(f64::NAN);
    let (took, reference) = (number("seconds"), number("reference_seconds"));
    println!("{}", text("measured"));
    if reference.is_nan() {
        println!("    {}; reference {}", seconds(took), text("reference"));
        return Ok(());
    }
    println!(
        "    {} = {:.2} times {} ({})",
        seconds(took),
        took / reference,
        text("reference"),
        seconds(reference)
    );
    Ok(())
}

fn seconds(seconds: f64) -> String {
    if seconds < 0.1 {
        format!("{:.2} ms", seconds * 1e3)
    } else {
        format!("{seconds:.2} s")
    }
}
