//! Groups of records, figure by figure.

use std::io::{self, Write};

use figures::{Compared, Group, with_uncertainty};

use super::table::{table, write};
use super::unit::words;
use crate::commands::ComparisonAnswer;

/// Writes means, spreads and differences.
pub(crate) fn comparison(out: &mut dyn Write, answer: &ComparisonAnswer) -> io::Result<()> {
    let compared = &answer.comparison;
    let mut rows = table(&[
        "figure",
        "of",
        "group",
        "n",
        "mean",
        "95 % interval of the mean",
        "spread s",
        "u of one",
    ]);
    for figure in &compared.figures {
        for group in &figure.groups {
            rows.add_row(group_row(figure, group));
        }
    }
    write(out, &rows)?;
    differences(out, &compared.figures)?;
    notes(out, &compared.figures)?;
    for law in &answer.peukert {
        let exponent = law.law.exponent;
        writeln!(
            out,
            "\nPeukert's exponent of {}: {} from {} discharges (t = C / I^n, C = {:.4} Ah at 1 A)",
            law.group,
            with_uncertainty(exponent.value, Some(exponent.standard_uncertainty)),
            law.law.discharges.len(),
            law.law.capacity_at_one_ampere_ah
        )?;
    }
    writeln!(out, "\nMethods:")?;
    for method in &compared.methods {
        writeln!(out, "  {method}")?;
    }
    writeln!(
        out,
        "  u of one: what measuring a single DUT is uncertain by; what one sink errs alike for all \
         does not show in the spread"
    )
}

fn of(figure: &Compared) -> String {
    let label = figure.label.clone();
    label.unwrap_or_else(|| "whole run".to_owned())
}

fn group_row(figure: &Compared, group: &Group) -> Vec<String> {
    let unit = figure.unit.symbol();
    let number = |value: f64| with_uncertainty(value, None);
    let spread = group.standard_deviation;
    vec![
        words(&figure.name),
        of(figure),
        group.name.clone(),
        group.values.len().to_string(),
        format!("{} {unit}", digits_of(group.mean, spread)),
        group.interval.map_or_else(
            || "-".to_owned(),
            |[low, high]| {
                let half = 0.5 * (high - low);
                format!(
                    "{} to {} {unit}",
                    digits_of(low, Some(half)),
                    digits_of(high, Some(half))
                )
            },
        ),
        spread.map_or_else(
            || "-".to_owned(),
            |spread| format!("{} {unit}", number(spread)),
        ),
        group
            .measurement
            .map_or_else(|| "-".to_owned(), |u| format!("{} {unit}", number(u))),
    ]
}

/// The value to the place of the second digit of what it spreads by.
fn digits_of(value: f64, spread: Option<f64>) -> String {
    let text = with_uncertainty(value, spread);
    match text.split_once('(') {
        Some((number, _)) => number.to_owned(),
        None => text,
    }
}

fn differences(out: &mut dyn Write, figures: &[Compared]) -> io::Result<()> {
    let mut rows = table(&[
        "difference",
        "of",
        "",
        "value",
        "95 % interval",
        "p if there is none",
    ]);
    let mut any = false;
    for figure in figures {
        let unit = figure.unit.symbol();
        for one in &figure.differences {
            any = true;
            let [low, high] = one.interval;
            let se = Some(one.standard_error);
            rows.add_row([
                words(&figure.name),
                of(figure),
                format!("{} less {}", one.of, one.from),
                format!("{} {unit}", digits_of(one.difference, se)),
                format!("{} to {} {unit}", digits_of(low, se), digits_of(high, se)),
                probability(one.probability),
            ]);
        }
    }
    if any {
        writeln!(out)?;
        write(out, &rows)?;
    }
    Ok(())
}

fn probability(probability: f64) -> String {
    if probability < 0.001 {
        "below 0.001".to_owned()
    } else {
        format!("{probability:.3}")
    }
}

fn notes(out: &mut dyn Write, figures: &[Compared]) -> io::Result<()> {
    let mut told: Vec<String> = Vec::new();
    for figure in figures {
        for group in &figure.groups {
            for outlier in &group.outliers {
                told.push(format!(
                    "outlier: {} of {}, record {outlier} of group {}; it stays in",
                    words(&figure.name),
                    of(figure),
                    group.name
                ));
            }
            for note in &group.notes {
                let line = format!("group {}: {note}", group.name);
                if !told.contains(&line) {
                    told.push(line);
                }
            }
        }
    }
    if !told.is_empty() {
        writeln!(out)?;
    }
    for line in told {
        writeln!(out, "{line}")?;
    }
    Ok(())
}
