//! `figures`: from the record alone.

use anyhow::Result;

use crate::arguments::Figures;
use crate::exit::{Exit, hinted};
use crate::output::Output;
use crate::print;
use crate::record_folder;

pub(super) fn carry_out(arguments: &Figures, output: Output) -> Result<Exit> {
    let record = record_folder::open(&arguments.of)?;
    let figures = figures::work_out(&record).map_err(|error| {
        hinted(
            format!("no figures from {}: {error}", record.folder().display()),
            "`sinkwarden verify` says whether the record is as it was written",
        )
    })?;
    output.give(&figures, |out, figures| {
        print::figures(out, figures, arguments.budget)
    })?;
    Ok(Exit::Done)
}
