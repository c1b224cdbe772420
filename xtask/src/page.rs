//! The live page: built from `web/` with Node.js into `web/dist`, which the daemon takes in, and
//! tested in a real browser before a real daemon.
//!
//! Where Node.js is missing the daemon is built with its plain page only, and this says so.

use std::io::{BufRead as _, BufReader};
use std::path::PathBuf;
use std::process::{Command, Stdio};
use std::{fs, io};

use anyhow::{Context as _, Result, bail};

use crate::command::{answers, root, run, show};
use crate::parts;

/// What the tests in node said, added up.
#[derive(Default)]
pub(crate) struct Counts {
    pub(crate) passed: u64,
    pub(crate) failed: u64,
}

impl Counts {
    /// Takes a line such as `ℹ pass 31` or `# fail 0`.
    fn take(&mut self, line: &str) {
        let mut words = line.split_whitespace().skip(1);
        let (Some(what), Some(number), None) = (words.next(), words.next(), words.next()) else {
            return;
        };
        let Ok(number) = number.parse::<u64>() else {
            return;
        };
        match what {
            "pass" => self.passed += number,
            "fail" | "cancelled" => self.failed += number,
            _ => {}
        }
    }
}

/// Builds the page. Fails if Node.js is missing.
pub(crate) fn build() -> Result<()> {
    for part in parts::PAGE_BUILD {
        if !answers(part.program) {
            bail!(
                "`{}` is missing, needed for {}; to mend: {}",
                part.program,
                part.purpose,
                part.install
            );
        }
    }
    install()?;
    run(node(&["build.mjs"]).stdout(Stdio::null()))
}

/// Builds the page where Node.js is there; says what is served where it is not.
#[expect(
    clippy::print_stdout,
    reason = "a chore talks to the person who started it"
)]
pub(crate) fn build_if_possible() -> Result<bool> {
    if let Some(part) = parts::PAGE_BUILD.iter().find(|part| !answers(part.program)) {
        println!(
            "`{}` is missing: the daemon serves its plain page; for the full one: {}",
            part.program, part.install
        );
        return Ok(false);
    }
    build()?;
    Ok(true)
}

/// Checks the page's types, its core and, where there is a browser, the page itself.
pub(crate) fn test() -> Result<Counts> {
    let mut counts = Counts::default();
    run(&mut node(&["node_modules/typescript/bin/tsc", "--noEmit"]))?;
    count(&mut node(&["test/core.mjs"]), &mut counts)?;
    if parts::browser_is_there() {
        count(&mut node(&["test/page.mjs"]), &mut counts)?;
    }
    Ok(counts)
}

/// Fetches what `package-lock.json` names, unless it is there.
fn install() -> Result<()> {
    let changed = |path: &str| -> io::Result<_> { fs::metadata(web().join(path))?.modified() };
    let locked = changed("package-lock.json").context("web/package-lock.json cannot be read")?;
    // npm writes this file last.
    if changed("node_modules/.package-lock.json").is_ok_and(|installed| installed >= locked) {
        return Ok(());
    }
    let mut npm = Command::new("npm");
    npm.args(["ci", "--no-audit", "--no-fund", "--loglevel=error"]);
    run(npm.current_dir(web()).stdout(Stdio::null()))
}

fn count(command: &mut Command, counts: &mut Counts) -> Result<()> {
    command.stdout(Stdio::piped());
    let mut child = command
        .spawn()
        .with_context(|| format!("cannot start `{}`", show(command)))?;
    let output = child.stdout.take().context("no output to read")?;
    let before = counts.failed;
    for line in BufReader::new(output).lines() {
        let line = line?;
        counts.take(&line);
        #[expect(clippy::print_stdout, reason = "the tests' own output is passed on")]
        {
            println!("{line}");
        }
    }
    let succeeded = child.wait()?.success();
    // A runner that died without counting is a failure too.
    if !succeeded && counts.failed == before {
        counts.failed += 1;
    }
    Ok(())
}

fn node(arguments: &[&str]) -> Command {
    let mut command = Command::new("node");
    command.args(arguments).current_dir(web());
    command.env("SINKWARDEN_ROOT", root());
    command
}

fn web() -> PathBuf {
    root().join("web")
}
