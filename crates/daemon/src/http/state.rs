//! How the daemon itself stands: health, readiness, metrics.

use std::sync::Arc;

use axum::Json;
use axum::extract::State;
use axum::http::{StatusCode, header};
use axum::response::IntoResponse;

use crate::app::App;
use crate::view::{HealthView, LinkState};

/// Whether the process lives and every sink has a worker.
#[utoipa::path(
    get, path = "/health", tag = "state",
    responses((status = 200, body = HealthView), (status = 503, body = HealthView)),
)]
pub(super) async fn health(State(app): State<Arc<App>>) -> impl IntoResponse {
    let dead = app
        .sinks
        .iter()
        .filter(|sink| sink.snapshot.has_changed().is_err());
    answer(
        dead.map(|sink| format!("the worker of sink `{}` has ended", sink.name()))
            .collect(),
    )
}

/// Whether a session stands with every sink.
#[utoipa::path(
    get, path = "/ready", tag = "state",
    responses((status = 200, body = HealthView), (status = 503, body = HealthView)),
)]
pub(super) async fn ready(State(app): State<Arc<App>>) -> impl IntoResponse {
    let missing = app.sinks.iter().filter_map(|sink| {
        let link = sink.view().link;
        let reason = link
            .reason
            .map_or_else(String::new, |why| format!(": {why}"));
        (link.state != LinkState::Connected)
            .then(|| format!("no session stands with sink `{}`{reason}", sink.name()))
    });
    answer(missing.collect())
}

fn answer(troubles: Vec<String>) -> (StatusCode, Json<HealthView>) {
    let status = if troubles.is_empty() {
        StatusCode::OK
    } else {
        StatusCode::SERVICE_UNAVAILABLE
    };
    let ok = troubles.is_empty();
    (status, Json(HealthView { ok, troubles }))
}

/// Metrics in the Prometheus text format.
#[utoipa::path(
    get, path = "/metrics", tag = "state",
    responses((status = 200, content_type = "text/plain", body = String)),
)]
pub(super) async fn metrics(State(app): State<Arc<App>>) -> impl IntoResponse {
    let media = "application/openmetrics-text; version=1.0.0; charset=utf-8";
    ([(header::CONTENT_TYPE, media)], app.context.metrics.text())
}
