//! The hashes that hold the record, and the commands that recompute this page's numbers.

use crate::page::Report;
use crate::section::{WhatIs, table_head};
use crate::wording::{count, rfc3339};
use plot::Markup;

/// Segments whose hashes are listed unfolded.
const SEGMENTS_MAX: usize = 200;

pub(crate) fn defence(report: &Report<'_>) -> Markup {
    let verified = &report.evidence.verified;
    let mut table = WhatIs::default();
    table.row_with("hash of the record", &hash(&verified.hash));
    table.row(
        "seal",
        if verified.sealed {
            "sealed"
        } else {
            "not sealed"
        },
    );
    table.row(
        "every byte, checked when this report was made",
        if verified.is_intact() {
            "as it was written".to_owned()
        } else {
            format!("{} findings, listed below", verified.findings.len())
        },
    );
    table.row(
        "holds",
        format!(
            "{} entries in {} segment{}",
            count(report.evidence.entries),
            count(verified.segments),
            if verified.segments == 1 { "" } else { "s" }
        ),
    );
    if let Some(made) = report.made {
        table.row("report made", rfc3339(made));
    }
    let mut section = table.table();
    findings(report, &mut section);
    segments(report, &mut section);
    section.raw("<p>Keep the hash elsewhere than the record. A seal is no signature: whoever ");
    section
        .raw("rewrites the whole record can write a new seal, but not one with this hash.</p>\n");
    section.raw("<h3>To recompute</h3>\n<p>With the record’s folder at hand, and nothing else:");
    section.raw("</p>\n<pre>");
    for (command, what) in [
        ("verify ", "every byte against the seal"),
        ("replay ", "the same readings, the same orders, bit for bit"),
        ("figures --budget ", "every figure with its budget"),
        ("export ", "the readbacks as CSV, to compute by other means"),
    ] {
        section
            .raw("sinkwarden ")
            .raw(command)
            .text(shell_word(&report.manifest.record));
        section.raw("   # ").raw(what).raw("\n");
    }
    section.raw("</pre>\n");
    section
}

fn hash(hash: &str) -> Markup {
    let mut code = Markup::new();
    code.raw("<code class=\"hash\">").text(hash).raw("</code>");
    code
}

fn findings(report: &Report<'_>, section: &mut Markup) {
    let verified = &report.evidence.verified;
    if !verified.findings.is_empty() {
        section.raw("<h3>What is not as it was written</h3>\n<ul>\n");
        for finding in &verified.findings {
            section.raw("<li>").text(finding.to_string()).raw("</li>\n");
        }
        section.raw("</ul>\n");
    }
    if !verified.set_aside.is_empty() {
        section.raw("<p>Torn ends that were set aside, and are kept: ");
        section.text(verified.set_aside.join(", ")).raw(".</p>\n");
    }
}

fn segments(report: &Report<'_>, section: &mut Markup) {
    let Some(seal) = &report.evidence.seal else {
        return;
    };
    section.raw("<details class=\"long\"><summary>Hashes under the seal (SHA-256)</summary>\n");
    section.raw("<div class=\"wide-table\"><table>\n");
    section.add(&table_head(&[
        ("", "file"),
        ("number spare", "entries"),
        ("", "hash of its plain text"),
    ]));
    section.raw("<tr><th scope=\"row\">manifest.json</th><td class=\"spare\"></td><td>");
    section
        .add(&hash(&seal.manifest_sha256))
        .raw("</td></tr>\n");
    for segment in seal.segments.iter().take(SEGMENTS_MAX) {
        section.raw("<tr><th scope=\"row\">").text(&segment.file);
        section.raw("</th><td class=\"number spare\">");
        section.text(format!(
            "{} to {}",
            count(segment.first),
            count(segment.last)
        ));
        section
            .raw("</td><td>")
            .add(&hash(&segment.plain_sha256))
            .raw("</td></tr>\n");
    }
    for file in &seal.set_aside {
        section.raw("<tr><th scope=\"row\">").text(&file.file);
        section
            .raw("</th><td class=\"spare\"></td><td>")
            .add(&hash(&file.sha256));
        section.raw("</td></tr>\n");
    }
    section.raw("</tbody></table></div>\n");
    if let Some(more) = seal
        .segments
        .len()
        .checked_sub(SEGMENTS_MAX)
        .filter(|more| *more > 0)
    {
        section
            .raw("<p>and ")
            .text(more.to_string())
            .raw(" more, in seal.json</p>\n");
    }
    section.raw("</details>\n");
}

/// A word for a shell: quoted unless it is plain.
fn shell_word(word: &str) -> String {
    let plain = |letter: char| letter.is_ascii_alphanumeric() || matches!(letter, '-' | '_' | '.');
    if !word.is_empty() && word.chars().all(plain) {
        word.to_owned()
    } else {
        format!("'{}'", word.replace('\'', "'\\''"))
    }
}
