//! `records`: what a folder holds.

use anyhow::Result;

use crate::arguments::Records;
use crate::exit::Exit;
use crate::output::Output;
use crate::print;
use crate::record_folder;

pub(super) fn carry_out(arguments: &Records, output: Output) -> Result<Exit> {
    let mut list = record_folder::list(&arguments.folder)?;
    let fits = |wanted: &Option<String>, found: &str| {
        wanted.as_deref().is_none_or(|wanted| wanted == found)
    };
    list.records
        .retain(|record| fits(&arguments.dut, &record.dut) && fits(&arguments.sink, &record.sink));
    output.give(&list, print::records)?;
    Ok(Exit::Done)
}
