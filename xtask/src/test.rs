//! `cargo xtask test`: everything the project can check about itself, one closing line.

use std::io::{BufRead as _, BufReader};
use std::process::Stdio;

use anyhow::{Context as _, Result, bail};
use clap::Args;

use crate::command::{answers, cargo, run, show};
use crate::{coverage, page, parts};

/// How much to test.
#[derive(Args)]
pub(crate) struct Options {
    /// Leave out formatting and lints (for a quick second run).
    #[arg(long)]
    tests_only: bool,
}

/// What the test binaries said, added up.
#[derive(Default)]
struct Tally {
    passed: u64,
    failed: u64,
    skipped: u64,
}

impl Tally {
    /// Adds the counts of a line such as `test result: ok. 3 passed; 0 failed; 1 ignored; ...`.
    fn take(&mut self, line: &str) {
        let Some(counts) = line.trim().strip_prefix("test result:") else {
            return;
        };
        for part in counts.split(['.', ';']) {
            let mut words = part.split_whitespace();
            let (Some(number), Some(what)) = (words.next(), words.next()) else {
                continue;
            };
            let Ok(number) = number.parse::<u64>() else {
                continue;
            };
            match what {
                "passed" => self.passed += number,
                "failed" => self.failed += number,
                "ignored" => self.skipped += number,
                _ => {}
            }
        }
    }
}

#[expect(
    clippy::print_stdout,
    reason = "a chore talks to the person who started it"
)]
/// Runs everything and prints the closing line.
pub(crate) fn run_everything(options: &Options) -> Result<()> {
    let mut tally = Tally::default();
    for part in parts::missing() {
        tally.skipped += 1;
        println!(
            "skipped: `{}` is missing, needed for {}; to mend: {}",
            part.program, part.purpose, part.install
        );
    }
    let has_page = page::build_if_possible()?;
    if !options.tests_only {
        run(&mut cargo(&["fmt", "--all", "--check"]))?;
        run(&mut cargo(&[
            "clippy",
            "--workspace",
            "--all-targets",
            "--quiet",
            "--",
            "-D",
            "warnings",
        ]))?;
    }
    let tests = cargo_tests(&mut tally);
    let covered = if answers("gcov") {
        coverage::hold()
    } else {
        Ok(())
    };
    if has_page {
        let counts = page::test()?;
        tally.passed += counts.passed;
        tally.failed += counts.failed;
    }
    println!(
        "{} passed, {} failed, {} skipped",
        tally.passed, tally.failed, tally.skipped
    );
    tests?;
    covered?;
    if tally.failed > 0 {
        bail!("tests failed: see above");
    }
    Ok(())
}

/// Builds the command line first, since the system tests start it, then runs every test.
fn cargo_tests(tally: &mut Tally) -> Result<()> {
    run(&mut cargo(&["build", "--quiet", "--package", "sinkwarden"]))?;
    let crates = cargo_test(&["--workspace", "--exclude", "system-tests"], tally);
    // The whole-system tests wait for real time most of theirs, one of them for five minutes.
    let system = ["--package", "system-tests", "--", "--test-threads", "4"];
    crates.and(cargo_test(&system, tally))
}

/// Runs `cargo test` with these arguments, passes on what it says, and adds up its counts.
fn cargo_test(arguments: &[&str], tally: &mut Tally) -> Result<()> {
    let mut command = cargo(&["test", "--no-fail-fast"]);
    command.args(arguments);
    command.stdout(Stdio::piped());
    let mut child = command
        .spawn()
        .with_context(|| format!("cannot start `{}`", show(&command)))?;
    let output = child.stdout.take().context("no output to read")?;
    for line in BufReader::new(output).lines() {
        let line = line?;
        tally.take(&line);
        #[expect(clippy::print_stdout, reason = "the tests' own output is passed on")]
        {
            println!("{line}");
        }
    }
    let status = child.wait()?;
    if !status.success() {
        bail!("tests failed: see above");
    }
    Ok(())
}

/// Rewrites every document that a test keeps true.
pub(crate) fn rewrite_documents() -> Result<()> {
    run(cargo(&["test", "--workspace", "--quiet"]).env("UPDATE_EXPECT", "1"))
}
