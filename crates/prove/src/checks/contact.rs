//! Power-up, sessions, the description (chapters 2, 3, 5 and point 6.1).

use quantity::SinkTime;
use wire::{Cause, Reset, SinkState};

use crate::checks::{A_WHILE, LONG};
use crate::probe::{Answer, Outcome, Probe, Stop, ensure};

use wire::ReasonRefused;

/// A number that no session of this program has reached when it is asked under.
const FAR_AHEAD: u16 = 40_000;

pub(crate) fn session_first(probe: &mut Probe<'_>) -> Outcome {
    probe.say_bytes(b"\n")?;
    // No `off` here: whether the sink is off by itself must be seen before anything turns it off.
    let answer = probe.say_order(&format!("readback {FAR_AHEAD} 0"), FAR_AHEAD)?;
    match answer {
        Answer::Refused(ReasonRefused::Session) => {
            Ok("an order was refused with `session`".to_owned())
        }
        Answer::Done => Err(Stop::Fails(format!(
            "order {FAR_AHEAD} was executed though no session of this host had begun (chapter 2)"
        ))),
        Answer::Gap(_) | Answer::Refused(_) => Err(Stop::NotShown(
            "a session from before stands; cut the sink's power and run this first of all"
                .to_owned(),
        )),
    }
}

pub(crate) fn description(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.new_session()?;
    ensure!(
        described.abilities.burst == (described.burst != 0),
        "ability burst is {}, samples of a burst {}: stated if and only if there are any \
         (chapter 5)",
        described.abilities.burst,
        described.burst
    );
    let (again, _) = probe.hello()?;
    ensure!(
        again == described,
        "`hello` under the same session number brought another description (chapter 3)"
    );
    Ok(format!(
        "firmware {}, serial {}, tick {}, queue {}, last start: {}",
        described.firmware,
        described.serial,
        described.tick,
        described.queue,
        described.reset.word()
    ))
}

pub(crate) fn off_at_session(probe: &mut Probe<'_>) -> Outcome {
    probe.new_session()?;
    probe.start_readbacks()?;
    let mark = probe.mark();
    let pair = probe.reading()?;
    let state = pair.values.state;
    ensure!(
        !matches!(state, SinkState::On | SinkState::Saturated),
        "the state is {} in a session in which no step was given: it must be off (chapter 6.1)",
        name(state)
    );
    ensure!(
        pair.counters.queued == 0 && pair.counters.step.0 == 0,
        "{} steps queued and step {} last begun in a session in which none was given (chapter 3)",
        pair.counters.queued,
        pair.counters.step.0
    );
    probe.listen(A_WHILE)?;
    ensure!(
        probe.edges(mark).is_empty(),
        "a step began in a session in which none was given (chapter 6.1)"
    );
    Ok(format!("state {}", name(state)))
}

pub(crate) fn forgets(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let later = probe.ahead()?;
    probe.rest_now(LONG)?;
    let queued = probe.rest(later, LONG)?;
    probe.new_session()?;
    let mark = probe.mark();
    let number = probe.next_number();
    let (_, answer) = probe.order("step", "current 0 0 0 1000000")?;
    ensure!(
        answer != Answer::Gap(number) && !matches!(answer, Answer::Gap(_)),
        "a new session expects another number than 1: `{answer}` (chapter 3)"
    );
    ensure!(
        answer == Answer::Refused(ReasonRefused::Unready),
        "a step in a new session without limits was answered `{answer}`, expected `no unready`: \
         limits are forgotten (chapter 3)"
    );
    // Beyond the time at which the step queued before would have begun.
    while probe.fence()? <= later {
        probe.listen(A_WHILE)?;
    }
    probe.listen(A_WHILE)?;
    ensure!(
        probe.edges(mark).is_empty(),
        "order {queued} of the session before began in the new one (chapter 3)"
    );
    let readbacks = probe
        .since(mark)
        .filter(|line| matches!(line, wire::SinkLine::Counters { .. }))
        .count();
    ensure!(
        readbacks == 0,
        "{readbacks} readbacks came in a session that has ordered none (chapter 3)"
    );
    probe.start_readbacks()?;
    let pair = probe.reading()?;
    ensure!(
        matches!(pair.values.state, SinkState::Off),
        "a new session left the sink {}: it turns the current off (chapter 3)",
        name(pair.values.state)
    );
    Ok("off, unready, no edge, no readback, numbers from 1".to_owned())
}

pub(crate) fn off_after_reset(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.new_session()?;
    let now = probe.fence()?;
    if described.reset != Reset::Watchdog {
        return Err(Stop::NotShown(format!(
            "the sink started {} s ago and has had a session since; press its reset while a step \
             runs and watch the gate (the firmware guide tells how)",
            now.checked_since(SinkTime::ZERO)
                .map_or(0, |span| span.micros() / 1_000_000)
        )));
    }
    probe.start_readbacks()?;
    let state = probe.reading()?.values.state;
    match state {
        SinkState::Latched(Cause::Watchdog) => {
            probe.must("reset", "")?;
            Ok("after a reset by the watchdog: latched until `reset`".to_owned())
        }
        // `reset` may have been given since.
        SinkState::Off => Err(Stop::NotShown(
            "the watchdog's latch has been cleared since the reset".to_owned(),
        )),
        other => Err(Stop::Fails(format!(
            "after a reset by the watchdog the state is {}: it must be latched with `watchdog` \
             (chapter 6.1)",
            name(other)
        ))),
    }
}

/// A state as the trade says it.
pub(crate) fn name(state: SinkState) -> String {
    match state {
        SinkState::Off => "off".to_owned(),
        SinkState::On => "on".to_owned(),
        SinkState::Saturated => "on and out of headroom".to_owned(),
        SinkState::Latched(cause) => format!("latched with `{}`", cause.word()),
    }
}
