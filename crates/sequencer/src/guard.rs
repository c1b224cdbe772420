//! The interlocks, judged so that doubt trips.
//!
//! An interval whose extreme crosses counts in full towards a persistence. One exception: where
//! the sink judges the same limit at every sample and the persistence is shorter than the
//! interval, the host cannot know for how long the extreme lasted and the sink can; there the
//! host counts only intervals that lie wholly across (`docs/interlocks.md`).
//!
//! The guard keeps, for every interlock, how near it came: the page and the report show it.

use quantity::{Charge, Current, Energy, Power, Span};
use sequence::plan::{Armed, Plan};
use wire::{Cause, SinkState, TemperatureReading};

use crate::event::{Crossing, Interlock};
use crate::expectation::Expectation;
use crate::observation::{Cover, Observation};

/// Temperatures outside this no sensor on a heat sink reports while it works (m°C).
const TEMPERATURES: std::ops::RangeInclusive<i64> = -60_000..=300_000;
/// Charge that must have been counted if the mean current says so, before a counter is called
/// stuck: far above any rounding of either (uC).
const STUCK_CHARGE: i64 = 1_000;

/// The sink's value of a trip by the sensor: the current stands at its converter's stop.
pub(crate) const CURRENT_AT_STOP: i64 = 3;

/// Crossings of one event, in the table's order.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Crossings {
    found: [Option<Crossing>; Interlock::ALL.len()],
}

impl Crossings {
    /// Adds one; a second crossing of the same interlock is the same crossing.
    pub(crate) fn add(&mut self, crossing: Crossing) {
        if let Some(place) = self.found.get_mut(crossing.interlock.index()) {
            place.get_or_insert(crossing);
        }
    }

    /// Adds one if there is one.
    pub(crate) fn add_some(&mut self, crossing: Option<Crossing>) {
        if let Some(crossing) = crossing {
            self.add(crossing);
        }
    }

    pub(crate) fn iter(&self) -> impl Iterator<Item = Crossing> {
        self.found.iter().flatten().copied()
    }

    pub(crate) fn is_empty(&self) -> bool {
        self.found.iter().all(Option::is_none)
    }
}

/// How near an interlock came.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Margin {
    /// Which.
    pub interlock: Interlock,
    /// The value now, in the interlock's unit.
    pub value: i64,
    /// The value nearest to the threshold so far.
    pub worst_value: i64,
    /// What must not be crossed.
    pub threshold: i64,
    /// How near the value is now: 0 far away, 1000 at the threshold, more beyond it.
    pub permille: u32,
    /// How near it has been so far.
    pub worst_permille: u32,
}

/// One interlock's memory.
#[derive(Debug, Clone, Copy, Default)]
struct Post {
    crossed_for: Span,
    margin: Option<Margin>,
}

/// Where a value stands.
#[derive(Debug, Clone, Copy)]
struct Stand {
    interlock: Interlock,
    /// The extreme nearest to the threshold.
    value: i64,
    threshold: i64,
    permille: u32,
    persistence: Span,
    /// The extreme crosses.
    touched: bool,
    /// The whole interval crosses.
    wholly: bool,
    /// The sink judges the same limit at every sample now.
    sink_copy: bool,
}

/// Judges the interlocks that readings decide.
#[derive(Debug, Clone, Default)]
pub(crate) struct Guard {
    posts: [Post; Interlock::ALL.len()],
}

impl Guard {
    /// A new session: what had been crossed before says nothing about now.
    pub(crate) fn restart(&mut self) {
        for post in &mut self.posts {
            post.crossed_for = Span::ZERO;
        }
    }

    /// Temperature, power, voltages, current, the sensor: what is judged in every phase.
    ///
    /// `at_once` takes every persistence for zero: before a start nothing has to be ridden out.
    pub(crate) fn judge_levels(
        &mut self,
        plan: &Plan,
        seen: &Observation,
        counted: Option<Charge>,
        at_once: bool,
        crossings: &mut Crossings,
    ) {
        let armed = &plan.interlocks;
        let on = seen.on();
        if let TemperatureReading::Value(value) = seen.temperature {
            let limit = armed.over_temperature;
            let value = value.millidegrees_celsius();
            let stand = above(
                Interlock::OverTemperature,
                (value, value),
                limit.threshold.millidegrees_celsius(),
                limit.persistence,
            );
            self.weigh(
                stand.with_sink_copy(true),
                seen.interval(),
                at_once,
                crossings,
            );
        }
        let (voltage, current) = (seen.voltage, seen.current);
        let power = (
            voltage.max.times(current.max).max(Power::ZERO).microwatts(),
            voltage.min.times(current.min).microwatts(),
        );
        let limit = armed.over_power;
        let stand = above(
            Interlock::OverPower,
            power,
            limit.threshold.microwatts(),
            limit.persistence,
        );
        self.weigh(
            stand.with_sink_copy(on),
            seen.interval(),
            at_once,
            crossings,
        );

        let lows = (voltage.min.microvolts(), voltage.max.microvolts());
        let limit = armed.undervoltage;
        let stand = below(
            Interlock::Undervoltage,
            lows,
            limit.threshold.microvolts(),
            limit.persistence,
        );
        self.weigh(
            stand.with_sink_copy(on),
            seen.interval(),
            at_once,
            crossings,
        );
        let limit = armed.over_voltage;
        let highs = (lows.1, lows.0);
        let stand = above(
            Interlock::OverVoltage,
            highs,
            limit.threshold.microvolts(),
            limit.persistence,
        );
        self.weigh(
            stand.with_sink_copy(on),
            seen.interval(),
            at_once,
            crossings,
        );
        let limit = armed.reversed_polarity;
        let stand = below(
            Interlock::ReversedPolarity,
            lows,
            limit.threshold.microvolts(),
            limit.persistence,
        );
        self.weigh(stand, seen.interval(), at_once, crossings);

        let limit = armed.over_current;
        let currents = (current.max.microamperes(), current.min.microamperes());
        let stand = above(
            Interlock::OverCurrent,
            currents,
            limit.threshold.microamperes(),
            limit.persistence,
        );
        self.weigh(
            stand.with_sink_copy(on),
            seen.interval(),
            at_once,
            crossings,
        );
        self.judge_sensor(armed.sensor_fault, seen, counted, at_once, crossings);
    }

    /// A sensor open or shorted, a value that no converter shows, a counter that stands still
    /// while current flows.
    fn judge_sensor(
        &mut self,
        persistence: Span,
        seen: &Observation,
        counted: Option<Charge>,
        at_once: bool,
        crossings: &mut Crossings,
    ) {
        let fault = match seen.temperature {
            TemperatureReading::Open => 1,
            TemperatureReading::Short => 2,
            TemperatureReading::Value(value)
                if !TEMPERATURES.contains(&value.millidegrees_celsius()) =>
            {
                3
            }
            TemperatureReading::Value(_) if seen.impossible || stuck(seen, counted) => 3,
            TemperatureReading::Value(_) => 0,
        };
        let stand = Stand {
            interlock: Interlock::SensorFault,
            value: fault,
            threshold: 0,
            permille: if fault == 0 { 0 } else { 1000 },
            persistence,
            touched: fault != 0,
            wholly: fault != 0,
            sink_copy: false,
        };
        self.weigh(stand, seen.interval(), at_once, crossings);
    }

    /// Whether the readback exceeds what was asked for.
    pub(crate) fn judge_releasing(
        &mut self,
        limit: Armed<Current>,
        seen: &Observation,
        expected: &Expectation,
        crossings: &mut Crossings,
    ) {
        let Some(largest) = expected.largest else {
            return;
        };
        let excess = |current: Current| current.saturating_sub(largest).microamperes();
        let stand = above(
            Interlock::NotReleasing,
            (excess(seen.current.max), excess(seen.current.min)),
            limit.threshold.microamperes(),
            limit.persistence,
        );
        self.weigh(
            stand.with_sink_copy(seen.on()),
            seen.interval(),
            false,
            crossings,
        );
    }

    /// Whether the readback falls short of what was asked for, for the interlock's persistence.
    ///
    /// Returns the crossing rather than adding it: a step may allow its source to give up.
    pub(crate) fn judge_following(
        &mut self,
        limit: Armed<Current>,
        seen: &Observation,
        expected: &Expectation,
    ) -> Option<Crossing> {
        let short = |wanted: Option<Current>, shown: Current| {
            wanted.map(|wanted| wanted.saturating_sub(shown).microamperes())
        };
        let by_least = short(expected.least, seen.current.min);
        let by_largest = short(expected.reached, seen.current.max);
        let value = by_least.max(by_largest)?;
        let threshold = limit.threshold.microamperes();
        let saturated = expected.drawing && seen.state == SinkState::Saturated;
        let mut stand = above(
            Interlock::NotFollowing,
            (value, value),
            threshold,
            limit.persistence,
        );
        if saturated && !stand.touched {
            stand.touched = true;
            stand.permille = stand.permille.max(1000);
        }
        let mut crossings = Crossings::default();
        self.weigh(stand, seen.interval(), false, &mut crossings);
        crossings.iter().next()
    }

    /// Forgets how long the sink has not followed: a step begins that is judged by itself.
    pub(crate) fn forgive_following(&mut self) {
        if let Some(post) = self.posts.get_mut(Interlock::NotFollowing.index()) {
            post.crossed_for = Span::ZERO;
        }
    }

    /// A total that must not be exceeded: charge, energy, time, silence, drift.
    pub(crate) fn judge_total(
        &mut self,
        interlock: Interlock,
        value: i64,
        threshold: i64,
        crossings: &mut Crossings,
    ) {
        let stand = above(interlock, (value, value), threshold, Span::ZERO);
        self.weigh(stand, Span::ZERO, false, crossings);
    }

    fn weigh(&mut self, stand: Stand, interval: Span, at_once: bool, crossings: &mut Crossings) {
        let Some(post) = self.posts.get_mut(stand.interlock.index()) else {
            return;
        };
        let worst = post.margin.map_or((stand.permille, stand.value), |margin| {
            if stand.permille > margin.worst_permille {
                (stand.permille, stand.value)
            } else {
                (margin.worst_permille, margin.worst_value)
            }
        });
        post.margin = Some(Margin {
            interlock: stand.interlock,
            value: stand.value,
            worst_value: worst.1,
            threshold: stand.threshold,
            permille: stand.permille,
            worst_permille: worst.0,
        });
        let known_by_sink =
            stand.sink_copy && stand.persistence > Span::ZERO && stand.persistence < interval;
        let counts = if known_by_sink && !at_once {
            stand.wholly
        } else {
            stand.touched
        };
        if !counts {
            post.crossed_for = Span::ZERO;
            return;
        }
        post.crossed_for = post.crossed_for.saturating_add(interval);
        if at_once || post.crossed_for >= stand.persistence {
            crossings.add(Crossing {
                interlock: stand.interlock,
                value: stand.value,
                threshold: stand.threshold,
                by_sink: false,
            });
        }
    }

    /// Every armed interlock that has been judged, in the table's order.
    pub(crate) fn margins(&self) -> impl Iterator<Item = Margin> {
        self.posts.iter().filter_map(|post| post.margin)
    }
}

impl Stand {
    fn with_sink_copy(self, sink_copy: bool) -> Self {
        Self { sink_copy, ..self }
    }
}

/// `values`: the extreme nearest to the threshold, and the one farthest from it.
fn above(interlock: Interlock, values: (i64, i64), threshold: i64, persistence: Span) -> Stand {
    let (value, farthest) = values;
    Stand {
        interlock,
        value,
        threshold,
        permille: ratio(value, threshold, value > threshold),
        persistence,
        touched: value > threshold,
        wholly: farthest > threshold,
        sink_copy: false,
    }
}

fn below(interlock: Interlock, values: (i64, i64), threshold: i64, persistence: Span) -> Stand {
    let (value, farthest) = values;
    let touched = value < threshold;
    // Above zero the threshold over the value; at or below zero, how far below zero it is.
    let permille = if threshold > 0 {
        if value <= 0 {
            ratio(2, 1, touched)
        } else {
            ratio(threshold, value, touched)
        }
    } else {
        ratio(value.saturating_neg(), threshold.saturating_neg(), touched)
    };
    Stand {
        interlock,
        value,
        threshold,
        permille,
        persistence,
        touched,
        wholly: farthest < threshold,
        sink_copy: false,
    }
}

/// `part / whole` in parts in a thousand, between 0 and 2000; at least 1000 when crossed.
fn ratio(part: i64, whole: i64, crossed: bool) -> u32 {
    let least = if crossed { 1000 } else { 0 };
    if whole <= 0 {
        return least;
    }
    // What does not fit times a thousand is far above any threshold's double, or divides well
    // enough without: nothing is decided by it.
    let ratio = match part.checked_mul(1000) {
        Some(scaled) => scaled / whole,
        None => (part / whole).saturating_mul(1000),
    };
    u32::try_from(ratio.clamp(0, 2000))
        .unwrap_or(2000)
        .max(least)
}

/// A counter that stands still while the nominal means say that charge has flowed. True values
/// would not do: a correction's offset flows in them even where the converter shows nothing.
///
/// Equal readings prove nothing (a quiet front end shows the same codes for hours), so this is
/// the only sign of a frozen reading that the host takes by itself; a readback frozen across a
/// change of setpoint shows as not following or not releasing.
fn stuck(seen: &Observation, counted: Option<Charge>) -> bool {
    let expected = seen.current_nominal.times(seen.interval());
    seen.on()
        && seen.cover == Cover::Whole
        && expected.microcoulombs() >= STUCK_CHARGE
        && counted == Some(Charge::ZERO)
}

/// The interlock that a cause of the sink's own stands for, and its threshold in the plan.
pub(crate) fn interlock_of(cause: Cause, plan: &Plan) -> (Interlock, i64) {
    let armed = &plan.interlocks;
    match cause {
        Cause::Temperature => (
            Interlock::OverTemperature,
            armed.over_temperature.threshold.millidegrees_celsius(),
        ),
        Cause::Power => (
            Interlock::OverPower,
            armed.over_power.threshold.microwatts(),
        ),
        Cause::VoltageLow => (
            Interlock::Undervoltage,
            armed.undervoltage.threshold.microvolts(),
        ),
        Cause::VoltageHigh => (
            Interlock::OverVoltage,
            armed.over_voltage.threshold.microvolts(),
        ),
        Cause::Current => (
            Interlock::OverCurrent,
            armed.over_current.threshold.microamperes(),
        ),
        Cause::Excess => (
            Interlock::NotReleasing,
            armed.not_releasing.threshold.microamperes(),
        ),
        Cause::Sensor => (Interlock::SensorFault, 0),
        Cause::Deadman => (Interlock::Silence, micros(plan.deadman)),
        Cause::Watchdog => (Interlock::Clock, 0),
    }
}

/// A current at its converter's stop, which the sink has turned off for as a faulty sensor.
///
/// The stop hides how much flows, but it is above anything that may be asked for: unless the
/// limit lies as high as the stop, the sink does not release, and a person must hear of it.
pub(crate) fn beyond_any_setpoint(plan: &Plan) -> Option<Crossing> {
    let armed = &plan.interlocks;
    let shown = plan.correction.current_from_readback(plan.ranges.current);
    let excess = shown.saturating_sub(armed.over_current.threshold);
    let threshold = armed.not_releasing.threshold;
    (excess > threshold).then_some(Crossing {
        interlock: Interlock::NotReleasing,
        value: excess.microamperes(),
        threshold: threshold.microamperes(),
        by_sink: true,
    })
}

/// A span as an interlock's value.
pub(crate) fn micros(span: Span) -> i64 {
    i64::try_from(span.micros()).unwrap_or(i64::MAX)
}

/// Charge and energy of the whole run against their limits.
pub(crate) fn judge_delivered(
    guard: &mut Guard,
    plan: &Plan,
    delivered: (Charge, Energy),
    crossings: &mut Crossings,
) {
    if let Some(limit) = plan.interlocks.charge {
        guard.judge_total(
            Interlock::Charge,
            delivered.0.microcoulombs(),
            limit.microcoulombs(),
            crossings,
        );
    }
    if let Some(limit) = plan.interlocks.energy {
        guard.judge_total(
            Interlock::Energy,
            delivered.1.microjoules(),
            limit.microjoules(),
            crossings,
        );
    }
}
