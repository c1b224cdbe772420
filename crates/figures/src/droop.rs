//! Droop and recovery time of a supply, from the samples captured around an edge.
//!
//! What is faster than the sampling interval is not seen; every figure here says so, and where
//! the extreme is the very first sample, a warning says that the true one is larger.

use sequence::plan::DutKind;
use sink::accumulate::Moments;
use sink::uncertainty::{Budget, DegreesOfFreedom};

use crate::capture::{Capture, of_stage};
use crate::contribution::{bounded, observed};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, Unit};
use crate::least_squares::number;
use crate::stage::Stage;
use crate::work::Workbench;

/// Half the band about the settled voltage in which it counts as recovered, a share of it.
const BAND: f64 = 0.005;

const NOT_CAPTURED: &str = "the samples around the edge were not captured: the sink takes one \
                            capture at a time and was still sending the one before; set the \
                            edges farther apart";

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
        if let Err(reason) = recovery {
            none(Name::RecoveryTime, reason);
        }
        let interval = self.plan.tick;
        let how = format!(
            "largest departure of the voltage from its mean before the edge, of samples every \
             {interval}: what is shorter is not seen"
        );
        figures.figures.push(Figure::of_stage(
            name,
            stage,
            (edge.largest, Unit::Volt),
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
        let Ok(seconds) = recovery else { return };
        let how = format!(
            "from the edge to the first sample within {} % of the settled voltage (but two steps \
             of the converter at least) after which none lies outside, of samples every \
             {interval}; settled: mean of the last quarter of the capture",
            BAND * 100.0
        );
        let budget = Budget::new(vec![bounded("sampling interval", interval.seconds())]);
        figures.figures.push(Figure::of_stage(
            Name::RecoveryTime,
            stage,
            (seconds, Unit::Second),
            budget,
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
        let mut lines = self
            .instrument
            .voltage
            .of_difference(edge.largest, weight, 1.0);
        let next = edge.after.get(edge.place + 1).map_or(0.0, |after| after.1);
        lines.push(bounded(
            "extreme between two samples",
            (edge.largest - next).abs(),
        ));
        if let Some(noise) = edge.noise.filter(|noise| *noise > 0.0) {
            let freedom = DegreesOfFreedom::finite(number(edge.samples_before - 1));
            lines.push(observed("noise of a sample", noise * weight, freedom));
        }
        Budget::new(lines)
    }

    /// Seconds from the edge to the first sample in the band after which none is outside.
    fn recovery(&self, edge: &Edge) -> Result<f64, &'static str> {
        let quarter = edge.after.len() / 4;
        let mean = |samples: &[(f64, f64)]| {
            samples.iter().map(|sample| sample.1).sum::<f64>() / number(samples.len())
        };
        let (rest, last) = edge.after.split_at(edge.after.len() - quarter);
        let (_, before_last) = rest.split_at(rest.len() - quarter);
        let settled = mean(last);
        let level = edge.level - edge.sign * settled;
        let band = (BAND * level.abs()).max(2.0 * self.instrument.voltage.step);
        if (mean(before_last) - settled).abs() > 0.5 * band {
            return Err("the capture ends before the voltage has settled; capture for longer");
        }
        let outside = edge
            .after
            .iter()
            .rposition(|sample| (sample.1 - settled).abs() > band);
        let Some(outside) = outside else {
            return Err("no sample after the edge lies outside the band");
        };
        let first = edge
            .after
            .get(outside + 1)
            .ok_or("the voltage is outside the band at the end of the capture")?;
        Ok(first.0 * self.plan.tick.seconds() * self.time_base.factor)
    }
}

/// An edge as a capture shows it, true volts.
struct Edge {
    /// Mean before it.
    level: f64,
    /// Standard deviation of a sample before it.
    noise: Option<f64>,
    samples_before: usize,
    /// Ticks since the edge, and how far the voltage was off the mean before it.
    after: Vec<(f64, f64)>,
    /// Where the largest stands.
    place: usize,
    largest: f64,
    /// -1 where the current fell.
    sign: f64,
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
