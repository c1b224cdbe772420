//! `run`: start on the daemon, follow to the end, or leave at once.

use anyhow::Result;
use daemon::view::{Code, FiguresView, RunView, SequenceRequest, SequenceText};
use figures::{Name, with_uncertainty};
use uuid::Uuid;

use super::check::tell_refused;
use super::follow::{Followed, follow};
use super::interrupt::Interrupt;
use crate::arguments::Run;
use crate::client::{Client, RequestError};
use crate::exit::{Exit, hinted};
use crate::output::{Output, tell};
use crate::print;
use crate::sequence_file::SequenceFile;

pub(super) fn carry_out(arguments: &Run, output: Output) -> Result<Exit> {
    let client = arguments.at.client()?;
    let file = SequenceFile::load(&arguments.sequence)?;
    let request = SequenceRequest {
        sequence: SequenceText(file.text),
        files: file.files,
        sink: arguments.sink.clone(),
        dut: arguments.dut.clone(),
    };
    // From here on Ctrl-C must not leave behind a run that nobody knows of.
    let interrupt = if arguments.detach {
        None
    } else {
        Some(Interrupt::watch(&client, &arguments.sink)?)
    };
    let key = Uuid::now_v7().to_string();
    let run: RunView = match client.start("/v1/runs", &request, &key) {
        Ok(run) => run,
        Err(RequestError::Refused(problem)) if problem.code == Code::SequenceRefused => {
            return tell_refused(&problem, &arguments.sequence, output);
        }
        Err(error) => return Err(error.into()),
    };
    let Some(interrupt) = interrupt else {
        output.give(&run, print::started_run)?;
        return Ok(Exit::Done);
    };
    interrupt.run_is(run.id);
    if !output.is_json() {
        tell(format_args!(
            "run {} has begun on `{}` with {}; Ctrl-C stops it",
            run.id, run.sink, run.dut
        ));
    }
    match follow(&client, &run)? {
        Followed::Ended(ended) => {
            output.give(&*ended, |out, run| {
                print::ended_run(out, run)?;
                if let Some(line) = capacity(&client, run.id) {
                    writeln!(out, "\n{line}")?;
                }
                writeln!(out, "\nfor every figure: sinkwarden figures {}", run.record)
            })?;
            let how = ended.ending.as_ref().map(|ending| ending.how);
            Ok(how.map_or(Exit::Failed, Exit::from))
        }
        Followed::RecordOnly(record) => {
            let Some(ending) = &record.ending else {
                return Err(hinted(
                    format!(
                        "run {} is not known to the daemon and its record is open",
                        run.id
                    ),
                    "see the daemon's log",
                ));
            };
            tell(format_args!(
                "the daemon was started anew; the record says: {}",
                ending.how.text()
            ));
            output.give(&record, |out, record| {
                writeln!(out, "record {}", record.folder)
            })?;
            Ok(ending.how.into())
        }
    }
}

/// The capacity and energy from the record, where the daemon gives them.
fn capacity(client: &Client, id: Uuid) -> Option<String> {
    let view: FiguresView = client.get(&format!("/v1/records/{id}/figures")).ok()?;
    let figures = view.figures;
    let texts: Vec<String> = figures
        .figures
        .iter()
        .filter(|figure| figure.label.is_none())
        .filter(|figure| matches!(figure.name, Name::Capacity | Name::Energy))
        .map(|figure| {
            let standard = figure
                .uncertainty
                .map(|combined| combined.standard_uncertainty);
            format!(
                "{} {} {}",
                print::words(&figure.name),
                with_uncertainty(figure.value, standard),
                figure.unit.symbol()
            )
        })
        .collect();
    let standing = figures.standing.words();
    (!texts.is_empty()).then(|| format!("from the record: {} ({standing})", texts.join(", ")))
}
