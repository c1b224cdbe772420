//! One line for a sink or a run as it is now.

use std::fmt::Write as _;
use std::io::{self, Write};

use daemon::view::{ReadingView, RunView, SinkView};

use super::unit::{duration, percent, quantity, words};

/// A run's progress in one line.
pub(crate) fn progress_of(run: &RunView) -> String {
    let mut text = format!(
        "{} of about {}",
        duration(run.elapsed_s),
        duration(run.expected_s)
    );
    if let Some(label) = run.step.as_ref().and_then(|step| step.label.as_ref()) {
        let _ = write!(text, "  {label}");
    }
    if let Some(reading) = &run.reading {
        let _ = write!(
            text,
            "  {}  {}",
            quantity(reading.voltage_v, "V"),
            quantity(reading.current_a, "A")
        );
    }
    let _ = write!(text, "  {}", quantity(run.charge_ah, "Ah"));
    if let Some(nearest) = run.margins.first() {
        let _ = write!(
            text,
            "  nearest: {} {}",
            words(&nearest.interlock),
            percent(nearest.nearness)
        );
    }
    text
}

/// Writes a sink as it is now in one line.
pub(crate) fn sink_line(out: &mut dyn Write, view: &SinkView) -> io::Result<()> {
    let reading = view
        .reading
        .as_ref()
        .map_or_else(|| "no readback yet".to_owned(), readback);
    write!(
        out,
        "{}  {}  {}  {reading}",
        view.at,
        view.name,
        words(&view.link.state)
    )?;
    if let Some(run) = &view.run {
        write!(
            out,
            "  {} on {}: {}",
            words(&run.state),
            run.dut,
            progress_of(run)
        )?;
    }
    writeln!(out)
}

/// A readback in a few words.
pub(super) fn readback(reading: &ReadingView) -> String {
    let temperature = match (reading.temperature_degc, &reading.sensor_fault) {
        (Some(temperature), _) => quantity(temperature, "degC"),
        (None, Some(fault)) => format!("temperature sensor {fault}"),
        (None, None) => "no temperature".to_owned(),
    };
    format!(
        "{}  {}  {}  {}  {temperature}",
        words(&reading.state),
        quantity(reading.voltage_v, "V"),
        quantity(reading.current_a, "A"),
        quantity(reading.power_w, "W"),
    )
}
