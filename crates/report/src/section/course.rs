//! The steps as they were carried out, what happened, and how it ended.

use std::collections::BTreeMap;

use quantity::Span;
use sequencer::event::StepEnd;

use crate::evidence::Stage;
use crate::page::Report;
use crate::section::table_head;
use crate::wording::{action, count, crossing, duration, elapsed, ending, rfc3339, step_end};
use plot::Markup;

/// Steps of the plan that are listed.
const STEPS_MAX: usize = 60;

pub(crate) fn course(report: &Report<'_>) -> Markup {
    let mut section = Markup::new();
    ended(report, &mut section);
    steps(report, &mut section);
    events(report, &mut section);
    section
}

fn ended(report: &Report<'_>, section: &mut Markup) {
    section.raw("<p>");
    if let Some(how) = report.how_ended() {
        section.raw("The run ended: <strong>").text(ending(&how));
        section.raw("</strong>");
        if let Some(ended) = &report.manifest.ended {
            section.raw(", ").text(rfc3339(&ended.at));
        }
        section.raw(".");
        let reason = report.manifest.ended.as_ref();
        if let Some(reason) = reason.and_then(|ended| ended.reason.as_ref()) {
            section.raw(" ").text(reason);
        }
    } else {
        section.raw("<strong>No end is recorded</strong>: the run was going on when this was ");
        section.raw("written, or its host had died.");
    }
    section.raw("</p>\n");
    let crossings = &report.evidence.course.crossings;
    if crossings.is_empty() {
        section.raw("<p>No interlock crossed.</p>\n");
    }
    for crossed in crossings {
        section
            .raw("<p>Crossed: ")
            .text(crossing(crossed))
            .raw(".</p>\n");
    }
}

/// The steps of one place in the plan, taken together.
struct Together<'a> {
    first: &'a Stage,
    times: u64,
    took: Span,
    /// Why they ended, with how often.
    ends: Vec<(StepEnd, u64)>,
    running: bool,
}

fn steps(report: &Report<'_>, section: &mut Markup) {
    let stages = &report.evidence.course.stages;
    if stages.is_empty() {
        section.raw("<p>No step was carried out.</p>\n");
        return;
    }
    let mut places: BTreeMap<u32, Together<'_>> = BTreeMap::new();
    for stage in stages {
        let together = places.entry(stage.op).or_insert(Together {
            first: stage,
            times: 0,
            took: Span::ZERO,
            ends: Vec::new(),
            running: false,
        });
        together.times += 1;
        together.took = together
            .took
            .saturating_add(stage.took.unwrap_or(Span::ZERO));
        match stage.ended_by {
            Some(by) => match together.ends.iter_mut().find(|(known, _)| *known == by) {
                Some((_, times)) => *times += 1,
                None => together.ends.push((by, 1)),
            },
            None => together.running = true,
        }
    }
    section.raw("<h3>Steps as they were carried out</h3>\n<table>\n");
    section.add(&table_head(&[
        ("number", "began"),
        ("", "step"),
        ("", "held"),
        ("number", "took"),
        ("", "ended because"),
    ]));
    for together in places.values().take(STEPS_MAX) {
        step(report, section, together);
    }
    section.raw("</tbody></table>\n");
    if let Some(more) = places.len().checked_sub(STEPS_MAX).filter(|more| *more > 0) {
        section.raw("<p class=\"faint\">").text(more.to_string());
        section.raw(" more steps of the plan were carried out; the journal holds each.</p>\n");
    }
}

fn step(report: &Report<'_>, section: &mut Markup, together: &Together<'_>) {
    let stage = together.first;
    let began = report.evidence.since_start(stage.begin);
    section
        .raw("<tr><td class=\"number\">")
        .text(elapsed(began));
    section.raw("</td><th scope=\"row\">");
    section.text(stage.label.as_deref().unwrap_or("without label"));
    if together.times > 1 {
        section
            .raw("<small>")
            .text(count(together.times))
            .raw(" times</small>");
    }
    section.raw("</th><td>").text(action(&stage.step));
    section.raw("</td><td class=\"number\">");
    if together.took > Span::ZERO {
        section.text(duration(together.took));
    }
    section.raw("</td><td>");
    let mut between = "";
    for (by, times) in &together.ends {
        section.raw(between).text(step_end(&stage.step, *by));
        if together.ends.len() > 1 {
            section.text(format!(" ({} times)", count(*times)));
        }
        between = "; ";
    }
    if together.running {
        section
            .raw(between)
            .raw("not ended when the record was read");
    }
    section.raw("</td></tr>\n");
}

fn events(report: &Report<'_>, section: &mut Markup) {
    let course = &report.evidence.course;
    section.raw("<h3>Events</h3>\n");
    if course.marks.is_empty() {
        section.raw("<p>None but the steps.</p>\n");
    } else {
        section.raw("<table>\n").add(&table_head(&[
            ("number", "at"),
            ("", "what"),
            ("number", "entry"),
        ]));
        for mark in &course.marks {
            section.raw("<tr><td class=\"number\">");
            section.text(elapsed(report.evidence.since_start(mark.at)));
            section.raw("</td><td>").text(&mark.sentence);
            section
                .raw("</td><td class=\"number\">")
                .text(count(mark.entry));
            section.raw("</td></tr>\n");
        }
        section.raw("</tbody></table>\n");
    }
    if course.marks_left_out > 0 {
        section.raw("<p>").text(count(course.marks_left_out));
        section.raw(" more events are in the journal.</p>\n");
    }
    let totals = report.evidence.totals;
    section.raw("<p class=\"faint\">Times count from the first readback, by the host’s clock. ");
    section.text(format!(
        "In all: {} orders recorded, {} sent again, {} lines damaged on the way, {} readbacks \
         lost, the sink’s clock aligned with the host’s {} times.",
        count(totals.orders),
        count(totals.sent_again),
        count(totals.damaged_lines),
        count(totals.readbacks_lost),
        count(totals.alignments)
    ));
    section.raw("</p>\n");
}
