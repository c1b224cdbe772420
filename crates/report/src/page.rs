//! The page: its head, its sections in order, its style and its script.

mod style;

use figures::Figures;
use journal::{ClockKind, Manifest};

use crate::curves::plots;
use crate::evidence::Evidence;
use crate::section::{
    cautions, certificate, course, defence, in_brief, interlocks, results, subject, submitted,
};
use crate::wording::{duration, ending, rfc3339};
use plot::Markup;

/// All that a page is made of.
pub(crate) struct Report<'a> {
    pub(crate) manifest: &'a Manifest,
    pub(crate) figures: &'a Figures,
    pub(crate) evidence: &'a Evidence,
    /// When the report was made (RFC 3339).
    pub(crate) made: Option<&'a str>,
}

const SCRIPT: &str = include_str!("page/read_off.js");

impl Report<'_> {
    /// The whole page.
    pub(crate) fn page(&self) -> String {
        let mut page = Markup::new();
        page.raw("<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n");
        page.raw("<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n");
        page.raw("<meta name=\"color-scheme\" content=\"light dark\">\n");
        // Nothing is to be fetched, and the browser is told to see to it.
        page.raw("<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; ");
        page.raw("style-src 'unsafe-inline'; script-src 'unsafe-inline'\">\n");
        page.element("title", self.title());
        page.raw("\n<style>\n").add(&style::sheet(self));
        page.raw("</style>\n</head>\n<body>\n<main>\n");
        self.head(&mut page);
        page.add(&section("cautions", "Before you read on", &cautions(self)));
        page.add(&section(
            "subject",
            "What was tested, on what",
            &subject(self),
        ));
        let plots = plots(self.manifest, self.evidence);
        if plots.is_empty() {
            let none = "<p>The record holds no readback, so there is nothing to draw.</p>";
            let mut text = Markup::new();
            text.raw(none);
            page.add(&section("curves", "The curves", &text));
        } else {
            page.add(&section("curves", "The curves", &plots));
        }
        page.add(&section("figures", "Figures", &results(self)));
        page.add(&section(
            "course",
            "How it went and how it ended",
            &course(self),
        ));
        let margins = interlocks(self);
        page.add(&section(
            "interlocks",
            "How near each interlock came",
            &margins,
        ));
        page.add(&section(
            "certificate",
            "Certificate of the sink",
            &certificate(self),
        ));
        page.add(&section(
            "defence",
            "Hashes, and how to recompute this",
            &defence(self),
        ));
        page.add(&section("submitted", "The sequence", &submitted(self)));
        page.raw("</main>\n<script>\n").raw(SCRIPT);
        page.raw("</script>\n</body>\n</html>\n");
        page.into_string()
    }

    fn title(&self) -> String {
        let dut = &self.manifest.plan.dut.label;
        format!(
            "{}: {dut} on {}",
            self.manifest.plan.title, self.manifest.sink
        )
    }

    fn head(&self, page: &mut Markup) {
        let manifest = self.manifest;
        page.raw("<header>\n<p class=\"kind\">")
            .raw(match manifest.clock {
                ClockKind::Real => "Record of a run",
                ClockKind::TimeLapse => "Record of a run in time-lapse, on a simulated source",
                ClockKind::Virtual => "Record of a rehearsal, on a simulated source",
            });
        page.raw("</p>\n").element("h1", &manifest.plan.title);
        page.raw("\n<p class=\"what\">");
        page.element("strong", &manifest.plan.dut.label);
        page.raw(" on the sink ").element("strong", &manifest.sink);
        page.raw(" of the host ").text(&manifest.host);
        page.raw(", begun ").text(rfc3339(&manifest.created));
        page.raw("</p>\n<p class=\"end\">").text(self.outcome());
        page.raw("</p>\n").add(&in_brief(self));
        page.raw("</header>\n");
    }

    /// How it ended, and after how long, in a sentence.
    fn outcome(&self) -> String {
        let after = self
            .evidence
            .length()
            .map_or_else(String::new, |length| format!(" after {}", duration(length)));
        let how = self.how_ended();
        match how {
            Some(how) => {
                let mut sentence = format!("{}{after}.", ending(&how));
                if let Some(first) = sentence.get(..1) {
                    sentence = format!(
                        "{}{}",
                        first.to_uppercase(),
                        sentence.get(1..).unwrap_or("")
                    );
                }
                sentence
            }
            None => format!(
                "Not ended when this was written{after}: the run was going on, or its host had died."
            ),
        }
    }

    /// How it ended, by the manifest or else by the journal.
    pub(crate) fn how_ended(&self) -> Option<sequencer::event::Ending> {
        self.manifest
            .ended
            .as_ref()
            .map(|ended| ended.how.clone())
            .or_else(|| self.evidence.course.ended.clone())
    }
}

fn section(identity: &'static str, heading: &'static str, content: &Markup) -> Markup {
    let mut section = Markup::new();
    section.raw("<section aria-labelledby=\"").raw(identity);
    section.raw("\">\n<h2 id=\"").raw(identity).raw("\">");
    section.raw(heading).raw("</h2>\n").add(content);
    section.raw("</section>\n");
    section
}
