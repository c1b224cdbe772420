//! The sink's own limits and its latch, as far as they can be crossed without a current
//! (chapter 3, points 6.3 and 6.5).

use quantity::Span;
use wire::{Cause, ReasonRefused, SinkState, TemperatureReading};

use crate::checks::contact::name;
use crate::checks::{A_WHILE, LONG};
use crate::probe::{Mark, Outcome, Probe, Stop, Trip, cannot, ensure};

pub(crate) fn refuses(probe: &mut Probe<'_>) -> Outcome {
    let described = probe.ready()?;
    // Far ahead, so that a firmware that takes them does not draw: the check ends with `off`.
    let far = probe.fence()?.saturating_add(LONG).micros();
    probe.must("limit", "current 1000 0")?;
    probe.refused(
        "step",
        &format!("current {far} 1001 0 1000000"),
        ReasonRefused::Limit,
    )?;
    probe.must("step", &format!("current {far} 1000 0 1000000"))?;
    if described.abilities.power {
        probe.must("limit", "power 1000 0")?;
        probe.refused(
            "step",
            &format!("power {far} 1001 0 1000000"),
            ReasonRefused::Limit,
        )?;
    }
    probe.off()?;
    Ok("1 mA taken at a limit of 1 mA, 1.001 mA refused".to_owned())
}

/// Awaits a trip that is due at once, and holds it against what it must be.
fn expect(probe: &mut Probe<'_>, mark: Mark, cause: Cause, setting: &str) -> Result<Trip, Stop> {
    let within = probe.options().patience.saturating_add(probe.lateness());
    let Some(trip) = probe.trip(mark, within)? else {
        return Err(Stop::Fails(format!(
            "no trip within {within} of `{setting}`, which the present reading crosses \
             (chapter 6.3)"
        )));
    };
    ensure!(
        trip.cause == cause,
        "`{setting}` was crossed and the trip says `{}`, expected `{}` (chapter 6.3)",
        trip.cause.word(),
        cause.word()
    );
    Ok(trip)
}

pub(crate) fn latch(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    probe.rest_now(LONG)?;
    let mark = probe.mark();
    let setting = "voltage-low 999999999 0";
    probe.must("limit", setting)?;
    expect(probe, mark, Cause::VoltageLow, setting)?;
    probe.refused("step", "current 0 0 0 1000000", ReasonRefused::Latched)?;
    probe.refused("reset", "", ReasonRefused::Cause)?;
    // A new session does not clear it either.
    probe.new_session()?;
    probe.start_readbacks()?;
    let state = probe.reading()?.values.state;
    ensure!(
        state == SinkState::Latched(Cause::VoltageLow),
        "a new session left the sink {}: a latch stays until `reset` (chapter 3)",
        name(state)
    );
    probe.must("limit", "voltage-low -99999999 0")?;
    probe.must("reset", "")?;
    let mark = probe.mark();
    probe.listen(A_WHILE)?;
    let state = probe.reading()?.values.state;
    ensure!(
        state == SinkState::Off && probe.edges(mark).is_empty(),
        "after `reset` the state is {}: it turns nothing on (chapter 3)",
        name(state)
    );
    Ok("latched over a new session, until `reset`".to_owned())
}

pub(crate) fn temperature(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let TemperatureReading::Value(now) = probe.reading()?.values.temperature else {
        return cannot("the temperature sensor is open or shorted");
    };
    let below = now.millidegrees_celsius() - 5_000;
    let setting = format!("temperature {below} 0");
    // Off, with no step given: temperature is judged all the same.
    let mark = probe.mark();
    probe.must("limit", &setting)?;
    let trip = expect(probe, mark, Cause::Temperature, &setting)?;
    ensure!(
        trip.value > below,
        "the trip says {} m°C, which does not cross {below} m°C (chapter 4)",
        trip.value
    );
    probe.refused("reset", "", ReasonRefused::Cause)?;
    probe.must("limit", "temperature 90000 0")?;
    probe.must("reset", "")?;
    Ok(format!(
        "tripped at {} m°C with the limit at {below} m°C",
        trip.value
    ))
}

pub(crate) fn voltage(probe: &mut Probe<'_>) -> Outcome {
    probe.ready()?;
    let now = probe.reading()?.values;
    let cases = [
        (
            Cause::VoltageHigh,
            now.voltage_min.microvolts() - 100_000,
            999_999_999,
        ),
        (
            Cause::VoltageLow,
            now.voltage_max.microvolts() + 100_000,
            -99_999_999,
        ),
    ];
    for (cause, crossed, wide) in cases {
        // Off: not judged.
        let mark = probe.mark();
        let setting = format!("{} {crossed} 0", cause.word());
        probe.must("limit", &setting)?;
        probe.listen(A_WHILE)?;
        ensure!(
            probe.trip(mark, Span::ZERO)?.is_none(),
            "`{setting}` tripped while off: it is judged while on (chapter 6.3)"
        );
        let mark = probe.mark();
        let step = probe.rest(quantity::SinkTime::ZERO, LONG)?;
        let trip = expect(probe, mark, cause, &setting)?;
        let edge = probe.edge(mark, step)?;
        let took = trip.time.saturating_since(edge.time);
        ensure!(
            took <= probe.lateness(),
            "`{setting}` was crossed from the edge on, and tripped {took} after it: it is judged \
             at every sample (chapter 6.3)"
        );
        probe.must("limit", &format!("{} {wide} 0", cause.word()))?;
        probe.must("reset", "")?;
    }
    Ok("high and low trip at the sample after the edge".to_owned())
}

pub(crate) fn persistence(probe: &mut Probe<'_>) -> Outcome {
    let persist = Span::from_millis(300);
    probe.ready()?;
    let now = probe.reading()?.values.voltage_max;
    let setting = format!(
        "voltage-low {} {}",
        now.microvolts() + 100_000,
        persist.micros()
    );
    probe.must("limit", &setting)?;
    let mark = probe.mark();
    let edge = probe.rest_now(LONG)?;
    let within = persist.saturating_add(probe.options().patience);
    let Some(trip) = probe.trip(mark, within)? else {
        return Err(Stop::Fails(format!(
            "no trip within {within} of `{setting}`, which every sample crosses (chapter 6.3)"
        )));
    };
    let took = trip.time.saturating_since(edge.time);
    // The first sample after the edge is the first that crosses.
    let most = persist
        .saturating_add(probe.lateness())
        .saturating_add(probe.lateness());
    ensure!(
        took >= persist && took <= most,
        "`{setting}` tripped {took} after the edge (chapter 3)"
    );
    Ok(format!("tripped after {took}, persistence {persist}"))
}
