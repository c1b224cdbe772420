//! Figures and record to one self-contained HTML page with plots.
//!
//! What was tested on what with what, the cautions, the curves, the figures with their
//! uncertainty, how the run ended, how near each interlock came, the certificate, the hashes and
//! how to recompute it all: one file that reads on a phone, prints on A4 and works without
//! script, without network and in ten years.
//!
//! Invariants:
//! - Nothing in the page is fetched from anywhere: style, script and plots are in it.
//! - Text of the record reaches the page through [`plot::Markup::text`] alone, which escapes
//!   it; only string literals of this crate are written as they are.
//! - How near the interlocks came is recomputed from the record's events, never remembered.
//! - What is a rehearsal, uncalibrated, unsealed or altered says so at the head of the page.
//!
//! What it deliberately does not do: work a figure out (`figures` does), read a clock (the time
//! at which a report is made comes in), write a file, judge whether a cell is good.

mod curves;
mod evidence;
mod page;
mod section;
mod wording;

#[cfg(test)]
mod tests;

use figures::{Figures, Standing};
use journal::{JournalError, Record};

/// What a report can be told beside the record and its figures.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Options {
    /// When the report is made (RFC 3339); left out of the page where it is `None`.
    pub made: Option<String>,
}

/// Why a report could not be made.
#[derive(Debug, thiserror::Error)]
pub enum ReportError {
    /// The record cannot be read.
    #[error("the record cannot be read: {0}; `sinkwarden verify` says where it was altered")]
    Record(#[from] JournalError),
    /// The figures are of another record.
    #[error(
        "the figures are of record `{figures}`, this is record `{record}`: work them out from \
         this record"
    )]
    OtherRecord {
        /// The record that the figures name.
        figures: String,
        /// The record that was given.
        record: String,
    },
}

/// The report of a record as one HTML page. Works on a record that is still being written, that
/// broke off, or that holds no readback; what is missing is said.
///
/// Reads the record about four times (events, plot, and every byte once more for the hashes):
/// some seconds for a night with millions of readbacks.
///
/// # Errors
/// [`ReportError`] for a record that cannot be read, and for figures of another record.
pub fn render(
    record: &Record,
    figures: &Figures,
    options: &Options,
) -> Result<String, ReportError> {
    let manifest = record.manifest();
    if figures.record != manifest.record {
        return Err(ReportError::OtherRecord {
            figures: figures.record.clone(),
            record: manifest.record.clone(),
        });
    }
    let evidence = evidence::gather(record)?;
    let report = page::Report {
        manifest,
        figures,
        evidence: &evidence,
        made: options.made.as_deref(),
    };
    Ok(report.page())
}

/// Stands in for the figures of a record that supports none, such as one without a readback.
/// `reason`: why there are none; the page shows it as a warning.
pub fn no_figures(record: &Record, reason: &str) -> Figures {
    Figures {
        record: record.manifest().record.clone(),
        software: record.manifest().software.clone(),
        standing: Standing::NominalUncalibrated,
        figures: Vec::new(),
        missing: Vec::new(),
        warnings: vec![reason.to_owned()],
        cell_model: None,
    }
}
