//! Cycles of a recording, and whether one stands for all.

use super::shape::{Shape, mean};

/// One cycle as shapes.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub(super) struct Cycle {
    pub(super) shapes: Vec<Shape>,
    /// Twice the charge that was measured in it, in nanoampere-microseconds.
    pub(super) drawn: i128,
    pub(super) edges_moved: u64,
    pub(super) ticks_averaged: u64,
    pub(super) tick_departure: i64,
}

/// What cycles have in common.
#[derive(Debug, PartialEq, Eq)]
pub(super) enum Fold {
    /// One for all of them, and how many they are.
    Same(Cycle, u64),
    /// One departs from the first: which, from 1.
    Departing(Vec<Cycle>, u64),
}

/// Most ticks by which an edge may come earlier or later from cycle to cycle.
const JITTER: i64 = 2;

/// One cycle for all, if each is like the first: the same shapes, edges within some ticks,
/// currents within the error. Its currents are the means of all cycles.
pub(super) fn fold(cycles: Vec<Cycle>, error: i64, tick: i64) -> Fold {
    let Some(first) = cycles.first() else {
        return Fold::Same(Cycle::default(), 1);
    };
    let departing = cycles
        .iter()
        .position(|cycle| !alike(first, cycle, error, tick));
    if let Some(at) = departing {
        return Fold::Departing(cycles, u64::try_from(at + 1).unwrap_or(u64::MAX));
    }
    let count = i128::try_from(cycles.len()).unwrap_or(1);
    let mut shapes = first.shapes.clone();
    for (at, shape) in shapes.iter_mut().enumerate() {
        let all = cycles.iter().filter_map(|cycle| cycle.shapes.get(at));
        average(shape, all, count);
    }
    let one = Cycle {
        shapes,
        drawn: cycles.iter().map(|cycle| cycle.drawn).sum::<i128>() / count,
        ..Cycle::default()
    };
    Fold::Same(one, u64::try_from(cycles.len()).unwrap_or(u64::MAX))
}

fn average<'a>(shape: &mut Shape, all: impl Iterator<Item = &'a Shape>, count: i128) {
    let (mut sum, mut sum_from, mut sum_to) = (0_i128, 0_i128, 0_i128);
    for other in all {
        match (*shape, *other) {
            (
                Shape::Hold { own_ticks, .. },
                Shape::Hold {
                    own, own_ticks: of, ..
                },
            ) => {
                // The mean current of the other, over the ticks of this.
                sum += own * i128::from(own_ticks) / i128::from(of.max(1));
            }
            (Shape::Line { .. }, Shape::Line { from, to, .. }) => {
                sum_from += i128::from(from);
                sum_to += i128::from(to);
            }
            (Shape::Hold { .. }, Shape::Line { .. }) | (Shape::Line { .. }, Shape::Hold { .. }) => {
            }
        }
    }
    match shape {
        Shape::Hold { own, .. } => *own = sum / count,
        Shape::Line { from, to, ends, .. } => {
            *from = i64::try_from(sum_from / count).unwrap_or(*from);
            *to = i64::try_from(sum_to / count).unwrap_or(*to);
            *ends = (ends.0.min(*to), ends.1.max(*to));
        }
    }
}

fn alike(one: &Cycle, other: &Cycle, error: i64, tick: i64) -> bool {
    one.shapes.len() == other.shapes.len()
        && one
            .shapes
            .iter()
            .zip(&other.shapes)
            .all(|(one, other)| alike_shapes(*one, *other, error, tick))
}

fn alike_shapes(one: Shape, other: Shape, error: i64, tick: i64) -> bool {
    let near = |a: i64, b: i64| a.abs_diff(b) <= error.unsigned_abs();
    if one.ticks().abs_diff(other.ticks()) > JITTER.unsigned_abs() {
        return false;
    }
    match (one, other) {
        (
            Shape::Hold { own, own_ticks, .. },
            Shape::Hold {
                own: own_b,
                own_ticks: ticks_b,
                ..
            },
        ) => near(mean(own, own_ticks, tick), mean(own_b, ticks_b, tick)),
        (
            Shape::Line { from, to, .. },
            Shape::Line {
                from: from_b,
                to: to_b,
                ..
            },
        ) => near(from, from_b) && near(to, to_b),
        (Shape::Hold { .. }, Shape::Line { .. }) | (Shape::Line { .. }, Shape::Hold { .. }) => {
            false
        }
    }
}
