//! The figures, those that the data cannot support, the methods and the budgets.

use figures::{Figure, Figures, Standing, Unit, with_uncertainty};
use sink::uncertainty::Evaluation;

use crate::page::Report;
use crate::section::table_head;
use crate::wording::{count, quoted, significant, unit, with_unit, words};
use plot::Markup;

/// Figures beyond which they are folded on the screen: a run of many labels has hundreds.
const UNFOLDED_MAX: usize = 40;

pub(crate) fn results(report: &Report<'_>) -> Markup {
    let figures = report.figures;
    let mut section = Markup::new();
    if figures.figures.is_empty() {
        section.raw("<p>The record supports no figure.</p>\n");
    } else {
        section
            .raw("<p>A value stands with its standard uncertainty in brackets, in units of its ");
        section.raw("last digits: 3.187(14)\u{202f}Ah is 3.187\u{202f}Ah with ");
        section.raw("u\u{202f}=\u{202f}0.014\u{202f}Ah (JCGM 100:2008, 7.2.2). ");
        section.raw(match figures.standing {
            Standing::Calibrated => "A valid certificate of the sink stands behind them.</p>\n",
            Standing::CurrentCalibrated => {
                "A valid certificate of the sink’s current stands behind them; the voltage, and all \
                 that needs it, is <strong>nominal, uncalibrated</strong>.</p>\n"
            }
            Standing::NominalUncalibrated => {
                "They are <strong>nominal, uncalibrated</strong>.</p>\n"
            }
        });
        let methods = methods(figures);
        values(&mut section, figures, &methods);
        missing(&mut section, figures);
        listed(&mut section, &methods);
        budgets(&mut section, figures);
        return section;
    }
    missing(&mut section, figures);
    section
}

/// The value with its uncertainty and unit; small resistances and charges in thousandths.
pub(crate) fn value_of(figure: &Figure) -> String {
    let (factor, symbol) = scaled(figure);
    let standard = figure
        .uncertainty
        .map(|combined| combined.standard_uncertainty * factor);
    with_unit(&with_uncertainty(figure.value * factor, standard), symbol)
        .trim_end()
        .to_owned()
}

/// By what a figure is multiplied to be read, and the unit it is then in.
fn scaled(figure: &Figure) -> (f64, &'static str) {
    let small = figure.value.abs() < 0.1;
    if figure.unit == Unit::Ohm && figure.value.abs() < 1.0 {
        return (1e3, "mohm");
    }
    match figure.unit.symbol() {
        "Ah" if small => (1e3, "mAh"),
        "Wh" if small => (1e3, "mWh"),
        "s" if small => (1e3, "ms"),
        "1" => (1.0, ""),
        symbol => (1.0, symbol),
    }
}

/// What a figure is of: the whole run, a label, or one of the steps of a label.
fn whose(figure: &Figure) -> String {
    let label = figure.label.as_deref().unwrap_or("whole run");
    match figure.occurrence {
        Some(occurrence) => format!("{label}, no. {occurrence}"),
        None => label.to_owned(),
    }
}

/// Each method once: how, and whose.
fn methods(figures: &Figures) -> Vec<(&str, &str)> {
    let mut methods: Vec<(&str, &str)> = Vec::new();
    for figure in &figures.figures {
        let method = (figure.method.how.as_str(), figure.method.source.as_str());
        if !methods.contains(&method) {
            methods.push(method);
        }
    }
    methods
}

fn values(section: &mut Markup, figures: &Figures, methods: &[(&str, &str)]) {
    let many = figures.figures.len() > UNFOLDED_MAX;
    if many {
        section.raw("<details class=\"long\" open><summary>All ");
        section.text(count(
            u64::try_from(figures.figures.len()).unwrap_or(u64::MAX),
        ));
        section.raw(" figures</summary>\n");
    }
    section.raw("<table>\n").add(&table_head(&[
        ("", "figure"),
        ("", "value"),
        ("spare", "dominated by"),
        ("number spare", "entries"),
        ("number", "method"),
    ]));
    for figure in &figures.figures {
        section
            .raw("<tr><th scope=\"row\">")
            .text(words(&figure.name));
        section
            .raw("<small>")
            .text(whose(figure))
            .raw("</small></th><td><span class=\"value\">");
        section.text(value_of(figure)).raw("</span>");
        expanded(section, figure);
        section.raw("</td><td class=\"spare\">");
        section.text(
            figure
                .dominated_by
                .as_deref()
                .unwrap_or("no uncertainty is claimed"),
        );
        section.raw("</td><td class=\"number spare\">");
        section.text(format!(
            "{} to {}",
            count(figure.rows.first),
            count(figure.rows.last)
        ));
        section.raw("</td><td class=\"number\">");
        let method = (figure.method.how.as_str(), figure.method.source.as_str());
        let place = methods.iter().position(|one| *one == method);
        section.text(place.map_or_else(String::new, |place| (place + 1).to_string()));
        section.raw("</td></tr>\n");
    }
    section.raw("</tbody></table>\n");
    if many {
        section.raw("</details>\n");
    }
}

fn expanded(section: &mut Markup, figure: &Figure) {
    let Some(expanded) = figure.expanded else {
        return;
    };
    let (factor, symbol) = scaled(figure);
    section.raw("<small>±\u{202f}");
    section.text(with_unit(&significant(expanded.half_width * factor, 2), symbol).trim_end());
    section
        .raw(" at ")
        .text(significant(expanded.probability * 100.0, 2));
    section.raw("\u{202f}%, k\u{202f}=\u{202f}");
    section.text(significant(expanded.coverage_factor, 3));
    section.raw("</small>");
}

fn missing(section: &mut Markup, figures: &Figures) {
    if figures.missing.is_empty() {
        return;
    }
    section.raw("<h3>Not given</h3>\n<table>\n");
    section.add(&table_head(&[
        ("", "figure"),
        ("", "why there is no number"),
    ]));
    for missing in &figures.missing {
        section
            .raw("<tr><th scope=\"row\">")
            .text(words(&missing.name));
        if let Some(label) = &missing.label {
            section.raw("<small>").text(label).raw("</small>");
        }
        section
            .raw("</th><td>")
            .text(quoted(&missing.reason))
            .raw("</td></tr>\n");
    }
    section.raw("</tbody></table>\n");
}

fn listed(section: &mut Markup, methods: &[(&str, &str)]) {
    section.raw("<h3>Methods and their sources</h3>\n<ol>\n");
    for (how, source) in methods {
        section
            .raw("<li>")
            .text(how)
            .raw(".<br><small class=\"faint\">Source: ");
        section.text(source).raw("</small></li>\n");
    }
    section.raw("</ol>\n");
}

fn budgets(section: &mut Markup, figures: &Figures) {
    let with_budget = || {
        figures
            .figures
            .iter()
            .filter(|figure| !figure.budget.contributions.is_empty())
    };
    if with_budget().next().is_none() {
        return;
    }
    section.raw("<h3>Uncertainty budgets</h3>\n");
    section.raw("<p>After JCGM 100:2008. Type A: by statistics of readings; type B: by other ");
    section.raw("means, such as a data sheet.</p>\n");
    for figure in with_budget() {
        budget(section, figure);
    }
}

fn budget(section: &mut Markup, figure: &Figure) {
    let (factor, symbol) = scaled(figure);
    section.raw("<details><summary>").text(words(&figure.name));
    section
        .raw(", ")
        .text(whose(figure))
        .raw(": ")
        .text(value_of(figure));
    section.raw("</summary>\n<table>").add(&table_head(&[
        ("", "contribution"),
        ("", "type"),
        ("number", "standard uncertainty"),
        ("number", "of the variance"),
    ]));
    let squares: f64 = figure
        .budget
        .contributions
        .iter()
        .map(|line| line.share().powi(2))
        .sum();
    for line in &figure.budget.contributions {
        let share = line.share();
        section.raw("<tr><th scope=\"row\">").text(&line.name);
        section.raw("</th><td>").raw(match line.evaluation {
            Evaluation::TypeA => "A",
            Evaluation::TypeB => "B",
        });
        section.raw("</td><td class=\"number\">");
        section.text(small(share * factor, symbol));
        section.raw("</td><td class=\"number\">");
        if squares > 0.0 {
            let part = share.powi(2) / squares * 100.0;
            section.text(format!("{part:.1}\u{202f}%"));
        }
        section.raw("</td></tr>\n");
    }
    section.raw("</tbody><tfoot><tr><th scope=\"row\">combined</th><td></td><td class=\"number\">");
    if let Some(combined) = figure.uncertainty {
        section.text(small(combined.standard_uncertainty * factor, symbol));
    }
    section.raw("</td><td></td></tr></tfoot></table>\n");
    let correlated = figure.budget.correlations.len();
    if correlated > 0 {
        section.raw("<p>Pairs of contributions that are correlated, and are combined so: ");
        section.text(correlated.to_string()).raw(".</p>\n");
    }
    section.raw("</details>\n");
}

/// A small number, in powers of ten where decimals would be mostly zeros.
fn small(value: f64, symbol: &str) -> String {
    if value == 0.0 || value.abs() >= 1e-3 {
        return with_unit(&significant(value, 2), symbol)
            .trim_end()
            .to_owned();
    }
    let exponent = value.abs().log10().floor();
    let mantissa = value / 10_f64.powf(exponent);
    let power: String = format!("{exponent:.0}").chars().map(raised).collect();
    format!("{mantissa:.1}·10{power}\u{202f}{}", unit(symbol))
        .trim_end()
        .to_owned()
}

const fn raised(digit: char) -> char {
    match digit {
        '0' => '⁰',
        '1' => '¹',
        '2' => '²',
        '3' => '³',
        '4' => '⁴',
        '5' => '⁵',
        '6' => '⁶',
        '7' => '⁷',
        '8' => '⁸',
        '9' => '⁹',
        _ => '⁻',
    }
}
