//! What a plan will take.

use std::io::{self, Write};

use daemon::view::{CheckView, PlanStepView, PlannedMarginView};

use super::table::{list, table, write};
use super::unit::{count, duration, percent, quantity, words};

/// Most steps of a plan that are printed.
const STEPS_MOST: usize = 30;

/// Writes what the check says of a sequence that may run.
pub(crate) fn check(out: &mut dyn Write, view: &CheckView) -> io::Result<()> {
    writeln!(
        out,
        "ok: \"{}\" may run on `{}` with {}",
        view.title, view.sink, view.dut
    )?;
    writeln!(out)?;
    steps(out, &view.steps, view.instructions)?;
    let forecast = &view.forecast;
    let mut rows = vec![
        (
            "duration",
            format!(
                "about {}, at most {}",
                duration(forecast.duration_s),
                duration(view.duration_at_most_s)
            ),
        ),
        (
            "charge",
            format!("about {}", quantity(forecast.charge_ah, "Ah")),
        ),
        (
            "energy",
            format!("about {}", quantity(forecast.energy_wh, "Wh")),
        ),
    ];
    if let Some(heat) = &view.temperatures {
        let at_most = |degc: f64, limit: f64| {
            format!(
                "at most {}, of {}",
                quantity(degc, "degC"),
                quantity(limit, "degC")
            )
        };
        rows.push((
            "heat sink",
            at_most(heat.heat_sink_degc, heat.heat_sink_max_degc),
        ));
        rows.push((
            "junction",
            at_most(heat.junction_degc, heat.junction_max_degc),
        ));
    }
    rows.push((
        "readbacks",
        format!("at most {}", count(view.readbacks_at_most)),
    ));
    list(out, &rows)?;
    writeln!(out)?;
    margins(out, &view.margins)?;
    writeln!(
        out,
        "\"About\" is reckoned from the data sheet's values alone; `rehearse` knows better."
    )
}

fn steps(out: &mut dyn Write, steps: &[PlanStepView], instructions: u64) -> io::Result<()> {
    for step in steps.iter().take(STEPS_MOST) {
        let indent = usize::try_from(step.depth).unwrap_or(0) * 2 + 2;
        write!(out, "{:indent$}{}", "", step.text)?;
        if let Some(label) = &step.label {
            write!(out, "  ({label})")?;
        }
        writeln!(out)?;
    }
    if steps.len() > STEPS_MOST {
        writeln!(out, "  and so on: {} instructions", count(instructions))?;
    }
    writeln!(out)
}

/// Writes how near each interlock is to come.
fn margins(out: &mut dyn Write, margins: &[PlannedMarginView]) -> io::Result<()> {
    let mut rows = table(&["interlock", "planned", "limit", "how near"]);
    for margin in margins {
        rows.add_row([
            words(&margin.interlock),
            quantity(margin.planned, &margin.unit),
            quantity(margin.threshold, &margin.unit),
            percent(margin.nearness),
        ]);
    }
    write(out, &rows)?;
    writeln!(out)
}
