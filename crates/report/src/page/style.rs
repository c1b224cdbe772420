//! The style sheet, with the record's identity at the foot of each printed page.

use plot::Markup;

use super::Report;

const SHEET: &str = include_str!("style.css");

/// Characters of the record's hash at the foot of a printed page.
const HASH_SHOWN: usize = 16;

/// The whole sheet.
pub(super) fn sheet(report: &Report<'_>) -> Markup {
    let mut sheet = Markup::new();
    sheet.raw(plot::STYLE).raw(SHEET);
    let hash = &report.evidence.verified.hash;
    let foot = format!(
        "record {}, {} {}",
        report.manifest.record,
        if report.evidence.verified.sealed {
            "sealed"
        } else {
            "not sealed,"
        },
        hash.get(..HASH_SHOWN).unwrap_or(hash)
    );
    sheet
        .raw("@page { @bottom-left { content: ")
        .style_string(&foot);
    sheet.raw("; } }\n");
    sheet
}
