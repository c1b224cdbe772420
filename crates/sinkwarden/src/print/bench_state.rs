//! The daemon's sinks as they are, and what became of `off`.

use std::io::{self, Write};

use daemon::view::{OffList, SinkList};

use super::line::{progress_of, readback};
use super::unit::{duration, words};

/// Writes every sink as it is now.
pub(crate) fn sinks(out: &mut dyn Write, list: &SinkList) -> io::Result<()> {
    writeln!(out, "bench {}", list.bench)?;
    for sink in &list.sinks {
        let link = &sink.link;
        let calibrated = if sink.calibrated {
            "calibrated"
        } else {
            "nominal, uncalibrated"
        };
        write!(
            out,
            "\n{}  {} {}",
            sink.name,
            words(&link.kind),
            words(&link.state)
        )?;
        if !link.port.is_empty() {
            write!(out, " at {}", link.port)?;
        }
        if let Some(factor) = link.time_factor {
            write!(out, ", {factor} times as fast as real time")?;
        }
        writeln!(out, ", {calibrated}")?;
        if let Some(reason) = &link.reason {
            writeln!(out, "  {reason}")?;
        }
        if let Some(reading) = &sink.reading {
            writeln!(out, "  {}", readback(reading))?;
            if let Some(cause) = &reading.latched_by {
                writeln!(out, "  latched by {}", words(cause))?;
            }
        }
        if let Some(run) = &sink.run {
            writeln!(
                out,
                "  {} \"{}\" on {}",
                words(&run.state),
                run.title,
                run.dut
            )?;
            writeln!(out, "  {}", progress_of(run))?;
        }
    }
    Ok(())
}

/// Writes what became of `off` for each sink.
pub(crate) fn off(out: &mut dyn Write, list: &OffList) -> io::Result<()> {
    for sink in &list.sinks {
        let took = duration(sink.took_s);
        if sink.acknowledged {
            writeln!(out, "{}: off, said so after {took}", sink.sink)?;
        } else {
            writeln!(out, "{}: NOT acknowledged within {took}", sink.sink)?;
        }
        if let Some(detail) = &sink.detail {
            writeln!(out, "  {detail}")?;
        }
    }
    Ok(())
}
