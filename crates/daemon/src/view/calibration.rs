//! Calibrations under way, certificates, verifications.

use quantity::{Current, HostTime, Span, Text, Voltage};
use serde::{Deserialize, Deserializer, Serialize};
use serde_json::Value;
use sink::calibration::{Certificate, ChannelSummary, Drift, Statement, Validity};
use utoipa::ToSchema;
use uuid::Uuid;

use super::{RunView, rfc3339};

/// A calibration, or a verification, to begin.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct CalibrationRequest {
    /// The sink's name.
    pub sink: String,
    /// The source that the sink draws from, in the words of a sequence's `dut`.
    #[schema(value_type = Object)]
    pub dut: Value,
    /// The interlocks, in the words of a sequence: at least one; the bench's own for the others.
    #[schema(value_type = Object)]
    pub interlocks: Value,
    /// How long a setpoint holds unless it is asked for again.
    #[schema(value_type = String, example = "10 s")]
    pub interval: Text<Span>,
    /// Readback interval; the bench's usual one unless said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>, example = "100 ms")]
    pub readback: Option<Text<Span>>,
    /// What to set, one after the other: nominal currents.
    #[schema(value_type = Vec<String>, example = json!(["10 mA", "500 mA", "1 A"]))]
    pub setpoints: Vec<Text<Current>>,
    /// Least time at a setpoint before it counts as settled; 1 s unless said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>, example = "1 s")]
    pub settle: Option<Text<Span>>,
    /// Readbacks taken at each point; 10 unless said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub readbacks: Option<u16>,
    /// The certificate's identity; bench, sink and date unless said.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub identity: Option<String>,
    /// Verify this certificate instead of making a new one.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub verifies: Option<String>,
    /// Who, where, with which meters.
    #[schema(value_type = Object)]
    pub statement: Statement,
}

/// What the reference meters read at the present setpoint.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct MeterReading {
    /// The current: one reading, or several.
    #[serde(
        default,
        deserialize_with = "one_or_more",
        skip_serializing_if = "Vec::is_empty"
    )]
    #[schema(value_type = Vec<String>, example = json!(["498.6 mA"]))]
    pub current: Vec<Text<Current>>,
    /// The voltage at the sink's sense terminals: one reading, or several.
    #[serde(
        default,
        deserialize_with = "one_or_more",
        skip_serializing_if = "Vec::is_empty"
    )]
    #[schema(value_type = Vec<String>, example = json!(["3.702 V"]))]
    pub voltage: Vec<Text<Voltage>>,
}

fn one_or_more<'de, D: Deserializer<'de>, T: Deserialize<'de>>(
    deserializer: D,
) -> Result<Vec<T>, D::Error> {
    #[derive(Deserialize)]
    #[serde(untagged)]
    enum Form<T> {
        Many(Vec<T>),
        One(T),
    }
    Ok(match Form::deserialize(deserializer)? {
        Form::Many(many) => many,
        Form::One(one) => vec![one],
    })
}

/// How far a calibration is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum CalibrationState {
    /// The setpoint has not settled; `waits_for` says for what.
    Settling,
    /// The setpoint has settled: the meters are to be read.
    Settled,
    /// All points are taken; it is to be finished.
    Taken,
    /// The run has ended before all points were taken. What was taken can still be finished.
    Ended,
    /// The certificate is written, or the verification done.
    Finished,
}

/// What was read back at the present setpoint; nominal values.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct NominalView {
    /// How many readbacks.
    pub readbacks: u64,
    /// Mean current.
    pub current_a: f64,
    /// Standard deviation of one current readback.
    pub current_deviation_a: f64,
    /// Mean voltage.
    pub voltage_v: f64,
    /// Standard deviation of one voltage readback.
    pub voltage_deviation_v: f64,
    /// Heat sink temperature, latest.
    pub temperature_degc: Option<f64>,
}

/// A calibration or a verification under way.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CalibrationView {
    /// Its identity: that of its run and record.
    #[schema(value_type = String, format = "uuid")]
    pub id: Uuid,
    /// The sink's name.
    pub sink: String,
    /// The identity of the certificate that it makes, or verifies.
    pub certificate: String,
    /// Whether it verifies that certificate.
    pub verifies: bool,
    /// How far it is.
    pub state: CalibrationState,
    /// What is waited for, while it settles.
    pub waits_for: Option<String>,
    /// Which point is held, from 1.
    pub point: u64,
    /// How many points there are.
    pub points: u64,
    /// The nominal setpoint that is held.
    pub setpoint_a: Option<f64>,
    /// What was read back at it.
    pub nominal: Option<NominalView>,
    /// Current points taken.
    pub current_points: u64,
    /// Voltage points taken.
    pub voltage_points: u64,
    /// The run.
    pub run: Option<RunView>,
}

/// What came of a calibration or a verification.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CalibrationOutcome {
    /// Its identity.
    #[schema(value_type = String, format = "uuid")]
    pub id: Uuid,
    /// The file that was written, on the daemon's host.
    pub file: String,
    /// What the bench file's entry of the sink must say to use a new certificate.
    pub bench_entry: Option<String>,
    /// The new certificate in short.
    pub certificate: Option<CertificateSummary>,
    /// The verification.
    pub verification: Option<VerificationView>,
}

/// One line of a certificate.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct LineView {
    /// `current set`, `current read` or `voltage read`.
    pub channel: String,
    /// The unit of offset and residuals.
    pub unit: String,
    /// True value at nominal zero.
    pub offset: f64,
    /// Its standard uncertainty from the fit.
    pub offset_uncertainty: f64,
    /// Slope of true against nominal values.
    pub slope: f64,
    /// Its standard uncertainty from the fit.
    pub slope_uncertainty: f64,
    /// Points.
    pub points: u64,
    /// The largest residual, by magnitude.
    pub largest_residual: f64,
    /// Points (from 1) that lie farther off than their uncertainty lets expect.
    pub outliers: Vec<usize>,
    /// Smallest and largest nominal value that it vouches for.
    pub range: [f64; 2],
    /// Whether the residuals demand more than a straight line.
    pub bent: bool,
}

impl LineView {
    fn new(channel: &str, unit: &str, summary: &ChannelSummary) -> Self {
        let largest =
            summary
                .residuals_micro
                .iter()
                .copied()
                .fold(0.0, |largest: f64, residual| {
                    if residual.abs() > largest.abs() {
                        residual
                    } else {
                        largest
                    }
                });
        Self {
            channel: channel.to_owned(),
            unit: unit.to_owned(),
            offset: summary.offset_micro / 1e6,
            offset_uncertainty: summary.offset_uncertainty_micro / 1e6,
            slope: summary.slope,
            slope_uncertainty: summary.slope_uncertainty,
            points: summary.residuals_micro.len() as u64,
            largest_residual: largest / 1e6,
            outliers: summary.outliers.clone(),
            range: summary.range_micro.map(|end| end / 1e6),
            bent: summary.second_order.demanded,
        }
    }
}

/// A certificate in short.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CertificateSummary {
    /// Its identity.
    pub identity: String,
    /// The sink.
    pub sink: String,
    /// Who did it.
    pub operator: String,
    /// When it was issued (RFC 3339).
    pub issued: String,
    /// Until when it holds (RFC 3339).
    pub valid_until: String,
    /// Whether it holds now: `valid`, `expired` or `not_yet`.
    #[schema(value_type = String)]
    pub validity: Validity,
    /// The meters.
    pub meters: Vec<String>,
    /// The record of the run in which its points were taken.
    pub record: Option<String>,
    /// Its three lines.
    pub lines: Vec<LineView>,
    /// What has changed since the certificate before of the same sink.
    #[schema(value_type = Vec<Object>)]
    pub drift: Vec<Drift>,
    /// How it was verified.
    pub verifications: Vec<VerificationView>,
}

impl CertificateSummary {
    /// A certificate as it stands at a time.
    pub fn new(certificate: &Certificate, at_unix_s: i64) -> Self {
        let of = &certificate.measurements;
        let time = |unix_s: i64| rfc3339(HostTime::from_micros(unix_s.saturating_mul(1_000_000)));
        Self {
            identity: of.identity.clone(),
            sink: of.sink.clone(),
            operator: of.operator.clone(),
            issued: time(of.issued_unix_s),
            valid_until: time(of.valid_until_unix_s),
            validity: certificate.validity(at_unix_s),
            meters: std::iter::once(&of.current_meter.identity)
                .chain(of.voltage_meter.as_ref().map(|meter| &meter.identity))
                .cloned()
                .collect(),
            record: of.record.clone(),
            lines: [
                ("current set", "A", Some(&certificate.current_set)),
                ("current read", "A", Some(&certificate.current_read)),
                ("voltage read", "V", certificate.voltage_read.as_ref()),
            ]
            .into_iter()
            .filter_map(|(name, unit, line)| Some(LineView::new(name, unit, line?)))
            .collect(),
            drift: Vec::new(),
            verifications: Vec::new(),
        }
    }
}

/// The certificates beside the bench file.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct CertificateList {
    /// By sink and date.
    pub certificates: Vec<CertificateSummary>,
    /// Files that cannot be used, and why.
    pub troubles: Vec<String>,
}

/// One point of a verification.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct VerifiedPoint {
    /// `current set`, `current read` or `voltage read`.
    pub channel: String,
    /// The unit of all values.
    pub unit: String,
    /// The nominal setpoint or readback.
    pub nominal: f64,
    /// The true value that the certificate makes of it.
    pub corrected: f64,
    /// What the meter read.
    pub reference: f64,
    /// Corrected less reference.
    pub error: f64,
    /// Expanded uncertainty (95 %) of the corrected value.
    pub expanded: f64,
    /// Expanded uncertainty (95 %) of the reference.
    pub reference_expanded: f64,
    /// E_n: the error over both expanded uncertainties.
    pub normalised_error: f64,
    /// Whether |E_n| <= 1.
    pub passed: bool,
}

/// A verification of a certificate.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct VerificationView {
    /// The certificate's identity.
    pub certificate: String,
    /// When (RFC 3339).
    pub at: String,
    /// Who did it.
    pub operator: String,
    /// The record of its run.
    pub record: Option<String>,
    /// Whether every point passed.
    pub passed: bool,
    /// Its points.
    pub points: Vec<VerifiedPoint>,
}
