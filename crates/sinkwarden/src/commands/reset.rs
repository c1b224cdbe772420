//! `reset`: a sink that has latched.

use anyhow::Result;
use daemon::view::ResetView;

use crate::arguments::ResetOf;
use crate::exit::Exit;
use crate::output::Output;

pub(super) fn carry_out(of: &ResetOf, output: Output) -> Result<Exit> {
    let client = of.at.client()?;
    let answer: ResetView = client.post(&format!("/v1/sinks/{}/reset", of.sink))?;
    output.give(&answer, |out, answer| {
        writeln!(out, "{} is reset and off", answer.sink)
    })?;
    Ok(Exit::Done)
}
