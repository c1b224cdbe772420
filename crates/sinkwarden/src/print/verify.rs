//! Whether a record is as it was written.

use std::io::{self, Write};

use journal::VerifyReport;

use super::table::list;
use super::unit::{count, words};

/// Writes what was found.
pub(crate) fn verify(out: &mut dyn Write, report: &VerifyReport) -> io::Result<()> {
    if report.is_intact() {
        writeln!(out, "intact: nothing was altered since it was written")?;
    } else {
        writeln!(
            out,
            "ALTERED: {} places are not as they were written",
            report.findings.len()
        )?;
        for finding in &report.findings {
            writeln!(out, "  {}: {finding}", words(&finding.kind))?;
        }
    }
    writeln!(out)?;
    let seal = if report.sealed {
        "sealed"
    } else {
        "not sealed: its end rests on its lines' checksums alone"
    };
    list(
        out,
        &[
            (
                "record",
                report
                    .record
                    .clone()
                    .unwrap_or_else(|| "unknown".to_owned()),
            ),
            ("seal", seal.to_owned()),
            ("entries", count(report.entries)),
            ("segments", count(report.segments)),
            ("hash", report.hash.clone()),
        ],
    )?;
    for file in &report.set_aside {
        writeln!(out, "  set aside by a recovery, as it should be: {file}")?;
    }
    for file in &report.not_covered {
        writeln!(out, "  not covered by the seal: {file}")?;
    }
    Ok(())
}
