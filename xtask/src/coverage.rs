//! `cargo xtask coverage`: every branch of the firmware's core is taken by a test, or named with
//! the reason in `firmware-protocol/reference/COVERAGE.md`.

use std::collections::BTreeSet;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::{fs, io};

use anyhow::{Context as _, Result, bail};
use serde_json::Value;

use crate::command::{cargo, root, run};

const EXCEPTIONS: &str = "firmware-protocol/reference/COVERAGE.md";

/// Random tests must not take a branch in one run and leave it in the next.
const SEED: &str = "1";

/// A line with a branch: its file, and the line as it stands in the source.
type Place = (String, String);

/// What the counters say.
#[derive(Default)]
struct Branches {
    all: u32,
    taken: u32,
    untaken: BTreeSet<Place>,
}

/// Runs the tests that drive the core, and holds the branches they leave against the exceptions.
#[expect(
    clippy::print_stdout,
    reason = "a chore talks to the person who started it"
)]
pub(crate) fn hold() -> Result<()> {
    let counters = root().join("target").join("coverage");
    match fs::remove_dir_all(&counters) {
        Err(error) if error.kind() != io::ErrorKind::NotFound => {
            return Err(error).with_context(|| format!("cannot empty {}", counters.display()));
        }
        Ok(()) | Err(_) => {}
    }
    run(cargo(&[
        "test",
        "--quiet",
        "--package",
        "simulator",
        "--features",
        "coverage",
        "--lib",
        "--test",
        "firmware",
    ])
    .env("GCOV_PREFIX", &counters)
    .env("PROPTEST_RNG_SEED", SEED))?;
    let mut branches = Branches::default();
    for counted in files_below(&counters)? {
        branches.add(&counters, &counted)?;
    }
    if branches.all == 0 {
        bail!("no branch was counted below {}", counters.display());
    }
    let exceptions = exceptions()?;
    println!(
        "branches of the core: {} of {} taken, the rest on {} lines with their reasons in {EXCEPTIONS}",
        branches.taken,
        branches.all,
        exceptions.len()
    );
    let unnamed: Vec<_> = branches.untaken.difference(&exceptions).collect();
    let needless: Vec<_> = exceptions.difference(&branches.untaken).collect();
    if !unnamed.is_empty() || !needless.is_empty() {
        bail!(
            "{EXCEPTIONS} is not as it should be\n  taken by no test, and not named: {unnamed:#?}\n  \
             named, and taken or gone: {needless:#?}"
        );
    }
    Ok(())
}

/// Every file of counters below a folder.
fn files_below(folder: &Path) -> Result<Vec<PathBuf>> {
    let mut found = Vec::new();
    let mut folders = vec![folder.to_owned()];
    while let Some(folder) = folders.pop() {
        let entries = fs::read_dir(&folder)
            .with_context(|| format!("no counters in {}", folder.display()))?;
        for entry in entries {
            let path = entry?.path();
            if path.is_dir() {
                folders.push(path);
            } else if path.extension().is_some_and(|end| end == "gcda") {
                found.push(path);
            }
        }
    }
    Ok(found)
}

impl Branches {
    /// Reads one file of counters. What the compiler noted of its source lies where it compiled.
    fn add(&mut self, counters: &Path, counted: &Path) -> Result<()> {
        let compiled = Path::new("/").join(counted.strip_prefix(counters)?);
        let notes = compiled.with_extension("gcno");
        fs::copy(&notes, counted.with_extension("gcno"))
            .with_context(|| format!("cannot copy {}", notes.display()))?;
        let output = Command::new("gcov")
            .args(["--branch-probabilities", "--json-format", "--stdout"])
            .arg(counted)
            .current_dir(root().join("crates/simulator"))
            .output()
            .context("cannot start `gcov`; it comes with gcc")?;
        let answer: Value = serde_json::from_slice(&output.stdout)
            .with_context(|| format!("`gcov` said of {}", counted.display()))?;
        for file in list(&answer, "files") {
            let path = Path::new(file.get("file").and_then(Value::as_str).unwrap_or_default());
            if path.extension().is_some_and(|end| end == "c") {
                self.add_file(path, file)?;
            }
        }
        Ok(())
    }

    fn add_file(&mut self, path: &Path, file: &Value) -> Result<()> {
        let path = root().join("crates/simulator").join(path);
        let source =
            fs::read_to_string(&path).with_context(|| format!("cannot read {}", path.display()))?;
        let source: Vec<&str> = source.lines().collect();
        let name = path.file_name().unwrap_or_default().to_string_lossy();
        for line in list(file, "lines") {
            let number = line.get("line_number").and_then(Value::as_u64).unwrap_or(0);
            let text = usize::try_from(number)?
                .checked_sub(1)
                .and_then(|index| source.get(index));
            let text = text.map_or("", |text| text.trim());
            for branch in list(line, "branches") {
                self.all += 1;
                if branch.get("count").and_then(Value::as_u64) == Some(0) {
                    self.untaken.insert((name.to_string(), text.to_owned()));
                } else {
                    self.taken += 1;
                }
            }
        }
        Ok(())
    }
}

fn list<'v>(value: &'v Value, key: &str) -> impl Iterator<Item = &'v Value> {
    let list = value.get(key).and_then(Value::as_array);
    list.into_iter().flatten()
}

/// The lines named in the table: its first two columns, in code marks.
fn exceptions() -> Result<BTreeSet<Place>> {
    let text = fs::read_to_string(root().join(EXCEPTIONS))
        .with_context(|| format!("cannot read {EXCEPTIONS}"))?;
    let rows = text.lines().filter_map(|row| {
        let (file, rest) = row.strip_prefix("| `")?.split_once("` | `")?;
        let (line, _why) = rest.split_once("` | ")?;
        Some((file.to_owned(), line.replace("\\|", "|")))
    });
    Ok(rows.collect())
}
