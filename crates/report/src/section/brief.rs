//! The figures that a reader looks for first.

use figures::{Figure, Name};

use crate::page::Report;
use crate::section::results::value_of;
use crate::wording::words;
use plot::Markup;

/// How many.
const MOST: usize = 4;

/// Figures of the whole run that are looked for first, in this order; the others follow in the
/// order in which they were worked out.
const FIRST: [Name; 6] = [
    Name::Capacity,
    Name::Energy,
    Name::DcResistance,
    Name::MeanVoltage,
    Name::DeliveredCharge,
    Name::DeliveredEnergy,
];

pub(crate) fn in_brief(report: &Report<'_>) -> Markup {
    let mut brief = Markup::new();
    let chosen = chosen(&report.figures.figures);
    if chosen.is_empty() {
        return brief;
    }
    brief.raw("<dl class=\"brief\">");
    for figure in chosen {
        brief.raw("<div>").element("dt", words(&figure.name));
        brief.raw("<dd>").text(value_of(figure)).raw("</dd></div>");
    }
    brief.raw("</dl>\n");
    brief
}

fn chosen(figures: &[Figure]) -> Vec<&Figure> {
    let whole = |figure: &&Figure| figure.label.is_none();
    let beside = |name: Name| {
        figures
            .iter()
            .filter(whole)
            .any(|figure| figure.name == name)
    };
    // What was delivered in all only repeats a capacity that was reached.
    let repeats = |name: Name| {
        (name == Name::DeliveredCharge && beside(Name::Capacity))
            || (name == Name::DeliveredEnergy && beside(Name::Energy))
            || matches!(name, Name::Duration | Name::ChargeByTrapezoid)
    };
    let mut chosen: Vec<&Figure> = Vec::new();
    for name in FIRST {
        let mut of_name = figures.iter().filter(|figure| figure.name == name);
        // A resistance is always of one step; the others are of the whole run.
        let found = if name == Name::DcResistance {
            of_name.next()
        } else {
            of_name.find(whole)
        };
        chosen.extend(found.filter(|figure| !repeats(figure.name)));
    }
    let rest = figures
        .iter()
        .filter(whole)
        .filter(|figure| !FIRST.contains(&figure.name) && !repeats(figure.name));
    chosen.extend(rest);
    chosen.truncate(MOST);
    chosen
}
