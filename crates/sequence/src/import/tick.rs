//! Rows cut at the sink's ticks.
//!
//! A sink moves its current on its ticks only. A stretch of whole ticks passes as it is; a tick
//! with more than one row in it becomes its exact charge and the extremes within it.
//!
//! Invariant: the pieces' charge is that of what was pushed, bar the part tick that `flush`
//! answers.

/// A piece of the recording on whole ticks.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Piece {
    /// How many ticks.
    pub(super) ticks: i64,
    /// Twice its charge, in nanoampere-microseconds.
    pub(super) drawn: i128,
    pub(super) form: Form,
}

/// What the current does in a piece, in nanoamperes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Form {
    /// A straight line.
    Straight { from: i64, to: i64 },
    /// One tick whose samples lie between two values, each close to their mean.
    Close { least: i64, largest: i64 },
    /// One tick in which the current changes faster than the sink can.
    Fast { mean: i64, departure: i64 },
}

/// Cuts rows at ticks.
#[derive(Debug, Clone)]
pub(super) struct Ticker {
    tick: i64,
    /// How far a constant may be from a sample.
    room: i64,
    /// Microseconds of the tick at work that are over.
    filled: i64,
    drawn: i128,
    least: i64,
    largest: i64,
}

/// The value of a straight line after a part of its span.
pub(super) fn between(from: i64, to: i64, part: i64, span: i64) -> i64 {
    if from == to || span == 0 || part == span {
        return to;
    }
    let rise = i128::from(to - from) * i128::from(part) / i128::from(span);
    from + i64::try_from(rise).unwrap_or(0)
}

impl Ticker {
    pub(super) const fn new(tick: i64, room: i64) -> Self {
        Self {
            tick,
            room,
            filled: 0,
            drawn: 0,
            least: i64::MAX,
            largest: i64::MIN,
        }
    }

    pub(super) const fn tick(&self) -> i64 {
        self.tick
    }

    /// Takes a straight line in and gives out every tick that is whole with it.
    pub(super) fn push(
        &mut self,
        mut span: i64,
        mut from: i64,
        to: i64,
        out: &mut impl FnMut(Piece),
    ) {
        while span > 0 {
            let whole = span / self.tick;
            let gentle = whole > 1 || (whole == 1 && (to - from).abs() <= self.room);
            if self.filled == 0 && gentle {
                let part = whole * self.tick;
                let end = between(from, to, part, span);
                out(Piece {
                    ticks: whole,
                    drawn: twice(from, end, part),
                    form: Form::Straight { from, to: end },
                });
                (span, from) = (span - part, end);
                continue;
            }
            let part = span.min(self.tick - self.filled);
            let end = between(from, to, part, span);
            self.drawn += twice(from, end, part);
            self.least = self.least.min(from).min(end);
            self.largest = self.largest.max(from).max(end);
            self.filled += part;
            (span, from) = (span - part, end);
            if self.filled == self.tick {
                out(self.take());
            }
        }
    }

    /// Ends the recording: a last part of half a tick or more counts as one, less is answered as
    /// twice its charge.
    pub(super) fn flush(&mut self, out: &mut impl FnMut(Piece)) -> i128 {
        if self.filled * 2 >= self.tick {
            out(self.take());
            return 0;
        }
        std::mem::replace(self, Self::new(self.tick, self.room)).drawn
    }

    /// The tick at work as a piece.
    fn take(&mut self) -> Piece {
        let done = std::mem::replace(self, Self::new(self.tick, self.room));
        let (least, largest) = (done.least, done.largest);
        let mean = done.drawn.div_euclid(2 * i128::from(self.tick));
        let mean = i64::try_from(mean).unwrap_or(0);
        let departure = (largest - mean).max(mean - least);
        let form = if departure <= self.room {
            Form::Close { least, largest }
        } else {
            Form::Fast { mean, departure }
        };
        Piece {
            ticks: 1,
            drawn: done.drawn,
            form,
        }
    }
}

/// Twice the charge of a straight line.
fn twice(from: i64, to: i64, span: i64) -> i128 {
    i128::from(from + to) * i128::from(span)
}
