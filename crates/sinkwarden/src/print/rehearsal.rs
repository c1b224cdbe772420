//! How a rehearsal went.

use std::io::{self, Write};

use super::ending::{ending, margins};
use super::table::list;
use super::unit::{count, duration, quantity};
use crate::commands::RehearsalAnswer;

/// Writes how a rehearsal went.
pub(crate) fn rehearsal(out: &mut dyn Write, answer: &RehearsalAnswer) -> io::Result<()> {
    ending(out, &answer.ending, answer.duration_s, &answer.crossings)?;
    writeln!(out)?;
    let peak = answer
        .peak_temperature_degc
        .map_or_else(|| "none read".to_owned(), |peak| quantity(peak, "degC"));
    let mut rows = vec![
        ("charge", quantity(answer.charge_ah, "Ah")),
        ("energy", quantity(answer.energy_wh, "Wh")),
        ("hottest heat sink", peak),
        ("readbacks", count(answer.readbacks)),
        ("rehearsed in", duration(answer.took_s)),
    ];
    if let Some(kept) = &answer.kept {
        rows.push(("record", kept.display().to_string()));
    }
    list(out, &rows)?;
    writeln!(out)?;
    margins(out, &answer.margins)
}
