//! Pieces joined into constant currents and straight lines.
//!
//! Two candidates grow with each piece and die when they cannot stay within the room of every
//! sample: a constant (the least of the upper bounds above the greatest of the lower ones, with
//! the mean of the charge between them, so that the charge can be kept) and a straight line from
//! a fixed beginning (a cone of slopes that narrows, with the line of that charge inside; Reumann and Witkam 1974 is the common
//! ancestor of such filters). When both are dead the shape ends before the piece. Nothing is
//! looked at twice.
//!
//! A tick with a fast change waits for the next piece: if it is but an edge between the two, it
//! joins the side that is nearer, and its charge is left to the balance.

use super::cycle::Cycle;
use super::tick::{Form, Piece};

/// A shape of the recording, not yet set on a converter.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Shape {
    /// A constant current.
    Hold {
        /// Its ticks, edges among them.
        ticks: i64,
        /// Twice the charge that says which current, and over how many ticks: all but edges.
        own: i128,
        own_ticks: i64,
        /// The mean of an edge's tick that it has taken in at its beginning.
        lead: Option<i64>,
        /// The same at its end.
        trail: Option<i64>,
    },
    /// A straight line, in nanoamperes.
    Line {
        ticks: i64,
        from: i64,
        to: i64,
        /// Where it may end and still be near every sample.
        ends: (i64, i64),
    },
}

impl Shape {
    pub(super) const fn ticks(self) -> i64 {
        match self {
            Self::Hold { ticks, .. } | Self::Line { ticks, .. } => ticks,
        }
    }

    /// The current at its end.
    fn end(self, tick: i64) -> i64 {
        match self {
            Self::Hold { own, own_ticks, .. } => mean(own, own_ticks, tick),
            Self::Line { to, .. } => to,
        }
    }
}

/// A constant current in nanoamperes from twice its charge.
pub(super) fn mean(twice: i128, ticks: i64, tick: i64) -> i64 {
    let span = 2 * i128::from(ticks) * i128::from(tick);
    i64::try_from(twice.div_euclid(span.max(1))).unwrap_or(0)
}

/// A sample that a shape must come near: when (from the shape's beginning) and between what.
#[derive(Debug, Clone, Copy)]
struct Gate {
    at: i64,
    low: i64,
    high: i64,
}

/// Straight lines from a fixed beginning: slopes as fractions, current over time.
#[derive(Debug, Clone, Copy)]
struct Cone {
    from: i64,
    low: (i64, i64),
    high: (i64, i64),
}

/// Steeper than any edge, in nanoamperes a microsecond.
const STEEPEST: i64 = 1_000_000_000_000;

/// Whether one fraction is below another; denominators are above zero.
fn below(one: (i64, i64), other: (i64, i64)) -> bool {
    i128::from(one.0) * i128::from(other.1) < i128::from(other.0) * i128::from(one.1)
}

impl Cone {
    const fn new(from: i64) -> Self {
        Self {
            from,
            low: (-STEEPEST, 1),
            high: (STEEPEST, 1),
        }
    }

    /// The cone that also goes through a gate; `None` if none does.
    fn through(mut self, gate: Gate) -> Option<Self> {
        if gate.at == 0 {
            return (gate.low <= self.from && self.from <= gate.high).then_some(self);
        }
        let low = (gate.low - self.from, gate.at);
        let high = (gate.high - self.from, gate.at);
        if below(self.low, low) {
            self.low = low;
        }
        if below(high, self.high) {
            self.high = high;
        }
        (!below(self.high, self.low)).then_some(self)
    }

    /// Whether the line with a charge lies in the cone, so that the charge can be kept.
    fn holds(&self, twice: i128, span: i64) -> bool {
        let span = i128::from(span);
        // The slope is rise over square; nothing is divided, since this is asked of each piece.
        let rise = twice - 2 * i128::from(self.from) * span;
        let square = span * span;
        let times = |slope: i64| i128::from(slope).saturating_mul(square);
        times(self.low.0) <= rise.saturating_mul(self.low.1.into())
            && rise.saturating_mul(self.high.1.into()) <= times(self.high.0)
    }

    /// Where lines of a span may end.
    fn ends(self, span: i64) -> (i64, i64) {
        let at = |slope: (i64, i64)| {
            let rise = i128::from(slope.0) * i128::from(span) / i128::from(slope.1);
            let end = (i128::from(self.from) + rise).clamp(i64::MIN.into(), i64::MAX.into());
            i64::try_from(end).unwrap_or(self.from)
        };
        (at(self.low).min(at(self.high)), at(self.high))
    }

    /// The line with a charge, held inside the cone.
    fn line(self, twice: i128, ticks: i64, tick: i64) -> Shape {
        let span = ticks * tick;
        let wanted = twice / i128::from(span.max(1)) - i128::from(self.from);
        let ends = self.ends(span);
        let to = wanted.clamp(ends.0.into(), ends.1.into());
        Shape::Line {
            ticks,
            from: self.from,
            to: i64::try_from(to).unwrap_or(self.from),
            ends,
        }
    }
}

/// The shape at work, without the edge that leads to it.
#[derive(Debug, Clone, Copy)]
struct Open {
    ticks: i64,
    drawn: i128,
    lead: Option<Piece>,
    /// Bounds of the constant; `None` when there is none any more.
    constant: Option<(i64, i64)>,
    cone: Option<Cone>,
}

/// Joins pieces into shapes.
#[derive(Debug, Clone)]
pub(super) struct Shaper {
    tick: i64,
    room: i64,
    open: Option<Open>,
    /// Where the current is at the end of the shape at work.
    level: i64,
    /// A fast tick that waits for the next piece.
    fast: Option<Piece>,
    /// An edge that belongs to the next shape.
    lead: Option<Piece>,
    cycle: Cycle,
}

impl Shaper {
    pub(super) fn new(tick: i64, room: i64) -> Self {
        Self {
            tick,
            room,
            open: None,
            level: 0,
            fast: None,
            lead: None,
            cycle: Cycle::default(),
        }
    }

    /// Takes a piece in.
    pub(super) fn push(&mut self, piece: Piece) {
        let (Form::Straight { .. } | Form::Close { .. }) = piece.form else {
            if let Some(waiting) = self.fast.replace(piece) {
                self.averaged(waiting);
            }
            return;
        };
        if let Some(waiting) = self.fast.take() {
            self.edge(waiting, self.begin_of(piece));
        }
        self.join(piece);
    }

    /// Ends the cycle; `rest` is twice the charge of a part tick at its end.
    pub(super) fn close(&mut self, rest: i128) -> Cycle {
        if let Some(waiting) = self.fast.take() {
            self.averaged(waiting);
        }
        self.shut();
        let mut cycle = std::mem::take(&mut self.cycle);
        cycle.drawn += rest;
        cycle
    }

    fn begin_of(&self, piece: Piece) -> i64 {
        match piece.form {
            Form::Straight { from, .. } => from,
            Form::Close { .. } | Form::Fast { .. } => mean(piece.drawn, piece.ticks, self.tick),
        }
    }

    /// A fast tick between the shape at work and a next piece.
    fn edge(&mut self, fast: Piece, next: i64) {
        let value = mean(fast.drawn, 1, self.tick);
        let (low, high) = (self.level.min(next), self.level.max(next));
        let Some(open) = self.open.filter(|_| (low..=high).contains(&value)) else {
            self.averaged(fast);
            return;
        };
        let nearer_before = (value - self.level).abs() <= (next - value).abs();
        let holds = open.constant.is_some();
        if nearer_before && holds {
            self.shut_with(Some(fast));
        } else {
            self.shut();
            self.lead = Some(fast);
        }
    }

    /// A fast tick that is no mere edge: its mean is drawn.
    fn averaged(&mut self, fast: Piece) {
        if let Form::Fast { departure, .. } = fast.form {
            self.cycle.ticks_averaged += 1;
            self.cycle.tick_departure = self.cycle.tick_departure.max(departure);
        }
        self.join(fast);
    }

    /// Adds a piece to the shape at work, or ends that and begins another with it.
    fn join(&mut self, piece: Piece) {
        let grown = self.open.and_then(|open| self.grown(open, piece));
        let open = grown.unwrap_or_else(|| {
            self.shut();
            self.begun(piece)
        });
        self.open = Some(open);
        self.level = match piece.form {
            Form::Straight { to, .. } => to,
            Form::Close { .. } | Form::Fast { .. } => mean(piece.drawn, 1, self.tick),
        };
    }

    /// The samples of a piece that begins at a time.
    fn gates(&self, at: i64, piece: Piece) -> [Gate; 2] {
        let (room, end) = (self.room, at + piece.ticks * self.tick);
        let gate = |at, least: i64, largest: i64| Gate {
            at,
            low: largest - room,
            high: least + room,
        };
        match piece.form {
            Form::Straight { from, to } => [gate(at, from, from), gate(end, to, to)],
            Form::Close { least, largest } => [gate(i64::midpoint(at, end), least, largest); 2],
            Form::Fast { mean, .. } => [gate(i64::midpoint(at, end), mean, mean); 2],
        }
    }

    /// A shape with one more piece; `None` if neither candidate bears it.
    fn grown(&self, mut open: Open, piece: Piece) -> Option<Open> {
        let [first, second] = self.gates(open.ticks * self.tick, piece);
        open.ticks += piece.ticks;
        open.drawn += piece.drawn;
        open.constant = open.constant.and_then(|(low, high)| {
            let low = low.max(first.low).max(second.low);
            let high = high.min(first.high).min(second.high);
            let mean = mean(open.drawn, open.ticks, self.tick);
            (low <= mean && mean <= high).then_some((low, high))
        });
        open.cone = open
            .cone
            .and_then(|cone| cone.through(first)?.through(second))
            .filter(|cone| cone.holds(open.drawn, open.ticks * self.tick));
        (open.constant.is_some() || open.cone.is_some()).then_some(open)
    }

    /// A shape that begins with a piece, after the edge that leads to it.
    fn begun(&mut self, piece: Piece) -> Open {
        let lead = self.lead.take();
        let [first, _] = self.gates(0, piece);
        let open = |from| Open {
            ticks: 0,
            drawn: 0,
            lead,
            constant: Some((i64::MIN, i64::MAX)),
            cone: Some(Cone::new(from)),
        };
        // A line goes on from where the shape before ended, if the piece allows it.
        let before = self.cycle.shapes.last().map(|shape| shape.end(self.tick));
        let near = before.filter(|before| (first.low..=first.high).contains(before));
        let gone_on = near
            .filter(|_| lead.is_none())
            .and_then(|before| self.grown(open(before), piece))
            .filter(|open| open.cone.is_some());
        let alone = open(self.begin_of(piece));
        // A piece alone fits a candidate always: its own beginning and slope, or its mean.
        gone_on
            .or_else(|| self.grown(alone, piece))
            .unwrap_or(alone)
    }

    fn shut(&mut self) {
        self.shut_with(None);
    }

    /// Ends the shape at work, with the edge behind it if that belongs to it. An edge before a
    /// line stands on its own; a constant takes edges in, and the balance may set them free.
    fn shut_with(&mut self, trail: Option<Piece>) {
        let Some(open) = self.open.take() else { return };
        let edges = [open.lead, trail];
        let [lead, trail] = edges.map(|edge| edge.map(|edge| mean(edge.drawn, 1, self.tick)));
        self.cycle.drawn += open.drawn;
        for edge in edges.into_iter().flatten() {
            self.cycle.drawn += edge.drawn;
        }
        let (ticks, shapes) = (open.ticks, &mut self.cycle.shapes);
        match (open.constant, open.cone) {
            (None, Some(cone)) if ticks > 1 => {
                shapes.extend(open.lead.map(|lead| Shape::Hold {
                    ticks: 1,
                    own: lead.drawn,
                    own_ticks: 1,
                    lead: None,
                    trail: None,
                }));
                shapes.push(cone.line(open.drawn, ticks, self.tick));
            }
            _ => {
                let taken = i64::from(lead.is_some()) + i64::from(trail.is_some());
                self.cycle.edges_moved += u64::try_from(taken).unwrap_or(0);
                shapes.push(Shape::Hold {
                    ticks: ticks + taken,
                    own: open.drawn,
                    own_ticks: ticks,
                    lead,
                    trail,
                });
            }
        }
    }
}
