//! What the check found: file, line and column, the line itself with the place marked, the mend.

use std::io::{self, Write};
use std::path::Path;

use daemon::view::Problem;
use sequence::Finding;

/// Writes findings, a blank line after each, and a line that counts them.
pub(crate) fn findings(out: &mut dyn Write, file: &Path, findings: &[Finding]) -> io::Result<()> {
    for finding in findings {
        write_one(out, file, finding)?;
        writeln!(out)?;
    }
    let errors = findings.iter().filter(|finding| finding.is_error()).count();
    let warnings = findings.len() - errors;
    writeln!(
        out,
        "{}, {}",
        counted(errors, "error"),
        counted(warnings, "warning")
    )
}

/// Writes why a sequence is refused.
pub(crate) fn refused(out: &mut dyn Write, file: &Path, problem: &Problem) -> io::Result<()> {
    findings(out, file, &problem.findings)?;
    writeln!(out, "refused: {}", problem.detail)
}

fn counted(number: usize, what: &str) -> String {
    let plural = if number == 1 { "" } else { "s" };
    format!("{number} {what}{plural}")
}

fn write_one(out: &mut dyn Write, file: &Path, finding: &Finding) -> io::Result<()> {
    let head = format!(
        "{}[{}]: {}",
        finding.severity, finding.rule, finding.message
    );
    let Some(place) = &finding.place else {
        writeln!(out, "{}: {head}", file.display())?;
        return writeln!(out, "  hint: {}", finding.hint);
    };
    writeln!(
        out,
        "{}:{}:{}: {head}",
        file.display(),
        place.line,
        place.column
    )?;
    let number = place.line.to_string();
    let gutter = number.len();
    let before = usize::try_from(place.caret).unwrap_or(0);
    let width = usize::try_from(place.width).unwrap_or(1).max(1);
    writeln!(out, "  {number} | {}", place.excerpt)?;
    writeln!(
        out,
        "  {:gutter$} | {:before$}{}",
        "",
        "",
        "^".repeat(width)
    )?;
    if !finding.pointer.is_empty() {
        writeln!(out, "  {:gutter$} at {}", "", finding.pointer)?;
    }
    writeln!(out, "  {:gutter$} hint: {}", "", finding.hint)
}
