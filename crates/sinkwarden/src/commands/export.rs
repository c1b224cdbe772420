//! `export`: every readback as CSV.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use anyhow::Result;
use journal::{JournalError, Record, export_csv};
use serde_json::json;

use crate::arguments::Export;
use crate::exit::{Exit, hinted};
use crate::output::{Output, tell};
use crate::print;
use crate::progress::Progress;
use crate::record_folder;

pub(super) fn carry_out(arguments: &Export, output: Output) -> Result<Exit> {
    let record = record_folder::open(&arguments.of)?;
    let Some(path) = &arguments.output else {
        // Here the table itself is the answer, whatever form is asked for.
        write(&record, &mut BufWriter::new(io::stdout().lock()))?;
        return Ok(Exit::Done);
    };
    let mut file = BufWriter::new(create(path)?);
    let rows = write(&record, &mut file)?;
    if output.is_json() {
        output.give(&json!({ "output": path, "rows": rows }), |_, _| Ok(()))?;
    } else {
        tell(format_args!(
            "{} readbacks in {}",
            print::count(rows),
            path.display()
        ));
    }
    Ok(Exit::Done)
}

fn create(path: &Path) -> Result<File> {
    File::create_new(path).map_err(|error| {
        hinted(
            format!("cannot create {}: {error}", path.display()),
            "give --output a file that does not exist yet",
        )
    })
}

fn write(record: &Record, target: &mut dyn Write) -> Result<u64> {
    let mut progress = Progress::open_ended();
    let exported = export_csv(record, target, |done| {
        let text = format!(
            "segment {} of {}, {} readbacks",
            done.segments_done,
            done.segments,
            print::count(done.rows)
        );
        progress.at(done.segments_done, text);
    });
    progress.finish();
    let rows = exported.map_err(|error| {
        // Told apart, so that a reader who has had enough is no error.
        if let JournalError::Export(error) = error {
            anyhow::Error::from(error)
        } else {
            error.into()
        }
    })?;
    target.flush()?;
    Ok(rows)
}
