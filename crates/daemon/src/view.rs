//! What the daemon tells over HTTP, as types: one shape for server, clients and documentation.
//!
//! Quantities are plain numbers whose names carry the unit; instants are RFC 3339 text. Nothing
//! here decides anything, and nothing in a view is more exact than a double.
//!
//! What it deliberately does not do: name a field two ways. The command line, the page and the
//! OpenAPI document all use these types.

mod calibration;
mod event;
mod hand;
mod margin;
mod plan;
mod problem;
mod reading;
mod record;
mod run;
mod sequence;
mod sink;

pub use calibration::{
    CalibrationOutcome, CalibrationRequest, CalibrationState, CalibrationView, CertificateList,
    CertificateSummary, LineView, MeterReading, NominalView, VerificationView, VerifiedPoint,
};
pub use event::{Event, EventBody, GoneEvent, LinkEvent, RunEvent, RunNews};
pub use hand::{HandRequest, SetpointRequest};
pub use margin::MarginView;
pub use plan::{PlanStepView, PlannedMarginView, TemperaturesView};
pub use problem::{Code, Problem};
pub use reading::{ReadingView, StateWord};
pub use record::{
    ComparisonView, CourseView, DamageView, FiguresView, HappeningView, PeukertView, ReadingsView,
    RecordList, RecordSummary, RecordView, StretchView, VerifyView,
};
pub use run::{
    ClockWord, CrossingView, EndingView, EndingWord, HandView, LoopView, RunList, RunState,
    RunView, StepView,
};
pub use sequence::{
    CheckView, CurveView, ForecastView, OutlineView, RehearsalView, RehearseRequest,
    SequenceRequest, SequenceText,
};
pub use sink::{
    DescriptionView, HealthView, LimitsView, LinkKind, LinkState, LinkView, OffList, OffView,
    ResetView, SinkList, SinkView,
};

use quantity::HostTime;

/// An instant as RFC 3339 text, in UTC.
pub(crate) fn rfc3339(at: HostTime) -> String {
    // Beyond the year 9999 there is no such text; the number is as good.
    jiff::Timestamp::from_microsecond(at.micros())
        .map_or_else(|_| at.micros().to_string(), |stamp| stamp.to_string())
}

#[cfg(test)]
mod tests;
