//! A sequence as read: typed, but not yet judged and not yet bound to a sink.
//!
//! What could not be read is `None` here and already a finding, so that the rules can judge the
//! rest in the same answer. A draft becomes a plan only when nothing refuses it.

mod read;

use std::collections::BTreeSet;

use quantity::{
    Charge, Current, CurrentSpec, Energy, Power, Resistance, Span, Temperature, Voltage,
};

pub(crate) use read::{is_plain, read};

use crate::import::ImportReport;
use crate::plan::{DutKind, OnInterruption};
use crate::profile::Segment;

/// A sequence as read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Draft {
    pub(crate) title: String,
    pub(crate) dut: DutDraft,
    pub(crate) readback: Option<Span>,
    pub(crate) on_interruption: OnInterruption,
    pub(crate) interlocks: InterlocksDraft,
    pub(crate) steps: Vec<StepDraft>,
}

/// The device under test as read.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub(crate) struct DutDraft {
    pub(crate) label: Option<String>,
    pub(crate) kind: Option<DutKind>,
    pub(crate) rated_capacity: Option<Charge>,
    pub(crate) voltage_min: Option<Voltage>,
    pub(crate) voltage_max: Option<Voltage>,
    pub(crate) current_max: Option<Current>,
    pub(crate) series: u16,
    pub(crate) parallel: u16,
}

/// An interlock as written: threshold and persistence, each where it stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Written<T> {
    pub(crate) threshold: Option<T>,
    pub(crate) persistence: Option<Span>,
}

/// The interlocks as written.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub(crate) struct InterlocksDraft {
    pub(crate) over_temperature: Option<Written<Temperature>>,
    pub(crate) over_power: Option<Written<Power>>,
    pub(crate) undervoltage: Option<Written<Voltage>>,
    pub(crate) over_voltage: Option<Written<Voltage>>,
    pub(crate) reversed_polarity: Option<Written<Voltage>>,
    pub(crate) over_current: Option<Written<Current>>,
    pub(crate) not_following: Option<Written<Current>>,
    pub(crate) not_releasing: Option<Written<Current>>,
    pub(crate) sensor_fault: Option<Span>,
    pub(crate) silence: Option<Span>,
    pub(crate) charge: Option<Charge>,
    pub(crate) energy: Option<Energy>,
    pub(crate) time: Option<Span>,
    pub(crate) clock: Option<Span>,
    /// Whether any stands in the file, read or not.
    pub(crate) any: bool,
}

/// A step as read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct StepDraft {
    pub(crate) pointer: String,
    pub(crate) label: Option<String>,
    pub(crate) action: Option<ActionDraft>,
    /// `for`, `at_most`, or the time that the action itself names.
    pub(crate) time: Option<Span>,
    pub(crate) until: Vec<UntilDraft>,
    pub(crate) then: NextDraft,
    pub(crate) readback: Option<Span>,
    pub(crate) may_give_up: bool,
    pub(crate) burst: Option<(Span, Span)>,
    /// What an import made of the profile.
    pub(crate) imported: Option<ImportDraft>,
}

/// What an import made of a profile, beside its segments.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct ImportDraft {
    /// How often the segments are gone through.
    pub(crate) turns: u64,
    pub(crate) report: ImportReport,
}

/// What a step does, as read; currents are amperes already.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum ActionDraft {
    Rest,
    Draw(Option<Current>),
    Power(Option<Power>),
    Resistance(Option<Resistance>),
    Ramp(RampDraft),
    Profile(Vec<Segment>),
    Repeat(RepeatDraft),
}

/// A ramp as read.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct RampDraft {
    /// Whether a `from` stands in the file, read or not.
    pub(crate) has_from: bool,
    pub(crate) from: Option<Current>,
    pub(crate) to: Option<Current>,
}

/// A repeat as read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct RepeatDraft {
    pub(crate) times: Option<u64>,
    /// Whether a `times` stands in the file, read or not.
    pub(crate) has_times: bool,
    pub(crate) at_most: Option<Span>,
    /// Whether an `at_most` stands in the file, read or not.
    pub(crate) has_at_most: bool,
    pub(crate) steps: Vec<StepDraft>,
}

/// What follows, as read.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub(crate) enum NextDraft {
    #[default]
    GoOn,
    End,
    SkipTo {
        label: String,
        pointer: String,
    },
}

/// A condition as read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct UntilDraft {
    pub(crate) pointer: String,
    pub(crate) condition: Option<ConditionDraft>,
    pub(crate) persistence: Option<Span>,
    pub(crate) then: NextDraft,
}

/// What a condition watches, as read.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum ConditionDraft {
    /// One that the plan knows.
    Watch(crate::plan::Condition),
    /// The time since the step or repeat began; a plan says it with a duration.
    Elapsed(Span),
}

impl Draft {
    /// Calls `visit` with every step, outer before inner, in the order of the file.
    pub(crate) fn each_step<'a>(&'a self, visit: &mut dyn FnMut(&'a StepDraft)) {
        walk(&self.steps, visit);
    }

    /// The labels that some skip goes to.
    pub(crate) fn skip_targets(&self) -> BTreeSet<&str> {
        let mut targets = BTreeSet::new();
        self.each_step(&mut |step| {
            let nexts = step.until.iter().map(|until| &until.then);
            for next in nexts.chain(std::iter::once(&step.then)) {
                if let NextDraft::SkipTo { label, .. } = next {
                    targets.insert(label.as_str());
                }
            }
        });
        targets
    }
}

fn walk<'a>(steps: &'a [StepDraft], visit: &mut dyn FnMut(&'a StepDraft)) {
    for step in steps {
        visit(step);
        if let Some(ActionDraft::Repeat(repeat)) = &step.action {
            walk(&repeat.steps, visit);
        }
    }
}

impl StepDraft {
    /// The pointer of one of the step's keys.
    pub(crate) fn key(&self, key: &str) -> String {
        format!("{}/{key}", self.pointer)
    }
}

/// A current in amperes, where that can be known.
pub(crate) fn amperes(spec: CurrentSpec, rated_capacity: Option<Charge>) -> Option<Current> {
    match spec {
        CurrentSpec::Absolute(current) => Some(current),
        CurrentSpec::RatedMultiple { .. } => spec.resolve(rated_capacity?),
    }
}
