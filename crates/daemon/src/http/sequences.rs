//! Sequences: check and rehearse.

use std::sync::Arc;

use axum::Json;
use axum::extract::State;

use super::extract::JsonBytes;
use super::problem::aside;
use crate::app::App;
use crate::rehearsing::{self, OUTLINE_POINTS};
use crate::starting;
use crate::view::{CheckView, Code, Problem, RehearsalView, RehearseRequest, SequenceRequest};

/// Checks a sequence for a sink. Nothing is started.
#[utoipa::path(
    post, path = "/v1/sequences/check", tag = "sequences",
    request_body = SequenceRequest,
    responses(
        (status = 200, body = CheckView, description = "It may run; findings are warnings"),
        (status = 404, body = Problem),
        (status = 422, body = Problem, description = "It is refused; the findings say why"),
    ),
)]
pub(super) async fn check(
    State(app): State<Arc<App>>,
    body: JsonBytes,
) -> Result<Json<CheckView>, Problem> {
    aside(move || {
        let request: SequenceRequest = body.parse()?;
        let sink = app.sink(&request.sink)?;
        let compiled = starting::check(&app, sink, &request)?;
        Ok(Json(CheckView::new(&compiled, OUTLINE_POINTS)))
    })
    .await
}

/// Rehearses a sequence for a sink in virtual time, against a simulated source.
#[utoipa::path(
    post, path = "/v1/sequences/rehearse", tag = "sequences",
    request_body = RehearseRequest,
    responses(
        (status = 200, body = RehearsalView),
        (status = 404, body = Problem),
        (status = 422, body = Problem),
        (status = 503, body = Problem, description = "Others are being rehearsed; try again"),
    ),
)]
pub(super) async fn rehearse(
    State(app): State<Arc<App>>,
    body: JsonBytes,
) -> Result<Json<RehearsalView>, Problem> {
    let permit = Arc::clone(&app.bounds.rehearsals).try_acquire_owned();
    let Ok(permit) = permit else {
        let detail = "another rehearsal is under way; try again when it is done";
        return Err(Problem::new(Code::TooManyRehearsals, detail));
    };
    aside(move || {
        // Held by the work, not by the request: a client that leaves frees no core.
        let _permit = permit;
        let request: RehearseRequest = body.parse()?;
        let sink = app.sink(&request.sink)?;
        let sequence = SequenceRequest {
            sequence: request.sequence.clone(),
            files: request.files.clone(),
            sink: request.sink.clone(),
            dut: request.dut.clone(),
        };
        let compiled = starting::check(&app, sink, &sequence)?;
        rehearsing::run(sink, &request, compiled).map(Json)
    })
    .await
}

/// The JSON Schema of a sequence file.
#[utoipa::path(
    get, path = "/v1/sequence-schema.json", tag = "sequences",
    responses((status = 200, body = Object)),
)]
pub(super) async fn schema() -> Json<serde_json::Value> {
    Json(sequence::schema())
}
