//! How a run ended, and how near its interlocks came.

use std::io::{self, Write};

use daemon::view::{CrossingView, EndingView, MarginView, RunView};

use super::table::{list, table, write};
use super::unit::{duration, percent, quantity, words};

/// Writes the line that says how it ended.
pub(super) fn ending(
    out: &mut dyn Write,
    ending: &EndingView,
    elapsed_s: f64,
    crossings: &[CrossingView],
) -> io::Result<()> {
    let interlock = ending.interlock.map_or_else(String::new, |interlock| {
        format!(" by {}", words(&interlock))
    });
    writeln!(
        out,
        "{}{interlock} after {}",
        ending.how.text(),
        duration(elapsed_s)
    )?;
    if let Some(reason) = &ending.reason {
        writeln!(out, "  {reason}")?;
    }
    for crossing in crossings {
        let by = if crossing.by_sink {
            "the sink's own copy"
        } else {
            "the host"
        };
        writeln!(
            out,
            "  crossed: {} {}, limit {}, seen first by {by}",
            words(&crossing.interlock),
            quantity(crossing.value, &crossing.unit),
            quantity(crossing.threshold, &crossing.unit)
        )?;
    }
    Ok(())
}

/// Writes how near each interlock came, the nearest first.
pub(crate) fn margins(out: &mut dyn Write, margins: &[MarginView]) -> io::Result<()> {
    if margins.is_empty() {
        return Ok(());
    }
    let mut sorted: Vec<&MarginView> = margins.iter().collect();
    sorted.sort_by(|a, b| b.worst_nearness.total_cmp(&a.worst_nearness));
    let mut rows = table(&["interlock", "came to", "limit", "how near"]);
    for margin in sorted {
        rows.add_row([
            words(&margin.interlock),
            quantity(margin.worst_value, &margin.unit),
            quantity(margin.threshold, &margin.unit),
            percent(margin.worst_nearness),
        ]);
    }
    write(out, &rows)
}

/// Writes that a run goes on without us.
pub(crate) fn started_run(out: &mut dyn Write, run: &RunView) -> io::Result<()> {
    writeln!(out, "{}", run.id)
}

/// Writes how a run ended.
pub(crate) fn ended_run(out: &mut dyn Write, run: &RunView) -> io::Result<()> {
    if let Some(ended) = &run.ending {
        ending(out, ended, run.elapsed_s, &run.crossings)?;
    }
    writeln!(out)?;
    let seal = if run.sealed { "sealed" } else { "not sealed" };
    list(
        out,
        &[
            ("charge", quantity(run.charge_ah, "Ah")),
            ("energy", quantity(run.energy_wh, "Wh")),
            (
                "record",
                format!("{} ({seal}), in the daemon's records folder", run.record),
            ),
        ],
    )?;
    writeln!(out)?;
    margins(out, &run.margins)
}
