//! The table: each guarantee, where the protocol gives it, and the check that tests it.

use quantity::Span;
use serde::Serialize;

use crate::checks::{
    abilities, contact, counting, deadman, limits, lines, orders, source, stepping,
};
use crate::probe::{Outcome, Probe};

/// What must be connected for a check to show anything.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Needs {
    /// Nothing.
    Nothing,
    /// A source that gives current, and leave to draw it.
    Source,
}

/// Something the protocol guarantees.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
pub struct Guarantee {
    /// Its short name.
    pub name: &'static str,
    /// Chapter and point of the protocol's text.
    pub chapter: &'static str,
    /// What the sink does.
    pub says: &'static str,
    /// What must be connected.
    pub needs: Needs,
    /// How long the check itself waits and listens at most.
    pub longest: Span,
}

pub(crate) type Check = fn(&mut Probe<'_>) -> Outcome;

/// Every guarantee that is checked, in the order of the checks.
pub fn guarantees() -> impl Iterator<Item = &'static Guarantee> {
    CHECKS.iter().map(|(guarantee, _)| guarantee)
}

const fn idle(
    name: &'static str,
    chapter: &'static str,
    seconds: u64,
    says: &'static str,
) -> Guarantee {
    Guarantee {
        name,
        chapter,
        says,
        needs: Needs::Nothing,
        longest: Span::from_secs(seconds),
    }
}

const fn drawing(
    name: &'static str,
    chapter: &'static str,
    seconds: u64,
    says: &'static str,
) -> Guarantee {
    Guarantee {
        needs: Needs::Source,
        ..idle(name, chapter, seconds, says)
    }
}

/// The first two must stay so: they are about what stands before any session has begun, and before
/// anything has turned the sink off.
#[rustfmt::skip]
pub(crate) const CHECKS: &[(Guarantee, Check)] = &[
    (idle("session-first", "2", 3, "no order is taken before a session has begun"), contact::session_first),
    (idle("off-at-session", "3, 6.1", 3, "a new session finds it off, with nothing queued"), contact::off_at_session),
    (idle("description", "5", 3, "describes itself in five lines, whole or not at all"), contact::description),
    (idle("off-after-reset", "6.1", 1, "off at power-up and after every reset"), contact::off_after_reset),
    (idle("forgets-at-session", "3", 4, "a new session forgets limits, readbacks, queue and numbers"), contact::forgets),
    (idle("damaged-lines", "1", 4, "a damaged line is counted, and neither answered nor acted on"), lines::damaged),
    (idle("line-ends", "1", 3, "empty lines and a return before the line end are borne"), lines::line_ends),
    (idle("faulty-lines", "1, 2, 8", 8, "a faulty line is refused with its reason, counted, never acted on"), lines::faulty),
    (idle("once", "2", 5, "an order that comes again is answered again and not executed again"), orders::once),
    (idle("in-turn", "2", 5, "an order out of turn is refused with the number expected"), orders::in_turn),
    (idle("sixteen-answers", "2", 5, "16 orders at once, and their answers kept"), orders::sixteen),
    (idle("ready-first", "3", 5, "no step before all six limits are set"), stepping::ready_first),
    (idle("limit-refuses", "3, 6.3", 4, "a step above a limit is refused"), limits::refuses),
    (idle("step-refusals", "3", 8, "a step that is late, out of order or too many is refused"), stepping::refusals),
    (idle("edges-in-order", "6.6, 6.7", 6, "steps begin in order, each at the first tick at or after its start"), stepping::edges),
    (idle("hold-ends", "6.7", 6, "with nothing queued the last step lasts to its hold, then off"), stepping::hold_ends),
    (idle("hold-waits", "3, 6.7", 5, "while a step is queued, the one in progress lasts until that begins"), stepping::hold_waits),
    (idle("clear", "3", 5, "`clear` drops what has not begun, and nothing else"), stepping::clear),
    (idle("off", "3, 6.8", 6, "`off` ends the step, empties the queue, and may be repeated"), stepping::off),
    (idle("deadman", "6.2", 6, "silence for the agreed interval: off, queue emptied, latched"), deadman::trips),
    (idle("deadman-untold", "3, 6.2", 9, "without an agreement the interval is 2 s"), deadman::untold),
    (idle("deadman-queued", "6.2", 5, "a step that is only queued is watched too"), deadman::queued),
    (idle("deadman-noise", "1, 6.2", 6, "damaged, faulty and echoed lines do not pass for a host"), deadman::noise),
    (idle("deadman-quiet", "6.2", 5, "any valid line keeps it quiet"), deadman::quiet),
    (idle("latch", "3, 6.5", 6, "latched: no step until `reset`, and `reset` turns nothing on"), limits::latch),
    (idle("limit-temperature", "6.3, 6.5", 6, "too hot: latched, also while off, and no `reset` while it stands"), limits::temperature),
    (idle("limit-voltage", "6.3", 8, "voltage beyond its limits while on: off and latched"), limits::voltage),
    (idle("limit-persistence", "3, 6.3", 6, "a limit trips after its persistence and not before"), limits::persistence),
    (idle("readbacks", "3, 4", 6, "readbacks come as numbered pairs, at the interval ordered"), counting::readbacks),
    (idle("events-counted", "4", 5, "events bear a running number"), counting::events),
    (idle("counters-kept", "4, 6.9", 5, "counters go on over sessions and never go back"), counting::kept),
    (idle("clock", "3, 4", 4, "the clock runs at the rate of the host's and never goes back"), counting::clock),
    (idle("burst", "3, 4", 9, "a burst brings every sample asked for, in order"), abilities::burst),
    (idle("isolator", "3", 4, "the isolator obeys, or is refused for want of it"), abilities::isolator),
    (idle("modes", "3", 4, "modes it has not are refused"), abilities::modes),
    (drawing("draws", "3, 6.6", 6, "a step draws, `off` stops it"), source::draws),
    (drawing("charge", "6.9", 12, "charge and energy are what was measured times the time it passed"), source::charge),
    (drawing("limit-current", "6.3", 6, "current beyond its limit: off and latched"), source::limit_current),
    (drawing("limit-power", "6.3", 6, "power beyond its limit: off and latched"), source::limit_power),
    (drawing("ramp", "3, 6.6", 8, "a ramp is a straight line to its target"), source::ramp),
    (drawing("regulated-power", "6.10", 6, "a power step holds the power"), source::power),
    (drawing("regulated-resistance", "6.10", 6, "a resistance step holds the resistance"), source::resistance),
    (drawing("deadman-current", "6.2", 6, "silence stops a current that flows"), source::deadman),
];
