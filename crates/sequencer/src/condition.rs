//! Conditions that end a step or a loop, judged so that doubt waits.
//!
//! A condition with a persistence counts only intervals that lie wholly across it and wholly
//! within its step; one without is met by the extreme. Charge, energy and temperature are values
//! at an instant: an interval lies wholly across them if both its ends do. A pair whose
//! neighbours were lost does not cover its interval, so it breaks a persistence.

use quantity::{Charge, Energy, SinkTime, Span};
use sequence::plan::{Condition, Until};
use sink::correction::Correction;
use wire::TemperatureReading;

use crate::account::Counted;
use crate::observation::{Cover, Observation};
use crate::settled::Window;

/// The conditions of one step or loop, from its beginning on.
#[derive(Debug, Clone)]
pub(crate) struct Watch {
    /// Intervals that begin before this do not count.
    valid_from: SinkTime,
    /// What had been counted when it began.
    base: Counted,
    states: Vec<State>,
}

#[derive(Debug, Clone, Default)]
struct State {
    held_for: Span,
    across: bool,
    window: Option<Window>,
}

impl Watch {
    /// Begins to watch; `valid_from` is the first instant that surely belongs to the step.
    pub(crate) fn new(untils: &[Until], valid_from: SinkTime, base: Counted) -> Self {
        let mut watch = Self {
            valid_from,
            base,
            states: Vec::new(),
        };
        watch.clear(untils);
        watch
    }

    /// Begins anew after a gap; what has been counted stays.
    pub(crate) fn resume(&mut self, untils: &[Until], valid_from: SinkTime) {
        self.valid_from = valid_from;
        self.clear(untils);
    }

    fn clear(&mut self, untils: &[Until]) {
        let state = |until: &Until| State {
            window: window(until.condition).map(|length| Window::new(length, self.valid_from)),
            ..State::default()
        };
        self.states = untils.iter().map(state).collect();
    }

    /// What had been counted when it began.
    pub(crate) fn base(&self) -> Counted {
        self.base
    }

    /// The first condition that is met by this observation, and its index.
    pub(crate) fn met<'a>(
        &mut self,
        untils: &'a [Until],
        observation: &Observation,
        sum: Counted,
        correction: &Correction,
    ) -> Option<(u16, &'a Until)> {
        let evidence = Evidence {
            observation,
            delivered: sum.since(self.base),
            correction,
            within: !observation.first && observation.from >= self.valid_from,
        };
        let mut met = None;
        for ((index, until), state) in (0_u16..).zip(untils).zip(&mut self.states) {
            if state.judge(until, &evidence) && met.is_none() {
                met = Some((index, until));
            }
        }
        met
    }
}

/// What a condition is judged by.
struct Evidence<'a> {
    observation: &'a Observation,
    delivered: Counted,
    correction: &'a Correction,
    /// The interval lies wholly within the step.
    within: bool,
}

impl Evidence<'_> {
    fn charge(&self) -> Charge {
        self.delivered.charge(self.correction)
    }

    fn energy(&self) -> Energy {
        self.delivered.energy(self.correction)
    }
}

/// What an interval says of a condition.
#[derive(Clone, Copy)]
struct Verdict {
    /// It was across at some instant.
    touched: bool,
    /// It was across all the time.
    wholly: bool,
}

impl State {
    fn judge(&mut self, until: &Until, evidence: &Evidence<'_>) -> bool {
        let verdict = self.verdict(until.condition, evidence);
        if until.persistence == Span::ZERO {
            return verdict.touched;
        }
        self.held_for = if verdict.wholly {
            self.held_for
                .saturating_add(evidence.observation.interval())
        } else {
            Span::ZERO
        };
        self.held_for >= until.persistence
    }

    fn verdict(&mut self, condition: Condition, evidence: &Evidence<'_>) -> Verdict {
        let seen = evidence.observation;
        match condition {
            Condition::VoltageBelow(limit) => {
                range(evidence, seen.voltage.min < limit, seen.voltage.max < limit)
            }
            Condition::VoltageAbove(limit) => {
                range(evidence, seen.voltage.max > limit, seen.voltage.min > limit)
            }
            Condition::CurrentBelow(limit) => {
                range(evidence, seen.current.min < limit, seen.current.max < limit)
            }
            Condition::CurrentAbove(limit) => {
                range(evidence, seen.current.max > limit, seen.current.min > limit)
            }
            Condition::Charge(limit) => self.instant(evidence.charge() >= limit),
            Condition::Energy(limit) => self.instant(evidence.energy() >= limit),
            Condition::TemperatureAbove(limit) => match seen.temperature {
                TemperatureReading::Value(value) => self.instant(value > limit),
                TemperatureReading::Open | TemperatureReading::Short => self.instant(false),
            },
            Condition::TemperatureBelow(limit) => match seen.temperature {
                TemperatureReading::Value(value) => self.instant(value < limit),
                TemperatureReading::Open | TemperatureReading::Short => self.instant(false),
            },
            Condition::VoltageSettled { change, .. } => {
                let value = Some(seen.voltage.mean.microvolts());
                self.settled(evidence, value, change.microvolts())
            }
            Condition::TemperatureSettled { change, .. } => {
                let value = match seen.temperature {
                    TemperatureReading::Value(value) => Some(value.millidegrees_celsius()),
                    TemperatureReading::Open | TemperatureReading::Short => None,
                };
                self.settled(evidence, value, change.millidegrees_celsius())
            }
        }
    }

    /// A value at an instant: the interval is wholly across if its beginning was, too.
    fn instant(&mut self, across: bool) -> Verdict {
        let before = std::mem::replace(&mut self.across, across);
        Verdict {
            touched: across,
            wholly: across && before,
        }
    }

    fn settled(&mut self, evidence: &Evidence<'_>, value: Option<i64>, change: i64) -> Verdict {
        let moved = match (value, &mut self.window) {
            (Some(value), Some(window)) if evidence.within => {
                window.add(evidence.observation.time, value)
            }
            _ => None,
        };
        self.instant(moved.is_some_and(|moved| moved < change))
    }
}

fn range(evidence: &Evidence<'_>, touched: bool, wholly: bool) -> Verdict {
    Verdict {
        touched: touched && evidence.within,
        wholly: wholly && evidence.within && evidence.observation.cover == Cover::Whole,
    }
}

fn window(condition: Condition) -> Option<Span> {
    match condition {
        Condition::VoltageSettled { window, .. } | Condition::TemperatureSettled { window, .. } => {
            Some(window)
        }
        Condition::VoltageBelow(_)
        | Condition::VoltageAbove(_)
        | Condition::CurrentBelow(_)
        | Condition::CurrentAbove(_)
        | Condition::Charge(_)
        | Condition::Energy(_)
        | Condition::TemperatureAbove(_)
        | Condition::TemperatureBelow(_) => None,
    }
}
