//! Readbacks, events, counters and the clock (chapters 3 and 4, point 6.9).

use quantity::Span;
use wire::SinkLine;

use crate::checks::LONG;
use crate::probe::{Outcome, Pair, Probe, Stop, ensure};

/// What follows a running number: 65535 is followed by 1.
const fn following(count: u16) -> u16 {
    if count == u16::MAX { 1 } else { count + 1 }
}

/// So many pairs in a row.
fn pairs(probe: &mut Probe<'_>, many: usize) -> Result<Vec<Pair>, Stop> {
    let mut pairs: Vec<Pair> = vec![probe.reading()?];
    while let Some(last) = pairs.last()
        && pairs.len() < many
    {
        let next = probe.pair_after(&last.counters)?;
        pairs.push(next);
    }
    Ok(pairs)
}

pub(crate) fn readbacks(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let interval = probe.start_readbacks()?;
    let all = pairs(probe, 12)?;
    let tolerance = interval.saturating_add(probe.lateness());
    for (one, next) in all.iter().zip(all.iter().skip(1)) {
        ensure!(
            next.count == following(one.count),
            "readback {} was followed by {}: they are counted one by one (chapter 4)",
            one.count,
            next.count
        );
        let passed = next.counters.time.saturating_since(one.counters.time);
        ensure!(
            passed <= tolerance,
            "readbacks ordered every {interval} came {passed} apart (chapter 3)"
        );
    }
    for pair in &all {
        let low = pair.counters.time.micros() & u64::from(u32::MAX);
        ensure!(
            low == u64::from(pair.time_low),
            "readback {} bears time {} in `c` and {} in `r`: the same in its low 32 bits \
             (chapter 4)",
            pair.count,
            pair.counters.time.micros(),
            pair.time_low
        );
        let values = pair.values;
        ensure!(
            values.current_min <= values.current
                && values.current <= values.current_max
                && values.voltage_min <= values.voltage
                && values.voltage <= values.voltage_max,
            "a mean of readback {} lies outside its extremes (chapter 4)",
            pair.count
        );
    }
    probe.must("readback", "0")?;
    let mark = probe.mark();
    probe.listen(Span::from_micros(interval.micros().saturating_mul(4)))?;
    let more = probe
        .since(mark)
        .filter(|line| matches!(line, SinkLine::Counters { .. }))
        .count();
    ensure!(
        more == 0,
        "{more} readbacks came after `readback 0` (chapter 3)"
    );
    Ok(format!("{} pairs in a row, every {interval}", all.len()))
}

pub(crate) fn events(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let mark = probe.mark();
    for _ in 0..3 {
        let mark = probe.mark();
        probe.rest_now(Span::from_millis(30))?;
        let within = probe.options().patience.saturating_add(probe.lateness());
        probe.end(mark, within)?;
    }
    let counts: Vec<u16> = probe
        .since(mark)
        .filter_map(|line| match *line {
            SinkLine::Edge { event, .. }
            | SinkLine::End { event, .. }
            | SinkLine::Trip { event, .. } => Some(event),
            _ => None,
        })
        .collect();
    ensure!(
        counts.len() == 6,
        "three steps that end brought {} events, expected an `edge` and an `end` of each \
         (chapter 4)",
        counts.len()
    );
    let in_row = counts
        .iter()
        .zip(counts.iter().skip(1))
        .all(|(one, next)| *next == following(*one));
    ensure!(
        in_row,
        "events are numbered {counts:?}: edge, end and trip share one running number (chapter 4)"
    );
    Ok(format!("{} events, numbered in a row", counts.len()))
}

pub(crate) fn kept(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let before = probe.reading()?;
    let step = probe.rest_now(LONG)?;
    let running = probe.reading()?;
    ensure!(
        running.counters.step.0 == step.step,
        "order {} is in progress and the counters say {} (chapter 4)",
        step.step,
        running.counters.step.0
    );
    probe.ready()?;
    let after = probe.reading()?;
    for (what, early, late) in [
        (
            "charge",
            before.counters.charge.microcoulombs(),
            after.counters.charge.microcoulombs(),
        ),
        (
            "energy",
            before.counters.energy.microjoules(),
            after.counters.energy.microjoules(),
        ),
    ] {
        ensure!(
            late >= early,
            "{what} went back from {early} to {late} (chapter 6.9)"
        );
    }
    ensure!(
        after.counters.time > running.counters.time,
        "the clock went back in a new session (chapter 4)"
    );
    ensure!(
        after.count != before.count && after.count >= before.count.min(after.count),
        "the running number of readbacks began anew in a new session (chapter 4)"
    );
    ensure!(
        after.counters.step.0 == 0,
        "a new session says that order {} ran last: none has (chapter 3)",
        after.counters.step.0
    );
    Ok("over two sessions".to_owned())
}

pub(crate) fn clock(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let began = probe.elapsed();
    let first = probe.fence()?;
    let answered = probe.elapsed();
    let mut last = first;
    while probe.elapsed().saturating_sub(answered) < Span::from_millis(1_500) {
        let now = probe.fence()?;
        ensure!(
            now >= last,
            "the clock went back from {} us to {} us (chapter 3)",
            last.micros(),
            now.micros()
        );
        last = now;
        probe.listen(Span::from_millis(100))?;
    }
    let asked = probe.elapsed();
    let end = probe.fence()?;
    let done = probe.elapsed();
    let sink = end.saturating_since(first);
    // Each instant lies between its ask and its answer.
    let shortest = asked.saturating_sub(answered);
    let most = done.saturating_sub(began);
    let slack = Span::from_micros(most.micros() / 50);
    ensure!(
        sink.saturating_add(slack) >= shortest && sink <= most.saturating_add(slack),
        "the sink's clock advanced {sink} while between {shortest} and {most} passed here: TIME is \
         in microseconds (chapter 3)"
    );
    Ok(format!("{sink} there, {shortest} to {most} here"))
}
