//! Starting other programs and saying what was started when they fail.

use std::path::PathBuf;
use std::process::Command;

use anyhow::{Context as _, Result, bail};

/// The checkout's root: the folder above `xtask`.
pub(crate) fn root() -> PathBuf {
    let mut root = PathBuf::from(env!("CARGO_MANIFEST_DIR"));
    root.pop();
    root
}

/// Cargo as this process was started by it, in the checkout's root.
pub(crate) fn cargo(arguments: &[&str]) -> Command {
    let cargo = std::env::var_os("CARGO").unwrap_or_else(|| "cargo".into());
    let mut command = Command::new(cargo);
    command.args(arguments).current_dir(root());
    command
}

/// Runs a command to its end and fails with its own words if it does not succeed.
pub(crate) fn run(command: &mut Command) -> Result<()> {
    let shown = show(command);
    let status = command
        .status()
        .with_context(|| format!("cannot start `{shown}`"))?;
    if !status.success() {
        bail!("`{shown}` failed: {status}");
    }
    Ok(())
}

/// The command as one would type it.
pub(crate) fn show(command: &Command) -> String {
    let words: Vec<_> = std::iter::once(command.get_program())
        .chain(command.get_args())
        .map(|word| word.to_string_lossy().into_owned())
        .collect();
    words.join(" ")
}

/// Whether a program of this name answers on the search path.
pub(crate) fn answers(program: &str) -> bool {
    Command::new(program)
        .arg("--version")
        .stdout(std::process::Stdio::null())
        .stderr(std::process::Stdio::null())
        .status()
        .is_ok_and(|status| status.success())
}
