//! What a reader must know before believing a number, and the usual cautions.

use figures::Standing;
use journal::ClockKind;
use sequencer::event::{Ending, Interlock};

use crate::page::Report;
use crate::wording::{count, quoted, words};
use plot::Markup;

pub(crate) fn cautions(report: &Report<'_>) -> Markup {
    let mut list = List::default();
    of_the_record(report, &mut list);
    of_the_figures(report, &mut list);
    of_the_run(report, &mut list);
    list.caution(
        "No safety-rated protection.",
        "The interlocks told of here are a second pair of eyes. A fuse and a switch in series, \
         supervision of lithium cells, the data sheet of the cell’s maker, your local codes and \
         qualified people come first. A MOSFET that fails usually fails shorted, and then no \
         software turns the current off.",
    );
    let mut section = Markup::new();
    section.raw("<ul class=\"cautions\">\n").add(&list.items);
    section.raw("</ul>\n");
    section
}

/// Whether the record is what it claims to be.
fn of_the_record(report: &Report<'_>, list: &mut List) {
    let verified = &report.evidence.verified;
    if !verified.is_intact() {
        let what = format!(
            "Checking every byte found {} that differ from what was written, the first: {}.",
            count(u64::try_from(verified.findings.len()).unwrap_or(u64::MAX)),
            verified
                .findings
                .first()
                .map_or_else(String::new, ToString::to_string)
        );
        list.grave("Not as it was written.", &what);
    }
    match report.manifest.clock {
        ClockKind::Real => {}
        ClockKind::TimeLapse => list.grave(
            "Simulated, in time-lapse.",
            "A simulated sink drew from a simulated source, faster than real time. No device was \
             tested; the figures say what the simulation did.",
        ),
        ClockKind::Virtual => list.grave(
            "A rehearsal.",
            "The sequence ran in virtual time on a simulated sink and a simulated source. No \
             device was tested; the figures say what the simulation did.",
        ),
    }
    if !verified.sealed {
        list.grave(
            "Not sealed.",
            "The run was still going on when this was written, or its host died before it could \
             seal the record. What follows holds for what the record had by then.",
        );
    }
    if let Some(tail) = &report.evidence.tail {
        list.caution("The record breaks off.", tail);
    }
    if let Some(entry) = report.evidence.replayed.difference {
        let what = format!(
            "Fed with the record’s own readings, this version’s sequencer decides otherwise at \
             entry {}. How near the interlocks came is that of another course from there on.",
            count(entry)
        );
        list.grave("The replay differs.", &what);
    }
}

/// Whether the figures can be believed.
fn of_the_figures(report: &Report<'_>, list: &mut List) {
    if report.figures.standing == Standing::NominalUncalibrated {
        list.grave(
            "Nominal, uncalibrated.",
            "No valid certificate stands behind the figures. Their uncertainty holds what the \
             bench file states of the sense resistor and the converters, and nothing that only a \
             calibration would find: a home-built sink is commonly off by several percent at the \
             top of its range and by several times the reading at the bottom (common practice, \
             no source).",
        );
    }
    for warning in &report.figures.warnings {
        // The standing has been told above, in more words.
        if !warning.starts_with("nominal, uncalibrated") {
            list.caution("Warning:", &quoted(warning));
        }
    }
}

/// What happened that a reader must not overlook.
fn of_the_run(report: &Report<'_>, list: &mut List) {
    if let Some(Ending::Tripped(interlock)) = report.how_ended() {
        let what = format!(
            "It ended by the interlock “{}”, not by its sequence.",
            words(&interlock)
        );
        list.grave("The run tripped.", &what);
        if interlock == Interlock::NotReleasing {
            list.grave(
                "Cut the circuit by hand before touching anything.",
                "A sink that does not release usually has a MOSFET that failed shorted.",
            );
        }
    }
    let resumed = report.manifest.resumed.len();
    if resumed > 0 {
        let what = format!(
            "The host died and came back {resumed} time{}; the run was taken up again from its \
             record. See how it went.",
            if resumed == 1 { "" } else { "s" }
        );
        list.caution("Resumed.", &what);
    }
}

#[derive(Default)]
struct List {
    items: Markup,
}

impl List {
    fn grave(&mut self, head: &'static str, what: &str) {
        self.items.raw("<li class=\"grave\"><strong>").raw(head);
        self.items.raw("</strong> ").text(what).raw("</li>\n");
    }

    fn caution(&mut self, head: &'static str, what: &str) {
        self.items.raw("<li><strong>").raw(head);
        self.items.raw("</strong> ").text(what).raw("</li>\n");
    }
}
