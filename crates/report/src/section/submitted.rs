//! The sequence as it was submitted, with the files that it names.
//!
//! It stands at the end: on paper nothing is folded, and a sequence of two pages before the curves
//! would keep a reader from what he looks for.

use journal::Manifest;

use crate::page::Report;
use crate::wording::count;
use plot::Markup;

/// Lines of a file named by the sequence that are shown; a profile can have thousands.
const FILE_LINES_MAX: usize = 40;

pub(crate) fn submitted(report: &Report<'_>) -> Markup {
    let mut section = Markup::new();
    sequence(report.manifest, &mut section);
    section
}

fn sequence(manifest: &Manifest, section: &mut Markup) {
    section
        .raw("<details class=\"long\"><summary>The sequence as it was submitted</summary>\n<pre>");
    section.text(&manifest.sequence.text).raw("</pre>\n");
    for (name, text) in &manifest.sequence.files {
        section.raw("<p>").text(name).raw(":</p>\n<pre>");
        let mut lines = text.lines();
        for line in lines.by_ref().take(FILE_LINES_MAX) {
            section.text(line).raw("\n");
        }
        let more = lines.count();
        section.raw("</pre>\n");
        if more > 0 {
            section
                .raw("<p>and ")
                .text(count(u64::try_from(more).unwrap_or(u64::MAX)));
            section.raw(" more lines, in the record’s manifest</p>\n");
        }
    }
    section.raw("</details>\n");
}
