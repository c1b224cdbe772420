//! What a sink may or may not have: bursts, an isolator, regulated modes (chapters 3 and 4).

use quantity::Span;
use wire::{ReasonRefused, SinkLine};

use crate::checks::LONG;
use crate::probe::{Outcome, Probe, ensure};

pub(crate) fn burst(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let at = probe.ahead()?;
    if !described.abilities.burst {
        probe.refused(
            "burst",
            &format!("{} 1 1", at.micros()),
            ReasonRefused::Ability,
        )?;
        return Ok("none, and refused with `ability`".to_owned());
    }
    let most = u64::from(described.burst);
    let late = at
        .micros()
        .saturating_sub(Span::from_secs(1).micros() + probe.lateness().micros());
    for (fields, reason) in [
        (format!("{} 0 0", at.micros()), ReasonRefused::Range),
        (format!("{} {most} 1", at.micros()), ReasonRefused::Range),
        (format!("{late} 1 1"), ReasonRefused::Late),
    ] {
        probe.refused("burst", &fields, reason)?;
    }
    let half = (described.burst / 2).clamp(1, 12);
    let wanted = usize::from(half) * 2;
    let mark = probe.mark();
    let at = probe.ahead()?.micros();
    probe.must("burst", &format!("{at} {half} {half}"))?;
    probe.refused("burst", &format!("{at} {half} {half}"), ReasonRefused::Full)?;
    let within = Span::from_secs(2)
        .saturating_add(probe.options().patience)
        .saturating_add(probe.options().late);
    let done = probe.hear(mark, within, |line| {
        matches!(line, SinkLine::BurstDone { .. }).then_some(())
    })?;
    ensure!(
        done.is_some(),
        "no `b ... done` within {within} of a burst of {wanted} samples (chapter 4)"
    );
    let mut indices: Vec<usize> = Vec::new();
    for line in probe.since(mark) {
        if let SinkLine::Burst { index, len, .. } = *line {
            let first = usize::from(index);
            indices.extend(first..first + usize::from(len));
        }
    }
    ensure!(
        indices.iter().copied().eq(0..wanted),
        "a burst of {wanted} samples brought those of index {indices:?} (chapter 4)"
    );
    Ok(format!("{wanted} samples, in order"))
}

pub(crate) fn isolator(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    if !described.abilities.isolator {
        probe.refused("isolator", "1", ReasonRefused::Ability)?;
        return Ok("none, and refused with `ability`".to_owned());
    }
    probe.must("isolator", "1")?;
    let mark = probe.mark();
    let step = probe.rest_now(LONG)?;
    probe.must("isolator", "0")?;
    let state = probe.reading()?.values.state;
    ensure!(
        state == wire::SinkState::Off,
        "opening the isolator left step {} in progress: it turns off first (chapter 3)",
        step.step
    );
    ensure!(
        probe.end(mark, Span::ZERO)?.is_none(),
        "opening the isolator was told as the end of a hold (chapter 4)"
    );
    Ok("closed and opened; opening turned off".to_owned())
}

pub(crate) fn modes(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let far = probe.fence()?.saturating_add(LONG).micros();
    let mut said = Vec::new();
    for (mode, has) in [
        ("power", described.abilities.power),
        ("resistance", described.abilities.resistance),
    ] {
        // Far ahead, and dropped before it begins.
        let fields = format!("{mode} {far} 1000000 0 1000000");
        let (number, answer) = probe.order("step", &fields)?;
        let expected = if has { "ok" } else { "no ability" };
        ensure!(
            answer.to_string() == expected,
            "`step {number} {fields}` was answered `{answer}`, expected `{expected}`: ability \
             {mode} is {has} (chapters 3 and 5)"
        );
        said.push(format!("{mode}: {}", if has { "yes" } else { "no" }));
    }
    probe.must("clear", "0")?;
    Ok(said.join(", "))
}
