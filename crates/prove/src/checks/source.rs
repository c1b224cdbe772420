//! What needs a current: drawing, counting it, limits on it, ramps, regulated steps
//! (chapter 3, points 6.2, 6.3, 6.6, 6.9 and 6.10).
//!
//! Nominal values are not true values. So what is set is held against what is read back only
//! coarsely: an uncalibrated sink may be several percent off and still be sound.

use quantity::{Charge, Current, Power, Span};
use wire::{Cause, Description, SinkState};

use crate::checks::LONG;
use crate::checks::contact::name;
use crate::probe::{Edge, Outcome, Pair, Probe, Stop, cannot, ensure};

/// How far a set value may lie from the one read back, in parts of a hundred of the value, beside
/// that of the scale.
const APART_PERCENT: i64 = 15;

/// Begins a step and lets it settle.
fn begin(probe: &mut Probe<'_>, mode: &str, target: i64, ramp: Span) -> Result<Edge, Stop> {
    let mark = probe.mark();
    let fields = format!("{mode} 0 {target} {} {}", ramp.micros(), LONG.micros());
    let step = probe.must("step", &fields)?;
    let edge = probe.edge(mark, step)?;
    probe.listen(Span::from_millis(100))?;
    Ok(edge)
}

fn close(measured: i64, set: i64, scale: i64) -> bool {
    let apart = measured.saturating_sub(set).saturating_abs();
    apart <= set.saturating_abs() / 100 * APART_PERCENT + scale / 100
}

/// A pair from within a settled step; not shown if the source does not give the current.
fn settled(probe: &mut Probe<'_>) -> Result<Pair, Stop> {
    let pair = probe.reading()?;
    match pair.values.state {
        SinkState::On => Ok(pair),
        SinkState::Saturated => Err(Stop::NotShown(
            "the sink is out of headroom: the source does not give the current".to_owned(),
        )),
        other => Err(Stop::Fails(format!(
            "a step is in progress and the state is {} (chapter 4)",
            name(other)
        ))),
    }
}

/// No current that a converter could tell from none.
fn none_flows(pair: &Pair, described: &Description) -> bool {
    pair.values.current_max.microamperes() <= described.sense_current.microamperes() / 100
}

pub(crate) fn draws(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let set = probe.draw()?;
    begin(probe, "current", set.microamperes(), Span::ZERO)?;
    let on = settled(probe)?;
    let full = described.sense_current.microamperes();
    ensure!(
        close(on.values.current.microamperes(), set.microamperes(), full),
        "{set} was set and {} read back (chapter 3)",
        on.values.current
    );
    probe.off()?;
    probe.reading()?;
    let off = probe.reading()?;
    ensure!(
        none_flows(&off, &described),
        "{} flows after `off` was answered (chapter 6.8)",
        off.values.current_max
    );
    Ok(format!(
        "{set} set, {} read back, nothing after `off`",
        on.values.current
    ))
}

pub(crate) fn charge(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let set = probe.draw()?;
    begin(probe, "current", set.microamperes(), Span::ZERO)?;
    let mut first = settled(probe)?;
    let mut last = first;
    let mut expected_pc: i128 = 0;
    let mut energy_least: i128 = 0;
    let mut energy_most: i128 = 0;
    let mut pairs = 0_i64;
    while last.counters.time.saturating_since(first.counters.time) < Span::from_secs(3) {
        let next = probe.pair_after(&last.counters)?;
        let mean = next.values;
        if next.count != last.count.checked_add(1).unwrap_or(1) {
            // A readback was lost, and with it its mean: begin again.
            (first, last) = (next, next);
            (expected_pc, energy_least, energy_most, pairs) = (0, 0, 0, 0);
            continue;
        }
        let passed = i128::from(
            next.counters
                .time
                .saturating_since(last.counters.time)
                .micros(),
        );
        let current = i128::from(mean.current.microamperes());
        expected_pc += current * passed;
        energy_least += current * passed * i128::from(mean.voltage_min.microvolts());
        energy_most += current * passed * i128::from(mean.voltage_max.microvolts());
        last = next;
        pairs += 1;
    }
    let counted = last.counters.charge.saturating_sub(first.counters.charge);
    let expected = narrow(expected_pc / 1_000_000);
    // The mean is told to the microampere, the counter to the microcoulomb.
    let tolerance = expected / 1_000 + pairs + 2;
    let apart = counted.microcoulombs().saturating_sub(expected);
    ensure!(
        apart.abs() <= tolerance,
        "the counter moved by {counted} while mean current times time is {}: {} ppm apart, at \
         most 1000 (chapter 6.9)",
        Charge::from_microcoulombs(expected),
        apart.saturating_mul(1_000_000) / expected.max(1)
    );
    let energy = last
        .counters
        .energy
        .saturating_sub(first.counters.energy)
        .microjoules();
    let (lower, upper) = (
        narrow(energy_least / 1_000_000_000_000),
        narrow(energy_most / 1_000_000_000_000),
    );
    let slack = upper / 1_000 + pairs + 2;
    ensure!(
        energy >= lower - slack && energy <= upper + slack,
        "the energy counter moved by {energy} uJ, charge times voltage is {lower} to {upper} uJ \
         (chapter 6.9)"
    );
    Ok(format!(
        "{counted} counted, {} from {pairs} readbacks",
        Charge::from_microcoulombs(expected)
    ))
}

fn narrow(value: i128) -> i64 {
    i64::try_from(value).unwrap_or(i64::MAX)
}

/// Sets a limit below what flows and awaits the trip.
fn trips(probe: &mut Probe<'_>, cause: Cause, limit: i64) -> Result<String, Stop> {
    let mark = probe.mark();
    let setting = format!("{} {limit} 0", cause.word());
    probe.must("limit", &setting)?;
    let within = probe.options().patience.saturating_add(probe.lateness());
    let Some(trip) = probe.trip(mark, within)? else {
        return Err(Stop::Fails(format!(
            "no trip within {within} of `limit {setting}`, though more flowed when it was set \
             (chapter 6.3)"
        )));
    };
    ensure!(
        trip.cause == cause && trip.value > limit,
        "`limit {setting}` was crossed and the trip says `{}` of {} (chapter 6.3)",
        trip.cause.word(),
        trip.value
    );
    let state = probe.reading()?.values.state;
    ensure!(
        state == SinkState::Latched(cause),
        "after the trip the state is {} (chapter 6.3)",
        name(state)
    );
    probe.must("reset", "")?;
    Ok(format!(
        "tripped at {} with the limit at {limit} {}",
        trip.value,
        cause.unit()
    ))
}

pub(crate) fn limit_current(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let set = probe.draw()?;
    begin(probe, "current", set.microamperes(), Span::ZERO)?;
    let flows = settled(probe)?.values.current;
    trips(probe, Cause::Current, flows.microamperes() / 2)
}

pub(crate) fn limit_power(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let set = probe.draw()?;
    begin(probe, "current", set.microamperes(), Span::ZERO)?;
    let flows = settled(probe)?.values;
    let power = flows.voltage.times(flows.current);
    if power.microwatts() < 2_000 {
        return cannot("the source gives too little power to set a limit below it");
    }
    trips(probe, Cause::Power, power.microwatts() / 2)
}

pub(crate) fn ramp(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let set = probe.draw()?;
    let over = Span::from_secs(2);
    let begun = begin(probe, "current", set.microamperes(), over)?.time;
    // A mean over an interval is the line's value in its middle.
    let mut before = probe.reading()?;
    let mut worst = 0_i64;
    let full = described.sense_current.microamperes();
    loop {
        let next = probe.pair_after(&before.counters)?;
        let middle = before
            .counters
            .time
            .saturating_since(begun)
            .micros()
            .midpoint(next.counters.time.saturating_since(begun).micros());
        if next.counters.time.saturating_since(begun) >= over {
            break;
        }
        let line = set.microamperes() * i64::try_from(middle).unwrap_or(0)
            / i64::try_from(over.micros()).unwrap_or(i64::MAX);
        let read = next.values.current.microamperes();
        ensure!(
            close(read, line, full.saturating_mul(2)),
            "{} ms into a ramp to {set} over {over} the line is at {}, read back {} (chapter 3)",
            middle / 1_000,
            Current::from_microamperes(line),
            next.values.current
        );
        worst = worst.max((read - line).abs());
        before = next;
    }
    Ok(format!(
        "at most {} from the line",
        Current::from_microamperes(worst)
    ))
}

pub(crate) fn power(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    if !described.abilities.power {
        return cannot("this sink has no constant power");
    }
    let most = probe.draw()?;
    let open = probe.reading()?.values.voltage;
    let target = open.times(most).microwatts() / 2;
    if target < 1_000 {
        return cannot("the source's voltage is too low");
    }
    begin(probe, "power", target, Span::ZERO)?;
    let values = settled(probe)?.values;
    let drawn = values.voltage.times(values.current);
    let scale = open.times(described.sense_current).microwatts();
    ensure!(
        close(drawn.microwatts(), target, scale),
        "{} was set and {drawn} is drawn (chapter 6.10)",
        Power::from_microwatts(target)
    );
    Ok(format!(
        "{} set, {drawn} drawn",
        Power::from_microwatts(target)
    ))
}

pub(crate) fn resistance(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    if !described.abilities.resistance {
        return cannot("this sink has no constant resistance");
    }
    let most = probe.draw()?;
    let open = probe.reading()?.values.voltage;
    let half = Current::from_microamperes(most.microamperes() / 2);
    let Some(target) = open.over_current(half) else {
        return cannot("the source's voltage is too low");
    };
    if target.microohms() < 1 || target.microohms() > i64::from(i32::MAX) {
        return cannot("the source's voltage is too low");
    }
    begin(probe, "resistance", target.microohms(), Span::ZERO)?;
    let values = settled(probe)?.values;
    let Some(expected) = values.voltage.over(target) else {
        return cannot("the source's voltage is too low");
    };
    ensure!(
        close(
            values.current.microamperes(),
            expected.microamperes(),
            described.sense_current.microamperes()
        ),
        "{target} was set, {} and {} are read back (chapter 6.10)",
        values.voltage,
        values.current
    );
    Ok(format!(
        "{target} set, {} at {}",
        values.current, values.voltage
    ))
}

pub(crate) fn deadman(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    let agreed = Span::from_millis(500);
    let set = probe.draw()?;
    probe.must("deadman", &agreed.micros().to_string())?;
    begin(probe, "current", set.microamperes(), Span::ZERO)?;
    let mark = probe.mark();
    probe.fence()?;
    probe.fall_silent();
    let trip = probe.trip(mark, Span::from_secs(2).saturating_add(probe.lateness()))?;
    probe.speak_again();
    ensure!(
        trip.is_some_and(|trip| trip.cause == Cause::Deadman),
        "no deadman's trip within 2 s of silence with {set} flowing, agreed was {agreed} \
         (chapter 6.2)"
    );
    probe.reading()?;
    let pair = probe.reading()?;
    ensure!(
        none_flows(&pair, &described),
        "{} flows after the deadman's trip (chapter 6.2)",
        pair.values.current_max
    );
    Ok(format!("{set} stopped by silence"))
}
