//! The interface's description, generated from the code that serves it.

use std::sync::Arc;

use axum::routing::get;
use axum::{Json, Router};
use utoipa::OpenApi;
use utoipa::openapi::OpenApi as Document;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{calibrations, events, hand, readings, records, runs, sequences, sinks, state};
use crate::app::App;
use crate::view::{Code, GoneEvent, LinkEvent, Problem, RunEvent};

#[derive(OpenApi)]
#[openapi(
    info(
        title = "Sinkwarden",
        description = "Drives current sinks, unattended and on the record. Quantities in answers are plain numbers whose names carry the unit; quantities in what is sent are text with their unit; times are RFC 3339. Errors are problem details (RFC 9457).",
    ),
    components(schemas(Problem, Code, RunEvent, LinkEvent, GoneEvent))
)]
struct Head;

/// The routes of the interface, and their description.
pub(super) fn parts() -> (Router<Arc<App>>, Document) {
    OpenApiRouter::with_openapi(Head::openapi())
        .routes(routes!(sinks::list))
        .routes(routes!(sinks::one))
        .routes(routes!(sinks::off))
        .routes(routes!(sinks::off_all))
        .routes(routes!(sinks::reset))
        .routes(routes!(sequences::check))
        .routes(routes!(sequences::rehearse))
        .routes(routes!(sequences::schema))
        .routes(routes!(runs::list, runs::start))
        .routes(routes!(hand::begin))
        .routes(routes!(hand::setpoint))
        .routes(routes!(hand::renew))
        .routes(routes!(runs::one))
        .routes(routes!(runs::stop))
        .routes(routes!(runs::hold))
        .routes(routes!(runs::go_on))
        .routes(routes!(calibrations::begin))
        .routes(routes!(calibrations::one))
        .routes(routes!(calibrations::reading))
        .routes(routes!(calibrations::finish))
        .routes(routes!(calibrations::certificates))
        .routes(routes!(calibrations::certificate))
        .routes(routes!(records::list))
        .routes(routes!(records::one))
        .routes(routes!(readings::readings))
        .routes(routes!(readings::course))
        .routes(routes!(records::figures))
        .routes(routes!(records::report))
        .routes(routes!(records::comparison))
        .routes(routes!(records::verify))
        .routes(routes!(events::stream))
        .routes(routes!(state::health))
        .routes(routes!(state::ready))
        .routes(routes!(state::metrics))
        .split_for_parts()
}

/// Where the description itself is served, and what the codes of problems mean.
pub(super) fn routes(document: Document) -> Router<Arc<App>> {
    Router::new()
        .route(
            "/v1/openapi.json",
            get(move || {
                let document = document.clone();
                async move { Json(document) }
            }),
        )
        .route("/v1/problems", get(problems))
}

/// Every code with its status and meaning.
async fn problems() -> Json<Vec<Problem>> {
    let list = Code::ALL
        .iter()
        .map(|code| Problem::new(*code, code.title()));
    Json(list.collect())
}
