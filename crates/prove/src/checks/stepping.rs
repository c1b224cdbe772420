//! Steps: what is refused, when they begin and end (chapter 3, points 6.6 to 6.8).

use quantity::{SinkTime, Span};
use wire::{ReasonRefused, SinkState};

use crate::checks::contact::name;
use crate::checks::{A_WHILE, LONG};
use crate::probe::{Edge, Outcome, Probe, Stop, ensure};

pub(crate) fn ready_first(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.new_session()?;
    let limits = [
        format!("current {} 0", described.sense_current.microamperes()),
        "power 999999999 0".to_owned(),
        "voltage-high 999999999 0".to_owned(),
        "voltage-low -99999999 0".to_owned(),
        "temperature 90000 0".to_owned(),
        format!("excess {} 0", described.sense_current.microamperes()),
    ];
    for (set, limit) in limits.iter().enumerate() {
        let (_, answer) = probe.order("step", "current 0 0 0 1000000")?;
        ensure!(
            answer.to_string() == "no unready",
            "a step after {set} of the six limits was answered `{answer}`, expected `no unready` \
             (chapter 3)"
        );
        probe.must("limit", limit)?;
    }
    probe.must("step", "current 0 0 0 1000000")?;
    Ok("refused until the sixth limit was set".to_owned())
}

pub(crate) fn refusals(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let hold = LONG.micros();
    let now = probe.fence()?;
    let past = now.micros().saturating_sub(1_000).max(1);
    probe.refused(
        "step",
        &format!("current {past} 0 0 {hold}"),
        ReasonRefused::Late,
    )?;
    let far = now.saturating_add(LONG).micros();
    for _ in 0..described.queue {
        probe.must("step", &format!("current {far} 0 0 {hold}"))?;
    }
    let queued = probe.reading()?.counters.queued;
    ensure!(
        queued == described.queue,
        "{} steps were taken and {queued} are queued (chapter 4)",
        described.queue
    );
    let earlier = far - 1;
    probe.refused(
        "step",
        &format!("current {earlier} 0 0 {hold}"),
        ReasonRefused::Range,
    )?;
    probe.refused(
        "step",
        &format!("current 0 0 0 {hold}"),
        ReasonRefused::Range,
    )?;
    probe.refused(
        "step",
        &format!("current {far} 0 0 {hold}"),
        ReasonRefused::Full,
    )?;
    Ok(format!(
        "{} steps taken, the next refused with `full`",
        described.queue
    ))
}

/// By how much a step began after its start; fails if that is too much, or before it.
fn lateness(probe: &Probe<'_>, edge: Edge, start: SinkTime) -> Result<Span, Stop> {
    let Some(late) = edge.time.checked_since(start) else {
        return Err(Stop::Fails(format!(
            "step {} began at {} us, before its start at {} us (chapter 6.6)",
            edge.step,
            edge.time.micros(),
            start.micros()
        )));
    };
    let most = probe.lateness();
    ensure!(
        late <= most,
        "step {} began {late} after its start, at most {most} is one tick and what is borne \
         (chapter 6.6)",
        edge.step
    );
    Ok(late)
}

pub(crate) fn edges(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let mark = probe.mark();
    let first = probe.ahead()?;
    let gap = Span::from_millis(120);
    let second = first.saturating_add(gap);
    let third = second.saturating_add(gap);
    let starts = [first, second, third, third];
    let mut steps = Vec::new();
    for start in starts {
        steps.push(probe.rest(start, LONG)?);
    }
    let Some(last) = steps.last().copied() else {
        return Err(Stop::NotShown("no step was given".to_owned()));
    };
    // Until the last is due, and a while beyond; then whatever began is there.
    while probe.fence()? <= third {
        probe.listen(Span::from_millis(50))?;
    }
    probe.edge(mark, last)?;
    probe.listen(A_WHILE)?;
    let begun = probe.edges(mark);
    let order: Vec<u16> = begun.iter().map(|edge| edge.step).collect();
    ensure!(
        order == steps,
        "steps queued in the order {steps:?} began in the order {order:?} (chapter 6.7)"
    );
    let mut most = Span::ZERO;
    for (edge, start) in begun.iter().zip(starts) {
        most = most.max(lateness(probe, *edge, start)?);
    }
    Ok(format!("in order, at most {most} after their starts"))
}

pub(crate) fn hold_ends(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let mark = probe.mark();
    let hold = Span::from_millis(200);
    let edge = probe.rest_now(hold)?;
    let patience = hold.saturating_add(probe.options().patience);
    let Some(end) = probe.end(mark, patience.saturating_add(probe.lateness()))? else {
        return Err(Stop::Fails(format!(
            "no `end` within {patience} of a step that holds {hold} with nothing queued: it \
             lasts to its hold, then off (chapter 6.7)"
        )));
    };
    let lasted = end.saturating_since(edge.time);
    ensure!(
        lasted >= hold && lasted <= hold.saturating_add(probe.lateness()),
        "a step that holds {hold} lasted {lasted} (chapter 6.7)"
    );
    let state = probe.reading()?.values.state;
    ensure!(
        state == SinkState::Off,
        "after the last hold the state is {}: off, and not latched (chapter 6.7)",
        name(state)
    );
    Ok(format!("held {lasted}, ordered {hold}"))
}

pub(crate) fn hold_waits(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let mark = probe.mark();
    let first = probe.ahead()?;
    let second = first.saturating_add(Span::from_millis(300));
    let one = probe.rest(first, Span::from_millis(50))?;
    let other = probe.rest(second, Span::from_millis(50))?;
    probe.edge(mark, one)?;
    while probe.fence()? <= second {
        probe.listen(Span::from_millis(50))?;
    }
    let edge = probe.edge(mark, other)?;
    lateness(probe, edge, second)?;
    let patience = probe.options().patience.saturating_add(probe.lateness());
    let Some(end) = probe.end(mark, patience)? else {
        return Err(Stop::Fails(
            "no `end` of the last step (chapter 6.7)".to_owned(),
        ));
    };
    ensure!(
        end >= edge.time,
        "a step ended by its hold while another was queued: only the last step's hold counts \
         (chapter 3)"
    );
    Ok("the hold of a step with another behind it was passed over".to_owned())
}

pub(crate) fn clear(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let running = probe.rest_now(LONG)?;
    let mark = probe.mark();
    let soon = probe.ahead()?;
    let kept = probe.rest(soon, LONG)?;
    let from = soon.saturating_add(Span::from_millis(100));
    let dropped = probe.rest(from, LONG)?;
    probe.must("clear", &from.micros().to_string())?;
    while probe.fence()? <= from {
        probe.listen(Span::from_millis(50))?;
    }
    probe.edge(mark, kept)?;
    probe.listen(A_WHILE)?;
    ensure!(
        !probe.edges(mark).iter().any(|edge| edge.step == dropped),
        "order {dropped} began though `clear` had dropped it (chapter 3)"
    );
    probe.rest(from.saturating_add(LONG), LONG)?;
    probe.must("clear", "0")?;
    let pair = probe.reading()?;
    ensure!(
        pair.counters.queued == 0,
        "{} steps are queued after `clear` of all (chapter 3)",
        pair.counters.queued
    );
    ensure!(
        pair.values.state == SinkState::On,
        "`clear` left the sink {}: the step in progress goes on (chapter 3)",
        name(pair.values.state)
    );
    Ok(format!(
        "step {} went on, step {dropped} was dropped",
        running.step
    ))
}

pub(crate) fn off(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let running = probe.rest_now(LONG)?;
    let mark = probe.mark();
    let later = probe.ahead()?;
    let queued = probe.rest(later, LONG)?;
    probe.off()?;
    let pair = probe.reading()?;
    ensure!(
        pair.values.state == SinkState::Off,
        "after `off` the state is {} (chapter 6.8)",
        name(pair.values.state)
    );
    ensure!(
        pair.counters.queued == 0,
        "after `off` {} steps are queued (chapter 6.8)",
        pair.counters.queued
    );
    for _ in 0..3 {
        probe.off()?;
    }
    while probe.fence()? <= later {
        probe.listen(Span::from_millis(50))?;
    }
    probe.listen(A_WHILE)?;
    ensure!(
        probe.edges(mark).is_empty(),
        "order {queued} began after `off` (chapter 6.8)"
    );
    ensure!(
        probe.end(mark, Span::ZERO)?.is_none(),
        "step {} was ended a second time after `off` (chapter 4)",
        running.step
    );
    // `off` is no latch: the next step is taken.
    probe.rest_now(Span::from_millis(50))?;
    Ok("off, queue empty, nothing began afterwards, no latch".to_owned())
}
