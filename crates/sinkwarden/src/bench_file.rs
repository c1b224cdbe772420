//! The bench file: read, checked, one sink picked, its certificate applied.

use std::fmt::Write as _;
use std::fs;
use std::path::Path;

use anyhow::Result;
use sink::bench::{Bench, SinkEntry};
use sink::calibration::{Certificate, Validity};
use sink::correction::Correction;

use crate::exit::hinted;
use crate::output::tell;

/// The bench to start from, of the invented scenario.
pub(crate) const STARTING: &str = include_str!("../../sink/src/bench/weir.toml");

/// Reads and checks a bench file.
///
/// # Errors
/// Every problem of the file, each with its place.
pub(crate) fn load(path: &Path) -> Result<Bench> {
    let text = fs::read_to_string(path).map_err(|error| {
        hinted(
            format!("cannot read the bench file {}: {error}", path.display()),
            "name it with --bench, or make one to start from: sinkwarden bench > bench.toml",
        )
    })?;
    Bench::from_toml(&text).map_err(|error| {
        let mut message = format!("the bench file {} cannot be used", path.display());
        for problem in &error.problems {
            let _ = write!(
                message,
                "\n  {}:{}:{}: ",
                path.display(),
                problem.line,
                problem.column
            );
            if !problem.path.is_empty() {
                let _ = write!(message, "{}: ", problem.path);
            }
            message.push_str(&problem.message);
        }
        hinted(
            message,
            "mend these places; `sinkwarden bench` prints a bench file that is right",
        )
    })
}

/// Picks a sink.
///
/// # Errors
/// A name that is not on the bench.
pub(crate) fn sink(bench: &Bench, path: &Path, name: &str) -> Result<SinkEntry> {
    bench.sink(name).cloned().ok_or_else(|| {
        let names: Vec<&str> = bench.sinks.iter().map(|sink| sink.name.as_str()).collect();
        hinted(
            format!("the bench file {} has no sink `{name}`", path.display()),
            format!("give --sink one of: {}", names.join(", ")),
        )
    })
}

/// The correction of a sink and its certificate as the record keeps it.
///
/// # Errors
/// A certificate that cannot be read, or was altered.
pub(crate) fn calibration(
    entry: &SinkEntry,
    bench: &Path,
) -> Result<(Correction, Option<serde_json::Value>)> {
    let Some(name) = &entry.certificate else {
        return Ok((Correction::IDENTITY, None));
    };
    let path = bench.parent().unwrap_or(Path::new(".")).join(name);
    let refused = |why: String| {
        hinted(
            format!(
                "the certificate {} of sink `{}`: {why}",
                path.display(),
                entry.name
            ),
            "restore the certificate, or take `certificate` out of the bench file: figures are then nominal",
        )
    };
    let text = fs::read_to_string(&path).map_err(|error| refused(error.to_string()))?;
    let certificate = Certificate::from_json(&text).map_err(|error| refused(error.to_string()))?;
    match certificate.validity(jiff::Timestamp::now().as_second()) {
        Validity::Valid => {}
        Validity::NotYet => tell(format_args!(
            "warning: the certificate {} is not valid yet",
            path.display()
        )),
        Validity::Expired => tell(format_args!(
            "warning: the certificate {} has expired; calibrate the sink again",
            path.display()
        )),
    }
    let value = serde_json::to_value(&certificate).map_err(|error| refused(error.to_string()))?;
    Ok((certificate.correction, Some(value)))
}
