//! Records as they are shown.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;
use uuid::Uuid;

use super::{ClockWord, CurveView, EndingView};

/// A record in short.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RecordSummary {
    /// Its identity, and that of its run.
    #[schema(value_type = String, format = "uuid")]
    pub id: Uuid,
    /// Its folder in the records folder.
    pub folder: String,
    /// The sink's name.
    pub sink: String,
    /// What is written on the device under test.
    pub dut: String,
    /// The sequence's title.
    pub title: String,
    /// When the run was started (RFC 3339).
    pub started: String,
    /// Whose time the run was on.
    pub clock: ClockWord,
    /// The labels of its steps.
    pub labels: Vec<String>,
    /// How it ended; absent while it runs.
    pub ending: Option<EndingView>,
    /// Whether it is under its seal.
    pub sealed: bool,
    /// When it was taken up again after the host had died (RFC 3339).
    pub resumed: Vec<String>,
}

/// Records.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RecordList {
    /// The latest first.
    pub records: Vec<RecordSummary>,
    /// Folders that hold no readable record, and why.
    pub unreadable: Vec<DamageView>,
}

/// A folder that holds no readable record.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct DamageView {
    /// The folder in the records folder.
    pub folder: String,
    /// Why it cannot be read.
    pub reason: String,
}

/// A record.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RecordView {
    /// In short.
    pub summary: RecordSummary,
    /// The manifest, as it is on disk.
    #[schema(value_type = Object)]
    pub manifest: serde_json::Value,
}

/// Readbacks of a record, thinned with extremes kept.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct ReadingsView {
    /// The record.
    #[schema(value_type = String, format = "uuid")]
    pub id: Uuid,
    /// Whether readbacks may still be added.
    pub in_progress: bool,
    /// Time from the start of the run to the last readback entered so far.
    pub length_s: f64,
    /// The points.
    pub curve: CurveView,
}

/// Whether a record is as it was written.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct VerifyView {
    /// Whether nothing was found.
    pub intact: bool,
    /// All that was found out.
    #[schema(value_type = Object)]
    pub report: serde_json::Value,
}

/// Figures of a record.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct FiguresView {
    /// The record.
    #[schema(value_type = String, format = "uuid")]
    pub id: Uuid,
    /// The figures, each with unit, uncertainty, method and source.
    #[schema(value_type = Object)]
    pub figures: figures::Figures,
}
