//! What a plan must be before it is run, and why it is refused.

use quantity::Span;
use sequence::plan::{Action, LoopHead, Next, Op, OpIndex, Plan, PlanStep};

use crate::orders::Limits;

/// Shortest and longest interval of the deadman that a sink accepts (line protocol, section 3).
const DEADMAN: (Span, Span) = (Span::from_millis(100), Span::from_secs(10));

/// Why a plan cannot be run.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum PlanError {
    /// Nothing to do.
    #[error("the plan has no step: a run needs at least one")]
    NoStep,
    /// More instructions than an index can name.
    #[error("the plan has more instructions than can be numbered (2^32 - 1)")]
    TooLong,
    /// Loop heads and feet do not match.
    #[error("instruction {op}: its loop's head and foot do not point at each other")]
    LoopMismatch {
        /// Where.
        op: OpIndex,
    },
    /// A loop without a step in it.
    #[error("instruction {op}: the loop has no step in its body, so it would never take any time")]
    EmptyLoop {
        /// Where.
        op: OpIndex,
    },
    /// A loop that runs no times, or for no time.
    #[error("instruction {op}: a loop must run at least once and for more than no time")]
    IdleLoop {
        /// Where.
        op: OpIndex,
    },
    /// A loop that nothing ends.
    #[error("instruction {op}: nothing ends the loop; give it `times`, an `until` or an `at_most`")]
    EndlessLoop {
        /// Where.
        op: OpIndex,
    },
    /// A step shorter than the sink can time.
    #[error(
        "instruction {op}: the step lasts {duration}, less than the sink's tick of {tick}; \
         make it longer or fold it into its neighbour"
    )]
    TooShort {
        /// Where.
        op: OpIndex,
        /// How long.
        duration: Span,
        /// What the sink can time.
        tick: Span,
    },
    /// A target above what the interlocks allow.
    #[error(
        "instruction {op}: the target is above the interlock's limit; \
         lower the target, or raise the limit if sink and device allow it"
    )]
    AboveLimit {
        /// Where.
        op: OpIndex,
    },
    /// A target that draws less than nothing.
    #[error(
        "instruction {op}: the target is below zero (or a resistance of zero): a sink only draws"
    )]
    NotDrawing {
        /// Where.
        op: OpIndex,
    },
    /// A skip to nowhere, or into a loop.
    #[error(
        "instruction {op}: skips to {target}, which does not exist or lies in a loop that \
         instruction {op} is not in; skip to the loop's head instead"
    )]
    BadSkip {
        /// From where.
        op: OpIndex,
        /// To where.
        target: OpIndex,
    },
    /// A label that the plan does not list.
    #[error("instruction {op}: label {label} is not in the plan's list of labels")]
    UnknownLabel {
        /// Where.
        op: OpIndex,
        /// Which.
        label: u32,
    },
    /// A sink's queue too short to run without a gap.
    #[error("the sink's queue holds {queue} steps; at least 4 are needed to run without a gap")]
    ShortQueue {
        /// How many it holds.
        queue: u16,
    },
    /// Readbacks too far apart for the interlock that waits for them.
    #[error(
        "readbacks every {interval} would trip the silence interlock of {silence}; \
         read back faster or allow a longer silence"
    )]
    SlowReadback {
        /// How far apart.
        interval: Span,
        /// What trips.
        silence: Span,
    },
    /// A time of zero where that means nothing.
    #[error("the plan's {what} is zero; it must be longer than that")]
    ZeroTime {
        /// Which.
        what: &'static str,
    },
    /// A deadman interval that no sink accepts.
    #[error("the plan's deadman is {interval}; a sink accepts 100 ms to 10 s")]
    Deadman {
        /// How long.
        interval: Span,
    },
}

pub(super) fn check_times(plan: &Plan) -> Result<(), PlanError> {
    if plan.queue < 4 {
        return Err(PlanError::ShortQueue { queue: plan.queue });
    }
    for (what, span) in [
        ("tick", plan.tick),
        ("silence interlock", plan.interlocks.silence),
        ("clock interlock", plan.interlocks.clock),
    ] {
        if span == Span::ZERO {
            return Err(PlanError::ZeroTime { what });
        }
    }
    check_readback(plan, plan.readback)?;
    if plan.deadman < DEADMAN.0 || plan.deadman > DEADMAN.1 {
        return Err(PlanError::Deadman {
            interval: plan.deadman,
        });
    }
    Ok(())
}

fn check_readback(plan: &Plan, interval: Span) -> Result<(), PlanError> {
    let silence = plan.interlocks.silence;
    if interval == Span::ZERO {
        return Err(PlanError::ZeroTime {
            what: "readback interval",
        });
    }
    if interval >= silence {
        return Err(PlanError::SlowReadback { interval, silence });
    }
    Ok(())
}

/// Checks that loops match, nest and end; returns, for every place, the heads around it.
pub(super) fn check_loops(plan: &Plan) -> Result<Vec<Vec<OpIndex>>, PlanError> {
    struct Open<'a> {
        head: &'a LoopHead,
        at: OpIndex,
        steps: bool,
    }
    let mut open: Vec<Open<'_>> = Vec::new();
    let mut enclosing = Vec::with_capacity(plan.ops.len());
    for (op, place) in (0..).zip(&plan.ops) {
        let around: Vec<OpIndex> = open.iter().map(|open| open.at).collect();
        enclosing.push(around);
        match place {
            Op::Step(_) => open.iter_mut().for_each(|open| open.steps = true),
            Op::LoopBegin(head) => {
                if head.times == Some(0) || head.at_most == Some(Span::ZERO) {
                    return Err(PlanError::IdleLoop { op });
                }
                if head.times.is_none() && head.until.is_empty() && head.at_most.is_none() {
                    return Err(PlanError::EndlessLoop { op });
                }
                open.push(Open {
                    head,
                    at: op,
                    steps: false,
                });
            }
            Op::LoopEnd { begin } => {
                let innermost = open.pop().ok_or(PlanError::LoopMismatch { op })?;
                if innermost.at != *begin || innermost.head.end != op {
                    return Err(PlanError::LoopMismatch { op });
                }
                if !innermost.steps {
                    return Err(PlanError::EmptyLoop { op: innermost.at });
                }
            }
        }
    }
    match open.last() {
        Some(unclosed) => Err(PlanError::LoopMismatch { op: unclosed.at }),
        None => Ok(enclosing),
    }
}

pub(super) fn check_step(
    plan: &Plan,
    limits: &Limits,
    op: OpIndex,
    step: &PlanStep,
) -> Result<(), PlanError> {
    if step.duration < plan.tick {
        return Err(PlanError::TooShort {
            op,
            duration: step.duration,
            tick: plan.tick,
        });
    }
    if let Some(interval) = step.readback {
        check_readback(plan, interval)?;
    }
    check_label(plan, op, step.label)?;
    let (drawing, allowed) = match step.action {
        Action::Rest => (true, true),
        Action::Current { target, .. } => {
            // Both the true value and the nominal one that stands for it.
            let allowed = target <= plan.interlocks.over_current.threshold
                && plan.correction.to_nominal_setpoint(target) <= limits.current;
            (!target.is_negative(), allowed)
        }
        Action::Power { target } => (
            !target.is_negative(),
            target <= plan.interlocks.over_power.threshold,
        ),
        // The sink bounds a resistance by its current limit (line protocol, section 6).
        Action::Resistance { target } => (target.microohms() > 0, true),
    };
    if !drawing {
        return Err(PlanError::NotDrawing { op });
    }
    if !allowed {
        return Err(PlanError::AboveLimit { op });
    }
    Ok(())
}

pub(super) fn check_label(plan: &Plan, op: OpIndex, label: Option<u32>) -> Result<(), PlanError> {
    match label {
        Some(label) if usize::try_from(label).is_ok_and(|index| index < plan.labels.len()) => {
            Ok(())
        }
        Some(label) => Err(PlanError::UnknownLabel { op, label }),
        None => Ok(()),
    }
}

pub(super) fn check_skips(
    op: OpIndex,
    nexts: &[Next],
    enclosing: &[Vec<OpIndex>],
) -> Result<(), PlanError> {
    let around = |place: OpIndex| usize::try_from(place).ok().and_then(|at| enclosing.get(at));
    for next in nexts {
        let Next::SkipTo(target) = *next else {
            continue;
        };
        let reachable = around(target)
            .zip(around(op))
            .is_some_and(|(there, here)| there.iter().all(|head| here.contains(head)));
        if !reachable {
            return Err(PlanError::BadSkip { op, target });
        }
    }
    Ok(())
}
