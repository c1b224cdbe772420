//! `cargo xtask bench`: what must be fast, measured on release builds. Prints; judges nothing.

use anyhow::Result;

use crate::command::{cargo, run};

/// Each benchmark: the package, its example, and the example's arguments.
const BENCHMARKS: &[(&str, &str, &[&str])] = &[
    // A twelve-hour night through core, protocol and sequencer, and the device alone.
    ("run", "rehearsal", &[]),
    // The record: writing, sealing, reading back, verifying, exporting.
    ("journal", "throughput", &["1000000"]),
    // A measured current of so many rows into the fewest steps.
    ("sequence", "import", &["3000000"]),
];

/// Builds the benchmarks as a user's build would be, and runs them one after the other.
pub(crate) fn measure() -> Result<()> {
    for (package, example, arguments) in BENCHMARKS {
        let mut command = cargo(&["run", "--release", "--quiet"]);
        command.args(["--package", package, "--example", example, "--"]);
        run(command.args(*arguments))?;
    }
    Ok(())
}
