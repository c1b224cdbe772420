//! A record's readbacks over time, thinned or whole, and its course.

use std::ops::Range;
use std::sync::Arc;

use axum::Json;
use axum::extract::{Path, State};
use axum::http::{HeaderMap, header};
use axum::response::{IntoResponse, Response};
use journal::{Grain, Record};
use quantity::{HostTime, Span};
use serde::Deserialize;
use tokio::sync::OwnedSemaphorePermit;
use utoipa::IntoParams;
use uuid::Uuid;

use super::export::{CSV, Table, export};
use super::extract::{Media, Params, accepted};
use super::records::with_record;
use crate::app::App;
use crate::records::started;
use crate::sketch::Look;
use crate::view::{Code, CourseView, CurveView, Problem, ReadingsView};

/// Points unless said.
const POINTS_USUAL: u32 = 1_000;
/// Most points at once.
const POINTS_MAX: u32 = 20_000;

/// Which readbacks.
#[derive(Debug, Deserialize, IntoParams)]
#[serde(deny_unknown_fields)]
#[into_params(parameter_in = Query)]
pub(super) struct Stretch {
    /// From this time since the start of the run; its beginning unless said.
    from_s: Option<f64>,
    /// To this time since the start of the run; its end unless said.
    to_s: Option<f64>,
    /// Most points: each keeps the extremes of the readbacks in its stretch of time. 1000 unless
    /// said. A CSV without `points`, `from_s` and `to_s` is the whole record, one row a readback;
    /// Parquet always is.
    points: Option<u32>,
}

/// Readbacks of a record, thinned with extremes kept. Works on a record that is being written.
#[utoipa::path(
    get, path = "/v1/records/{id}/readings", tag = "records",
    params(("id" = String, Path, description = "The record's id"), Stretch),
    responses(
        (status = 200, content(
            (ReadingsView = "application/json"),
            (String = "text/csv"),
            (Vec<u8> = "application/vnd.apache.parquet"),
        )),
        (status = 400, body = Problem),
        (status = 404, body = Problem),
        (status = 406, body = Problem),
    ),
)]
pub(super) async fn readings(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
    Params(stretch): Params<Stretch>,
    headers: HeaderMap,
) -> Result<Response, Problem> {
    let media = accepted(&headers)?;
    let whole = stretch.points.is_none() && stretch.from_s.is_none() && stretch.to_s.is_none();
    match media {
        Media::Csv if whole => return export(&app, &id, Table::Csv).await,
        Media::Parquet if whole => return export(&app, &id, Table::Parquet).await,
        Media::Parquet => {
            let detail = "Parquet is given of the whole record: leave out points, from_s and to_s";
            return Err(Problem::new(Code::QueryUnreadable, detail));
        }
        Media::Json | Media::Csv => {}
    }
    let working = Arc::clone(&app);
    let view = with_record(&app, &id, move |record, id| {
        thinned(&working, record, id, &stretch)
    })
    .await?;
    Ok(match media {
        Media::Json | Media::Parquet => Json(view).into_response(),
        Media::Csv => ([(header::CONTENT_TYPE, CSV)], csv_of(&view.curve)).into_response(),
    })
}

/// How a run went: its steps by their labels, and what happened. Works on a record that is being
/// written.
#[utoipa::path(
    get, path = "/v1/records/{id}/course", tag = "records",
    params(("id" = String, Path, description = "The record's id")),
    responses((status = 200, body = CourseView), (status = 404, body = Problem)),
)]
pub(super) async fn course(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<CourseView>, Problem> {
    let working = Arc::clone(&app);
    with_record(&app, &id, move |record, id| {
        let unreadable = |error: journal::JournalError| {
            Problem::new(Code::RecordUnreadable, format!("record {id}: {error}"))
        };
        let course = working.sketches.course(record);
        course.map(Json).map_err(unreadable)
    })
    .await
}

fn thinned(
    app: &Arc<App>,
    record: &Record,
    id: Uuid,
    stretch: &Stretch,
) -> Result<ReadingsView, Problem> {
    let unreadable = |error: journal::JournalError| {
        Problem::new(Code::RecordUnreadable, format!("record {id}: {error}"))
    };
    let points = stretch.points.unwrap_or(POINTS_USUAL);
    if !(1..=POINTS_MAX).contains(&points) {
        let detail = format!("points={points}; 1 to {POINTS_MAX} can be asked for");
        return Err(Problem::new(Code::QueryUnreadable, detail));
    }
    let start = started(record);
    let from = stretch.from_s.map(|from| after(start, from)).transpose()?;
    let to = stretch.to_s.map(|to| after(start, to)).transpose()?;
    let running = app
        .sinks
        .iter()
        .any(|sink| sink.view().run.is_some_and(|run| run.id == id));
    let Look {
        length,
        grains,
        next,
    } = app
        .sketches
        .look(record, &(from..to), points)
        .map_err(unreadable)?;
    if let Some(next) = next {
        read_ahead(app, record, next);
    }
    Ok(ReadingsView {
        id,
        in_progress: running,
        length_s: length.seconds(),
        curve: curve_of(&grains, start),
    })
}

/// Reads what the next look will probably be at while this one is answered and looked at, if one
/// of the readers is free.
fn read_ahead(app: &Arc<App>, record: &Record, next: Range<HostTime>) {
    let Ok(permit) = Arc::clone(&app.bounds.readers).try_acquire_owned() else {
        return;
    };
    let (app, record) = (Arc::clone(app), record.clone());
    tokio::task::spawn_blocking(move || {
        let _permit: OwnedSemaphorePermit = permit;
        app.sketches.read_ahead(&record, &next);
    });
}

fn after(start: HostTime, seconds: f64) -> Result<HostTime, Problem> {
    Span::from_seconds(seconds.max(0.0))
        .map(|span| start.saturating_add(span))
        .map_err(|error| Problem::new(Code::QueryUnreadable, error.to_string()))
}

fn curve_of(grains: &[Grain], start: HostTime) -> CurveView {
    let mut view = CurveView::default();
    for Grain { bucket, charge } in grains {
        view.charge_ah.push(Some(charge.ampere_hours()));
        view.time_s
            .push(bucket.first_at.saturating_since(start).seconds());
        view.readbacks.push(bucket.count);
        view.current_a.push(bucket.current.mean.amperes());
        view.current_min_a.push(bucket.current.min.amperes());
        view.current_max_a.push(bucket.current.max.amperes());
        view.voltage_v.push(bucket.voltage.mean.volts());
        view.voltage_min_v.push(bucket.voltage.min.volts());
        view.voltage_max_v.push(bucket.voltage.max.volts());
        let temperature = bucket.temperature;
        view.temperature_degc
            .push(temperature.map(|all| all.mean.degrees_celsius()));
        view.temperature_max_degc
            .push(temperature.map(|all| all.max.degrees_celsius()));
    }
    view
}

fn csv_of(curve: &CurveView) -> String {
    let numbers = |column: &[f64]| column.iter().map(ToString::to_string).collect();
    let gaps = |column: &[Option<f64>]| {
        column
            .iter()
            .map(|value| value.map_or_else(String::new, |value| value.to_string()))
            .collect()
    };
    let columns: [(&str, Vec<String>); 11] = [
        ("time_s", numbers(&curve.time_s)),
        (
            "readbacks",
            curve.readbacks.iter().map(ToString::to_string).collect(),
        ),
        ("current_a", numbers(&curve.current_a)),
        ("current_min_a", numbers(&curve.current_min_a)),
        ("current_max_a", numbers(&curve.current_max_a)),
        ("voltage_v", numbers(&curve.voltage_v)),
        ("voltage_min_v", numbers(&curve.voltage_min_v)),
        ("voltage_max_v", numbers(&curve.voltage_max_v)),
        ("temperature_degc", gaps(&curve.temperature_degc)),
        ("temperature_max_degc", gaps(&curve.temperature_max_degc)),
        ("charge_ah", gaps(&curve.charge_ah)),
    ];
    let names: Vec<&str> = columns.iter().map(|(name, _)| *name).collect();
    let mut text = names.join(",") + "\r\n";
    for row in 0..curve.time_s.len() {
        let cells: Vec<&str> = columns
            .iter()
            .filter_map(|(_, column)| column.get(row).map(String::as_str))
            .collect();
        text.push_str(&cells.join(","));
        text.push_str("\r\n");
    }
    text
}
