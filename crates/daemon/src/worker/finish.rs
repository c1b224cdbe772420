//! Beginning a run, and completing its record after it.

use std::sync::Arc;
use std::thread;

use journal::{Ended, WriterThread};
use quantity::HostTime;
use sequencer::event::{Crossing, Ending};
use sequencer::status::Status;

use super::hand::Hand;
use super::publish::reason_of;
use super::record::RunRecord;
use super::{Begin, RunInProgress, Worker};
use crate::context::Context;
use crate::figures_file;
use crate::sketch::keep_sketch;
use crate::view::{RunEvent, RunNews, RunState, RunView, rfc3339};

impl Worker {
    pub(super) fn begin(&mut self, begin: Begin, now: HostTime) {
        let answer = begin.answer;
        if self.ending.is_some() {
            return refuse(answer, "the daemon is ending".to_owned());
        }
        let writer = begin.writer;
        let recorded = writer.durable();
        let record = RunRecord::start(writer, self.free_bytes_min, self.commands.clone());
        let record = match record {
            Ok(record) => record,
            Err(error) => return refuse(answer, error.to_string()),
        };
        if let Err(busy) = self.keeper.begin(begin.sequencer, recorded, now) {
            return refuse(answer, busy.to_string());
        }
        let hand = Hand::of(&begin.plan);
        self.run = Some(RunInProgress {
            id: begin.id,
            folder: begin.folder,
            started: begin.started,
            expected: begin.plan.forecast().duration,
            plan: begin.plan,
            record,
            crossings: Vec::new(),
            hand,
            stopped_by: None,
            ending: None,
            reservation: begin.reservation,
        });
        if begin.resumed {
            self.tell(now, "resumed", false, RunNews::Resumed);
        } else {
            self.tell(now, "began", false, RunNews::Began);
        }
        self.newsworthy = true;
        self.settle();
        // Shown before it is answered: whoever asks for it next finds it.
        self.publish();
        if let (Some(answer), Some(view)) = (answer, self.run_view()) {
            let _ = answer.send(Ok(view));
        }
    }

    /// The run is over: its record is completed by another thread, the sink is free.
    pub(super) fn close(&mut self, ending: &Ending, status: &Status) {
        let Some(run) = self.run.take() else { return };
        let mut view = self.view_of(&run, status);
        view.state = RunState::Ended;
        self.newsworthy = true;
        let at = self.link.now();
        self.complete(run, view, ending, at);
    }

    /// The daemon ends and the sink has said nothing: what is known is kept.
    pub(super) fn abandon_run(&mut self) {
        let view = self.run_view();
        self.submit();
        if let (Some(run), Some(mut view)) = (self.run.take(), view) {
            view.state = RunState::Ended;
            let at = self.link.now();
            self.complete(run, view, &Ending::Stopped, at);
        }
    }

    fn complete(&self, run: RunInProgress, view: RunView, ending: &Ending, at: HostTime) {
        let ended = ended(ending, &run.crossings, run.stopped_by, at);
        self.context.ended.push(view.clone());
        drop(run.reservation);
        let context = Arc::clone(&self.context);
        let thread = run.record.into_thread();
        let completing = thread::Builder::new()
            .name("seal".into())
            .spawn(move || complete_record(thread, ended, view, &context));
        match completing {
            Ok(thread) => self.context.finishing(thread),
            // The record stays open; it is sealed when the daemon starts again.
            Err(error) => tracing::error!("no thread to seal the record: {error}"),
        }
    }
}

fn refuse(answer: Option<super::Answer<Result<RunView, String>>>, why: String) {
    tracing::error!("the run cannot begin: {why}");
    if let Some(answer) = answer {
        let _ = answer.send(Err(why));
    }
}

/// How a run ended, for its manifest.
pub(crate) fn ended(
    ending: &Ending,
    crossings: &[Crossing],
    stopped_by: Option<&str>,
    at: HostTime,
) -> Ended {
    Ended {
        how: ending.clone(),
        at: rfc3339(at),
        reason: reason_of(ending, crossings, stopped_by),
    }
}

/// Seals a record and works out its figures.
fn complete_record(thread: WriterThread, ended: Ended, run: RunView, context: &Context) {
    let writer = thread.close();
    let folder = writer.folder().to_path_buf();
    let result = match writer.failure() {
        Some(failure) => Err(failure.to_string()),
        None => writer.seal(ended).map_err(|error| error.to_string()),
    };
    let (message, sealed, hash) = match result {
        Ok(seal) => {
            context.ended.sealed(run.id);
            ("the record is sealed".to_owned(), true, Some(seal.hash))
        }
        Err(why) => {
            let message = format!(
                "the record {} is not sealed: {why}; it is taken up when the daemon starts again",
                run.record
            );
            (message, false, None)
        }
    };
    if sealed && let Err(why) = figures_file::write(&folder) {
        tracing::warn!(run = %run.id, "no figures: {why}");
    }
    if sealed && let Err(why) = keep_sketch(&folder) {
        tracing::warn!(run = %run.id, "no sketch for plots: {why}");
    }
    let at = run
        .ending
        .as_ref()
        .map_or(&run.started, |ending| &ending.at);
    context.tell(RunEvent {
        run: run.id,
        at: at.clone(),
        message: format!("{} on {}: {message}", run.dut, run.sink),
        sink: run.sink,
        dut: run.dut,
        calls_for_person: false,
        news: RunNews::Recorded { sealed, hash },
    });
}
