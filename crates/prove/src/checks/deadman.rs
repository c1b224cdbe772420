//! The deadman (point 6.2).

use quantity::{SinkTime, Span};
use wire::{Cause, ReasonRefused, SinkState, checksum};

use crate::checks::contact::name;
use crate::checks::{A_WHILE, LONG};
use crate::probe::{Mark, Outcome, Probe, Stop, Trip, ensure, sound_line};

/// The interval that checks agree: long against a host's hiccups, short against patience.
const AGREED: Span = Span::from_millis(500);

/// How many intervals a check listens for a trip that comes too late.
const LISTENED: u64 = 4;

/// Awaits the trip of a sink to which nothing valid was said since `last`, and judges it.
fn judge(
    probe: &mut Probe<'_>,
    mark: Mark,
    last: SinkTime,
    agreed: Span,
    listened: Span,
) -> Result<(Trip, Span), Stop> {
    let Some(trip) = probe.trip(mark, listened)? else {
        return Err(Stop::Fails(format!(
            "no trip within {listened} of silence, agreed was {agreed}: a host that dies leaves \
             the sink on (chapter 6.2)"
        )));
    };
    judge_trip(probe, trip, last, agreed)
}

fn judge_trip(
    probe: &Probe<'_>,
    trip: Trip,
    last: SinkTime,
    agreed: Span,
) -> Result<(Trip, Span), Stop> {
    ensure!(
        trip.cause == Cause::Deadman,
        "the sink tripped with `{}` of {}, expected `deadman` (chapter 6.2)",
        trip.cause.word(),
        trip.value
    );
    let silent = trip.time.saturating_since(last);
    let most = agreed.saturating_add(probe.lateness());
    ensure!(
        silent <= most,
        "the deadman tripped {silent} after the last valid line, agreed was {agreed}: too slow \
         (chapter 6.2)"
    );
    ensure!(
        silent >= agreed,
        "the deadman tripped {silent} after the last valid line, agreed was {agreed}: too soon \
         (chapter 6.2)"
    );
    let said = Span::from_micros(u64::try_from(trip.value).unwrap_or(0));
    let bound = probe.lateness();
    ensure!(
        said.saturating_sub(silent).max(silent.saturating_sub(said)) <= bound,
        "the trip says {said} of silence, between the last line and the trip lie {silent} \
         (chapter 4)"
    );
    Ok((trip, silent))
}

pub(crate) fn trips(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    probe.must("deadman", &AGREED.micros().to_string())?;
    let running = probe.rest_now(LONG)?;
    let later = running.time.saturating_add(Span::from_secs(4));
    probe.rest(later, LONG)?;
    let mark = probe.mark();
    let last = probe.fence()?;
    probe.fall_silent();
    let (_, silent) = judge(probe, mark, last, AGREED, times(AGREED, LISTENED))?;
    probe.speak_again();
    let pair = probe.reading()?;
    ensure!(
        pair.values.state == SinkState::Latched(Cause::Deadman),
        "after the deadman's trip the state is {}: latched with `deadman` (chapter 6.2)",
        name(pair.values.state)
    );
    ensure!(
        pair.counters.queued == 0,
        "after the deadman's trip {} steps are queued (chapter 6.2)",
        pair.counters.queued
    );
    probe.refused("step", "current 0 0 0 1000000", ReasonRefused::Latched)?;
    probe.must("reset", "")?;
    Ok(format!(
        "tripped after {silent} of silence, agreed {AGREED}"
    ))
}

pub(crate) fn untold(probe: &mut Probe<'_>) -> Outcome {
    let agreed = Span::from_secs(2);
    probe.ready()?;
    probe.rest_now(LONG)?;
    let mark = probe.mark();
    let last = probe.fence()?;
    probe.fall_silent();
    let listened = agreed.saturating_add(agreed).saturating_add(AGREED);
    let (_, silent) = judge(probe, mark, last, agreed, listened)?;
    Ok(format!("tripped after {silent} of silence"))
}

pub(crate) fn queued(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    probe.must("deadman", &AGREED.micros().to_string())?;
    let far = probe.fence()?.saturating_add(LONG);
    probe.rest(far, LONG)?;
    let mark = probe.mark();
    let last = probe.fence()?;
    probe.fall_silent();
    let (_, silent) = judge(probe, mark, last, AGREED, times(AGREED, LISTENED))?;
    Ok(format!(
        "tripped after {silent} of silence, before the step began"
    ))
}

pub(crate) fn noise(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    probe.must("deadman", &AGREED.micros().to_string())?;
    probe.rest_now(LONG)?;
    let mark = probe.mark();
    let last = probe.fence()?;
    probe.fall_silent();
    let ask = "clock 4711";
    let noises = [
        format!("{ask} {:04X}\n", checksum(ask.as_bytes()) ^ 1).into_bytes(),
        sound_line("clock 65536"),
        // What the sink itself may say, as a shorted cable would bring it back.
        sound_line("clock 4711 1000000"),
        sound_line("ok 1"),
        sound_line("end 1 1000000"),
        b"\n".to_vec(),
    ];
    let pause = Span::from_millis(60);
    let mut passed = Span::ZERO;
    let mut noises = noises.iter().cycle();
    let listened = times(AGREED, LISTENED);
    while passed < listened {
        if let Some(noise) = noises.next() {
            probe.say_bytes(noise)?;
        }
        if let Some(trip) = probe.trip(mark, pause)? {
            let (_, silent) = judge_trip(probe, trip, last, AGREED)?;
            return Ok(format!("tripped after {silent} without a valid line"));
        }
        passed = passed.saturating_add(pause);
    }
    Err(Stop::Fails(format!(
        "no trip within {listened} in which only damaged, faulty and echoed lines came, agreed \
         was {AGREED}: they pass for a host (chapters 1 and 6.2)"
    )))
}

pub(crate) fn quiet(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    probe.must("deadman", &times(AGREED, 2).micros().to_string())?;
    probe.rest_now(LONG)?;
    let mark = probe.mark();
    // Waiting says something every 400 ms.
    probe.listen(times(AGREED, 5))?;
    // Judged by what the sink heard, not by when the host meant to say it.
    let tripped = probe.trip(mark, Span::ZERO)?;
    ensure!(
        tripped.is_none(),
        "the sink tripped though a valid line came every 400 ms, agreed was 1 s (chapter 6.2)"
    );
    // A latch and a step that is over leave nothing to watch.
    probe.off()?;
    probe.must("deadman", &Span::from_millis(100).micros().to_string())?;
    let mark = probe.mark();
    probe.fence()?;
    probe.fall_silent();
    probe.listen(times(A_WHILE, 2))?;
    ensure!(
        probe.trip(mark, Span::ZERO)?.is_none(),
        "the deadman tripped with no step in progress or queued (chapter 6.2)"
    );
    Ok("quiet while lines came, and with nothing to watch".to_owned())
}

fn times(span: Span, factor: u64) -> Span {
    Span::from_micros(span.micros().saturating_mul(factor))
}
