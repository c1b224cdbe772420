//! How long a load runs.

use std::io::{self, Write};

use super::table::{list, table, write};
use super::unit::{duration, percent, quantity};
use crate::commands::PredictionAnswer;

/// Seconds in an hour.
const HOUR_S: f64 = 3600.0;

/// Writes the prediction, its interval and what dominates it.
pub(crate) fn prediction(out: &mut dyn Write, answer: &PredictionAnswer) -> io::Result<()> {
    let run_time = &answer.run_time;
    let [low, high] = run_time.outcome.symmetric;
    writeln!(
        out,
        "{}, {} of cases between {} and {}",
        duration(run_time.hours * HOUR_S),
        percent(run_time.outcome.probability),
        duration(low * HOUR_S),
        duration(high * HOUR_S)
    )?;
    writeln!(out)?;
    list(
        out,
        &[
            ("cell", answer.cell.clone()),
            ("load", answer.load.clone()),
            ("mean current", quantity(answer.mean_current_a, "A")),
            ("one cycle", duration(answer.cycle_s)),
            ("cut-off", quantity(answer.cut_off_v, "V")),
            (
                "standard uncertainty",
                duration(run_time.outcome.standard_uncertainty * HOUR_S),
            ),
            (
                "left at the end",
                percent(run_time.state_of_charge.max(0.0)),
            ),
            (
                "dominated by",
                run_time
                    .dominated_by
                    .clone()
                    .unwrap_or_else(|| "nothing that was given".to_owned()),
            ),
        ],
    )?;
    if !run_time.budget.contributions.is_empty() {
        writeln!(out)?;
        let mut rows = table(&["by itself", "standard deviation of the run-time"]);
        for line in &run_time.budget.contributions {
            rows.add_row([line.name.clone(), duration(line.share() * HOUR_S)]);
        }
        write(out, &rows)?;
    }
    for note in &run_time.notes {
        writeln!(out, "\nnote: {note}")?;
    }
    writeln!(
        out,
        "\nMethod: {}. Ageing and self-discharge are not in it.",
        run_time.method
    )
}
