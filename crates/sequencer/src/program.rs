//! A plan whose structure has been checked, and how it is walked.
//!
//! Invariants, all checked in [`Program::new`], so that nothing after it meets a plan that could
//! run for ever without drawing a breath:
//! - loops nest, each has at least one step in its body and something that ends it;
//! - every step lasts at least one tick of the sink;
//! - a skip never leads into a loop from outside it;
//! - no target is above the largest current or power that the interlocks allow.
//!
//! It deliberately knows nothing of readings: which way a condition sends the run is decided
//! elsewhere, and comes in here as a [`Next`].

mod check;

use std::sync::Arc;

use quantity::{SinkTime, Span};
use sequence::plan::{Action, LoopHead, Next, Op, OpIndex, Plan, PlanStep};

use crate::orders::Limits;

pub use check::PlanError;
use check::{check_label, check_loops, check_skips, check_step, check_times};

/// A plan whose structure has been checked.
#[derive(Debug, Clone)]
pub(crate) struct Program {
    plan: Arc<Plan>,
    /// For every loop head, the longest time one round of its body can take.
    round_at_most: Vec<Option<Span>>,
    skips_back: bool,
}

impl Program {
    /// Checks the plan's structure.
    ///
    /// # Errors
    /// The first rule broken, with its place; see [`PlanError`].
    pub(crate) fn new(plan: Arc<Plan>, limits: &Limits) -> Result<Self, PlanError> {
        OpIndex::try_from(plan.ops.len()).map_err(|_| PlanError::TooLong)?;
        check_times(&plan)?;
        let enclosing = check_loops(&plan)?;
        let mut steps = 0_u32;
        for (op, place) in (0..).zip(&plan.ops) {
            match place {
                Op::Step(step) => {
                    steps = steps.saturating_add(1);
                    check_step(&plan, limits, op, step)?;
                    let mut nexts = vec![step.then];
                    nexts.extend(step.until.iter().map(|until| until.then));
                    check_skips(op, &nexts, &enclosing)?;
                }
                Op::LoopBegin(head) => {
                    check_label(&plan, op, head.label)?;
                    let nexts: Vec<Next> = head.until.iter().map(|until| until.then).collect();
                    check_skips(op, &nexts, &enclosing)?;
                }
                Op::LoopEnd { .. } => {}
            }
        }
        if steps == 0 {
            return Err(PlanError::NoStep);
        }
        let round_at_most = rounds(&plan);
        let skips_back = skips_back(&plan);
        Ok(Self {
            plan,
            round_at_most,
            skips_back,
        })
    }

    pub(crate) fn plan(&self) -> &Plan {
        &self.plan
    }

    /// Sets what the one step of a run by hand does from now on.
    ///
    /// # Errors
    /// [`PlanError`] for a target or a time that a plan could not have; nothing is changed then.
    pub(crate) fn set_by_hand(
        &mut self,
        limits: &Limits,
        action: Action,
        duration: Span,
    ) -> Result<(), PlanError> {
        let Some(Op::Step(step)) = self.op(0) else {
            return Err(PlanError::NoStep);
        };
        let step = PlanStep {
            action,
            duration,
            ..step.clone()
        };
        check_step(&self.plan, limits, 0, &step)?;
        if let Some(place) = Arc::make_mut(&mut self.plan).ops.first_mut() {
            *place = Op::Step(step);
        }
        Ok(())
    }

    /// The step at `op`; `None` if there is none there.
    pub(crate) fn step(&self, op: OpIndex) -> Option<&PlanStep> {
        match self.op(op) {
            Some(Op::Step(step)) => Some(step),
            Some(Op::LoopBegin(_) | Op::LoopEnd { .. }) | None => None,
        }
    }

    /// The loop head at `op`; `None` if there is none there.
    pub(crate) fn head(&self, op: OpIndex) -> Option<&LoopHead> {
        match self.op(op) {
            Some(Op::LoopBegin(head)) => Some(head),
            Some(Op::Step(_) | Op::LoopEnd { .. }) | None => None,
        }
    }

    fn op(&self, op: OpIndex) -> Option<&Op> {
        self.plan.ops.get(usize::try_from(op).ok()?)
    }

    /// Walks from the cursor to the next step, which is to begin at `now`.
    ///
    /// `None`: the program is over. `serials` numbers the loops entered, so that two entries of
    /// the same loop are told apart.
    pub(crate) fn walk(
        &self,
        cursor: &mut Cursor,
        now: SinkTime,
        serials: &mut u64,
    ) -> Option<Slot> {
        loop {
            let over = cursor
                .frames
                .iter()
                .position(|frame| frame.deadline.is_some_and(|deadline| deadline <= now));
            if let Some(depth) = over {
                self.leave(cursor, depth);
                continue;
            }
            match self.op(cursor.at)? {
                Op::LoopBegin(head) => {
                    *serials = serials.saturating_add(1);
                    cursor.frames.push(Frame {
                        head: cursor.at,
                        round: 1,
                        serial: *serials,
                        deadline: head.at_most.map(|span| now.saturating_add(span)),
                    });
                    cursor.at += 1;
                }
                Op::LoopEnd { begin } => {
                    let times = self.head(*begin).and_then(|head| head.times);
                    match cursor.frames.last_mut() {
                        Some(frame) if times.is_none_or(|times| frame.round < times) => {
                            frame.round = frame.round.saturating_add(1);
                            cursor.at = begin + 1;
                        }
                        Some(_) | None => {
                            cursor.frames.pop();
                            cursor.at += 1;
                        }
                    }
                }
                Op::Step(step) => {
                    return Some(Slot::new(cursor, step, now));
                }
            }
        }
    }

    /// Puts the cursor where the run goes after instruction `op`, a step or a loop that is left.
    ///
    /// `frames` are the loops around `op`. Returns false if the run has finished.
    pub(crate) fn follow(&self, op: OpIndex, frames: &[Frame], next: Next) -> Option<Cursor> {
        let mut cursor = Cursor {
            at: op,
            frames: frames.to_vec(),
        };
        match next {
            Next::GoOn => {
                cursor.at = match self.op(op) {
                    Some(Op::LoopBegin(head)) => head.end + 1,
                    Some(Op::Step(_) | Op::LoopEnd { .. }) | None => op + 1,
                };
            }
            Next::SkipTo(target) => {
                let inside = |frame: &Frame| {
                    self.head(frame.head)
                        .is_some_and(|head| frame.head < target && target <= head.end)
                };
                cursor.frames.retain(inside);
                cursor.at = target;
            }
            Next::End => return None,
        }
        Some(cursor)
    }

    /// Leaves the loop at this depth, going on after its foot.
    fn leave(&self, cursor: &mut Cursor, depth: usize) {
        if let Some(frame) = cursor.frames.get(depth) {
            cursor.at = self.head(frame.head).map_or(cursor.at, |head| head.end + 1);
        }
        cursor.frames.truncate(depth);
    }

    /// The longest time from the beginning of the step at the cursor to the end of the program,
    /// if all conditions wait as long as they may; `None` if nothing bounds it.
    pub(crate) fn at_most_from(
        &self,
        op: OpIndex,
        frames: &[Frame],
        now: SinkTime,
    ) -> Option<Span> {
        if self.skips_back {
            return None;
        }
        // Innermost first: the rest of this round, then the rounds left, then what follows.
        let mut total = Span::ZERO;
        let mut from = op;
        for frame in frames.iter().rev() {
            let head = self.head(frame.head)?;
            let rest = self.stretch(from, head.end);
            let left = head.times.map(|times| times.saturating_sub(frame.round));
            let rounds = left
                .zip(
                    self.round_at_most
                        .get(usize::try_from(frame.head).ok()?)
                        .copied()
                        .flatten(),
                )
                .and_then(|(left, round)| times(round, left));
            let counted = rest
                .zip(rounds)
                .map(|(rest, rounds)| total.saturating_add(rest).saturating_add(rounds));
            let timed = frame
                .deadline
                .map(|deadline| deadline.saturating_since(now));
            total = least(counted, timed)?;
            from = head.end + 1;
        }
        let end = OpIndex::try_from(self.plan.ops.len()).ok()?;
        Some(total.saturating_add(self.stretch(from, end)?))
    }

    /// The longest time of the instructions in `from..to`, whole loops only.
    fn stretch(&self, from: OpIndex, to: OpIndex) -> Option<Span> {
        stretch(&self.plan, &self.round_at_most, from, to)
    }
}

/// A loop that the cursor is in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Frame {
    /// Where its head is.
    pub(crate) head: OpIndex,
    /// Which round this is, from 1.
    pub(crate) round: u64,
    /// Tells this entry of the loop from any other.
    pub(crate) serial: u64,
    /// When its `at_most` is over, by the schedule.
    pub(crate) deadline: Option<SinkTime>,
}

/// A place in the program, with the loops around it, outermost first.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub(crate) struct Cursor {
    pub(crate) at: OpIndex,
    pub(crate) frames: Vec<Frame>,
}

/// A step with its time on the sink's clock.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Slot {
    pub(crate) op: OpIndex,
    pub(crate) start: SinkTime,
    pub(crate) end: SinkTime,
    /// A loop's `at_most` ends it before its own duration is over.
    pub(crate) cut: bool,
    pub(crate) frames: Vec<Frame>,
}

impl Slot {
    fn new(cursor: &Cursor, step: &PlanStep, start: SinkTime) -> Self {
        let own = start.saturating_add(step.duration);
        let limit = cursor
            .frames
            .iter()
            .filter_map(|frame| frame.deadline)
            .min();
        let end = limit.map_or(own, |limit| limit.min(own));
        Self {
            op: cursor.at,
            start,
            end,
            cut: end < own,
            frames: cursor.frames.clone(),
        }
    }
}

fn least(a: Option<Span>, b: Option<Span>) -> Option<Span> {
    match (a, b) {
        (Some(a), Some(b)) => Some(a.min(b)),
        (one, None) | (None, one) => one,
    }
}

fn times(span: Span, factor: u64) -> Option<Span> {
    span.micros().checked_mul(factor).map(Span::from_micros)
}

/// The longest time of one round of every loop, by the place of its head.
fn rounds(plan: &Plan) -> Vec<Option<Span>> {
    let mut rounds = vec![None; plan.ops.len()];
    // From the back: an inner loop's head comes after its outer one's.
    for (op, place) in (0..)
        .zip(&plan.ops)
        .collect::<Vec<(OpIndex, &Op)>>()
        .into_iter()
        .rev()
    {
        if let Op::LoopBegin(head) = place {
            let round = stretch(plan, &rounds, op + 1, head.end);
            if let Some(cell) = usize::try_from(op).ok().and_then(|at| rounds.get_mut(at)) {
                *cell = round;
            }
        }
    }
    rounds
}

fn stretch(plan: &Plan, rounds: &[Option<Span>], from: OpIndex, to: OpIndex) -> Option<Span> {
    let mut total = Span::ZERO;
    let mut op = from;
    while op < to {
        let at = usize::try_from(op).ok()?;
        match plan.ops.get(at)? {
            Op::Step(step) => {
                total = total.checked_add(step.duration)?;
                op += 1;
            }
            Op::LoopBegin(head) => {
                let counted = head
                    .times
                    .zip(rounds.get(at).copied().flatten())
                    .and_then(|(count, round)| times(round, count));
                total = total.checked_add(least(counted, head.at_most)?)?;
                op = head.end + 1;
            }
            Op::LoopEnd { .. } => op += 1,
        }
    }
    Some(total)
}

fn skips_back(plan: &Plan) -> bool {
    let back = |op: OpIndex, next: Next| matches!(next, Next::SkipTo(target) if target <= op);
    (0..).zip(&plan.ops).any(|(op, place)| match place {
        Op::Step(step) => {
            back(op, step.then) || step.until.iter().any(|until| back(op, until.then))
        }
        Op::LoopBegin(head) => head.until.iter().any(|until| back(op, until.then)),
        Op::LoopEnd { .. } => false,
    })
}
