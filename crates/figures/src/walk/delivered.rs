//! What a stretch of the walk delivered, and how it takes the readbacks in.

use quantity::{Current, SinkTime, Span, Temperature, Voltage};
use sink::accumulate::Sum;
use wire::TemperatureReading;

use super::{Mark, Previous, Sample, Stretch};
use crate::noise::Ranges;
use crate::spread::Spread;
use crate::track::Track;

/// What a stretch of sink time delivered.
#[derive(Debug, Clone, Default)]
pub(crate) struct Delivered {
    /// Counters at its beginning and end; `None` where the record does not reach.
    pub(crate) begin: Option<Mark>,
    pub(crate) end: Option<Mark>,
    /// The latest counters within it: what a stretch that is still going on has delivered.
    pub(crate) latest: Option<Mark>,
    /// First and last row of the readbacks in it.
    pub(crate) rows: Option<(u64, u64)>,
    /// The last two readbacks that lie wholly in it, the later one second.
    pub(crate) last: (Option<Sample>, Option<Sample>),
    /// The two readbacks around the latest time the voltage watched fell below: an earlier
    /// fall did not last, or the step would have ended there.
    pub(crate) crossing: Option<(Sample, Sample)>,
    /// Hottest heat sink.
    pub(crate) hottest: Option<Temperature>,
    /// Trapezoid of the mean currents, ampere seconds.
    pub(crate) trapezoid: Sum,
    /// Time at its beginning that is still to be given the current of the first whole readback.
    held_back_s: f64,
    /// Sum of half the squared jumps of current times their intervals: the trapezoid's doubt.
    pub(crate) trapezoid_doubt: Sum,
    /// How far the current and the voltage went to and fro, nominal.
    pub(crate) current_spread: Spread,
    /// Ranges of the readbacks wholly in it, for the noise.
    pub(crate) ranges: Ranges,
    pub(crate) voltage_spread: Spread,
    /// The latest heat sink temperature.
    pub(crate) latest_temperature: Option<Temperature>,
    /// What else was asked for.
    pub(crate) looked: Looked,
}

/// What a closer look at a stretch saw; `None` where none was asked for.
#[derive(Debug, Clone, Default)]
pub(crate) struct Looked {
    /// The readbacks around some instants after its beginning.
    pub(crate) around: Option<Box<[Around; DELAYS.len()]>>,
    /// All readbacks that lie wholly in it, as far as they were kept.
    pub(crate) curve: Option<Vec<Sample>>,
    /// Its temperature and power.
    pub(crate) heat: Option<Box<Track>>,
    /// Its voltage and current.
    pub(crate) discharge: Option<Box<Track>>,
}

/// The two readbacks whose middles lie around an instant.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Around {
    pub(crate) before: Option<Sample>,
    pub(crate) after: Option<Sample>,
}

/// The times after an edge that [`Look::around`] looks at.
pub(crate) const DELAYS: [Span; 4] = [
    Span::from_millis(10),
    Span::from_millis(100),
    Span::from_secs(1),
    Span::from_secs(10),
];

impl Delivered {
    pub(super) fn looking(stretch: &Stretch) -> Self {
        let look = stretch.look;
        let looked = Looked {
            around: look.around.then(Box::default),
            curve: look.curve.map(|_| Vec::new()),
            heat: look.heat.then(Box::default),
            discharge: look.discharge.then(Box::default),
        };
        Self {
            looked,
            ..Self::default()
        }
    }

    /// Looks at a readback as closely as was asked for.
    pub(super) fn look(
        &mut self,
        stretch: &Stretch,
        sample: &Sample,
        temperature: TemperatureReading,
        keep: &mut usize,
    ) {
        let wholly = sample.from >= stretch.time.start && sample.time <= stretch.time.end;
        if !wholly || sample.from >= sample.time {
            return;
        }
        let since = sample.middle().saturating_since(stretch.time.start);
        if let Some(instants) = &mut self.looked.around {
            for (around, delay) in instants.iter_mut().zip(DELAYS) {
                around.take(since, delay, sample);
            }
        }
        if let (Some(curve), Some(span)) = (&mut self.looked.curve, stretch.look.curve)
            && since <= span
            && *keep > 0
        {
            *keep -= 1;
            curve.push(*sample);
        }
        if let (Some(track), TemperatureReading::Value(value)) =
            (&mut self.looked.heat, temperature)
        {
            let watts = sample.voltage.volts() * sample.current.amperes();
            track.add(since.seconds(), [value.degrees_celsius(), watts]);
        }
        if let Some(track) = &mut self.looked.discharge {
            let values = [sample.voltage.volts(), sample.current.amperes()];
            track.add(since.seconds(), values);
        }
    }

    /// Sets the counters at the stretch's ends as soon as the walk has passed them.
    pub(super) fn reach(&mut self, stretch: &Stretch, previous: Option<Previous>, mark: Mark) {
        if self.begin.is_none() && mark.time >= stretch.time.start {
            self.begin = mark_at(stretch.time.start, previous, mark);
        }
        if mark.time < stretch.time.end {
            self.latest = Some(mark);
        }
        if self.end.is_none() && mark.time >= stretch.time.end {
            self.end = mark_at(stretch.time.end, previous, mark);
        }
    }

    /// Takes in a readback whose interval lies in the stretch, at least in part.
    pub(super) fn cover(
        &mut self,
        stretch: &Stretch,
        previous: Option<Previous>,
        sample: &Sample,
        temperature: TemperatureReading,
    ) {
        let first = self.rows.map_or(sample.row, |(first, _)| first);
        self.rows = Some((first, sample.row));
        if let TemperatureReading::Value(value) = temperature {
            self.hottest = Some(self.hottest.map_or(value, |hottest| hottest.max(value)));
            self.latest_temperature = Some(value);
        }
        let wholly = sample.from >= stretch.time.start && sample.time <= stretch.time.end;
        if wholly && sample.from < sample.time {
            self.last = (self.last.1, Some(*sample));
            self.ranges.add(
                sample.time.saturating_since(sample.from).seconds(),
                [
                    sample.current_min.amperes(),
                    sample.current.amperes(),
                    sample.current_max.amperes(),
                ],
                [
                    sample.voltage_min.volts(),
                    sample.voltage.volts(),
                    sample.voltage_max.volts(),
                ],
            );
        }
        let Some(previous) = previous else { return };
        self.add_spreads(stretch, sample);
        self.add_trapezoid(stretch, previous, sample);
        if let Some(below) = stretch.below
            && wholly
            && sample.voltage < below
            && previous.voltage >= below
        {
            self.crossing = Some((previous.sample, *sample));
        }
    }

    fn add_spreads(&mut self, stretch: &Stretch, sample: &Sample) {
        let from = sample.from.max(stretch.time.start);
        let until = sample.time.min(stretch.time.end);
        let seconds = until.saturating_since(from).seconds();
        self.current_spread.add(
            seconds,
            sample.current.amperes(),
            [sample.current_min, sample.current_max].map(Current::amperes),
        );
        self.voltage_spread.add(
            seconds,
            sample.voltage.volts(),
            [sample.voltage_min, sample.voltage_max].map(Voltage::volts),
        );
    }

    /// The mean current of each readback stands for the middle of its interval; between middles it
    /// changes in a straight line, and from the outermost ones to the step's own ends it is held.
    /// With equal intervals that is each mean times its interval. A readback that reaches over an
    /// end of the step is a mean of what was before or after as well, so its part of the step goes
    /// to its neighbour. Half the jumps within the step times their intervals is what that may be
    /// wrong by.
    fn add_trapezoid(&mut self, stretch: &Stretch, previous: Previous, sample: &Sample) {
        let from = sample.from.max(stretch.time.start);
        let until = sample.time.min(stretch.time.end);
        let seconds = until.saturating_since(from).seconds();
        let (begins, ends) = (
            sample.from >= stretch.time.start,
            sample.time <= stretch.time.end,
        );
        let (before, now) = (previous.current.amperes(), sample.current.amperes());
        let whole_before = previous.sample.from >= stretch.time.start;
        if !begins && ends {
            self.held_back_s += seconds;
            return;
        }
        let held = if ends || !whole_before { now } else { before };
        let held_back_s = std::mem::take(&mut self.held_back_s);
        self.trapezoid.add(held * (seconds + held_back_s));
        if whole_before && ends {
            self.trapezoid_doubt
                .add((0.5 * (now - before) * seconds).powi(2));
        }
    }
}

impl Around {
    fn take(&mut self, since: Span, delay: Span, sample: &Sample) {
        if since <= delay {
            self.before = Some(*sample);
        } else if self.after.is_none() {
            self.after = Some(*sample);
        }
    }
}

/// The counters at an instant between the readback before and the one after it; `None` where the
/// record has none before, so that what flowed up to the first readback is not passed over.
fn mark_at(instant: SinkTime, previous: Option<Previous>, after: Mark) -> Option<Mark> {
    if instant >= after.time {
        return Some(after);
    }
    let previous = previous?;
    let before = previous.mark?;
    if instant <= before.time {
        return (instant == before.time).then_some(before);
    }
    let span = instant.saturating_since(before.time);
    let carried = previous.current.times(span);
    let power = previous.voltage.times(previous.current);
    let charge = before.charge.saturating_add(carried);
    let energy = before.energy.saturating_add(power.times(span));
    Some(Mark {
        time: instant,
        charge: charge.clamp(
            before.charge.min(after.charge),
            before.charge.max(after.charge),
        ),
        energy: energy.clamp(
            before.energy.min(after.energy),
            before.energy.max(after.energy),
        ),
    })
}
