//! Driving a setpoint by hand: begin, set, ask again.

use std::sync::Arc;

use axum::Json;
use axum::extract::{Path, State};
use axum::http::HeaderMap;
use axum::response::Response;
use uuid::Uuid;

use super::extract::{JsonBytes, id_of};
use super::problem::aside;
use super::runs::{self, RUNS, in_progress, no_such_run};
use crate::app::App;
use crate::by_hand;
use crate::starting;
use crate::view::{Code, HandRequest, Problem, RunView, SetpointRequest};

/// Begins a run by hand. Every setpoint holds for `interval` and no longer, unless it is asked
/// for again: a script that dies leaves a sink that goes off by itself. Interlocks hold and all is
/// recorded, as in any run. An `Idempotency-Key` makes a repeated request harmless.
#[utoipa::path(
    post, path = "/v1/runs/by-hand", tag = "runs",
    request_body = HandRequest,
    params(("Idempotency-Key" = Option<String>, Header, description = "1 to 255 printable characters, new for each run that is meant")),
    responses(
        (status = 201, body = RunView, description = "Begun; Location names the run"),
        (status = 200, body = RunView, description = "Begun before, with the same key"),
        (status = 303, description = "Begun before and over since; Location names its record"),
        (status = 404, body = Problem),
        (status = 409, body = Problem),
        (status = 422, body = Problem),
        (status = 507, body = Problem),
    ),
)]
pub(super) async fn begin(
    State(app): State<Arc<App>>,
    headers: HeaderMap,
    body: JsonBytes,
) -> Result<Response, Problem> {
    let bytes = body.0.clone();
    let request: HandRequest = aside(move || body.parse()).await?;
    let working = Arc::clone(&app);
    runs::once(&app, &headers, bytes, RUNS, |id| async move {
        try_begin(&working, request, id).await
    })
    .await
}

/// Begins a run by hand under an id.
pub(super) async fn try_begin(
    app: &Arc<App>,
    request: HandRequest,
    id: Uuid,
) -> Result<RunView, Problem> {
    let name = request.sink.clone();
    runs::begun(app, &name, move |app, sink| {
        let beginning = starting::start_by_hand(app, sink, &request, id)?;
        app.hands.began(id, request);
        Ok(beginning)
    })
    .await
}

/// Sets the current of a run by hand, and holds it for another interval; an empty object holds
/// what is set. Checked like a step of a sequence.
#[utoipa::path(
    post, path = "/v1/runs/{id}/setpoint", tag = "runs",
    params(("id" = String, Path, description = "The run's id")),
    request_body = SetpointRequest,
    responses(
        (status = 200, body = RunView),
        (status = 404, body = Problem),
        (status = 409, body = Problem),
        (status = 422, body = Problem, description = "The check refuses it; what was set is held until its interval ends"),
    ),
)]
pub(super) async fn setpoint(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
    body: JsonBytes,
) -> Result<Json<RunView>, Problem> {
    let wanted: SetpointRequest = body.parse()?;
    set(&app, &id, wanted).await
}

/// Holds what is set for another interval. Takes no body.
#[utoipa::path(
    post, path = "/v1/runs/{id}/renew", tag = "runs",
    params(("id" = String, Path, description = "The run's id")),
    responses((status = 200, body = RunView), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn renew(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<RunView>, Problem> {
    set(&app, &id, SetpointRequest::default()).await
}

async fn set(app: &Arc<App>, id: &str, wanted: SetpointRequest) -> Result<Json<RunView>, Problem> {
    let id: Uuid = id_of(id, Code::NoSuchRun)?;
    let Some((sink, _)) = in_progress(app, id) else {
        return Err(match app.context.ended.get(id) {
            Some(run) => {
                let why = run.ending.and_then(|ending| ending.reason);
                let why = why.map_or_else(String::new, |why| format!(": {why}"));
                Problem::new(Code::NotRunning, format!("run {id} has ended{why}"))
            }
            None => no_such_run(id),
        });
    };
    by_hand::set(app, sink, id, wanted).await.map(Json)
}
