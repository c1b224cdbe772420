//! `verify`: whether anything in a record was altered, and where.

use anyhow::Result;

use crate::arguments::RecordOf;
use crate::exit::Exit;
use crate::output::Output;
use crate::print;
use crate::record_folder;

pub(super) fn carry_out(of: &RecordOf, output: Output) -> Result<Exit> {
    let report = journal::verify(&record_folder::find(of)?)?;
    output.give(&report, print::verify)?;
    Ok(if report.is_intact() {
        Exit::Done
    } else {
        Exit::Altered
    })
}
