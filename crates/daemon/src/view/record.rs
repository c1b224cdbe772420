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

/// How a run went, or how it goes: which label held when, and what happened.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CourseView {
    /// The steps in order; steps of one label after each other are one stretch.
    pub stretches: Vec<StretchView>,
    /// What a person would write down, in order.
    pub happenings: Vec<HappeningView>,
    /// How much of either is left out because there is too much of it; the record has all.
    pub left_out: u64,
}

/// A stretch of a run under one label.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct StretchView {
    /// Its beginning, since the start of the run; as the host learned of it.
    pub from_s: f64,
    /// Its end.
    pub to_s: f64,
    /// The label, if its steps have one.
    pub label: Option<String>,
    /// How many steps.
    pub steps: u64,
}

/// Something that happened in a run.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct HappeningView {
    /// When, since the start of the run.
    pub at_s: f64,
    /// Of which kind: `crossed`, `held`, `continued`, `readbacks_lost`, `rescheduled`,
    /// `burst_missed`, `link_lost`, `link_back`, `resumed`, `tripped`, `ended`.
    pub kind: String,
    /// What, for people.
    pub message: String,
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

/// Groups of records compared.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct ComparisonView {
    /// Figure by figure: what the groups show, and their differences.
    #[schema(value_type = Object)]
    pub comparison: figures::Comparison,
    /// Peukert's exponent of every group whose discharges to the cut-off are at different rates.
    pub peukert: Vec<PeukertView>,
}

/// Peukert's exponent of a group.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct PeukertView {
    /// The group's name.
    pub group: String,
    /// What its discharges show.
    #[schema(value_type = Object)]
    pub law: figures::Peukert,
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
