//! Records: the list, one, its figures and report, several compared, whether one is as it was
//! written.

use std::sync::Arc;

use axum::Json;
use axum::extract::{Path, State};
use axum::http::header;
use axum::response::{IntoResponse, Response};
use journal::Record;
use serde::Deserialize;
use tokio::sync::OwnedSemaphorePermit;
use utoipa::IntoParams;
use uuid::Uuid;

use super::extract::{Params, id_of};
use super::problem::aside;
use crate::app::App;
use crate::figures_file;
use crate::view::{
    Code, ComparisonView, EndingWord, FiguresView, PeukertView, Problem, RecordList, RecordSummary,
    RecordView, VerifyView,
};

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
pub(super) async fn open(
    app: &Arc<App>,
    id: &str,
) -> Result<(Record, OwnedSemaphorePermit), Problem> {
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

/// Opens a record and does something with it, aside from whoever else is served.
pub(super) async fn with_record<T: Send + 'static>(
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
