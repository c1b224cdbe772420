//! A profile: a current given as pairs of time and current.
//!
//! Two stages with a seam between. The first makes [`Point`]s of whatever was given (pairs in
//! the sequence, a CSV inside it or beside it); the second makes [`Segment`]s of points, as the
//! interpolation says. A measured profile takes another way (`import`): rows of a CSV in, the
//! fewest segments out.
//!
//! Invariants: segments last longer than zero and add up to the profile's time; neither stage
//! knows a sink, so neither clips, rounds or drops anything.

mod csv;
mod number;

use quantity::{Current, Span};

pub(crate) use self::csv::points as points_of_csv;
pub(crate) use self::csv::{Row, Rows};

/// A moment of a profile.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Point {
    pub(crate) time: Span,
    pub(crate) current: Current,
}

/// What the current does between two points.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Interpolation {
    /// It stays until the next point; the last point only says when the profile ends.
    Steps,
    /// It follows the straight line to the next point.
    Linear,
}

/// A piece of a profile.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Segment {
    /// A constant current.
    Hold {
        /// The current.
        current: Current,
        /// How long.
        span: Span,
    },
    /// A straight line. Where the current before is another than `from`, the jump to it takes
    /// one tick of the sink out of `span`.
    Slope {
        /// The current at its beginning.
        from: Current,
        /// The current at its end.
        to: Current,
        /// How long.
        span: Span,
    },
}

impl Segment {
    /// How long it lasts.
    pub const fn span(self) -> Span {
        match self {
            Self::Hold { span, .. } | Self::Slope { span, .. } => span,
        }
    }

    /// The currents at its beginning and its end.
    pub const fn ends(self) -> [Current; 2] {
        match self {
            Self::Hold { current, .. } => [current, current],
            Self::Slope { from, to, .. } => [from, to],
        }
    }

    /// The current it leaves off with.
    pub const fn last(self) -> Current {
        match self {
            Self::Hold { current, .. } => current,
            Self::Slope { to, .. } => to,
        }
    }
}

/// Why points are no profile: where (the index of the pair), what, and the mend.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Fault {
    pub(crate) index: usize,
    pub(crate) message: String,
    pub(crate) hint: String,
}

fn fault(index: usize, message: String, hint: &str) -> Fault {
    Fault {
        index,
        message,
        hint: hint.to_owned(),
    }
}

/// The segments of a profile.
///
/// # Errors
/// Fewer than two points, a beginning other than 0 s, a time that goes back, no time at all.
pub(crate) fn segments(
    points: &[Point],
    interpolation: Interpolation,
) -> Result<Vec<Segment>, Fault> {
    let (Some(first), Some(last)) = (points.first(), points.last()) else {
        return Err(fault(
            0,
            "a profile without a pair".to_owned(),
            "write at least two pairs",
        ));
    };
    if first.time != Span::ZERO {
        return Err(fault(
            0,
            format!("the profile begins at {} where 0 s is wanted", first.time),
            "take the first time off all times",
        ));
    }
    let back = points.windows(2).position(|pair| match pair {
        [before, after] => {
            after.time < before.time
                || (after.time == before.time && interpolation == Interpolation::Steps)
        }
        _ => false,
    });
    if let Some(index) = back {
        let time = points.get(index + 1).map_or(Span::ZERO, |point| point.time);
        return Err(fault(
            index + 1,
            format!("the time {time} is not after the time before it"),
            "sort the pairs by time; two pairs at one time make an edge with linear interpolation",
        ));
    }
    if last.time == Span::ZERO {
        return Err(fault(
            0,
            "the profile lasts no time".to_owned(),
            "write at least two times",
        ));
    }
    let mut segments: Vec<Segment> = Vec::new();
    for pair in points.windows(2) {
        let [a, b] = pair else { continue };
        let span = b.time.saturating_sub(a.time);
        if span == Span::ZERO {
            continue;
        }
        let level = interpolation == Interpolation::Steps || a.current == b.current;
        match (level, segments.last_mut()) {
            // A constant current is one step however many pairs repeat it.
            (
                true,
                Some(Segment::Hold {
                    current,
                    span: held,
                }),
            ) if *current == a.current => {
                *held = held.saturating_add(span);
            }
            (true, _) => segments.push(Segment::Hold {
                current: a.current,
                span,
            }),
            (false, _) => segments.push(Segment::Slope {
                from: a.current,
                to: b.current,
                span,
            }),
        }
    }
    Ok(segments)
}

#[cfg(test)]
mod tests;
