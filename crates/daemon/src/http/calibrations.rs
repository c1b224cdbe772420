//! Calibrations and certificates.

use std::sync::Arc;

use axum::Json;
use axum::extract::{Path, State};
use axum::http::HeaderMap;
use axum::response::Response;
use serde::Deserialize;
use utoipa::IntoParams;
use uuid::Uuid;

use super::extract::{JsonBytes, Params, id_of};
use super::problem::aside;
use super::{hand, runs};
use crate::app::App;
use crate::calibrating;
use crate::certificates::CertificatesError;
use crate::view::{
    CalibrationOutcome, CalibrationRequest, CalibrationView, CertificateList, Code, MeterReading,
    Problem,
};

/// Where calibrations are.
const CALIBRATIONS: &str = "/v1/calibrations";

/// Begins a calibration, or the verification of a certificate: the first setpoint is held, and
/// must be asked for again (`POST /v1/runs/{id}/renew`) within its interval like any by hand. Every
/// setpoint is checked before anything flows. An `Idempotency-Key` makes a repeated request
/// harmless.
#[utoipa::path(
    post, path = "/v1/calibrations", tag = "calibrations",
    request_body = CalibrationRequest,
    params(("Idempotency-Key" = Option<String>, Header, description = "1 to 255 printable characters, new for each calibration that is meant")),
    responses(
        (status = 201, body = CalibrationView, description = "Begun; Location names it"),
        (status = 303, description = "Begun before, with the same key; Location names it"),
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
    let request: CalibrationRequest = aside(move || body.parse()).await?;
    let working = Arc::clone(&app);
    runs::once(&app, &headers, bytes, CALIBRATIONS, |id| async move {
        let checking = Arc::clone(&working);
        let (hand, prepared) = aside(move || calibrating::prepare(&checking, request)).await?;
        hand::try_begin(&working, hand, id).await?;
        prepared.began(&working, id);
        calibrating::view(&working, id).await
    })
    .await
}

/// How a calibration stands: which setpoint is held, whether it has settled, what is read back.
#[utoipa::path(
    get, path = "/v1/calibrations/{id}", tag = "calibrations",
    params(("id" = String, Path, description = "The calibration's id")),
    responses((status = 200, body = CalibrationView), (status = 404, body = Problem)),
)]
pub(super) async fn one(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<CalibrationView>, Problem> {
    calibrating::view(&app, id_here(&id)?).await.map(Json)
}

/// Gives what the meters read at the setpoint that is held. The latest readbacks are taken beside
/// it, and the next setpoint is set, for another interval; after the last one, 0 A.
#[utoipa::path(
    post, path = "/v1/calibrations/{id}/reading", tag = "calibrations",
    params(("id" = String, Path, description = "The calibration's id")),
    request_body = MeterReading,
    responses(
        (status = 200, body = CalibrationView),
        (status = 404, body = Problem),
        (status = 409, body = Problem, description = "It has not settled, or its run is over"),
        (status = 422, body = Problem),
    ),
)]
pub(super) async fn reading(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
    body: JsonBytes,
) -> Result<Json<CalibrationView>, Problem> {
    let read: MeterReading = body.parse()?;
    calibrating::take(&app, id_here(&id)?, read).await.map(Json)
}

/// Fits what was taken and writes the certificate, or judges the verification; then the run is
/// stopped. Takes no body.
#[utoipa::path(
    post, path = "/v1/calibrations/{id}/finish", tag = "calibrations",
    params(("id" = String, Path, description = "The calibration's id")),
    responses(
        (status = 200, body = CalibrationOutcome),
        (status = 404, body = Problem),
        (status = 409, body = Problem),
        (status = 422, body = Problem, description = "The points give no certificate; the run goes on"),
    ),
)]
pub(super) async fn finish(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<CalibrationOutcome>, Problem> {
    calibrating::finish(&app, id_here(&id)?).await.map(Json)
}

fn id_here(text: &str) -> Result<Uuid, Problem> {
    id_of(text, Code::NoSuchCalibration)
}

/// Which certificates.
#[derive(Debug, Deserialize, IntoParams)]
#[serde(deny_unknown_fields)]
#[into_params(parameter_in = Query)]
pub(super) struct Filter {
    /// Only those of this sink.
    sink: Option<String>,
}

/// The certificates beside the bench file, by sink and date, each with what has changed since the
/// one before and with its verifications.
#[utoipa::path(
    get, path = "/v1/certificates", tag = "calibrations", params(Filter),
    responses((status = 200, body = CertificateList), (status = 400, body = Problem)),
)]
pub(super) async fn certificates(
    State(app): State<Arc<App>>,
    Params(filter): Params<Filter>,
) -> Result<Json<CertificateList>, Problem> {
    aside(move || {
        let now = app.clock.now().micros().div_euclid(1_000_000);
        let list = app.certificates.list(filter.sink.as_deref(), now);
        list.map(Json).map_err(|error| problem(&error))
    })
    .await
}

/// One certificate, whole: points, statement, correction, covariance, residuals.
#[utoipa::path(
    get, path = "/v1/certificates/{identity}", tag = "calibrations",
    params(("identity" = String, Path, description = "The certificate's identity")),
    responses((status = 200, body = Object), (status = 404, body = Problem)),
)]
pub(super) async fn certificate(
    State(app): State<Arc<App>>,
    Path(identity): Path<String>,
) -> Result<Json<sink::calibration::Certificate>, Problem> {
    aside(move || {
        let certificate = app.certificates.load(&identity);
        certificate.map(Json).map_err(|error| problem(&error))
    })
    .await
}

fn problem(error: &CertificatesError) -> Problem {
    let code = match error {
        CertificatesError::Missing { .. } | CertificatesError::Identity(_) => {
            Code::NoSuchCertificate
        }
        CertificatesError::Exists(_) | CertificatesError::Unsound { .. } => {
            Code::CalibrationRefused
        }
        CertificatesError::Disk { .. } => Code::RecordUnreadable,
    };
    Problem::new(code, error.to_string())
}
