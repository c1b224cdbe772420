//! What a plan will probably do: duration, charge, energy, and its shape for a plot.
//!
//! A forecast before anything is known of the cell but its data sheet: the voltage stays half
//! way between its least and its largest, and a cut-off is reached when the rated capacity has
//! been drawn. A rehearsal against a simulated source knows better; this needs none.
//!
//! Repeats are gone through once and then multiplied, so a month of ten-second cycles costs no
//! more than one.

use std::ops::Range;

use quantity::{Charge, Current, Energy, Quantity, Span, Voltage};
use serde::{Deserialize, Serialize};

use super::foresight::Heat;
use super::{Action, Condition, LoopHead, Next, Op, OpIndex, Plan, PlanStep, Until};

/// What a plan will probably do.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Forecast {
    /// How long it takes.
    pub duration: Span,
    /// The charge it draws.
    pub charge: Charge,
    /// The energy it draws.
    pub energy: Energy,
}

/// The planned shape: current against time.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Outline {
    /// Points to be joined by straight lines; two at one time are an edge.
    pub points: Vec<OutlinePoint>,
    /// Rounds of repeats that are not drawn out.
    pub bands: Vec<Band>,
    /// Where each label's first step lies.
    pub labels: Vec<Labelled>,
}

/// The first step that bears a label, with those of the same label right behind it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Labelled {
    /// The label, an index into [`Plan::labels`].
    pub label: u32,
    /// When the step begins.
    pub from: Span,
    /// When it ends.
    pub to: Span,
}

/// A point of the planned shape.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct OutlinePoint {
    /// Time since the beginning.
    pub time: Span,
    /// Current.
    pub current: Current,
}

/// A stretch of time in which the current goes to and fro between two values.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Band {
    /// When it begins.
    pub from: Span,
    /// When it ends.
    pub to: Span,
    /// Least current.
    pub least: Current,
    /// Largest current.
    pub largest: Current,
}

impl Plan {
    /// What the plan will probably do.
    pub fn forecast(&self) -> Forecast {
        self.forecast_with(&mut None)
    }

    /// The same, and how hot the sink gets on the way.
    pub(super) fn forecast_with(&self, heat: &mut Option<Heat<'_>>) -> Forecast {
        let mut walk = Walk::new(self, 0);
        walk.heat = heat.take();
        walk.block(0, self.ops.len());
        *heat = walk.heat.take();
        let voltage = walk.voltage;
        let charge = charge(walk.drawn);
        Forecast {
            duration: span(walk.time),
            charge,
            energy: charge.times(voltage),
        }
    }

    /// The planned shape in about so many points at most; repeats that do not fit are bands.
    pub fn outline(&self, points_max: usize) -> Outline {
        let mut walk = Walk::new(self, points_max);
        walk.block(0, self.ops.len());
        walk.outline
    }
}

const PICO_PER_MICRO: i128 = 1_000_000;

fn charge(picocoulombs: i128) -> Charge {
    Charge::from_base_units(picocoulombs / PICO_PER_MICRO).unwrap_or(Charge::MAX)
}

fn span(micros: u128) -> Span {
    u64::try_from(micros).map_or(Span::MAX, Span::from_micros)
}

fn index(place: OpIndex) -> usize {
    usize::try_from(place).unwrap_or(usize::MAX)
}

/// Where the walk goes after an instruction or a block.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Way {
    On,
    To(usize),
    End,
}

impl From<Next> for Way {
    fn from(next: Next) -> Self {
        match next {
            Next::GoOn => Self::On,
            Next::SkipTo(place) => Self::To(index(place)),
            Next::End => Self::End,
        }
    }
}

/// What one round of a repeat adds.
#[derive(Debug, Clone, Copy)]
struct Round {
    time: u128,
    drawn: i128,
}

/// What ends a repeat first.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Bound {
    /// Its number of rounds or its time.
    Spent,
    /// One of its own conditions.
    Until(Next),
    /// A cut-off of a step inside.
    Inside,
}

#[derive(Clone)]
struct Walk<'a, 'h> {
    plan: &'a Plan,
    voltage: Voltage,
    /// Microseconds since the beginning.
    time: u128,
    /// Picocoulombs since the beginning.
    drawn: i128,
    /// Picocoulombs that the cell has in all; `None` for a supply.
    capacity: Option<i128>,
    points_max: usize,
    outline: Outline,
    heat: Option<Heat<'h>>,
}

impl<'a, 'h> Walk<'a, 'h> {
    fn new(plan: &'a Plan, points_max: usize) -> Self {
        let dut = &plan.dut;
        let sum = dut.voltage_min.microvolts() / 2 + dut.voltage_max.microvolts() / 2;
        Self {
            plan,
            voltage: Voltage::from_microvolts(sum),
            time: 0,
            drawn: 0,
            capacity: dut
                .rated_capacity
                .map(|rated| rated.base_units() * PICO_PER_MICRO),
            points_max,
            outline: Outline::default(),
            heat: None,
        }
    }

    /// Goes through a block; answers where it leads, never a place inside it.
    fn block(&mut self, begin: usize, end: usize) -> Way {
        let mut at = begin;
        while at < end {
            let (way, after) = match self.plan.ops.get(at) {
                Some(Op::Step(step)) => (self.step(step), at + 1),
                Some(Op::LoopBegin(head)) => {
                    let foot = index(head.end);
                    (self.repeat(head, at + 1, foot), foot + 1)
                }
                Some(Op::LoopEnd { .. }) | None => (Way::On, at + 1),
            };
            at = match way {
                Way::On => after,
                Way::To(place) if (after..end).contains(&place) => place,
                Way::To(_) | Way::End => return way,
            };
        }
        Way::On
    }

    /// The currents at a step's beginning and end, after its ramp, if it has one.
    fn target(&self, action: Action) -> Current {
        match action {
            Action::Rest => Current::ZERO,
            Action::Current { target, .. } => target,
            Action::Power { target } => target.over(self.voltage).unwrap_or(Current::ZERO),
            Action::Resistance { target } => self.voltage.over(target).unwrap_or(Current::ZERO),
        }
    }

    fn step(&mut self, step: &PlanStep) -> Way {
        let target = self.target(step.action);
        let ramp = match step.action {
            Action::Current { ramp, .. } => u128::from(ramp.micros()),
            Action::Rest | Action::Power { .. } | Action::Resistance { .. } => 0,
        };
        let full = u128::from(step.duration.micros());
        let mut lasts = full;
        let mut way = Way::from(step.then);
        if ramp == 0 {
            for until in &step.until {
                let holds = self.holds_after(until.condition, target, self.drawn);
                if let Some(holds) = holds.filter(|&holds| holds < lasts) {
                    lasts = holds;
                    way = until.then.into();
                }
            }
        }
        // Before its first step a sink is off.
        let before = self
            .outline
            .points
            .last()
            .map_or(Current::ZERO, |point| point.current);
        let from = if ramp > 0 { before } else { target };
        if let Some(heat) = &mut self.heat {
            heat.step(step.action, from, target, span(lasts).seconds());
        }
        let began = span(self.time);
        self.draw(from, target, lasts);
        if let Some(label) = step.label {
            self.label(label, began);
        }
        way
    }

    /// A step with this label began then and has just ended.
    fn label(&mut self, label: u32, from: Span) {
        let labels = &mut self.outline.labels;
        if self.points_max == 0 {
            return;
        }
        let to = span(self.time);
        match labels.iter_mut().find(|known| known.label == label) {
            // A ramp from another current is an edge and a ramp, both with its label.
            Some(known) if known.to == from => known.to = to,
            Some(_) => {}
            None => labels.push(Labelled { label, from, to }),
        }
    }

    /// How long a current takes to meet a condition; `None` if charge does not decide it.
    fn holds_after(&self, condition: Condition, current: Current, began: i128) -> Option<u128> {
        if current <= Current::ZERO {
            return None;
        }
        let wanted = match condition {
            Condition::VoltageBelow(_) => self.capacity? - self.drawn,
            Condition::Charge(charge) => charge.base_units() * PICO_PER_MICRO + began - self.drawn,
            Condition::Energy(energy) => {
                let charge = energy.base_units() * PICO_PER_MICRO * PICO_PER_MICRO
                    / self.voltage.base_units().max(1);
                charge + began - self.drawn
            }
            Condition::VoltageAbove(_)
            | Condition::CurrentBelow(_)
            | Condition::CurrentAbove(_)
            | Condition::TemperatureAbove(_)
            | Condition::TemperatureBelow(_)
            | Condition::VoltageSettled { .. }
            | Condition::TemperatureSettled { .. } => return None,
        };
        u128::try_from((wanted / current.base_units()).max(0)).ok()
    }

    fn draw(&mut self, from: Current, to: Current, lasts: u128) {
        self.point(from);
        self.time = self.time.saturating_add(lasts);
        let twice = from.base_units() + to.base_units();
        let micros = i128::try_from(lasts).unwrap_or(i128::MAX);
        self.drawn = self.drawn.saturating_add(twice.saturating_mul(micros) / 2);
        self.point(to);
    }

    fn point(&mut self, current: Current) {
        let time = span(self.time);
        let point = OutlinePoint { time, current };
        // Ramps need the last point even when nothing is drawn.
        if self.points_max == 0 {
            self.outline.points.clear();
        }
        if self.outline.points.last() != Some(&point) {
            self.outline.points.push(point);
        }
    }

    fn repeat(&mut self, head: &LoopHead, body: usize, foot: usize) -> Way {
        let began = Round {
            time: self.time,
            drawn: self.drawn,
        };
        let way = self.rounds(head, began, body, foot);
        let Some(at_most) = head.at_most.map(|span| u128::from(span.micros())) else {
            return way;
        };
        let lasted = self.time - began.time;
        if lasted <= at_most {
            return way;
        }
        // The time was over in the middle of a round: its part of the charge stands for it.
        let part = |drawn: i128| {
            let drawn = drawn.unsigned_abs().saturating_mul(at_most) / lasted.max(1);
            i128::try_from(drawn).unwrap_or(i128::MAX)
        };
        self.drawn = began.drawn + part(self.drawn - began.drawn);
        self.time = began.time + at_most;
        let end = span(self.time);
        self.outline.points.retain(|point| point.time <= end);
        self.outline.bands.retain(|band| band.from < end);
        self.outline.labels.retain(|label| label.from < end);
        if let Some(band) = self.outline.bands.last_mut() {
            band.to = band.to.min(end);
        }
        Way::On
    }

    /// All rounds of a repeat, the last one whole.
    fn rounds(&mut self, head: &LoopHead, began: Round, body: usize, foot: usize) -> Way {
        let first_point = self.outline.points.len();
        let mut cold = self.heat.clone();
        let way = self.block(body, foot);
        if way != Way::On {
            return way;
        }
        let round = Round {
            time: self.time - began.time,
            drawn: self.drawn - began.drawn,
        };
        let (mut rounds, bound) = self.rounds_left(head, round, began.drawn, body, foot);
        let each = self.outline.points.len().saturating_sub(first_point).max(1);
        let room = self.points_max.saturating_sub(self.outline.points.len()) / each;
        for _ in 0..room {
            if rounds == 0 {
                break;
            }
            cold.clone_from(&self.heat);
            let way = self.block(body, foot);
            if way != Way::On {
                return way;
            }
            rounds -= 1;
        }
        self.warm(rounds, round, cold.as_ref(), body..foot);
        self.leap(rounds, round, first_point);
        match bound {
            Bound::Spent => Way::On,
            Bound::Until(next) => next.into(),
            Bound::Inside => self.block(body, foot),
        }
    }

    /// How many whole rounds follow the first, and what ends them.
    fn rounds_left(
        &self,
        head: &LoopHead,
        round: Round,
        began: i128,
        body: usize,
        foot: usize,
    ) -> (u128, Bound) {
        let by_times = head.times.map(|times| u128::from(times.saturating_sub(1)));
        let by_time = head.at_most.map(|at_most| {
            let left = u128::from(at_most.micros()).saturating_sub(round.time);
            left.div_ceil(round.time.max(1))
        });
        let spent = by_times
            .into_iter()
            .chain(by_time)
            .min()
            .map(|rounds| (rounds, Bound::Spent));
        let rounds_for = |condition| {
            // The mean current of a round stands for all of it.
            let mean = round.drawn / i128::try_from(round.time.max(1)).unwrap_or(i128::MAX);
            let mean = Current::from_base_units(mean).unwrap_or(Current::MAX);
            let holds = self.holds_after(condition, mean, began)?;
            Some(holds / round.time.max(1))
        };
        let own = head.until.iter().filter_map(|until: &Until| {
            Some((rounds_for(until.condition)?, Bound::Until(until.then)))
        });
        let inside = self
            .cut_off_inside(body, foot)
            .and_then(|condition| Some((rounds_for(condition)?, Bound::Inside)));
        spent
            .into_iter()
            .chain(own)
            .chain(inside)
            .min_by_key(|&(rounds, _)| rounds)
            .unwrap_or((0, Bound::Spent))
    }

    /// The first cut-off voltage of a step inside a repeat.
    fn cut_off_inside(&self, body: usize, foot: usize) -> Option<Condition> {
        let ops = self.plan.ops.get(body..foot)?;
        ops.iter().find_map(|op| match op {
            Op::Step(step) => step
                .until
                .iter()
                .map(|until| until.condition)
                .find(|condition| matches!(condition, Condition::VoltageBelow(_))),
            Op::LoopBegin(_) | Op::LoopEnd { .. } => None,
        })
    }

    /// The heat of whole rounds that are not walked: all but the last at once, and the last, which
    /// is the hottest or the coldest, step by step beside the walk.
    fn warm(&mut self, rounds: u128, round: Round, before: Option<&Heat<'h>>, body: Range<usize>) {
        let (Some(heat), Some(before), Some(skipped)) =
            (&mut self.heat, before, rounds.checked_sub(1))
        else {
            return;
        };
        let times = span(skipped).seconds() * 1e6;
        heat.repeat(before, span(round.time).seconds(), times);
        let mut last = Walk {
            outline: Outline::default(),
            points_max: 0,
            ..self.clone()
        };
        last.block(body.start, body.end);
        self.heat = last.heat;
    }

    /// Goes over whole rounds without walking them; a band stands for them.
    fn leap(&mut self, rounds: u128, round: Round, first_point: usize) {
        if rounds == 0 {
            return;
        }
        let drawn = self.outline.points.get(first_point..).unwrap_or(&[]);
        let currents = || drawn.iter().map(|point| point.current);
        let band = (currents().min(), currents().max());
        let from = span(self.time);
        self.time = self.time.saturating_add(round.time.saturating_mul(rounds));
        let rounds = i128::try_from(rounds).unwrap_or(i128::MAX);
        self.drawn = self
            .drawn
            .saturating_add(round.drawn.saturating_mul(rounds));
        if let (Some(least), Some(largest)) = band
            && self.points_max > 0
        {
            self.outline.bands.push(Band {
                from,
                to: span(self.time),
                least,
                largest,
            });
        }
    }
}

#[cfg(test)]
mod tests;
