//! A reading: judged first, then accounted, then asked whether a condition is met.

use wire::{Cause, Reading, SinkState, TemperatureReading};

use super::{Sequencer, crossing};
use crate::account::Increment;
use crate::event::{Crossing, Finding, Interlock};
use crate::expectation::Expectation;
use crate::guard::{Crossings, beyond_any_setpoint, interlock_of, judge_delivered, micros};
use crate::observation::Observation;
use crate::phase::Phase;

impl Sequencer {
    pub(super) fn on_reading(&mut self, reading: &Reading) {
        match self.phase {
            Phase::Waiting | Phase::Interruption { .. } | Phase::End(_) => return,
            Phase::Preparation(_) | Phase::Progress | Phase::Pause(_) => {}
        }
        let mut crossings = Crossings::default();
        if let Some(back) = self.previous.filter(|previous| reading.time <= *previous) {
            let by = micros(back.saturating_since(reading.time)).saturating_neg();
            crossings.add(crossing(Interlock::Clock, by, 0));
            self.trip(&crossings);
            return;
        }
        let anew = self.new_window.is_some();
        let (plan, previous) = (self.program.plan(), self.previous);
        let seen = Observation::new(plan, reading, self.now, previous, anew);
        self.new_window = self.new_window.filter(|window| !window.acknowledged);
        let silent = self.now.saturating_since(self.latest_at);
        let last = self.latest;
        if let Phase::Preparation(preparation) = &self.phase
            && preparation.rebooted
            && seen.first
        {
            self.account.restart();
        }
        let increment = self.account.take(&seen);
        self.previous = Some(seen.time);
        self.latest = seen.time;
        self.latest_at = seen.at;
        self.voltage = seen.voltage.mean;

        self.course.doubt(seen.time);
        let expected = self.expectation(&seen);
        self.judge(&seen, increment.as_ref(), &expected, &mut crossings);
        if !seen.first {
            let silence = micros(self.plan().interlocks.silence);
            self.guard
                .judge_total(Interlock::Silence, micros(silent), silence, &mut crossings);
        }
        let latched = match seen.state {
            SinkState::Latched(cause) => Some(cause),
            SinkState::Off | SinkState::On | SinkState::Saturated => None,
        };
        // A sink that has turned itself off follows nothing: what it latched for names the trip.
        let gave_up = latched.is_none() && self.judge_following(&seen, &expected, &mut crossings);
        if let (Some(cause), true) = (latched, self.phase.is_under_way()) {
            crossings.add(self.crossed_by_sink(cause, &seen));
            if cause == Cause::Sensor && seen.current_at_stop {
                crossings.add_some(beyond_any_setpoint(self.plan()));
            }
        }
        if !crossings.is_empty() {
            self.trip(&crossings);
            return;
        }
        if seen.lost > 0 {
            self.find(Finding::ReadbacksLost { count: seen.lost });
        }
        self.begun_through = self.begun_through.max(seen.time);
        match self.phase.clone() {
            Phase::Preparation(preparation) => {
                if preparation.again {
                    self.close_gap(preparation, last, increment.as_ref());
                }
                self.prepare(preparation, latched);
            }
            Phase::Progress => self.go_along(&seen, increment.as_ref(), gave_up),
            Phase::Pause(_) => {
                self.begin_due(seen.time, increment.as_ref());
                self.go_on_if_possible();
            }
            Phase::Waiting | Phase::Interruption { .. } | Phase::End(_) => {}
        }
    }

    /// Every interlock that a reading decides, but for not following.
    fn judge(
        &mut self,
        seen: &Observation,
        increment: Option<&Increment>,
        expected: &Expectation,
        crossings: &mut Crossings,
    ) {
        let plan = self.program.plan();
        let starting = matches!(self.phase, Phase::Preparation(_));
        let counted = increment
            .filter(|increment| increment.from == seen.from)
            .map(Increment::charge);
        self.guard
            .judge_levels(plan, seen, counted, starting, crossings);
        let sum = self.account.sum();
        let delivered = (sum.charge(&plan.correction), sum.energy(&plan.correction));
        judge_delivered(&mut self.guard, plan, delivered, crossings);
        if let Some(limit) = plan.interlocks.time {
            let (elapsed, limit) = (micros(self.elapsed), micros(limit));
            self.guard
                .judge_total(Interlock::Time, elapsed, limit, crossings);
        }
        let bound = plan.interlocks.clock;
        let drift = self
            .alignment
            .take(seen.time, seen.at, bound)
            .map_or(0, micros);
        self.guard
            .judge_total(Interlock::Clock, drift, micros(bound), crossings);
        let limit = plan.interlocks.not_releasing;
        self.guard.judge_releasing(limit, seen, expected, crossings);
    }

    fn expectation(&self, seen: &Observation) -> Expectation {
        match self.phase {
            Phase::Progress | Phase::Pause(_) => {
                let cap = self.plan().interlocks.over_current.threshold;
                Expectation::new(self.course.possible_steps(), seen, cap)
            }
            // The first reading of a session may hold what flowed before it.
            Phase::Preparation(_) if seen.first => Expectation {
                largest: None,
                ..Expectation::OFF
            },
            Phase::Preparation(_) | Phase::Waiting | Phase::Interruption { .. } | Phase::End(_) => {
                Expectation::OFF
            }
        }
    }

    /// Whether the running step's source has given up as it may; anything else that does not
    /// follow crosses.
    fn judge_following(
        &mut self,
        seen: &Observation,
        expected: &Expectation,
        crossings: &mut Crossings,
    ) -> bool {
        if self.phase != Phase::Progress {
            return false;
        }
        let limit = self.plan().interlocks.not_following;
        let Some(found) = self.guard.judge_following(limit, seen, expected) else {
            return false;
        };
        let may = self.course.running.as_ref().is_some_and(|running| {
            running.step.may_give_up && running.step.slot.start <= seen.from
        });
        if !may {
            crossings.add(found);
        }
        may
    }

    /// The sink says that it has latched and the word of why was lost: what the reading shows.
    fn crossed_by_sink(&self, cause: Cause, seen: &Observation) -> Crossing {
        let (interlock, threshold) = interlock_of(cause, self.plan());
        let value = match cause {
            Cause::Current => seen.current.max.microamperes(),
            Cause::Power => seen.voltage.max.times(seen.current.max).microwatts(),
            Cause::VoltageHigh => seen.voltage.max.microvolts(),
            Cause::VoltageLow => seen.voltage.min.microvolts(),
            Cause::Temperature => match seen.temperature {
                TemperatureReading::Value(value) => value.millidegrees_celsius(),
                TemperatureReading::Open | TemperatureReading::Short => 0,
            },
            Cause::Excess | Cause::Sensor | Cause::Deadman | Cause::Watchdog => 0,
        };
        Crossing {
            interlock,
            value,
            threshold,
            by_sink: true,
        }
    }
}
