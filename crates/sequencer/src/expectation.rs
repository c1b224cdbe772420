//! The setpoint as a function of the sink's time, and what the readback must show for it.
//!
//! Bounds, not estimates: an interval that holds edges still tells something (its largest
//! current must be at least that of any setpoint that was held long enough in it), and a
//! regulated step is bounded by the extremes of voltage in the same interval. So an interlock
//! that judges by these bounds never trips on a sink that follows.

use quantity::{Current, SinkTime, Span};
use sequence::plan::Action;
use wire::OrderId;

use crate::observation::{Cover, Observation, Spread};
use crate::program::Slot;

/// After an edge or a change of slope the readback may lag behind the setpoint for this long:
/// the loop, its filter and the converter's averaging.
pub(crate) const SETTLING: Span = Span::from_millis(20);

/// A step as it was ordered.
#[derive(Debug, Clone)]
pub(crate) struct Ordered {
    pub(crate) slot: Slot,
    pub(crate) order: OrderId,
    pub(crate) action: Action,
    /// The setpoint just before its start; for a regulated one, what was expected then.
    pub(crate) before: Current,
    /// Where a ramp begins, at least and at most: which step was running is not always sure.
    pub(crate) ramp_from: (Current, Current),
    /// Time over which the setpoint moves.
    pub(crate) ramp: Span,
    /// When the sink turns off by itself if nothing follows.
    pub(crate) hold_end: SinkTime,
    /// Until when current may flow for it: its end, or later where nothing follows at once.
    pub(crate) drawn_until: SinkTime,
    /// It was broken off: the sink is off before the next one begins.
    pub(crate) broken_off: bool,
    /// The sink has said that it has it.
    pub(crate) acknowledged: bool,
    /// Its source is expected to give up.
    pub(crate) may_give_up: bool,
}

impl Ordered {
    /// The current that is asked for at an instant of the step, given the voltage there.
    ///
    /// `None` for a regulated step at a voltage for which nothing can be said.
    pub(crate) fn setpoint(&self, time: SinkTime, voltage: quantity::Voltage) -> Option<Current> {
        match self.action {
            Action::Rest => Some(Current::ZERO),
            Action::Current { target, .. } => Some(self.on_ramp(self.ramp_from.1, time, target)),
            Action::Power { target } => target
                .over(voltage)
                .filter(|current| !current.is_negative()),
            Action::Resistance { target } => voltage
                .over(target)
                .map(|current| current.max(Current::ZERO)),
        }
    }

    fn on_ramp(&self, from: Current, time: SinkTime, target: Current) -> Current {
        let gone = time.saturating_since(self.slot.start);
        if gone >= self.ramp {
            return target;
        }
        let from = i128::from(from.microamperes());
        let to = i128::from(target.microamperes());
        let ramp = i128::from(self.ramp.micros()).max(1);
        let level = from + (to - from) * i128::from(gone.micros()) / ramp;
        Current::from_microamperes(i64::try_from(level).unwrap_or(target.microamperes()))
    }

    /// Least and largest setpoint at an instant; `None` for a regulated step.
    pub(crate) fn levels(&self, time: SinkTime) -> Option<(Current, Current)> {
        match self.action {
            Action::Rest => Some((Current::ZERO, Current::ZERO)),
            Action::Current { target, .. } => {
                let (least, most) = self.ramp_from;
                Some((
                    self.on_ramp(least, time, target),
                    self.on_ramp(most, time, target),
                ))
            }
            Action::Power { .. } | Action::Resistance { .. } => None,
        }
    }

    /// Least and largest setpoint between two instants of the step.
    ///
    /// For a regulated step `voltage` bounds them; the largest is `None` if nothing does.
    fn bounds(
        &self,
        from: SinkTime,
        to: SinkTime,
        voltage: Spread<quantity::Voltage>,
    ) -> (Current, Option<Current>) {
        match self.action {
            Action::Rest => (Current::ZERO, Some(Current::ZERO)),
            Action::Current { target, .. } => {
                let flat = (target, target);
                let (a, b) = (
                    self.levels(from).unwrap_or(flat),
                    self.levels(to).unwrap_or(flat),
                );
                (a.0.min(b.0), Some(a.1.max(b.1)))
            }
            Action::Power { .. } => (
                self.setpoint(to, voltage.max).unwrap_or(Current::ZERO),
                self.setpoint(to, voltage.min),
            ),
            Action::Resistance { .. } => (
                self.setpoint(to, voltage.min).unwrap_or(Current::ZERO),
                self.setpoint(to, voltage.max),
            ),
        }
    }

    /// It is long over: nothing of it can show in a reading any more.
    pub(crate) fn forget_times(&mut self) {
        self.slot.start = SinkTime::ZERO;
        self.slot.end = SinkTime::ZERO;
        self.hold_end = SinkTime::ZERO;
        self.drawn_until = SinkTime::ZERO;
        self.broken_off = true;
    }

    fn rests(&self) -> bool {
        match self.action {
            Action::Rest => true,
            Action::Current { target, .. } => target == Current::ZERO,
            Action::Power { .. } | Action::Resistance { .. } => false,
        }
    }
}

/// What the readback of an interval must show.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(crate) struct Expectation {
    /// The least current must not be below this: one settled step filled the whole interval.
    pub(crate) least: Option<Current>,
    /// The largest current must not be below this: it was held and settled within the interval.
    pub(crate) reached: Option<Current>,
    /// The largest current must not be above this; `None` if nothing bounds it.
    pub(crate) largest: Option<Current>,
    /// One settled step filled the interval, and it draws: being out of headroom counts.
    pub(crate) drawing: bool,
}

impl Expectation {
    /// Nothing is drawn: held, waiting, or before the first step.
    pub(crate) const OFF: Self = Self {
        least: None,
        reached: None,
        largest: Some(Current::ZERO),
        drawing: false,
    };

    /// Works out what the steps, in their order, ask for in the observation's interval.
    ///
    /// `cap` bounds regulated setpoints: the sink never sets more than its current limit.
    pub(crate) fn new<'a>(
        steps: impl Iterator<Item = &'a Ordered>,
        seen: &Observation,
        cap: Current,
    ) -> Self {
        let mut expectation = Self {
            largest: Some(Current::ZERO),
            ..Self::default()
        };
        for step in steps {
            if step.slot.start >= seen.time {
                break;
            }
            expectation.add(step, seen, cap);
        }
        expectation
    }

    fn add(&mut self, step: &Ordered, seen: &Observation, cap: Current) {
        let lagging = seen.from.saturating_sub(SETTLING);
        let (start, end) = (step.slot.start, step.slot.end);
        if step.drawn_until.saturating_add(SETTLING) <= seen.from {
            return;
        }
        // Anything asked for since shortly before the interval may still flow in it.
        let until = seen.time.min(end.max(step.drawn_until));
        let (_, highest) = step.bounds(lagging.max(start), until, seen.voltage);
        let highest = highest.map(|current| current.min(cap));
        self.largest = self.largest.zip(highest).map(|(a, b)| a.max(b));
        if seen.from < start.saturating_add(SETTLING) {
            self.largest = self
                .largest
                .map(|largest| largest.max(step.before.min(cap)));
        }
        // What was asked for long enough must have been reached.
        let (from, to) = (
            seen.from.max(start.saturating_add(SETTLING)),
            seen.time.min(end),
        );
        let whole = from == seen.from && to == seen.time;
        if from >= to || seen.first || !step.acknowledged {
            return;
        }
        // A step that ended within the interval may have been over before the extremes began.
        if (step.may_give_up || seen.cover == Cover::End) && !whole {
            return;
        }
        let (lagged, _) = step.bounds(to.saturating_sub(SETTLING).max(start), to, seen.voltage);
        let reached = lagged.min(cap);
        self.reached = Some(self.reached.map_or(reached, |other| other.max(reached)));
        if whole {
            let (least, _) =
                step.bounds(from.saturating_sub(SETTLING).max(start), to, seen.voltage);
            self.least = Some(least.min(cap));
            self.drawing = !step.rests();
        }
    }
}
