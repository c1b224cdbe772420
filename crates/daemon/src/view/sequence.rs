//! Checking and rehearsing.

use std::collections::BTreeMap;

use sequence::{Compiled, Finding};
use serde::{Deserialize, Deserializer, Serialize, Serializer};
use serde_json::value::RawValue;
use utoipa::ToSchema;

use super::{
    CrossingView, EndingView, MarginView, PlanStepView, PlannedMarginView, TemperaturesView,
};

/// The text of a sequence file: in a request either as text or as the JSON itself, whose places
/// in findings then count from its opening brace.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SequenceText(pub String);

impl<'de> Deserialize<'de> for SequenceText {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let raw = Box::<RawValue>::deserialize(deserializer)?;
        let text = raw.get();
        if text.starts_with('"') {
            return serde_json::from_str(text)
                .map(Self)
                .map_err(serde::de::Error::custom);
        }
        Ok(Self(text.to_owned()))
    }
}

impl Serialize for SequenceText {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_str(&self.0)
    }
}

/// A sequence for a sink.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct SequenceRequest {
    /// The sequence: the file's text, or its JSON.
    #[schema(value_type = Object)]
    pub sequence: SequenceText,
    /// The files it names (profiles), by their names in it.
    #[serde(default)]
    pub files: BTreeMap<String, String>,
    /// The sink's name.
    pub sink: String,
    /// What is written on the device under test; wins over the sequence's label.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub dut: Option<String>,
}

/// A sequence for a sink, and what to rehearse it against.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct RehearseRequest {
    /// The sequence: the file's text, or its JSON.
    #[schema(value_type = Object)]
    pub sequence: SequenceText,
    /// The files it names (profiles), by their names in it.
    #[serde(default)]
    pub files: BTreeMap<String, String>,
    /// The sink's name.
    pub sink: String,
    /// What is written on the device under test; wins over the sequence's label.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub dut: Option<String>,
    /// The simulated source, in the words of the bench file; a simulated sink has its own.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<Object>)]
    pub source: Option<serde_json::Value>,
    /// Most points of the curve; 1000 unless said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub points: Option<u32>,
}

/// A sequence that may run.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CheckView {
    /// Warnings; they stand on the record.
    #[schema(value_type = Vec<Object>)]
    pub findings: Vec<Finding>,
    /// The sequence's title.
    pub title: String,
    /// The sink it was compiled for.
    pub sink: String,
    /// What is written on the device under test.
    pub dut: String,
    /// Instructions of the plan.
    pub instructions: u64,
    /// The labels of its steps.
    pub labels: Vec<String>,
    /// The longest it can take.
    pub duration_at_most_s: f64,
    /// The most readbacks it can give.
    pub readbacks_at_most: u64,
    /// Its steps, in the order of the sequence; the first of them if they are many.
    pub steps: Vec<PlanStepView>,
    /// What it will probably do.
    pub forecast: ForecastView,
    /// How hot the sink gets, at most; null where that cannot be worked out.
    pub temperatures: Option<TemperaturesView>,
    /// How near each interlock is to come, the nearest first; of those that can be foreseen.
    pub margins: Vec<PlannedMarginView>,
    /// Its planned shape.
    pub outline: OutlineView,
}

/// What a plan will probably do, reckoned from the data sheet alone.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct ForecastView {
    /// How long it takes.
    pub duration_s: f64,
    /// The charge it draws.
    pub charge_ah: f64,
    /// The energy it draws.
    pub energy_wh: f64,
}

/// The planned shape: current against time.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct OutlineView {
    /// Times of the points, to be joined by straight lines; two at one time are an edge.
    pub time_s: Vec<f64>,
    /// Currents at these times.
    pub current_a: Vec<f64>,
    /// Stretches `[from_s, to_s, least_a, largest_a]` of repeats that are not drawn out.
    pub bands: Vec<[f64; 4]>,
    /// Where each label's first step lies, in the order of time.
    #[serde(default)]
    pub labels: Vec<OutlineLabelView>,
}

/// The first step that bears a label.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct OutlineLabelView {
    /// The label.
    pub label: String,
    /// When the step begins.
    pub from_s: f64,
    /// When it ends.
    pub to_s: f64,
}

impl CheckView {
    /// What the check says of a sequence that may run.
    pub fn new(compiled: &Compiled, points_max: usize) -> Self {
        let plan = &compiled.plan;
        let forecast = compiled.foresight.forecast;
        let outline = plan.outline(points_max);
        let bands = outline.bands.iter().map(|band| {
            [
                band.from.seconds(),
                band.to.seconds(),
                band.least.amperes(),
                band.largest.amperes(),
            ]
        });
        Self {
            findings: compiled.warnings.list.clone(),
            title: plan.title.clone(),
            sink: plan.sink.clone(),
            dut: plan.dut.label.clone(),
            instructions: plan.ops.len() as u64,
            labels: plan.labels.clone(),
            duration_at_most_s: plan.duration_at_most().seconds(),
            readbacks_at_most: plan.readbacks_at_most(),
            steps: super::plan::steps(plan),
            temperatures: compiled.foresight.peak.as_ref().map(TemperaturesView::new),
            margins: super::plan::margins(plan, &compiled.foresight),
            forecast: ForecastView {
                duration_s: forecast.duration.seconds(),
                charge_ah: forecast.charge.ampere_hours(),
                energy_wh: forecast.energy.watt_hours(),
            },
            outline: OutlineView {
                time_s: outline
                    .points
                    .iter()
                    .map(|point| point.time.seconds())
                    .collect(),
                current_a: outline
                    .points
                    .iter()
                    .map(|point| point.current.amperes())
                    .collect(),
                bands: bands.collect(),
                labels: outline
                    .labels
                    .iter()
                    .filter_map(|labelled| {
                        let label = plan.labels.get(usize::try_from(labelled.label).ok()?)?;
                        Some(OutlineLabelView {
                            label: label.clone(),
                            from_s: labelled.from.seconds(),
                            to_s: labelled.to.seconds(),
                        })
                    })
                    .collect(),
            },
        }
    }
}

/// How a rehearsal went.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct RehearsalView {
    /// What the check says.
    pub check: CheckView,
    /// How it ended; `at` is on the rehearsal's own clock.
    pub ending: EndingView,
    /// Interlocks that crossed.
    pub crossings: Vec<CrossingView>,
    /// Time under way.
    pub duration_s: f64,
    /// Charge delivered.
    pub charge_ah: f64,
    /// Energy delivered.
    pub energy_wh: f64,
    /// Hottest heat sink seen.
    pub peak_temperature_degc: Option<f64>,
    /// How near each interlock came; the nearest so far first.
    pub margins: Vec<MarginView>,
    /// Readbacks in the rehearsal.
    pub readbacks: u64,
    /// The thinned curve.
    pub curve: CurveView,
    /// How long the rehearsal itself took.
    pub took_s: f64,
}

/// Readbacks thinned to a few points, extremes kept: one array for each column, the same index
/// in all of them belongs to the same stretch of time.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CurveView {
    /// When the first readback of the stretch came, since the run began.
    pub time_s: Vec<f64>,
    /// Readbacks in the stretch.
    pub readbacks: Vec<u64>,
    /// Charge delivered when the first readback of the stretch came, since the first of the run.
    pub charge_ah: Vec<Option<f64>>,
    /// Mean current.
    pub current_a: Vec<f64>,
    /// Least current.
    pub current_min_a: Vec<f64>,
    /// Largest current.
    pub current_max_a: Vec<f64>,
    /// Mean voltage.
    pub voltage_v: Vec<f64>,
    /// Least voltage.
    pub voltage_min_v: Vec<f64>,
    /// Largest voltage.
    pub voltage_max_v: Vec<f64>,
    /// Mean heat sink temperature; null where its sensor gave none.
    pub temperature_degc: Vec<Option<f64>>,
    /// Hottest heat sink.
    pub temperature_max_degc: Vec<Option<f64>>,
}
