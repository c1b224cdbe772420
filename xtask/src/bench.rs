//! `cargo xtask bench`: what must be fast, as ratios to references measured in the same run.

use anyhow::Result;

use crate::command::{cargo, run};

/// Builds the benchmarks as a user's build would be, and runs them.
pub(crate) fn measure() -> Result<()> {
    run(&mut cargo(&[
        "run",
        "--release",
        "--quiet",
        "--package",
        "bench",
    ]))
}
