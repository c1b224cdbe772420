//! From a request to a run: compile, create the record, hand over to the worker.
//!
//! All of it works on the disk or on megabytes of text, so none of it runs on a thread that
//! answers others.

use std::sync::Arc;

use journal::{
    Body, ClockKind, Disk, Entry, FORMAT, JournalError, Manifest, Note, Options, Storage as _,
    Writer,
};
use quantity::HostTime;
use sequence::{Compiled, Findings, compile_with};
use sequencer::Sequencer;
use tokio::sync::oneshot;
use uuid::Uuid;

use crate::app::App;
use crate::by_hand;
use crate::records::folder_name;
use crate::sinks::SinkHandle;
use crate::view::{Code, HandRequest, Problem, RunView, SequenceRequest, rfc3339};
use crate::worker::{Answer, Ask, Begin, Reservation};

/// Compiles a sequence for a sink as it is now.
///
/// # Errors
/// [`Code::SequenceRefused`] with every finding.
pub(crate) fn check(
    app: &App,
    sink: &SinkHandle,
    request: &SequenceRequest,
) -> Result<Compiled, Problem> {
    let options = sequence::Options {
        dut_label: request.dut.clone(),
        ..options(app, sink)
    };
    compile_with(&request.sequence.0, &sink.facts(), &request.files, &options).map_err(|refused| {
        let (errors, warnings) = refused.0.count();
        let detail = format!(
            "the sequence is refused for sink `{}`: {errors} errors, {warnings} warnings",
            sink.name()
        );
        Problem::new(Code::SequenceRefused, detail).with_findings(refused.0.list)
    })
}

/// What the compiler must know beside the sequence and the sink.
pub(crate) fn options(app: &App, sink: &SinkHandle) -> sequence::Options {
    sequence::Options {
        correction: sink.correction,
        calibration: sink.calibration(),
        disk_free_bytes: free_bytes(app),
        ..sequence::Options::default()
    }
}

/// Free space for records; `None` where the platform cannot say.
fn free_bytes(app: &App) -> Option<u64> {
    Disk.free_bytes(app.records.folder()).ok().flatten()
}

/// Whether a run could begin on a sink; why not, otherwise.
pub(crate) fn is_ready(sink: &SinkHandle) -> Result<(), Problem> {
    let view = sink.view();
    let name = sink.name();
    if view.description.is_none() && view.run.is_none() {
        let reason = view
            .link
            .reason
            .map_or_else(String::new, |why| format!(": {why}"));
        let detail = format!("no session stands with sink `{name}`{reason}; connect it first");
        return Err(Problem::new(Code::SinkNotConnected, detail));
    }
    if let (Some(cause), None) = (&view.latched_by, &view.run) {
        let detail = format!(
            "sink `{name}` has latched ({cause}); see to the cause, then POST /v1/sinks/{name}/reset"
        );
        return Err(Problem::new(Code::SinkLatched, detail));
    }
    Ok(())
}

/// Starts a run under an id: the way to its first view, or why it cannot be.
///
/// # Errors
/// What the check refuses, a busy sink, a record that cannot be created.
pub(crate) fn start(
    app: &App,
    sink: &SinkHandle,
    request: &SequenceRequest,
    id: Uuid,
) -> Result<oneshot::Receiver<Result<RunView, String>>, Problem> {
    let reservation = reserve(sink)?;
    let compiled = check(app, sink, request)?;
    let text = journal::SequenceText {
        text: request.sequence.0.clone(),
        files: request.files.clone(),
    };
    launch(app, sink, reservation, compiled, text, id)
}

/// Starts a run by hand under an id, as [`start`] does.
///
/// # Errors
/// As [`start`].
pub(crate) fn start_by_hand(
    app: &App,
    sink: &SinkHandle,
    request: &HandRequest,
    id: Uuid,
) -> Result<oneshot::Receiver<Result<RunView, String>>, Problem> {
    let reservation = reserve(sink)?;
    let (compiled, text) = by_hand::check(app, sink, request, request.setpoint.0)?;
    let files = std::collections::BTreeMap::new();
    let text = journal::SequenceText { text, files };
    launch(app, sink, reservation, compiled, text, id)
}

fn reserve(sink: &SinkHandle) -> Result<Reservation, Problem> {
    sink.reserve().ok_or_else(|| {
        let name = sink.name();
        let detail = format!("a run is in progress on sink `{name}`; stop it, or wait for its end");
        Problem::new(Code::SinkBusy, detail)
    })
}

fn launch(
    app: &App,
    sink: &SinkHandle,
    reservation: Reservation,
    compiled: Compiled,
    text: journal::SequenceText,
    id: Uuid,
) -> Result<oneshot::Receiver<Result<RunView, String>>, Problem> {
    let name = sink.name();
    let plan = Arc::new(compiled.plan);
    let sequencer = Sequencer::new(Arc::clone(&plan)).map_err(|error| {
        Problem::new(
            Code::SequenceRefused,
            format!("the plan cannot be run: {error}"),
        )
    })?;
    let folder = folder_name(app.clock.now(), name, &plan.dut.label, id);
    let manifest = manifest(app, sink, text, &plan, id);
    let path = app.records.path(&folder);
    let writer =
        Writer::create(&path, manifest, Options::default()).map_err(|error| not_begun(&error))?;
    let writer =
        with_warnings(writer, &compiled.warnings, sink.now()).map_err(|error| not_begun(&error))?;
    let (answer, answered): (Answer<Result<RunView, String>>, _) = oneshot::channel();
    let begin = Begin {
        id,
        folder,
        plan,
        sequencer,
        started: writer.manifest().created.clone(),
        writer,
        resumed: false,
        reservation,
        answer: Some(answer),
    };
    sink.give(Ask::Begin(Box::new(begin)))?;
    Ok(answered)
}

fn not_begun(error: &JournalError) -> Problem {
    let detail = format!("the record of the run cannot be written: {error}");
    Problem::new(Code::RecordNotBegun, detail)
}

/// What the check warned of is the first thing in the record.
fn with_warnings(
    mut writer: Writer,
    warnings: &Findings,
    at: HostTime,
) -> Result<Writer, JournalError> {
    for warning in &warnings.list {
        let text = format!(
            "check: {}[{}] at {}: {}",
            warning.severity, warning.rule, warning.pointer, warning.message
        );
        writer.append(&Entry {
            number: writer.next_number(),
            at,
            body: Body::Note(Note::Text(text)),
        })?;
    }
    writer.commit()?;
    Ok(writer)
}

fn manifest(
    app: &App,
    sink: &SinkHandle,
    sequence: journal::SequenceText,
    plan: &sequence::plan::Plan,
    id: Uuid,
) -> Manifest {
    let clock = if sink.entry.link.is_simulated() {
        ClockKind::TimeLapse
    } else {
        ClockKind::Real
    };
    Manifest {
        format: FORMAT,
        record: id.to_string(),
        created: rfc3339(sink.now()),
        host: app.host.clone(),
        software: app.software.clone(),
        sink: sink.name().to_owned(),
        clock,
        bench: serde_json::to_value(&sink.entry).unwrap_or_default(),
        sequence,
        plan: plan.clone(),
        certificate: sink.certificate.clone(),
        description: sink.snapshot.borrow().description,
        resumed: Vec::new(),
        ended: None,
    }
}
