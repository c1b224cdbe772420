//! How near each interlock came, the nearest first.

use sequencer::Margin;
use sequencer::event::{Crossing, Interlock};

use crate::page::Report;
use crate::section::table_head;
use crate::wording::{count, interlock_limit, interlock_value, words};
use plot::Markup;

/// The limit itself, in parts of a thousand.
const AT_LIMIT: u32 = 1000;

pub(crate) fn interlocks(report: &Report<'_>) -> Markup {
    let mut section = Markup::new();
    let replayed = &report.evidence.replayed;
    let margins = match &replayed.margins {
        Ok(margins) => margins,
        Err(why) => {
            section.raw("<p>Not known: the recorded plan cannot be run by this version: ");
            section.text(why).raw(".</p>\n");
            return section;
        }
    };
    section.raw("<p>Recomputed when this report was made, by feeding the record’s events to a ");
    section.raw("fresh sequencer");
    match replayed.difference {
        None => {
            section.raw("; its ").text(count(replayed.outputs));
            section.raw(" orders and findings were the recorded ones, bit for bit.</p>\n");
        }
        Some(entry) => {
            section
                .raw(", which decided otherwise from entry ")
                .text(count(entry));
            section.raw(" on: from there these are the margins of another course.</p>\n");
        }
    }
    let sorted = sorted(margins, &report.evidence.course.crossings);
    if sorted.is_empty() {
        section.raw("<p>None was judged: no session with the sink stood.</p>\n");
        return section;
    }
    section.raw("<table>\n").add(&table_head(&[
        ("", "interlock"),
        ("number", "came to"),
        ("number", "limit"),
        ("number", "how near"),
        ("spare", "on the way to the limit"),
    ]));
    for near in &sorted {
        row(&mut section, near);
    }
    section.raw("</tbody></table>\n<p class=\"faint\">100\u{202f}% is the limit itself. Largest ");
    section.raw("voltage times largest current of an interval is taken for power, which is more ");
    section.raw("than flowed at any instant. Crossing a limit for less than its persistence is ");
    section
        .raw("no trip. An interlock that is not listed was not armed, or not called upon.</p>\n");
    section
}

/// How near one interlock came.
struct Nearness {
    interlock: Interlock,
    value: i64,
    threshold: i64,
    permille: u32,
    tripped: bool,
}

/// The nearest first. A crossing that the sink's own copy saw between two readbacks counts, too:
/// the host's margin alone would not show it.
fn sorted(margins: &[Margin], crossings: &[Crossing]) -> Vec<Nearness> {
    let mut all: Vec<Nearness> = margins
        .iter()
        .map(|margin| Nearness {
            interlock: margin.interlock,
            value: margin.worst_value,
            threshold: margin.threshold,
            permille: margin.worst_permille,
            tripped: false,
        })
        .collect();
    for crossing in crossings {
        let crossed = Nearness {
            interlock: crossing.interlock,
            value: crossing.value,
            threshold: crossing.threshold,
            permille: AT_LIMIT,
            tripped: true,
        };
        match all
            .iter_mut()
            .find(|near| near.interlock == crossing.interlock)
        {
            Some(near) if near.permille >= AT_LIMIT => near.tripped = true,
            Some(near) => *near = crossed,
            None => all.push(crossed),
        }
    }
    all.sort_by_key(|near| std::cmp::Reverse(near.permille));
    all
}

fn row(section: &mut Markup, near: &Nearness) {
    section
        .raw("<tr><th scope=\"row\">")
        .text(words(&near.interlock));
    if near.tripped {
        section.raw("<small>tripped</small>");
    }
    section.raw("</th><td class=\"number\">");
    section.text(interlock_value(near.interlock, near.value));
    section.raw("</td><td class=\"number\">");
    section.text(interlock_limit(near.interlock, near.threshold));
    section.raw("</td><td class=\"number\">");
    section.text(format!("{}\u{202f}%", near.permille / 10));
    section.raw("</td><td class=\"spare\">");
    bar(section, near.permille);
    section.raw("</td></tr>\n");
}

/// A line to the limit, inked as far as the value came; the number beside it says the same.
fn bar(section: &mut Markup, permille: u32) {
    section.raw("<svg class=\"near");
    if permille >= AT_LIMIT {
        section.raw(" over");
    }
    section.raw("\" viewBox=\"0 0 130 14\" preserveAspectRatio=\"none\" aria-hidden=\"true\">");
    section.raw("<line class=\"way\" x1=\"0\" y1=\"9\" x2=\"130\" y2=\"9\"/>");
    section.raw("<line class=\"came\" x1=\"0\" y1=\"9\" y2=\"9\" x2=\"");
    section.at(f64::from(permille.min(1300)) / 10.0);
    section.raw("\"/><line class=\"limit-tick\" x1=\"100\" y1=\"3\" x2=\"100\" y2=\"14\"/></svg>");
}
