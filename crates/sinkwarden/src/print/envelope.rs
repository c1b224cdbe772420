//! What a sink can do.

use std::io::{self, Write};

use super::table::{list, table, write};
use super::unit::{duration, quantity};
use crate::commands::EnvelopeAnswer;

/// Writes an envelope: a row a voltage, and of a single voltage every limit.
pub(crate) fn envelope(out: &mut dyn Write, answer: &EnvelopeAnswer) -> io::Result<()> {
    writeln!(
        out,
        "the largest current of `{}`, and the limit that binds:",
        answer.sink
    )?;
    writeln!(out)?;
    let durations: Vec<String> = answer.voltages.first().map_or_else(Vec::new, |row| {
        let told = |seconds: Option<f64>| {
            seconds.map_or_else(
                || "for ever".to_owned(),
                |seconds| format!("for {}", span(seconds)),
            )
        };
        row.ceilings
            .iter()
            .map(|ceiling| told(ceiling.for_s))
            .collect()
    });
    let header: Vec<&str> = std::iter::once("source")
        .chain(durations.iter().map(String::as_str))
        .collect();
    let mut rows = table(&header);
    for row in &answer.voltages {
        let mut cells = vec![quantity(row.voltage_v, "V")];
        cells.extend(
            row.ceilings
                .iter()
                .map(|ceiling| format!("{} {}", down(ceiling.current_a), ceiling.binding)),
        );
        rows.add_row(cells);
    }
    write(out, &rows)?;
    writeln!(out)?;
    if let [only] = &answer.voltages[..] {
        writeln!(
            out,
            "every limit at {}, were it alone:",
            quantity(only.voltage_v, "V")
        )?;
        writeln!(out)?;
        let header: Vec<&str> = std::iter::once("limit")
            .chain(durations.iter().map(String::as_str))
            .collect();
        let mut rows = table(&header);
        let order = only
            .ceilings
            .first()
            .map_or(&[][..], |ceiling| &ceiling.limits);
        for limit in order {
            let mut cells = vec![limit.limit.to_string()];
            cells.extend(only.ceilings.iter().map(|ceiling| {
                let own = ceiling.limits.iter().find(|own| own.limit == limit.limit);
                own.and_then(|own| own.current_a)
                    .map_or_else(|| "-".to_owned(), down)
            }));
            rows.add_row(cells);
        }
        write(out, &rows)?;
        writeln!(out)?;
    }
    list(
        out,
        &[
            ("floor", quantity(answer.floor_a, "A")),
            ("step", quantity(answer.step_a, "A")),
            ("ambient", quantity(answer.ambient_degc, "degC")),
            (
                "source resistance",
                quantity(answer.source_resistance_ohm, "ohm"),
            ),
        ],
    )?;
    for warning in &answer.warnings {
        writeln!(out)?;
        writeln!(out, "warning: {warning}")?;
    }
    writeln!(out)?;
    writeln!(
        out,
        "Currents are rounded down. \"For\" a time is once, out of rest at ambient temperature; \
         repeated pulses\nmust fit \"for ever\" with their mean power, too. It is no protection: \
         it says what a sink in order can do."
    )
}

/// A current rounded down: a limit must not grow by its print.
fn down(amperes: f64) -> String {
    if amperes >= 1.0 {
        format!("{:.3} A", (amperes * 1e3 + 1e-6).floor() / 1e3)
    } else {
        format!("{:.1} mA", (amperes * 1e4 + 1e-6).floor() / 10.0)
    }
}

/// A length of time without needless zeros.
fn span(seconds: f64) -> String {
    let told = duration(seconds);
    told.replace(".000", "")
        .replace(".00", "")
        .replace(" 0 s", "")
}
