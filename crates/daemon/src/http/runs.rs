//! Runs: start, follow, stop, hold, continue.

use std::sync::Arc;
use std::time::Duration;

use axum::Json;
use axum::body::Bytes;
use axum::extract::{Path, State};
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::{IntoResponse, Response};
use sequencer::event::Command;
use serde::Serialize;
use tokio::sync::oneshot;
use uuid::Uuid;

use super::extract::{JsonBytes, id_of};
use super::problem::aside;
use crate::app::App;
use crate::keys::{Claim, is_key};
use crate::sinks::SinkHandle;
use crate::starting;
use crate::view::{Code, Problem, RunList, RunState, RunView, SequenceRequest};
use crate::worker::Ask;

/// Where runs are.
pub(super) const RUNS: &str = "/v1/runs";
/// How long a new run waits for the sink's session: a daemon that has just been started.
const SESSION_WAIT: Duration = Duration::from_secs(3);

/// Checks a sequence and starts it. An `Idempotency-Key` makes a repeated request harmless: it
/// is answered with the run of the first.
#[utoipa::path(
    post, path = "/v1/runs", tag = "runs",
    request_body = SequenceRequest,
    params(("Idempotency-Key" = Option<String>, Header, description = "1 to 255 printable characters, new for each run that is meant")),
    responses(
        (status = 201, body = RunView, description = "Started; Location names the run"),
        (status = 200, body = RunView, description = "Started before, with the same key"),
        (status = 303, description = "Started before and over since; Location names its record"),
        (status = 404, body = Problem),
        (status = 409, body = Problem),
        (status = 422, body = Problem),
        (status = 507, body = Problem),
    ),
)]
pub(super) async fn start(
    State(app): State<Arc<App>>,
    headers: HeaderMap,
    body: JsonBytes,
) -> Result<Response, Problem> {
    let bytes = body.0.clone();
    let request: SequenceRequest = aside(move || body.parse()).await?;
    let working = Arc::clone(&app);
    once(&app, &headers, bytes, RUNS, |id| async move {
        try_begin(&working, request, id).await
    })
    .await
}

/// Begins a run once, however often the same request with the same key comes; `kind` is the path
/// under which the answer names it.
pub(super) async fn once<T, F>(
    app: &Arc<App>,
    headers: &HeaderMap,
    bytes: Bytes,
    kind: &'static str,
    begin: impl FnOnce(Uuid) -> F,
) -> Result<Response, Problem>
where
    T: Serialize + Send + 'static,
    F: Future<Output = Result<T, Problem>> + Send + 'static,
{
    if *app.ending.borrow() {
        return Err(Problem::new(
            Code::ShuttingDown,
            "nothing is started any more",
        ));
    }
    let claimed = match key_of(headers)? {
        Some(key) => Some(claim(app, key, bytes).await?),
        None => None,
    };
    let (id, held) = match claimed {
        None => (Uuid::now_v7(), None),
        Some(Claim::Start(id, held)) => (id, Some(held)),
        Some(Claim::Repeated(id)) => return Ok(repeated(app, kind, id)),
        Some(Claim::Reused) => {
            let detail = "the key was used for another request; take a new one for a new run";
            return Err(Problem::new(Code::KeyReused, detail));
        }
        Some(Claim::InUse) => {
            let detail = "the same request is being answered; repeat it in a moment";
            return Err(Problem::new(Code::KeyInUse, detail));
        }
    };
    // A client that leaves now must not leave half a run behind: this goes on without it.
    let beginning = begin(id);
    let app = Arc::clone(app);
    let started = tokio::spawn(async move {
        let result = beginning.await;
        if let (Err(_), Some(held)) = (&result, &held) {
            // A key whose request started nothing is free again.
            app.keys.forget(held);
        }
        result
    });
    let run = started.await.unwrap_or_else(|error| {
        tracing::error!("starting a run has failed: {error}");
        Err(Problem::new(Code::Internal, "the daemon's log says more"))
    })?;
    let location = format!("{kind}/{id}");
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        Json(run),
    )
        .into_response())
}

fn key_of(headers: &HeaderMap) -> Result<Option<String>, Problem> {
    let Some(value) = headers.get("idempotency-key") else {
        return Ok(None);
    };
    match value.to_str() {
        Ok(key) if is_key(key) => Ok(Some(key.to_owned())),
        Ok(_) | Err(_) => Err(Problem::new(
            Code::KeyUnreadable,
            "an Idempotency-Key has 1 to 255 printable ASCII characters",
        )),
    }
}

async fn claim(app: &Arc<App>, key: String, body: Bytes) -> Result<Claim, Problem> {
    let app = Arc::clone(app);
    aside(move || {
        let is_started = |id| in_progress(&app, id).is_some() || app.records.has(id);
        app.keys
            .claim(&key, &body, Uuid::now_v7(), is_started)
            .map_err(|error| {
                let detail = format!("the key cannot be kept: {error}");
                Problem::new(Code::RecordNotBegun, detail)
            })
    })
    .await
}

/// The answer to a request whose run was started before.
fn repeated(app: &App, kind: &str, id: Uuid) -> Response {
    let location = format!("{kind}/{id}");
    if kind != RUNS {
        return (StatusCode::SEE_OTHER, [(header::LOCATION, location)]).into_response();
    }
    if let Some(run) = run_of(app, id) {
        return ([(header::LOCATION, location)], Json(run)).into_response();
    }
    // It has ended before this daemon was started: its record is all there is.
    let location = format!("/v1/records/{id}");
    (StatusCode::SEE_OTHER, [(header::LOCATION, location)]).into_response()
}

async fn try_begin(app: &Arc<App>, request: SequenceRequest, id: Uuid) -> Result<RunView, Problem> {
    let name = request.sink.clone();
    begun(app, &name, move |app, sink| {
        starting::start(app, sink, &request, id)
    })
    .await
}

/// The way to a run's first view, or why it could not begin.
type Beginning = oneshot::Receiver<Result<RunView, String>>;

/// Begins a run on a sink that is ready for one.
pub(super) async fn begun(
    app: &Arc<App>,
    name: &str,
    start: impl FnOnce(&App, &SinkHandle) -> Result<Beginning, Problem> + Send + 'static,
) -> Result<RunView, Problem> {
    let sink = app.sink(name)?;
    sink.wait_for_session(SESSION_WAIT).await;
    starting::is_ready(sink)?;
    let (working, name) = (Arc::clone(app), name.to_owned());
    let answered = aside(move || start(&working, working.sink(&name)?)).await?;
    match answered.await {
        Ok(Ok(run)) => Ok(run),
        Ok(Err(why)) => Err(Problem::new(Code::RecordNotBegun, why)),
        Err(_) => Err(Problem::new(
            Code::WorkerEnded,
            "the sink's worker has ended",
        )),
    }
}

/// Runs in progress, and those that have ended since the daemon started, the latest first.
#[utoipa::path(get, path = "/v1/runs", tag = "runs", responses((status = 200, body = RunList)))]
pub(super) async fn list(State(app): State<Arc<App>>) -> Json<RunList> {
    let mut runs: Vec<RunView> = app
        .sinks
        .iter()
        .filter_map(|sink| sink.view().run)
        .collect();
    let ended = app.context.ended.all();
    // Between a run's end and its sink's next view it is in both.
    runs.retain(|run| !ended.iter().any(|other| other.id == run.id));
    runs.extend(ended);
    Json(RunList { runs })
}

/// One run.
#[utoipa::path(
    get, path = "/v1/runs/{id}", tag = "runs",
    params(("id" = String, Path, description = "The run's id")),
    responses((status = 200, body = RunView), (status = 404, body = Problem)),
)]
pub(super) async fn one(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<RunView>, Problem> {
    let id = id_of(&id, Code::NoSuchRun)?;
    run_of(&app, id).map(Json).ok_or_else(|| no_such_run(id))
}

/// Ends a run as stopped. Takes no body.
#[utoipa::path(
    post, path = "/v1/runs/{id}/stop", tag = "runs",
    params(("id" = String, Path, description = "The run's id")),
    responses((status = 200, body = RunView), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn stop(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<RunView>, Problem> {
    command(&app, &id, Command::Stop, &[]).await
}

/// Turns the sink off until continued; time and charge go on being accounted. Takes no body.
#[utoipa::path(
    post, path = "/v1/runs/{id}/hold", tag = "runs",
    params(("id" = String, Path, description = "The run's id")),
    responses((status = 200, body = RunView), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn hold(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<RunView>, Problem> {
    command(&app, &id, Command::Hold, &[RunState::Running]).await
}

/// Goes on after a hold. Takes no body.
#[utoipa::path(
    post, path = "/v1/runs/{id}/continue", tag = "runs",
    params(("id" = String, Path, description = "The run's id")),
    responses((status = 200, body = RunView), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn go_on(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<RunView>, Problem> {
    command(&app, &id, Command::Continue, &[RunState::Held]).await
}

/// Passes a command on, to a run that is in one of the states; in any, if none is named.
async fn command(
    app: &App,
    id: &str,
    command: Command,
    states: &[RunState],
) -> Result<Json<RunView>, Problem> {
    let id = id_of(id, Code::NoSuchRun)?;
    let Some((sink, run)) = in_progress(app, id) else {
        return Err(match app.context.ended.get(id) {
            Some(_) => Problem::new(Code::NotRunning, format!("run {id} has ended")),
            None => no_such_run(id),
        });
    };
    if !states.is_empty() && run.by_hand.is_some() {
        let detail = format!("run {id} is driven by hand; set 0 A instead, or stop it");
        return Err(Problem::new(Code::NotRunning, detail));
    }
    if !states.is_empty() && !states.contains(&run.state) {
        let detail = format!(
            "run {id} is {}; only one that is {} can do that",
            crate::metrics::word(&run.state),
            crate::metrics::word(&states.first())
        );
        return Err(Problem::new(Code::NotRunning, detail));
    }
    let (answer, answered) = oneshot::channel();
    sink.give(Ask::Run {
        id,
        command,
        answer,
    })?;
    match answered.await {
        Ok(Some(run)) => Ok(Json(run)),
        Ok(None) => Err(Problem::new(
            Code::NotRunning,
            format!("run {id} has ended"),
        )),
        Err(_) => Err(Problem::new(
            Code::WorkerEnded,
            "the sink's worker has ended",
        )),
    }
}

pub(super) fn in_progress(app: &App, id: Uuid) -> Option<(&SinkHandle, RunView)> {
    app.sinks.iter().find_map(|sink| {
        let run = sink.view().run.filter(|run| run.id == id)?;
        Some((sink, run))
    })
}

/// A run in progress, or one that has ended.
fn run_of(app: &App, id: Uuid) -> Option<RunView> {
    // In this order: a run that ends is among the ended before its sink shows it no more.
    let running = in_progress(app, id).map(|(_, run)| run);
    app.context.ended.get(id).or(running)
}

pub(super) fn no_such_run(id: Uuid) -> Problem {
    let detail = format!("no run {id}; its record, if there is one, is /v1/records/{id}");
    Problem::new(Code::NoSuchRun, detail)
}
