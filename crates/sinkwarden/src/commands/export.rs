//! `export`: every readback as a table.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use anyhow::Result;
use columnar::export_parquet;
use journal::{JournalError, Record, export_csv};
use serde_json::json;

use crate::arguments::{Export, TableKind};
use crate::exit::{Exit, hinted};
use crate::output::{Output, tell};
use crate::print;
use crate::progress::Progress;
use crate::record_folder;

pub(super) fn carry_out(arguments: &Export, output: Output) -> Result<Exit> {
    let record = record_folder::open(&arguments.of)?;
    let Some(path) = &arguments.output else {
        // Here the table itself is the answer, whatever form is asked for.
        write(&record, arguments.kind, BufWriter::new(io::stdout()))?;
        return Ok(Exit::Done);
    };
    let rows = write(&record, arguments.kind, BufWriter::new(create(path)?))?;
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

fn write(record: &Record, kind: TableKind, mut target: impl Write + Send) -> Result<u64> {
    let mut progress = Progress::open_ended();
    let shown = |done: journal::Progress| {
        let text = format!(
            "segment {} of {}, {} readbacks",
            done.segments_done,
            done.segments,
            print::count(done.rows)
        );
        progress.at(done.segments_done, text);
    };
    let exported = match kind {
        TableKind::Csv => export_csv(record, &mut target, shown).map_err(|error| {
            // Told apart, so that a reader who has had enough is no error.
            if let JournalError::Export(error) = error {
                anyhow::Error::from(error)
            } else {
                error.into()
            }
        }),
        TableKind::Parquet => export_parquet(record, &mut target, shown).map_err(Into::into),
    };
    progress.finish();
    let rows = exported?;
    target.flush()?;
    Ok(rows)
}
