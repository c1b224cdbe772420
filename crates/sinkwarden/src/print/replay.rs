//! Whether a record replays.

use std::io::{self, Write};

use super::unit::count;
use crate::commands::ReplayAnswer;

/// Writes what the replay gave.
pub(crate) fn replay(out: &mut dyn Write, answer: &ReplayAnswer) -> io::Result<()> {
    match answer {
        ReplayAnswer::Same(summary) => {
            writeln!(
                out,
                "the same, bit for bit: {} events gave the {} orders and findings of the record",
                count(summary.events),
                count(summary.outputs)
            )?;
            if summary.unrecorded > 0 {
                writeln!(
                    out,
                    "  {} more came after the last one recorded: the host died before it could write them",
                    count(summary.unrecorded)
                )?;
            }
            Ok(())
        }
        ReplayAnswer::Different {
            entry,
            expected,
            found,
        } => {
            writeln!(out, "DIFFERENT at entry {entry} of the journal")?;
            writeln!(
                out,
                "  the sequencer gives  {}",
                expected.as_deref().unwrap_or("nothing")
            )?;
            writeln!(
                out,
                "  the record has       {}",
                found.as_deref().unwrap_or("an event")
            )
        }
    }
}
