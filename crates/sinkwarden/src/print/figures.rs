//! A record's figures with their uncertainty and method.

use std::collections::BTreeSet;
use std::io::{self, Write};

use figures::{Figure, Figures, with_uncertainty};

use super::table::{table, write};
use super::unit::{count, words};

/// Writes the figures, those that the data cannot support, and the warnings; with `budgets` also
/// what contributes to each uncertainty.
pub(crate) fn figures(out: &mut dyn Write, figures: &Figures, budgets: bool) -> io::Result<()> {
    let standing = figures.standing.words();
    writeln!(out, "record {}, {standing}", figures.record)?;
    writeln!(out)?;
    let mut rows = table(&["figure", "of", "value", "dominated by", "readbacks"]);
    for figure in &figures.figures {
        rows.add_row([
            words(&figure.name),
            figure
                .label
                .clone()
                .unwrap_or_else(|| "whole run".to_owned()),
            value(figure),
            figure
                .dominated_by
                .clone()
                .unwrap_or_else(|| "-".to_owned()),
            format!("{} to {}", figure.rows.first, figure.rows.last),
        ]);
    }
    write(out, &rows)?;
    writeln!(out)?;
    writeln!(
        out,
        "3.187(14) Ah is 3.187 Ah with a standard uncertainty of 0.014 Ah (JCGM 100, 7.2.2)."
    )?;
    methods(out, figures)?;
    if budgets {
        for figure in &figures.figures {
            budget(out, figure)?;
        }
    }
    if !figures.missing.is_empty() {
        writeln!(out, "\nNot given:")?;
        for missing in &figures.missing {
            let of = missing
                .label
                .as_ref()
                .map_or_else(String::new, |label| format!(" of {label}"));
            writeln!(out, "  {}{of}: {}", words(&missing.name), missing.reason)?;
        }
    }
    for warning in &figures.warnings {
        writeln!(out, "\nwarning: {warning}")?;
    }
    Ok(())
}

fn value(figure: &Figure) -> String {
    let standard = figure
        .uncertainty
        .map(|combined| combined.standard_uncertainty);
    format!(
        "{} {}",
        with_uncertainty(figure.value, standard),
        figure.unit.symbol()
    )
}

/// Each method once, with the figures that were worked out by it.
fn methods(out: &mut dyn Write, figures: &Figures) -> io::Result<()> {
    writeln!(out, "\nMethods:")?;
    let mut told: Vec<&str> = Vec::new();
    for figure in &figures.figures {
        let method = &figure.method;
        if told.contains(&method.how.as_str()) {
            continue;
        }
        told.push(&method.how);
        let names: BTreeSet<String> = figures
            .figures
            .iter()
            .filter(|other| other.method.how == method.how)
            .map(|other| words(&other.name))
            .collect();
        let names: Vec<String> = names.into_iter().collect();
        writeln!(out, "  {}: {}", names.join(", "), method.how)?;
        writeln!(out, "    source: {}", method.source)?;
    }
    Ok(())
}

fn budget(out: &mut dyn Write, figure: &Figure) -> io::Result<()> {
    if figure.budget.contributions.is_empty() {
        return Ok(());
    }
    let of = figure.label.as_deref().unwrap_or("whole run");
    write!(out, "\n{} of {of}: {}", words(&figure.name), value(figure))?;
    if let Some(expanded) = figure.expanded {
        write!(
            out,
            ", expanded {} {} (k = {:.2}, {:.0} %)",
            with_uncertainty(expanded.half_width, None),
            figure.unit.symbol(),
            expanded.coverage_factor,
            expanded.probability * 100.0
        )?;
    }
    writeln!(out)?;
    let squares: f64 = figure
        .budget
        .contributions
        .iter()
        .map(|line| line.share() * line.share())
        .sum();
    let mut rows = table(&[
        "contribution",
        "type",
        "standard uncertainty",
        "of the variance",
    ]);
    for line in &figure.budget.contributions {
        let share = line.share();
        let part = if squares > 0.0 {
            share * share / squares * 100.0
        } else {
            0.0
        };
        rows.add_row([
            line.name.clone(),
            words(&line.evaluation),
            format!("{} {}", with_uncertainty(share, None), figure.unit.symbol()),
            format!("{part:.1} %"),
        ]);
    }
    write(out, &rows)?;
    if !figure.budget.correlations.is_empty() {
        let pairs = u64::try_from(figure.budget.correlations.len()).unwrap_or(u64::MAX);
        writeln!(out, " {} pairs of these are correlated", count(pairs))?;
    }
    Ok(())
}
