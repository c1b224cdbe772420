//! Records: the list, one, its readbacks, its figures, whether it is as it was written.

use std::io::{self, Write};
use std::ops::Range;
use std::sync::Arc;
use std::time::Duration;

use axum::Json;
use axum::body::{Body, Bytes};
use axum::extract::{Path, State};
use axum::http::{HeaderMap, header};
use axum::response::{IntoResponse, Response};
use columnar::export_parquet;
use journal::{Grain, Record, export_csv};
use quantity::{HostTime, Span};
use serde::Deserialize;
use tokio::runtime::Handle;
use tokio::sync::{OwnedSemaphorePermit, mpsc};
use tokio::time::timeout;
use utoipa::IntoParams;
use uuid::Uuid;

use super::extract::{Media, Params, accepted, id_of};
use super::problem::aside;
use crate::app::App;
use crate::figures_file;
use crate::records::started;
use crate::sketch::Look;
use crate::view::{
    Code, ComparisonView, CourseView, CurveView, EndingWord, FiguresView, PeukertView, Problem,
    ReadingsView, RecordList, RecordSummary, RecordView, VerifyView,
};

/// Points unless said.
const POINTS_USUAL: u32 = 1_000;
/// Most points at once.
const POINTS_MAX: u32 = 20_000;
/// Blocks of an export that may wait for a slow client.
const EXPORT_BLOCKS: usize = 8;
/// Bytes of a block.
const EXPORT_BLOCK_BYTES: usize = 64 << 10;
/// How long an export waits for a client that takes nothing.
const EXPORT_WAIT: Duration = Duration::from_secs(30);

/// Which records.
#[derive(Debug, Deserialize, IntoParams)]
#[serde(deny_unknown_fields)]
#[into_params(parameter_in = Query)]
pub(super) struct Filter {
    /// Only those of this device under test.
    dut: Option<String>,
    /// Only those of this sink.
    sink: Option<String>,
    /// Only those that ended so: `finished`, `stopped`, `tripped` or `interrupted`.
    #[param(value_type = Option<String>)]
    ending: Option<EndingWord>,
    /// Only those with a step of this label.
    label: Option<String>,
}

impl Filter {
    fn takes(&self, record: &RecordSummary) -> bool {
        let is = |wanted: &Option<String>, found: &str| {
            wanted.as_ref().is_none_or(|wanted| wanted == found)
        };
        is(&self.dut, &record.dut)
            && is(&self.sink, &record.sink)
            && self.ending.is_none_or(|wanted| {
                record
                    .ending
                    .as_ref()
                    .is_some_and(|ending| ending.how == wanted)
            })
            && self
                .label
                .as_ref()
                .is_none_or(|wanted| record.labels.contains(wanted))
    }
}

/// The records in the records folder, the latest first.
#[utoipa::path(
    get, path = "/v1/records", tag = "records", params(Filter),
    responses((status = 200, body = RecordList), (status = 400, body = Problem)),
)]
pub(super) async fn list(
    State(app): State<Arc<App>>,
    Params(filter): Params<Filter>,
) -> Result<Json<RecordList>, Problem> {
    aside(move || {
        let mut list = app.records.list().map_err(|error| {
            let detail = format!("the records folder cannot be read: {error}");
            Problem::new(Code::RecordUnreadable, detail)
        })?;
        list.records.retain(|record| filter.takes(record));
        Ok(Json(list))
    })
    .await
}

/// One record: its manifest, and how it ended.
#[utoipa::path(
    get, path = "/v1/records/{id}", tag = "records",
    params(("id" = String, Path, description = "The record's id")),
    responses((status = 200, body = RecordView), (status = 404, body = Problem)),
)]
pub(super) async fn one(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<RecordView>, Problem> {
    with_record(&app, &id, |record, id| {
        let name = record.folder().file_name().unwrap_or_default();
        let summary = crate::records::summary_of(&name.to_string_lossy(), record);
        let manifest = serde_json::to_value(record.manifest()).map_err(|error| {
            Problem::new(Code::RecordUnreadable, format!("record {id}: {error}"))
        })?;
        Ok(Json(RecordView { summary, manifest }))
    })
    .await
}

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

const CSV: &str = "text/csv; charset=utf-8; header=present";

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

/// The forms in which a whole record is given.
#[derive(Debug, Clone, Copy)]
enum Table {
    Csv,
    Parquet,
}

impl Table {
    fn media_type(self) -> &'static str {
        match self {
            Self::Csv => CSV,
            Self::Parquet => columnar::MEDIA_TYPE,
        }
    }

    fn write(self, record: &Record, out: &mut Blocks) -> io::Result<()> {
        match self {
            Self::Csv => export_csv(record, out, |_| {}).map_err(io::Error::other)?,
            Self::Parquet => export_parquet(record, &mut *out, |_| {}).map_err(io::Error::other)?,
        };
        out.flush()
    }
}

/// The whole record as a table, as fast as the client takes it.
async fn export(app: &Arc<App>, id: &str, table: Table) -> Result<Response, Problem> {
    let (record, permit) = open(app, id).await?;
    let (blocks, taken) = mpsc::channel(EXPORT_BLOCKS);
    let runtime = Handle::current();
    tokio::task::spawn_blocking(move || {
        let _permit: OwnedSemaphorePermit = permit;
        let mut out = Blocks {
            filling: Vec::with_capacity(EXPORT_BLOCK_BYTES),
            client: blocks.clone(),
            runtime,
        };
        if let Err(error) = table.write(&record, &mut out) {
            tracing::warn!("an export was cut off: {error}");
            // The client sees a body that is cut off, not one that seems whole.
            let _ = blocks.try_send(Err(error));
        }
    });
    let stream = tokio_stream::wrappers::ReceiverStream::new(taken);
    let media_type = [(header::CONTENT_TYPE, table.media_type())];
    Ok((media_type, Body::from_stream(stream)).into_response())
}

/// Hands an export over in blocks; waits for the client, but not for ever.
struct Blocks {
    filling: Vec<u8>,
    client: mpsc::Sender<io::Result<Bytes>>,
    runtime: Handle,
}

impl Write for Blocks {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.filling.extend_from_slice(bytes);
        if self.filling.len() >= EXPORT_BLOCK_BYTES {
            self.flush()?;
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        if self.filling.is_empty() {
            return Ok(());
        }
        let block = Bytes::from(std::mem::take(&mut self.filling));
        let sending = timeout(EXPORT_WAIT, self.client.send(Ok(block)));
        match self.runtime.block_on(sending) {
            Ok(Ok(())) => Ok(()),
            Ok(Err(_)) => Err(io::Error::other("the client has gone")),
            Err(_) => Err(io::Error::other("the client takes nothing")),
        }
    }
}

/// The figures of a record, worked out from the record alone.
#[utoipa::path(
    get, path = "/v1/records/{id}/figures", tag = "records",
    params(("id" = String, Path, description = "The record's id")),
    responses((status = 200, body = FiguresView), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn figures(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<FiguresView>, Problem> {
    with_record(&app, &id, |record, id| {
        let figures = figures_file::read(record)
            .map_err(|why| Problem::new(Code::FiguresUnavailable, format!("record {id}: {why}")))?;
        Ok(Json(FiguresView { id, figures }))
    })
    .await
}

/// The report of a record: one HTML page that fetches nothing. Works on a record that is being
/// written.
#[utoipa::path(
    get, path = "/v1/records/{id}/report", tag = "records",
    params(("id" = String, Path, description = "The record's id")),
    responses((status = 200, content((String = "text/html"))), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn report(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Response, Problem> {
    let page = with_record(&app, &id, |record, id| {
        // A record without a readback has a report, too: it says so.
        let figures =
            figures_file::read(record).unwrap_or_else(|reason| report::no_figures(record, &reason));
        let options = report::Options {
            made: Some(jiff::Timestamp::now().to_string()),
        };
        report::render(record, &figures, &options)
            .map_err(|why| Problem::new(Code::RecordUnreadable, format!("record {id}: {why}")))
    })
    .await?;
    Ok(([(header::CONTENT_TYPE, "text/html; charset=utf-8")], page).into_response())
}

/// Which records to compare.
#[derive(Debug, Deserialize, IntoParams)]
#[serde(deny_unknown_fields)]
#[into_params(parameter_in = Query)]
pub(super) struct Groups {
    /// The groups: `NAME:ID,ID,...`, several of them apart by `;`.
    groups: String,
}

/// Most records in one comparison.
const COMPARED_MAX: usize = 64;

/// Groups of records compared, figure by figure: means, spreads, differences.
#[utoipa::path(
    get, path = "/v1/comparison", tag = "records", params(Groups),
    responses((status = 200, body = ComparisonView), (status = 400, body = Problem), (status = 404, body = Problem), (status = 409, body = Problem)),
)]
pub(super) async fn comparison(
    State(app): State<Arc<App>>,
    Params(asked): Params<Groups>,
) -> Result<Json<ComparisonView>, Problem> {
    let unreadable = |part: &str| {
        let detail = format!("`{part}` is no group; write NAME:ID,ID,... and `;` between groups");
        Problem::new(Code::QueryUnreadable, detail)
    };
    let mut groups = Vec::new();
    let mut count = 0;
    for part in asked.groups.split(';').filter(|part| !part.is_empty()) {
        let (name, ids) = part.split_once(':').ok_or_else(|| unreadable(part))?;
        let mut records = Vec::new();
        for id in ids.split(',').filter(|id| !id.is_empty()) {
            count += 1;
            if count > COMPARED_MAX {
                let detail = format!("more than {COMPARED_MAX} records cannot be compared at once");
                return Err(Problem::new(Code::QueryUnreadable, detail));
            }
            let figures = with_record(&app, id, |record, id| {
                figures_file::read(record).map_err(|why| {
                    Problem::new(Code::FiguresUnavailable, format!("record {id}: {why}"))
                })
            });
            records.push(figures.await?);
        }
        if name.is_empty() || records.is_empty() {
            return Err(unreadable(part));
        }
        groups.push((name, records));
    }
    // Records at one rate, or without a cut-off, are no fault: they have no exponent.
    let peukert = groups.iter().filter_map(|(name, records)| {
        let law = figures::peukert(records).ok()?;
        let group = (*name).to_owned();
        Some(PeukertView { group, law })
    });
    Ok(Json(ComparisonView {
        peukert: peukert.collect(),
        comparison: figures::compare(&groups),
    }))
}

/// Whether anything in a record was altered, and where.
#[utoipa::path(
    get, path = "/v1/records/{id}/verify", tag = "records",
    params(("id" = String, Path, description = "The record's id")),
    responses((status = 200, body = VerifyView), (status = 404, body = Problem)),
)]
pub(super) async fn verify(
    State(app): State<Arc<App>>,
    Path(id): Path<String>,
) -> Result<Json<VerifyView>, Problem> {
    with_record(&app, &id, |record, id| {
        let unreadable =
            |error: String| Problem::new(Code::RecordUnreadable, format!("record {id}: {error}"));
        let report =
            journal::verify(record.folder()).map_err(|error| unreadable(error.to_string()))?;
        let intact = report.is_intact();
        let report = serde_json::to_value(report).map_err(|error| unreadable(error.to_string()))?;
        Ok(Json(VerifyView { intact, report }))
    })
    .await
}

/// Opens a record, as one of a bounded number of readers.
async fn open(app: &Arc<App>, id: &str) -> Result<(Record, OwnedSemaphorePermit), Problem> {
    let id = id_of(id, Code::NoSuchRecord)?;
    let permit = Arc::clone(&app.bounds.readers).acquire_owned().await;
    let permit =
        permit.map_err(|_| Problem::new(Code::ShuttingDown, "records are not read any more"))?;
    let app = Arc::clone(app);
    let record = aside(move || {
        app.records
            .find(id)
            .map_err(|error| Problem::new(Code::RecordUnreadable, format!("record {id}: {error}")))?
            .ok_or_else(|| {
                let folder = app.records.folder().display();
                Problem::new(Code::NoSuchRecord, format!("no record {id} in {folder}"))
            })
    })
    .await?;
    Ok((record, permit))
}

async fn with_record<T: Send + 'static>(
    app: &Arc<App>,
    id: &str,
    work: impl FnOnce(&Record, Uuid) -> Result<T, Problem> + Send + 'static,
) -> Result<T, Problem> {
    let (record, permit) = open(app, id).await?;
    let id = id_of(id, Code::NoSuchRecord)?;
    aside(move || {
        let _permit = permit;
        work(&record, id)
    })
    .await
}
