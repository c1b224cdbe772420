//! The rules a sequence is judged by: one table of stable codes.
//!
//! The code is interface: scripts, the HTTP interface and the documentation name it. The table in
//! `docs/sequences.md` is kept equal to this one by a test.

use std::fmt;

use serde::{Deserialize, Serialize};

/// Whether a finding refuses the sequence or only stands on the record.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, schemars::JsonSchema,
)]
#[serde(rename_all = "snake_case")]
pub enum Severity {
    /// The sequence is refused.
    Error,
    /// The sequence may run; the finding stands on the record.
    Warning,
}

impl fmt::Display for Severity {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Error => "error",
            Self::Warning => "warning",
        })
    }
}

macro_rules! rules {
    ($($variant:ident $code:literal $severity:ident $summary:literal)*) => {
        /// A rule, named by its stable code.
        #[derive(
            Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize,
            schemars::JsonSchema,
        )]
        #[non_exhaustive]
        pub enum Rule {
            $(
                #[doc = $summary]
                #[serde(rename = $code)]
                $variant,
            )*
        }

        impl Rule {
            /// Every rule, in the order of the documentation.
            pub const ALL: &'static [Self] = &[$(Self::$variant,)*];

            /// The stable code, such as `unknown-key`.
            pub const fn code(self) -> &'static str {
                match self {
                    $(Self::$variant => $code,)*
                }
            }

            /// Whether breaking it refuses the sequence.
            pub const fn severity(self) -> Severity {
                match self {
                    $(Self::$variant => Severity::$severity,)*
                }
            }

            /// What it asks for, in one sentence.
            pub const fn summary(self) -> &'static str {
                match self {
                    $(Self::$variant => $summary,)*
                }
            }
        }
    };
}

rules! {
    JsonSyntax "json-syntax" Error
        "The text is JSON as RFC 8259 has it: no comments, no trailing commas, no NaN."
    JsonDuplicateKey "json-duplicate-key" Error
        "An object has each key once."
    TooLarge "too-large" Error
        "The text, the profiles and the number of steps stay within what can be handled."
    Version "version" Error
        "The key `sequence` names a version of the format that is known."
    UnknownKey "unknown-key" Error
        "Only the keys of the format stand in an object."
    MissingKey "missing-key" Error
        "Every key that has no default is there."
    WrongKind "wrong-kind" Error
        "Each value is of the kind its key wants: text, count, list, object."
    UnitMissing "unit-missing" Error
        "A quantity is a text with its unit, never a bare number."
    BadQuantity "bad-quantity" Error
        "A quantity is a decimal number and a unit of the dimension that is wanted."
    BadWord "bad-word" Error
        "Where a choice is wanted, one of its words stands."
    BadCount "bad-count" Error
        "A count is a whole number within its bounds."
    BadText "bad-text" Error
        "A text is neither empty nor longer than its bound."
    ExactlyOne "exactly-one" Error
        "A step has one action, a condition one quantity, a profile one source."
    ClashingKeys "clashing-keys" Error
        "Keys that exclude each other do not stand together."
    TimeMissing "time-missing" Error
        "Every step that could last for ever has a time: `for`, or `at_most`."
    TimeZero "time-zero" Error
        "Every time that something is to last is above zero."
    EndlessRepeat "endless-repeat" Error
        "A repeat has a number of times or an `at_most`, so that it ends even if no condition ever holds."
    LabelDuplicate "label-duplicate" Error
        "A label names one step."
    LabelUnknown "label-unknown" Error
        "A `skip_to` names a label that exists."
    SkipBackward "skip-backward" Error
        "A `skip_to` goes forward; what goes back is a repeat."
    SkipIntoRepeat "skip-into-repeat" Error
        "A `skip_to` leaves repeats but enters none."
    Unreachable "unreachable" Warning
        "Every step can be reached."
    RampStartUnknown "ramp-start-unknown" Error
        "A ramp whose start does not follow from the step before names its `from`."
    ProfileSource "profile-source" Error
        "A profile's file is given and its text has a header with known columns and units."
    ProfilePoints "profile-points" Error
        "A profile has at least two pairs, begins at 0 s, and its times never go back."
    ProfileLastCurrent "profile-last-current" Warning
        "With steps, the last pair of a profile only says when the profile ends."
    ImportError "import-error" Error
        "The error that an import allows is at least one step of the sink's converter."
    ImportPeriod "import-period" Error
        "The period of an import is whole ticks and within the recording."
    ImportPeak "import-peak" Error
        "An import reaches no more than the sink can draw; peaks are cut only where `clip_above` says so."
    ImportBelowFloor "import-below-floor" Warning
        "A recording lies above the sink's floor; what sleeps below is drawn within other steps."
    ImportEdges "import-edges" Warning
        "A recording does not change within a tick of the sink by more than the error."
    ImportClipped "import-clipped" Warning
        "No peak of a recording is cut."
    ImportCycles "import-cycles" Warning
        "The cycles of a recording agree, and it ends with a whole one."
    ImportCharge "import-charge" Warning
        "The charge of each cycle of a recording is kept to one converter step for one tick."
    DutVoltages "dut-voltages" Error
        "The least voltage of the DUT is above zero and below its largest."
    DutCurrent "dut-current" Error
        "The largest current of the DUT is above zero."
    DutCellCount "dut-cell-count" Error
        "One cell is one in series and one in parallel."
    DutLabel "dut-label" Warning
        "The DUT has a label, in the file or given with the run."
    DutVoltageRange "dut-voltage-range" Error
        "The sink can measure the DUT's largest voltage."
    RatedCapacityMissing "rated-capacity-missing" Error
        "Where a current is a multiple of the rated capacity, that capacity is given."
    CurrentNegative "current-negative" Error
        "A sink draws: currents, powers and resistances are not below zero."
    CurrentAboveSink "current-above-sink" Error
        "No step draws more current than the sink can, at any voltage of the DUT."
    CurrentAboveDut "current-above-dut" Error
        "No step draws more current than the maker of the DUT allows, at any of its voltages."
    PowerAboveSink "power-above-sink" Error
        "No step puts more power into the sink than it may take, at the DUT's largest voltage."
    AboveEnvelope "above-envelope" Error
        "Every step lies within the sink's envelope at the DUT's least and largest voltage, for as long as it lasts."
    CurrentBelowFloor "current-below-floor" Error
        "A current is zero or at least the sink's floor."
    CoarseStep "coarse-step" Warning
        "The converter can set the current to within 2 %."
    AbilityMissing "ability-missing" Error
        "The sink has the ability that the step needs."
    ShorterThanTick "shorter-than-tick" Error
        "Nothing is shorter than the sink's tick."
    OffTick "off-tick" Warning
        "Times are whole ticks of the sink; else an edge moves by up to one tick."
    BurstTooLong "burst-too-long" Error
        "A burst fits into the sink's memory and into its step."
    BurstMissed "burst-missed" Warning
        "A burst has been sent before the next is taken."
    QueueRunsDry "queue-runs-dry" Error
        "Short steps come no faster than the port can refill the sink's queue."
    ReadbackTooFast "readback-too-fast" Error
        "No readback interval is shorter than the sink's shortest."
    ReadbackTooSlow "readback-too-slow" Error
        "No readback interval is longer than the bench allows."
    ReadbackAbovePort "readback-above-port" Error
        "Readbacks take no more than two thirds of what the port carries."
    InterlocksMissing "interlocks-missing" Error
        "A sequence has interlocks, and every one that judges has a threshold."
    InterlockLoosened "interlock-loosened" Error
        "A sequence may tighten an interlock of the bench, never loosen it."
    InterlockCannotAct "interlock-cannot-act" Error
        "An interlock that stands in the sequence can act before something else has."
    InterlockAtOnce "interlock-at-once" Error
        "No interlock trips on what the sequence itself asks for."
    UntilBehindInterlock "until-behind-interlock" Error
        "A condition that ends a step comes before the interlock on the same quantity."
    UndervoltageBelowDut "undervoltage-below-dut" Error
        "The undervoltage interlock is not below the DUT's least voltage."
    SilenceBelowReadback "silence-below-readback" Error
        "The silence interlock leaves room for two readback intervals."
    PersistenceBelowReadback "persistence-below-readback" Warning
        "A persistence that only the host can judge is not shorter than the readback interval."
    UntilNeverHolds "until-never-holds" Warning
        "A condition can hold within the time its step has."
    ChargeAboveRated "charge-above-rated" Warning
        "What is drawn for a fixed time is not more than the rated capacity."
    LimitOutOfReach "limit-out-of-reach" Warning
        "A limit on the time of the run is within what the run can take."
    LimitBeforeEnd "limit-before-end" Warning
        "The interlocks on charge, energy and time leave room for what the run will probably take."
    LeadsTripEarly "leads-trip-early" Warning
        "Over two wires, the sink's own undervoltage limit acts no earlier than the step's ending."
    CertificateAbsent "certificate-absent" Warning
        "The sink has a certificate; without one every figure is nominal, uncalibrated."
    CertificateExpires "certificate-expires" Warning
        "The sink's certificate is valid for the whole of the longest possible run."
    BeyondCalibration "beyond-calibration" Warning
        "The currents drawn, and the DUT's voltages, lie within what the sink's certificate was calibrated over."
    DiskSpace "disk-space" Error
        "The record of the longest possible run fits the disk."
    RecordLarge "record-large" Warning
        "The record of the longest possible run takes at most half of the free disk space."
}

impl fmt::Display for Rule {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.code())
    }
}

#[cfg(test)]
mod tests;
