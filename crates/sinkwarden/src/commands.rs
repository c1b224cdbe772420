//! What each command does: flags to one validated value, the crates' or the daemon's answer, its
//! print.

mod against;
mod calibrate;
mod certificates;
mod check;
mod compare;
mod envelope;
mod export;
mod figures;
mod follow;
mod interrupt;
mod keeping;
mod off;
mod predict;
mod prove;
mod records;
mod rehearse;
mod replay;
mod report;
mod reset;
mod run;
mod serve;
mod status;
mod verify;
mod watch;

use anyhow::Result;

use crate::arguments::Command;
use crate::bench_file::STARTING;
use crate::exit::Exit;
use crate::output::{Output, give_text};

pub(crate) use against::{AgainstAnswer, Side};
pub(crate) use calibrate::Certified;
pub(crate) use compare::ComparisonAnswer;
pub(crate) use envelope::EnvelopeAnswer;
pub(crate) use predict::PredictionAnswer;
pub(crate) use rehearse::RehearsalAnswer;
pub(crate) use replay::ReplayAnswer;

/// Carries a command out.
///
/// # Errors
/// What keeps it from being carried out, for stderr.
pub(crate) fn carry_out(command: Command, output: Output) -> Result<Exit> {
    match command {
        Command::Bench => {
            give_text(STARTING)?;
            Ok(Exit::Done)
        }
        Command::Schema => {
            give_text(&format!("{:#}\n", sequence::schema()))?;
            Ok(Exit::Done)
        }
        Command::Envelope(arguments) => envelope::carry_out(&arguments, output),
        Command::Calibrate(arguments) => calibrate::carry_out(&arguments, output),
        Command::Certificates(of) => certificates::carry_out(&of, output),
        Command::Check(arguments) => check::carry_out(&arguments, output),
        Command::Prove(arguments) => prove::carry_out(&arguments, output),
        Command::Rehearse(arguments) => rehearse::carry_out(&arguments, output),
        Command::Serve(arguments) => serve::carry_out(arguments, output),
        Command::Run(arguments) => run::carry_out(&arguments, output),
        Command::Off(of) => off::carry_out(&of, output),
        Command::Reset(of) => reset::carry_out(&of, output),
        Command::Status(of) => status::carry_out(&of, output),
        Command::Watch(of) => watch::carry_out(&of, output),
        Command::Records(arguments) => records::carry_out(&arguments, output),
        Command::Figures(arguments) => figures::carry_out(&arguments, output),
        Command::Replay(arguments) => replay::carry_out(&arguments, output),
        Command::Compare(arguments) => compare::carry_out(&arguments, output),
        Command::Predict(arguments) => predict::carry_out(&arguments, output),
        Command::Verify(of) => verify::carry_out(&of, output),
        Command::Export(arguments) => export::carry_out(&arguments, output),
        Command::Report(arguments) => report::carry_out(&arguments, output),
    }
}
