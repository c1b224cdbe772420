//! A rehearsal as the interface offers it: the run's own keeper in virtual time, its curve kept
//! in a bounded number of points, its time bounded.

use std::time::Duration;

use journal::{Body, Entry};
use quantity::{Charge, Current, HostTime, Span, Voltage};
use run::KeeperConfig;
use run::rehearse::{Observer, RehearseError, rehearse};
use sequence::Compiled;
use sequencer::Sequencer;
use sequencer::event::{Command, Crossing, Finding, Happening};
use simulator::device::SimulatedSink;
use sink::bench::{Link, SinkEntry};
use sink::correction::Correction;
use transport::port::HostClock;
use wire::{Counters, Reading, TemperatureReading};

use crate::sinks::SinkHandle;
use crate::view::{
    CheckView, Code, CrossingView, CurveView, MarginView, Problem, RehearsalView, RehearseRequest,
};
use crate::worker::ending_view;

/// Points of the curve unless said.
const POINTS_USUAL: u32 = 1_000;
/// Most points of the curve.
const POINTS_MAX: u32 = 20_000;
/// How long a rehearsal itself may take.
const TOOK_MAX: Duration = Duration::from_secs(90);
/// Virtual time beyond the plan's own longest: setup, and the last words.
const BEYOND_PLAN: Span = Span::from_secs(60);
/// Virtual time of a plan that nothing bounds.
const UNBOUNDED_MAX: Span = Span::from_secs(400 * 24 * 3600);
/// Moves of virtual time between two looks at the clock.
const LOOK_EVERY: u32 = 1_024;
/// Points of the planned shape.
pub(crate) const OUTLINE_POINTS: usize = 500;

/// Rehearses a checked sequence for a sink.
///
/// # Errors
/// [`Problem`] for a source that cannot be, or a run that comes to no end.
pub(crate) fn run(
    sink: &SinkHandle,
    request: &RehearseRequest,
    compiled: Compiled,
) -> Result<RehearsalView, Problem> {
    let clock = HostClock::start();
    let begun = clock.now();
    let entry = simulated(&sink.entry, request.source.as_ref())?;
    let refused = |error: String| Problem::new(Code::SourceRefused, error);
    let mut device =
        simulator::simulated_sink(&entry).map_err(|error| refused(error.to_string()))?;
    let config = KeeperConfig::for_sink(&entry).map_err(|error| refused(error.to_string()))?;
    let check = CheckView::new(&compiled, OUTLINE_POINTS);
    let longest = compiled.plan.duration_at_most();
    let at_most = longest.saturating_add(BEYOND_PLAN).min(UNBOUNDED_MAX);
    let points = request.points.unwrap_or(POINTS_USUAL).clamp(2, POINTS_MAX);
    let mut watcher = Watcher::new(compiled.plan.correction, points, clock);
    let sequencer = Sequencer::new(compiled.plan)
        .map_err(|error| Problem::new(Code::SequenceRefused, error.to_string()))?;
    let rehearsal = rehearse(sequencer, config, &mut device, begun, at_most, &mut watcher)
        .map_err(|error| match error {
            RehearseError::Plan(_) => Problem::new(Code::SequenceRefused, error.to_string()),
            RehearseError::NotTheSinkDescribed(_) | RehearseError::Endless(_) => {
                Problem::new(Code::RehearsalFailed, error.to_string())
            }
        })?;
    if watcher.stopped {
        let most = TOOK_MAX.as_secs();
        let passed = rehearsal.status.elapsed;
        let detail = format!(
            "the rehearsal had come to {passed} after {most} s and was given up; rehearse a shorter part, or on the command line"
        );
        return Err(Problem::new(Code::RehearsalFailed, detail));
    }
    let ending = ending_view(
        &rehearsal.ending,
        &watcher.crossings,
        None,
        begun.saturating_add(rehearsal.took),
    );
    let status = &rehearsal.status;
    let mut margins = MarginView::nearest_first(&status.margins);
    margins.sort_by(|a, b| b.worst_nearness.total_cmp(&a.worst_nearness));
    Ok(RehearsalView {
        check,
        ending,
        crossings: watcher.crossings.iter().map(CrossingView::new).collect(),
        duration_s: status.elapsed.seconds(),
        charge_ah: status.charge.ampere_hours(),
        energy_wh: status.energy.watt_hours(),
        peak_temperature_degc: watcher.peak_millidegc.map(|peak| f64::from(peak) / 1e3),
        margins,
        readbacks: watcher.readbacks,
        curve: watcher.curve.view(),
        took_s: clock.now().saturating_since(begun).seconds(),
    })
}

/// The entry with a simulated source: its own, or the one asked for.
fn simulated(entry: &SinkEntry, source: Option<&serde_json::Value>) -> Result<SinkEntry, Problem> {
    let mut entry = entry.clone();
    match (source, &entry.link) {
        (Some(source), _) => {
            entry.link = Link::Simulated {
                source: source.clone(),
                time_factor: std::num::NonZeroU32::MIN,
            };
        }
        (None, Link::Simulated { .. }) => {}
        (None, Link::Serial { .. } | Link::Tcp { .. }) => {
            let detail = format!(
                "sink `{}` is a real one; say what to rehearse against, such as \"source\": {{\"cell\": \"K\"}}",
                entry.name
            );
            return Err(Problem::new(Code::SourceNeeded, detail));
        }
    }
    Ok(entry)
}

/// Watches a rehearsal: keeps its curve, and ends one that takes too long.
struct Watcher {
    curve: Curve,
    crossings: Vec<Crossing>,
    peak_millidegc: Option<i32>,
    readbacks: u64,
    clock: HostClock,
    since: HostTime,
    looked: u32,
    stopped: bool,
}

impl Watcher {
    fn new(correction: Correction, points: u32, clock: HostClock) -> Self {
        Self {
            curve: Curve::new(correction, points as usize),
            crossings: Vec::new(),
            peak_millidegc: None,
            readbacks: 0,
            clock,
            since: clock.now(),
            looked: 0,
            stopped: false,
        }
    }
}

impl Observer for Watcher {
    fn entry(&mut self, entry: &Entry) {
        match &entry.body {
            Body::Event(Happening::Reading(reading)) => {
                self.readbacks += 1;
                if let TemperatureReading::Value(value) = reading.values.temperature {
                    let value = i32::try_from(value.millidegrees_celsius()).unwrap_or(i32::MAX);
                    self.peak_millidegc = self.peak_millidegc.max(Some(value));
                }
                self.curve.take(entry.at, reading);
            }
            Body::Finding(Finding::Crossed(crossing)) => self.crossings.push(*crossing),
            Body::Event(_)
            | Body::Order { .. }
            | Body::Off
            | Body::Finding(_)
            | Body::Ended(_)
            | Body::Note(_) => {}
        }
    }

    fn intervene(&mut self, _passed: Span, _device: &mut SimulatedSink) -> Option<Command> {
        self.looked += 1;
        if self.stopped || self.looked < LOOK_EVERY {
            return None;
        }
        self.looked = 0;
        let took = self.clock.now().saturating_since(self.since);
        self.stopped = Duration::from_micros(took.micros()) > TOOK_MAX;
        self.stopped.then_some(Command::Stop)
    }
}

/// A curve of which the length is not known beforehand, in a bounded number of points: when they
/// are full, neighbours are joined and each takes twice the time.
struct Curve {
    correction: Correction,
    most: usize,
    start: Option<HostTime>,
    width: Span,
    points: Vec<Stretch>,
    /// Counters of the first readback, from which charge is counted.
    base: Option<Counters>,
    charge: Charge,
}

/// All readbacks of a stretch of time, nominal.
#[derive(Debug, Clone, Copy)]
struct Stretch {
    place: u64,
    first: Span,
    /// True, when the first readback came.
    charge: Charge,
    count: u64,
    /// Least, sum of means, largest.
    current: [i64; 3],
    voltage: [i64; 3],
    /// How many, their sum, the largest.
    temperature: (u64, i64, i64),
}

impl Curve {
    fn new(correction: Correction, most: usize) -> Self {
        Self {
            correction,
            most,
            start: None,
            width: Span::from_millis(1),
            points: Vec::new(),
            base: None,
            charge: Charge::ZERO,
        }
    }

    fn take(&mut self, at: HostTime, reading: &Reading) {
        let start = *self.start.get_or_insert(at);
        let first = at.saturating_since(start);
        let values = &reading.values;
        if let Some(counters) = reading.counters {
            let base = self.base.get_or_insert(counters);
            self.charge = self.correction.charge_from_counter(
                counters.charge.saturating_sub(base.charge),
                counters.time.saturating_since(base.time),
            );
        }
        let mut new = Stretch {
            charge: self.charge,
            place: first.micros() / self.width.micros(),
            first,
            count: 1,
            current: [values.current_min, values.current, values.current_max]
                .map(Current::microamperes),
            voltage: [values.voltage_min, values.voltage, values.voltage_max]
                .map(Voltage::microvolts),
            temperature: match values.temperature {
                TemperatureReading::Value(value) => {
                    let value = value.millidegrees_celsius();
                    (1, value, value)
                }
                TemperatureReading::Open | TemperatureReading::Short => (0, 0, i64::MIN),
            },
        };
        if self.joins(&new) {
            return;
        }
        while self.points.len() >= self.most {
            self.halve();
            new.place = first.micros() / self.width.micros();
            if self.joins(&new) {
                return;
            }
        }
        self.points.push(new);
    }

    fn joins(&mut self, new: &Stretch) -> bool {
        match self.points.last_mut() {
            Some(last) if last.place == new.place => {
                last.join(new);
                true
            }
            Some(_) | None => false,
        }
    }

    fn halve(&mut self) {
        self.width = self.width.saturating_add(self.width);
        let mut joined: Vec<Stretch> = Vec::with_capacity(self.points.len());
        for mut point in self.points.drain(..) {
            point.place /= 2;
            match joined.last_mut() {
                Some(last) if last.place == point.place => last.join(&point),
                Some(_) | None => joined.push(point),
            }
        }
        self.points = joined;
    }

    fn view(&self) -> CurveView {
        let mut view = CurveView::default();
        for point in &self.points {
            point.show(&self.correction, &mut view);
        }
        view
    }
}

impl Stretch {
    fn join(&mut self, other: &Self) {
        fn joined(one: [i64; 3], other: [i64; 3]) -> [i64; 3] {
            let ([least, sum, largest], [other_least, other_sum, other_largest]) = (one, other);
            [
                least.min(other_least),
                sum.saturating_add(other_sum),
                largest.max(other_largest),
            ]
        }
        self.count += other.count;
        self.current = joined(self.current, other.current);
        self.voltage = joined(self.voltage, other.voltage);
        let (count, sum, largest) = other.temperature;
        self.temperature.0 += count;
        self.temperature.1 = self.temperature.1.saturating_add(sum);
        self.temperature.2 = self.temperature.2.max(largest);
    }

    fn show(&self, correction: &Correction, view: &mut CurveView) {
        let mean = |sum: i64, count: u64| {
            i64::try_from(count)
                .ok()
                .and_then(|count| sum.checked_div(count))
        };
        let current = |micro| {
            let nominal = Current::from_microamperes(micro);
            correction.current_from_readback(nominal).amperes()
        };
        let voltage = |microvolts, microamperes| {
            let nominal = Voltage::from_microvolts(microvolts);
            let current = Current::from_microamperes(microamperes);
            correction.voltage_from_readback(nominal, current).volts()
        };
        let [least, sum, largest] = self.current;
        let with = [least, mean(sum, self.count).unwrap_or(least), largest];
        view.time_s.push(self.first.seconds());
        view.readbacks.push(self.count);
        view.charge_ah.push(Some(self.charge.ampere_hours()));
        view.current_min_a.push(current(least));
        view.current_a
            .push(current(mean(sum, self.count).unwrap_or(least)));
        view.current_max_a.push(current(largest));
        let [least, sum, largest] = self.voltage;
        view.voltage_min_v.push(voltage(least, with[0]));
        view.voltage_v
            .push(voltage(mean(sum, self.count).unwrap_or(least), with[1]));
        view.voltage_max_v.push(voltage(largest, with[2]));
        let (count, sum, hottest) = self.temperature;
        let degc =
            |milli| quantity::Temperature::from_millidegrees_celsius(milli).degrees_celsius();
        view.temperature_degc.push(mean(sum, count).map(degc));
        view.temperature_max_degc
            .push((count > 0).then(|| degc(hottest)));
    }
}

#[cfg(test)]
mod tests;
