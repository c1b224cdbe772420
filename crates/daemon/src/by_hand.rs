//! Runs by hand: a script names a setpoint and an interval, and must go on doing so.
//!
//! What a script asks for is made into a sequence of one step and put to the same check as any
//! other: each new setpoint is judged by the envelope, the converter, the device under test and
//! the interlocks before it is passed on. The interval is kept by the sequencer, and below it by
//! the sink itself; nothing here watches it.
//!
//! What it deliberately does not do: keep a run going. Whoever began it must.

use std::collections::BTreeMap;
use std::sync::{Arc, Mutex, PoisonError};

use quantity::{Current, Span};
use sequence::{Compiled, Files, compile_with};
use serde_json::{Value, json};
use tokio::sync::oneshot;
use uuid::Uuid;

use crate::app::App;
use crate::sinks::SinkHandle;
use crate::starting;
use crate::view::{Code, HandRequest, Problem, RunView, SetpointRequest};
use crate::worker::Ask;

/// Shortest and longest interval: a step takes 200 ms to reach the sink, and after a minute
/// nobody remembers.
const INTERVAL: (Span, Span) = (Span::from_secs(1), Span::from_secs(60));
/// The title of a run by hand that is given none.
const TITLE: &str = "By hand";

/// What was asked for when each sink's latest run by hand began.
#[derive(Debug, Default)]
pub(crate) struct Hands(Mutex<BTreeMap<String, (Uuid, Arc<HandRequest>)>>);

impl Hands {
    /// Remembers what a run was begun with.
    pub(crate) fn began(&self, id: Uuid, request: HandRequest) {
        let mut hands = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        hands.insert(request.sink.clone(), (id, Arc::new(request)));
    }

    /// What a run was begun with.
    pub(crate) fn of(&self, id: Uuid) -> Option<Arc<HandRequest>> {
        let hands = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        let found = hands.values().find(|(of, _)| *of == id);
        found.map(|(_, request)| Arc::clone(request))
    }
}

/// Checks a setpoint as a sequence of one step: its plan, and the sequence's text.
///
/// # Errors
/// [`Code::IntervalRefused`], or [`Code::SequenceRefused`] with every finding.
pub(crate) fn check(
    app: &App,
    sink: &SinkHandle,
    request: &HandRequest,
    setpoint: Current,
) -> Result<(Compiled, String), Problem> {
    let interval = request.interval.0;
    check_interval(interval)?;
    let text = sequence_of(request, setpoint, interval);
    let options = starting::options(app, sink);
    let compiled = compile_with(&text, &sink.facts(), &Files::new(), &options);
    let mut compiled = compiled.map_err(|refused| {
        let (errors, warnings) = refused.0.count();
        let detail = format!(
            "{setpoint} by hand is refused for sink `{}`: {errors} errors, {warnings} warnings",
            sink.name()
        );
        Problem::new(Code::SequenceRefused, detail).with_findings(refused.0.list)
    })?;
    compiled.plan.by_hand = true;
    compiled.plan.validate().map_err(|error| {
        tracing::error!("a run by hand: {error}");
        Problem::new(Code::Internal, error.to_string())
    })?;
    Ok((compiled, text))
}

fn check_interval(interval: Span) -> Result<(), Problem> {
    let (shortest, longest) = INTERVAL;
    if (shortest..=longest).contains(&interval) {
        return Ok(());
    }
    let detail = format!(
        "an interval of {interval}; it may be {shortest} to {longest}, and is best three times as long as the time between two requests"
    );
    Err(Problem::new(Code::IntervalRefused, detail))
}

fn sequence_of(request: &HandRequest, setpoint: Current, interval: Span) -> String {
    let span = interval.to_string();
    let step = if setpoint == Current::ZERO {
        json!({ "rest": span })
    } else {
        json!({ "draw": setpoint.to_string(), "for": span })
    };
    let mut sequence = json!({
        "sequence": 1,
        "title": request.title.as_deref().unwrap_or(TITLE),
        "dut": request.dut,
        "interlocks": request.interlocks,
        "steps": [step],
    });
    if let (Some(readback), Value::Object(sequence)) = (&request.readback, &mut sequence) {
        sequence.insert("readback".to_owned(), json!(readback.0.to_string()));
    }
    format!("{sequence:#}\n")
}

/// Passes a setpoint on, checked; without one, the same again.
///
/// # Errors
/// What the check refuses; [`Code::NotRunning`] for a run that is none by hand, or over.
pub(crate) async fn set(
    app: &Arc<App>,
    sink: &SinkHandle,
    id: Uuid,
    wanted: SetpointRequest,
) -> Result<RunView, Problem> {
    let Some(began) = app.hands.of(id) else {
        let detail = format!("run {id} runs a sequence; a setpoint is for a run by hand");
        return Err(Problem::new(Code::NotByHand, detail));
    };
    let interval = wanted.interval.map(|interval| interval.0);
    if let Some(interval) = interval {
        check_interval(interval)?;
    }
    let setpoint = wanted.setpoint.map(|setpoint| setpoint.0);
    if let Some(setpoint) = setpoint {
        let (app, name) = (Arc::clone(app), sink.name().to_owned());
        crate::http::aside(move || check(&app, app.sink(&name)?, &began, setpoint)).await?;
    }
    let (answer, answered) = oneshot::channel();
    sink.give(Ask::Setpoint {
        id,
        setpoint,
        interval,
        answer,
    })?;
    match answered.await {
        Ok(Some(run)) => Ok(run),
        Ok(None) => {
            let run = sink.view().run.filter(|run| run.id == id);
            let why = run.and_then(|run| run.ending?.reason);
            let why = why.map_or_else(String::new, |why| format!(": {why}"));
            let detail = format!("run {id} has ended{why}");
            Err(Problem::new(Code::NotRunning, detail))
        }
        Err(_) => {
            let detail = "the sink's worker has ended";
            Err(Problem::new(Code::WorkerEnded, detail))
        }
    }
}
