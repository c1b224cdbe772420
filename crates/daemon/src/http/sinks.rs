//! Sinks: how they stand, off, reset.

use std::sync::Arc;
use std::time::Duration;

use axum::Json;
use axum::extract::{Path, State};
use futures_util::future::join_all;
use tokio::sync::oneshot;
use tokio::task::spawn_blocking;
use tokio::time::timeout;

use crate::app::App;
use crate::latches;
use crate::sinks::SinkHandle;
use crate::view::{Code, OffList, OffView, Problem, ResetView, SinkList, SinkView};
use crate::worker::{Ask, NotReset};

/// How long a reset waits for the sink's answer.
const RESET_WAIT: Duration = Duration::from_secs(3);

/// Every sink of the bench.
#[utoipa::path(get, path = "/v1/sinks", tag = "sinks", responses((status = 200, body = SinkList)))]
pub(super) async fn list(State(app): State<Arc<App>>) -> Json<SinkList> {
    Json(SinkList {
        bench: app.bench.clone(),
        sinks: app.sinks.iter().map(SinkHandle::view).collect(),
    })
}

/// One sink.
#[utoipa::path(
    get, path = "/v1/sinks/{sink}", tag = "sinks",
    params(("sink" = String, Path, description = "The sink's name")),
    responses((status = 200, body = SinkView), (status = 404, body = Problem)),
)]
pub(super) async fn one(
    State(app): State<Arc<App>>,
    Path(name): Path<String>,
) -> Result<Json<SinkView>, Problem> {
    Ok(Json(app.sink(&name)?.view()))
}

/// Off, now. Takes no body. Answered when the sink has said so, or after 1 s with what is known.
/// A run in progress ends as stopped.
#[utoipa::path(
    post, path = "/v1/sinks/{sink}/off", tag = "sinks",
    params(("sink" = String, Path, description = "The sink's name")),
    responses((status = 200, body = OffView), (status = 404, body = Problem)),
)]
pub(super) async fn off(
    State(app): State<Arc<App>>,
    Path(name): Path<String>,
) -> Result<Json<OffView>, Problem> {
    Ok(Json(app.sink(&name)?.off().await))
}

/// Off, now, for every sink. Takes no body.
#[utoipa::path(post, path = "/v1/off", tag = "sinks", responses((status = 200, body = OffList)))]
pub(super) async fn off_all(State(app): State<Arc<App>>) -> Json<OffList> {
    let sinks = join_all(app.sinks.iter().map(SinkHandle::off)).await;
    Json(OffList {
        acknowledged: sinks.iter().all(|sink| sink.acknowledged),
        sinks,
    })
}

/// Clears a latch whose cause is gone. Takes no body.
#[utoipa::path(
    post, path = "/v1/sinks/{sink}/reset", tag = "sinks",
    params(("sink" = String, Path, description = "The sink's name")),
    responses(
        (status = 200, body = ResetView),
        (status = 404, body = Problem),
        (status = 409, body = Problem),
    ),
)]
pub(super) async fn reset(
    State(app): State<Arc<App>>,
    Path(name): Path<String>,
) -> Result<Json<ResetView>, Problem> {
    let sink = app.sink(&name)?;
    let (answer, answered) = oneshot::channel();
    sink.give(Ask::Reset(answer))?;
    let refused = match timeout(RESET_WAIT, answered).await {
        Ok(Ok(Ok(()))) => {
            remember_reset(Arc::clone(&app), name.clone()).await;
            return Ok(Json(ResetView {
                sink: name,
                reset: true,
            }));
        }
        Ok(Ok(Err(NotReset::Busy))) => {
            let detail = format!("a run is in progress on sink `{name}`; stop it first");
            Problem::new(Code::SinkBusy, detail)
        }
        Ok(Ok(Err(NotReset::NotConnected))) => {
            let detail = format!("no session stands with sink `{name}`; connect it first");
            Problem::new(Code::SinkNotConnected, detail)
        }
        Ok(Ok(Err(NotReset::Refused(reason)))) => {
            let reason = crate::metrics::word(&reason);
            let detail = format!(
                "sink `{name}` refuses to be reset ({reason}); see to the cause of its latch first"
            );
            Problem::new(Code::ResetRefused, detail)
        }
        Ok(Err(_)) | Err(_) => {
            let detail = format!("sink `{name}` has not answered");
            Problem::new(Code::ResetRefused, detail)
        }
    };
    Err(refused)
}

/// The latch is clear whether or not that can be written down; if not, it is back after a restart.
async fn remember_reset(app: Arc<App>, name: String) {
    let noted = spawn_blocking(move || latches::note_reset(&app.records, &name)).await;
    if let Ok(Err(error)) = noted {
        tracing::warn!("the reset could not be written down: {error}");
    }
}
