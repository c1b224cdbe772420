//! What a plan will take.

use std::io::{self, Write};

use daemon::view::CheckView;

use super::table::list;
use super::unit::{count, duration, quantity};

/// Writes what the check says of a sequence that may run.
pub(crate) fn check(out: &mut dyn Write, view: &CheckView) -> io::Result<()> {
    writeln!(
        out,
        "ok: \"{}\" may run on `{}` with {}",
        view.title, view.sink, view.dut
    )?;
    writeln!(out)?;
    let labels = if view.labels.is_empty() {
        String::new()
    } else {
        format!(": {}", view.labels.join(", "))
    };
    let forecast = &view.forecast;
    list(
        out,
        &[
            (
                "instructions",
                format!("{}{labels}", count(view.instructions)),
            ),
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
            (
                "readbacks",
                format!("at most {}", count(view.readbacks_at_most)),
            ),
        ],
    )?;
    writeln!(out)?;
    writeln!(
        out,
        "\"About\" is reckoned from the data sheet's values alone; `rehearse` knows better."
    )
}
