//! Droop and recovery time of a supply, from the samples captured around an edge.
//!
//! What is faster than the sampling interval is not seen; every figure here says so, and where
//! the extreme is the very first sample, a warning says that the true one is larger.

use sequence::plan::DutKind;
use sink::accumulate::Moments;
use sink::uncertainty::{Budget, DegreesOfFreedom};

use crate::capture::{Capture, of_stage};
use crate::contribution::{ONE_EACH, bounded, observed};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, Unit};
use crate::least_squares::number;
use crate::noise::{expected_largest, scatter_of_largest};
use crate::recovery::BAND;
use crate::stage::Stage;
use crate::work::Workbench;

const NOT_CAPTURED: &str = "the samples around the edge were not captured: the sink takes one \
                            capture at a time and was still sending the one before; set the \
                            edges farther apart";

/// Samples nearer to the largest than so many times the noise might as well have been it.
const AS_LARGE: f64 = 2.0;

/// Fewest samples after the edge.
const LEAST: usize = 8;

impl Workbench<'_> {
    /// Droop, overshoot and recovery of every captured edge of a supply.
    pub(crate) fn droops(&self, figures: &mut Figures) {
        if self.plan.dut.kind != DutKind::Supply {
            return;
        }
        for (before, stage) in self.stages.iter().zip(self.stages.iter().skip(1)) {
            let held = before.held_current().zip(stage.held_current());
            let Some(rises) = held.and_then(|(one, other)| rises(one, other)) else {
                continue;
            };
            if stage.is_beyond_counting() || !stage.follows(before) {
                continue;
            }
            match of_stage(self.captures, stage, self.plan.tick) {
                Some(capture) => self.droop(figures, stage, capture, rises),
                None if stage.step.burst.is_some() && stage.is_first() => {
                    let name = if rises { Name::Droop } else { Name::Overshoot };
                    figures
                        .missing
                        .push(Missing::of(name, stage.label, NOT_CAPTURED));
                }
                None => {}
            }
        }
    }

    fn droop(&self, figures: &mut Figures, stage: &Stage<'_>, capture: &Capture, rises: bool) {
        let name = if rises { Name::Droop } else { Name::Overshoot };
        let mut none = |name, reason: &str| {
            figures.missing.push(Missing::of(name, stage.label, reason));
        };
        let edge = match self.edge(capture, rises) {
            Ok(edge) => edge,
            Err(reason) => return none(name, reason),
        };
        let recovery = self.recovery(&edge);
        if let Err(reason) = &recovery {
            none(Name::RecoveryTime, reason);
        }
        let interval = self.plan.tick;
        let how = format!(
            "largest departure of the voltage from its mean before the edge, of samples every \
             {interval}, less half of what noise adds to the largest of several: what is shorter \
             is not seen"
        );
        figures.figures.push(Figure::of_stage(
            name,
            stage,
            (edge.largest - edge.excess(), Unit::Volt),
            self.droop_budget(&edge),
            (&how, COMMON),
            capture.rows(),
        ));
        if edge.place == 0 {
            let warning = format!(
                "`{}`: the voltage was farthest off at the first sample after the edge; the true \
                 {} lies before it and is larger by an unknown amount",
                stage.label.unwrap_or("a step without a label"),
                if rises { "droop" } else { "overshoot" }
            );
            if !figures.warnings.contains(&warning) {
                figures.warnings.push(warning);
            }
        }
        let Ok(recovered) = recovery else { return };
        let how = format!(
            "from the edge to the instant at which the voltage came within {} % of the settled \
             voltage (but two steps of the converter, and five times the noise of a sample, at \
             least) to stay: where a straight line through the samples around it, one every \
             {interval}, meets that band; settled: mean of the last quarter of the capture",
            BAND * 100.0
        );
        figures.figures.push(Figure::of_stage(
            Name::RecoveryTime,
            stage,
            (recovered.seconds, Unit::Second),
            self.recovery_budget(&recovered),
            (&how, COMMON),
            capture.rows(),
        ));
    }

    /// What a capture shows of an edge.
    fn edge(&self, capture: &Capture, rises: bool) -> Result<Edge, &'static str> {
        let volts = |sample: &crate::capture::CaptureSample| {
            self.true_pair(sample.current, sample.voltage).1
        };
        let before: Moments = capture.before().map(volts).collect();
        let Some(level) = before.mean() else {
            return Err("the capture has no sample before the edge");
        };
        let sign = if rises { 1.0 } else { -1.0 };
        let after: Vec<(f64, f64)> = capture
            .after()
            .map(|sample| (f64::from(sample.tick), sign * (level - volts(sample))))
            .collect();
        if after.len() < LEAST {
            return Err("the capture has too few samples after the edge");
        }
        let largest = after
            .iter()
            .enumerate()
            .max_by(|(_, one), (_, other)| one.1.total_cmp(&other.1));
        let Some((place, &(_, largest))) = largest else {
            return Err("the capture has too few samples after the edge");
        };
        Ok(Edge {
            level,
            noise: before.standard_deviation(),
            samples_before: before.number(),
            after,
            place,
            largest,
            sign,
        })
    }

    fn droop_budget(&self, edge: &Edge) -> Budget {
        let weight = (1.0 + 1.0 / number(edge.samples_before)).sqrt();
        // Steps that no noise averages out err in the level as in the sample.
        let mut lines = self
            .instrument
            .voltage
            .of_difference(edge.largest, ONE_EACH, 1.0);
        let between = edge.between_samples();
        if between > 0.0 {
            lines.push(bounded("extreme between two samples", between));
        }
        if edge.excess() > 0.0 {
            lines.push(bounded("largest of several noisy samples", edge.excess()));
        }
        if let Some(noise) = edge.noise.filter(|noise| *noise > 0.0) {
            let freedom = DegreesOfFreedom::finite(number(edge.samples_before - 1));
            let noise = noise * weight * edge.scatter();
            lines.push(observed("noise of a sample", noise, freedom));
        }
        Budget::new(lines)
    }
}

/// An edge as a capture shows it, true volts.
pub(crate) struct Edge {
    /// Mean before it.
    pub(crate) level: f64,
    /// Standard deviation of a sample before it.
    pub(crate) noise: Option<f64>,
    pub(crate) samples_before: usize,
    /// Ticks since the edge, and how far the voltage was off the mean before it.
    pub(crate) after: Vec<(f64, f64)>,
    /// Where the largest stands.
    pub(crate) place: usize,
    pub(crate) largest: f64,
    /// -1 where the current fell.
    pub(crate) sign: f64,
}

impl Edge {
    /// How many samples noise might as well have made the largest.
    fn alike(&self) -> f64 {
        let least = self.largest - AS_LARGE * self.noise.unwrap_or(0.0);
        let alike = self.after.iter().filter(|sample| sample.1 > least);
        number(alike.count().max(1))
    }

    /// Half of what noise adds, on average, to the largest sample if all that might have been it
    /// were truly alike: nothing is added to one that stands out, all to one of a plateau.
    fn excess(&self) -> f64 {
        0.5 * self.noise.unwrap_or(0.0) * expected_largest(self.alike())
    }

    /// How the largest sample scatters against any sample: halfway, too, between one that stands
    /// out and one of a plateau.
    fn scatter(&self) -> f64 {
        f64::midpoint(1.0, scatter_of_largest(self.alike()))
    }

    /// How far the extreme may lie above its sample: what a parabola through it and its neighbours
    /// rises at most; at the first sample, as far as the fall to the next.
    fn between_samples(&self) -> f64 {
        let at = |place: Option<usize>| self.after.get(place?).map(|sample| sample.1);
        let before = at(self.place.checked_sub(1));
        let next = at(self.place.checked_add(1));
        match (before, next) {
            (Some(before), Some(next)) => (2.0 * self.largest - before - next).abs() / 8.0,
            (None, Some(next)) => (self.largest - next).abs(),
            (_, None) => 0.0,
        }
    }
}

fn rises(one: f64, other: f64) -> Option<bool> {
    if other > one {
        Some(true)
    } else if other < one {
        Some(false)
    } else {
        None
    }
}
