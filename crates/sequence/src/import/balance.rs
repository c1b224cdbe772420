//! Shapes set on a converter, with the charge kept.
//!
//! Each constant takes the setting below or above it, whichever keeps the running difference of
//! measured and planned charge smaller, so rounding is carried on and not lost. What is left at
//! the end of a cycle is taken up by the longest steps: whole if they are short of it, else in
//! part, which splits one step between two neighbouring settings. Where that is not enough,
//! edges that had moved to a whole tick get a tick of their own, between the two currents.

use quantity::{Charge, Current, Span};

use super::cycle::Cycle;
use super::levels::Levels;
use super::shape::{Shape, mean};
use super::{BelowFloor, Segment, charge, micro};

/// A shape on the converter, in nanoamperes.
#[derive(Debug, Clone, Copy)]
enum Set {
    Hold {
        ticks: i64,
        level: i64,
        /// The settings next to the measured current.
        low: i64,
        high: i64,
        /// Ticks at its beginning that are on the other setting.
        other: i64,
        /// The edges it has taken in, first and last, with the tick's mean.
        edges: [Option<i64>; 2],
        /// What those edges' ticks are set to, where they have been set free.
        freed: [Option<i64>; 2],
        /// Whether a line goes on from its level, which must then stay.
        pinned: bool,
    },
    Line {
        ticks: i64,
        from: i64,
        to: i64,
    },
}

impl Set {
    const fn other_level(level: i64, low: i64, high: i64) -> i64 {
        if level == low { high } else { low }
    }
}

/// Balances cycles one after the other.
pub(super) struct Balance<'a> {
    levels: &'a Levels<'a>,
    tick: i64,
    segments: Vec<Segment>,
    below: BelowFloor,
    /// Twice the charge below the floor.
    below_drawn: i128,
}

impl<'a> Balance<'a> {
    pub(super) fn new(levels: &'a Levels<'a>, tick: i64) -> Self {
        Self {
            levels,
            tick,
            segments: Vec::new(),
            below: BelowFloor::default(),
            below_drawn: 0,
        }
    }

    /// Sets a cycle; answers twice the charge that could not be kept.
    pub(super) fn cycle(&mut self, cycle: &Cycle) -> i128 {
        let mut sets: Vec<Set> = Vec::with_capacity(cycle.shapes.len());
        let mut left = 0_i128;
        for &shape in &cycle.shapes {
            let set = match shape {
                Shape::Hold {
                    ticks,
                    own,
                    own_ticks,
                    lead,
                    trail,
                } => {
                    let own_mean = mean(own, own_ticks, self.tick);
                    left += own * i128::from(ticks) / i128::from(own_ticks.max(1));
                    self.hold(ticks, own_mean, [lead, trail], &mut left)
                }
                Shape::Line {
                    ticks,
                    from,
                    to,
                    ends,
                } => {
                    left += i128::from(from + to) * i128::from(ticks * self.tick);
                    self.line(ticks, from, ends, sets.last_mut(), &mut left)
                }
            };
            sets.push(set);
        }
        // What the shapes leave out (edges that moved, lines held in their cone).
        left += cycle.drawn - self.drawn_by_shapes(cycle);
        self.trim(&mut sets, &mut left);
        self.free_edges(&mut sets, &mut left);
        self.trim(&mut sets, &mut left);
        for set in sets {
            self.put(set);
        }
        left
    }

    pub(super) fn below_floor(&self) -> BelowFloor {
        BelowFloor {
            charge: charge(self.below_drawn).max(Charge::ZERO),
            ..self.below
        }
    }

    pub(super) fn segments(self) -> Vec<Segment> {
        self.segments
    }

    fn drawn_by_shapes(&self, cycle: &Cycle) -> i128 {
        let drawn = |shape: &Shape| match *shape {
            Shape::Hold {
                ticks,
                own,
                own_ticks,
                ..
            } => own * i128::from(ticks) / i128::from(own_ticks.max(1)),
            Shape::Line {
                ticks, from, to, ..
            } => i128::from(from + to) * i128::from(ticks * self.tick),
        };
        cycle.shapes.iter().map(drawn).sum()
    }

    /// Twice the charge of a current for some ticks.
    fn twice(&self, current: i64, ticks: i64) -> i128 {
        2 * i128::from(current) * i128::from(ticks) * i128::from(self.tick)
    }

    fn hold(&mut self, ticks: i64, mean: i64, edges: [Option<i64>; 2], left: &mut i128) -> Set {
        let (low, high) = self.levels.around(mean);
        if self.levels.is_below_floor(mean) {
            let span = u64::try_from(ticks * self.tick).unwrap_or(0);
            self.below.time = self.below.time.saturating_add(Span::from_micros(span));
            self.below.largest = self.below.largest.max(micro(mean));
            self.below_drawn += self.twice(mean, ticks);
        }
        let after = |level: i64| *left - self.twice(level, ticks);
        let level = if after(low).abs() <= after(high).abs() {
            low
        } else {
            high
        };
        *left = after(level);
        Set::Hold {
            ticks,
            level,
            low,
            high,
            other: 0,
            edges,
            freed: [None; 2],
            pinned: false,
        }
    }

    /// A line that ends where it takes up what is left, as far as its samples allow.
    fn line(
        &self,
        ticks: i64,
        from: i64,
        ends: (i64, i64),
        before: Option<&mut Set>,
        left: &mut i128,
    ) -> Set {
        let from = self.levels.bounded(from);
        // It goes on from the level before if that is but a rounding away: no jump, no tick.
        let step = self.levels.step().unsigned_abs();
        let near = before.and_then(|set| match set {
            Set::Hold { level, pinned, .. } if level.abs_diff(from) <= step => {
                *pinned = true;
                Some(*level)
            }
            Set::Line { to, .. } if to.abs_diff(from) <= step => Some(*to),
            Set::Hold { .. } | Set::Line { .. } => None,
        });
        // A jump takes a tick of its own at the beginning.
        let jump = i64::from(near.is_none());
        let from = near.unwrap_or(from);
        let span = i128::from((ticks - jump) * self.tick);
        let to = (*left - self.twice(from, jump)) / span.max(1) - i128::from(from);
        let to = to.clamp(ends.0.into(), ends.1.into());
        let to = self.levels.bounded(i64::try_from(to).unwrap_or(from));
        if from == to {
            *left -= self.twice(to, ticks);
            return Set::Hold {
                ticks,
                level: to,
                low: to,
                high: to,
                other: 0,
                edges: [None; 2],
                freed: [None; 2],
                pinned: false,
            };
        }
        let slope = i128::from(from + to) * span;
        *left -= slope + self.twice(from, jump);
        Set::Line { ticks, from, to }
    }

    /// Takes up what is left, by the longest steps first.
    fn trim(&self, sets: &mut [Set], left: &mut i128) {
        let length = |set: &Set| match *set {
            Set::Hold {
                ticks,
                low,
                high,
                other,
                edges,
                ..
            } if low != high && other == 0 => {
                ticks - i64::try_from(edges.iter().flatten().count()).unwrap_or(0)
            }
            Set::Hold { .. } | Set::Line { .. } => 0,
        };
        let mut by_length: Vec<&mut Set> = sets.iter_mut().filter(|set| length(set) > 0).collect();
        by_length.sort_by_key(|set| std::cmp::Reverse(length(set)));
        let enough = self.twice(self.levels.step(), 1) / 2;
        for set in by_length {
            if left.abs() <= enough {
                return;
            }
            let Set::Hold {
                ticks,
                level,
                low,
                high,
                other,
                edges,
                pinned,
                ..
            } = set
            else {
                continue;
            };
            let change = Set::other_level(*level, *low, *high) - *level;
            let for_one = self.twice(change, 1);
            if for_one.signum() != left.signum() {
                continue;
            }
            let wanted = (*left + for_one / 2) / for_one;
            let taken = edges.iter().flatten().count();
            let free = *ticks - i64::try_from(taken).unwrap_or(0) - i64::from(*pinned);
            let moved = i64::try_from(wanted).unwrap_or(*ticks).min(*ticks);
            if moved == *ticks && !*pinned {
                *left -= self.twice(change, moved);
                *level += change;
            } else {
                // The edges' ticks stay on the first setting, should they be set free.
                *other = moved.min(free).max(0);
                *left -= self.twice(change, *other);
            }
        }
    }

    /// Gives edges a tick of their own, those first that have moved most charge, until enough
    /// of what is left is taken up.
    fn free_edges(&self, sets: &mut [Set], left: &mut i128) {
        let enough = self.twice(self.levels.step(), 1) / 2;
        if left.abs() <= enough {
            return;
        }
        let mut edges: Vec<(i64, i64, &mut Option<i64>)> = Vec::new();
        for set in sets {
            let Set::Hold {
                level,
                edges: taken,
                freed,
                pinned,
                ..
            } = set
            else {
                continue;
            };
            let most = if *pinned { 1 } else { 2 };
            for (edge, slot) in taken.iter().zip(freed).take(most) {
                edges.extend(edge.map(|mean| (*level, mean, slot)));
            }
        }
        edges.sort_by_key(|(level, mean, _)| std::cmp::Reverse(mean.abs_diff(*level)));
        for (level, mean, slot) in edges {
            if left.abs() <= enough {
                return;
            }
            let most = self.twice(mean - level, 1);
            if most.signum() != left.signum() {
                continue;
            }
            let part = if left.abs() < most.abs() { *left } else { most };
            let wanted = i128::from(level) + part / self.twice(1, 1);
            let (low, high) = self.levels.around(i64::try_from(wanted).unwrap_or(level));
            let after = |set: i64| (*left - self.twice(set - level, 1)).abs();
            let set = if after(low) <= after(high) { low } else { high };
            if after(set) < left.abs() {
                *left -= self.twice(set - level, 1);
                *slot = Some(set);
            }
        }
    }

    fn put(&mut self, set: Set) {
        match set {
            Set::Hold {
                ticks,
                level,
                low,
                high,
                other,
                freed: [lead, trail],
                ..
            } => {
                let freed = i64::from(lead.is_some()) + i64::from(trail.is_some());
                self.put_hold(lead.unwrap_or(level), i64::from(lead.is_some()));
                // The level comes last: a line may go on from it.
                self.put_hold(Set::other_level(level, low, high), other);
                self.put_hold(level, ticks - other - freed);
                self.put_hold(trail.unwrap_or(level), i64::from(trail.is_some()));
            }
            Set::Line { ticks, from, to } => self.segments.push(Segment::Slope {
                from: micro(from),
                to: micro(to),
                span: self.span(ticks),
            }),
        }
    }

    fn span(&self, ticks: i64) -> Span {
        Span::from_micros(u64::try_from(ticks * self.tick).unwrap_or(0))
    }

    /// Adds a constant current, or lengthens the one before.
    fn put_hold(&mut self, level: i64, ticks: i64) {
        if ticks == 0 {
            return;
        }
        let (level, added): (Current, Span) = (micro(level), self.span(ticks));
        if let Some(Segment::Hold { current, span }) = self.segments.last_mut()
            && *current == level
        {
            *span = span.saturating_add(added);
            return;
        }
        self.segments.push(Segment::Hold {
            current: level,
            span: added,
        });
    }
}
