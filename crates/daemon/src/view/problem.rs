//! Errors as problem details (RFC 9457), each with a stable code.

use sequence::Finding;
use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

macro_rules! codes {
    ($($variant:ident $code:literal $status:literal $title:literal)*) => {
        /// What went wrong, named by a code that does not change between versions.
        #[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, ToSchema)]
        #[non_exhaustive]
        pub enum Code {
            $(
                #[doc = $title]
                #[serde(rename = $code)]
                $variant,
            )*
        }

        impl Code {
            /// Every code, in the order of the documentation.
            pub const ALL: &'static [Self] = &[$(Self::$variant,)*];

            /// The code's text, such as `sink-busy`.
            pub const fn text(self) -> &'static str {
                match self {
                    $(Self::$variant => $code,)*
                }
            }

            /// The HTTP status it comes with.
            pub const fn status(self) -> u16 {
                match self {
                    $(Self::$variant => $status,)*
                }
            }

            /// What it means, in a sentence.
            pub const fn title(self) -> &'static str {
                match self {
                    $(Self::$variant => $title,)*
                }
            }
        }
    };
}

codes! {
    HostRefused "host-refused" 403 "The request names another host than this one."
    OriginRefused "origin-refused" 403 "A page of another origin may not talk to the daemon."
    TokenNeeded "token-needed" 401 "A token is needed, and the right one."
    ScopeTooSmall "scope-too-small" 403 "The token only allows to look on."
    NoSuchResource "no-such-resource" 404 "There is nothing under this path."
    MethodNotAllowed "method-not-allowed" 405 "The resource does not take this method."
    NoSuchSink "no-such-sink" 404 "The bench has no sink of this name."
    NoSuchRun "no-such-run" 404 "No run of this id is in progress or has ended since the daemon started."
    NoSuchRecord "no-such-record" 404 "The records folder has no record of this id."
    NotJson "not-json" 415 "The body must be declared as application/json."
    TooLarge "too-large" 413 "The body is larger than is taken."
    TooSlow "too-slow" 408 "The request took too long."
    BodyUnreadable "body-unreadable" 400 "The body is not what the resource takes."
    QueryUnreadable "query-unreadable" 400 "The query is not what the resource takes."
    NotAcceptable "not-acceptable" 406 "None of the accepted media types can be given."
    SequenceRefused "sequence-refused" 422 "The check refuses the sequence; the findings say why."
    SourceNeeded "source-needed" 422 "A rehearsal for a real sink needs a simulated source."
    SourceRefused "source-refused" 422 "The simulated source cannot be."
    RehearsalFailed "rehearsal-failed" 422 "The rehearsal came to no end."
    TooManyRehearsals "too-many-rehearsals" 503 "As many rehearsals are under way as are allowed at once."
    TooManyViewers "too-many-viewers" 503 "As many event streams are open as are allowed at once."
    SinkBusy "sink-busy" 409 "A run is in progress on the sink."
    SinkNotConnected "sink-not-connected" 409 "No session stands with the sink."
    SinkLatched "sink-latched" 409 "The sink has latched; reset it first."
    NotRunning "not-running" 409 "The run is not in a state in which this can be done."
    ResetRefused "reset-refused" 409 "The sink refuses to be reset."
    NotByHand "not-by-hand" 409 "The run is not driven by hand."
    IntervalRefused "interval-refused" 422 "The interval is too short or too long."
    NoSuchCalibration "no-such-calibration" 404 "No calibration of this id is known to the daemon."
    NoSuchCertificate "no-such-certificate" 404 "There is no certificate of this identity."
    CalibrationRefused "calibration-refused" 422 "The calibration cannot be: its points, its statement or its certificate."
    NotSettled "not-settled" 409 "The setpoint has not settled; wait, and read the meter again."
    KeyUnreadable "key-unreadable" 400 "The Idempotency-Key is not 1 to 255 printable ASCII characters."
    KeyReused "key-reused" 422 "The Idempotency-Key was used for another request."
    KeyInUse "key-in-use" 409 "A request with this Idempotency-Key is being answered."
    RecordNotBegun "record-not-begun" 507 "The record of the run cannot be written."
    RecordUnreadable "record-unreadable" 500 "The record cannot be read."
    FiguresUnavailable "figures-unavailable" 409 "The record gives no figures yet."
    WorkerEnded "worker-ended" 500 "The sink's worker has ended; the sink's deadman has turned it off."
    Internal "internal" 500 "The daemon has failed in a way that is its own fault."
    ShuttingDown "shutting-down" 503 "The daemon is ending."
}

impl std::fmt::Display for Code {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(self.text())
    }
}

/// Problem details (RFC 9457).
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize, ToSchema)]
pub struct Problem {
    /// A reference to the code's explanation, relative to the daemon.
    #[serde(rename = "type")]
    pub kind: String,
    /// What the code means.
    pub title: String,
    /// The HTTP status.
    pub status: u16,
    /// What happened this time: the value, the limit, the mend.
    pub detail: String,
    /// The stable code.
    pub code: Code,
    /// What the check found, where it refuses a sequence; the same as the check's own.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    #[schema(value_type = Vec<Object>)]
    pub findings: Vec<Finding>,
}

impl Problem {
    /// A problem with what happened this time.
    pub fn new(code: Code, detail: impl Into<String>) -> Self {
        Self {
            kind: format!("/v1/problems#{code}"),
            title: code.title().to_owned(),
            status: code.status(),
            detail: detail.into(),
            code,
            findings: Vec::new(),
        }
    }

    /// The same with findings.
    #[must_use]
    pub fn with_findings(mut self, findings: Vec<Finding>) -> Self {
        self.findings = findings;
        self
    }
}
