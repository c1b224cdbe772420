//! `report`: the record as one HTML page.

use std::fs;
use std::path::Path;

use anyhow::Result;
use figures::{Figures, FiguresError};
use journal::Record;
use report::{Options, no_figures, render};
use serde_json::json;
use transport::port::HostClock;

use super::keeping::rfc3339;
use crate::arguments::Report;
use crate::exit::{Exit, hinted};
use crate::output::{Output, give_text, tell};
use crate::record_folder;

pub(super) fn carry_out(arguments: &Report, output: Output) -> Result<Exit> {
    let record = record_folder::open(&arguments.of)?;
    let figures = figures(&record)?;
    let options = Options {
        made: Some(rfc3339(HostClock::start().now())),
    };
    let page = render(&record, &figures, &options)?;
    let Some(path) = &arguments.output else {
        // Here the page itself is the answer, whatever form is asked for.
        give_text(&page)?;
        return Ok(Exit::Done);
    };
    write(path, &page)?;
    if output.is_json() {
        let answer = json!({ "output": path, "record": figures.record, "bytes": page.len() });
        output.give(&answer, |_, _| Ok(()))?;
    } else {
        tell(format_args!(
            "report of record {} in {}",
            figures.record,
            path.display()
        ));
    }
    Ok(Exit::Done)
}

/// The record's figures, or none with the reason where it supports none.
fn figures(record: &Record) -> Result<Figures> {
    match figures::work_out(record) {
        Ok(figures) => Ok(figures),
        Err(error @ FiguresError::Empty) => Ok(no_figures(record, &error.to_string())),
        Err(error) => Err(hinted(
            format!("no report of {}: {error}", record.folder().display()),
            "`sinkwarden verify` says whether the record is as it was written",
        )),
    }
}

fn write(path: &Path, page: &str) -> Result<()> {
    fs::write(path, page).map_err(|error| {
        hinted(
            format!("cannot write {}: {error}", path.display()),
            "give --output a file in a folder that can be written to",
        )
    })
}
