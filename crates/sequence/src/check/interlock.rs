//! Rules on interlocks: there, not loosened, able to act, not acting at once.

use std::fmt;

use quantity::{Power, Quantity, Span, Voltage};

use super::Scene;
use super::flow::currents;
use super::target::{action_key, each_current, each_power, most_of_all};
use crate::draft::{InterlocksDraft, StepDraft, Written};
use crate::facts::Thresholds;
use crate::finding::{Finding, Findings};
use crate::plan::Armed;
use crate::rule::Rule;

/// The bench's interlocks with what the sequence says of them.
pub(crate) fn merge(written: &InterlocksDraft, bench: &Thresholds) -> Thresholds {
    fn armed<T: Copy>(written: Option<Written<T>>, bench: Option<Armed<T>>) -> Option<Armed<T>> {
        let Some(written) = written else { return bench };
        let persistence = written
            .persistence
            .or(bench.map(|bench| bench.persistence))
            .unwrap_or(Span::ZERO);
        match written.threshold {
            Some(threshold) => Some(Armed {
                threshold,
                persistence,
            }),
            // Unreadable, which is a finding already: the bench's own stands in for it.
            None => bench,
        }
    }
    Thresholds {
        over_temperature: armed(written.over_temperature, bench.over_temperature),
        over_power: armed(written.over_power, bench.over_power),
        undervoltage: armed(written.undervoltage, bench.undervoltage),
        over_voltage: armed(written.over_voltage, bench.over_voltage),
        reversed_polarity: armed(written.reversed_polarity, bench.reversed_polarity),
        over_current: armed(written.over_current, bench.over_current),
        not_following: armed(written.not_following, bench.not_following),
        not_releasing: armed(written.not_releasing, bench.not_releasing),
        sensor_fault: written.sensor_fault.or(bench.sensor_fault),
        silence: written.silence.or(bench.silence),
        charge: written.charge.or(bench.charge),
        energy: written.energy.or(bench.energy),
        time: written.time.or(bench.time),
        clock: written.clock.or(bench.clock),
    }
}

fn place(key: &str) -> String {
    format!("/interlocks/{key}")
}

/// Where a part of an interlock stands; some are but one quantity.
fn part_of(key: &str, part: &str) -> String {
    if part.is_empty() {
        place(key)
    } else {
        format!("{}/{part}", place(key))
    }
}

pub(super) fn there(scene: &Scene<'_>, findings: &mut Findings) {
    let (written, merged) = (&scene.draft.interlocks, scene.merged);
    if !written.any {
        findings.push(Finding::new(
            Rule::InterlocksMissing,
            "/interlocks",
            "the sequence names no interlock",
            "name at least the undervoltage at which the run must stop, \
             for example {\"undervoltage\": {\"below\": \"2.5 V\"}}",
        ));
        return;
    }
    let missing = [
        (
            "over_temperature",
            merged.over_temperature.is_none() && written.over_temperature.is_none(),
        ),
        (
            "over_power",
            merged.over_power.is_none() && written.over_power.is_none(),
        ),
        (
            "undervoltage",
            merged.undervoltage.is_none() && written.undervoltage.is_none(),
        ),
        (
            "over_voltage",
            merged.over_voltage.is_none() && written.over_voltage.is_none(),
        ),
        (
            "reversed_polarity",
            merged.reversed_polarity.is_none() && written.reversed_polarity.is_none(),
        ),
        (
            "over_current",
            merged.over_current.is_none() && written.over_current.is_none(),
        ),
        (
            "not_following",
            merged.not_following.is_none() && written.not_following.is_none(),
        ),
        (
            "not_releasing",
            merged.not_releasing.is_none() && written.not_releasing.is_none(),
        ),
        ("sensor_fault", merged.sensor_fault.is_none()),
        ("silence", merged.silence.is_none()),
        ("clock", merged.clock.is_none()),
    ];
    for (key, _) in missing.into_iter().filter(|&(_, missing)| missing) {
        findings.push(Finding::new(
            Rule::InterlocksMissing,
            "/interlocks",
            format!("neither the sequence nor the bench has a threshold for `{key}`"),
            format!("add `{key}` to `interlocks`"),
        ));
    }
}

fn loosened<T: fmt::Display>(
    key: &str,
    part: &str,
    value: T,
    bench: T,
    hint: &str,
    findings: &mut Findings,
) {
    findings.push(
        Finding::new(
            Rule::InterlockLoosened,
            part_of(key, part),
            format!("`{key}` at {value} is looser than the bench's {bench}"),
            format!("{hint} {bench}, or leave the key out"),
        )
        .numbers(value, bench),
    );
}

/// Which side of a threshold trips.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Side {
    Above,
    Below,
}

/// Holds one written interlock against the bench's.
struct Comparison<'a> {
    findings: &'a mut Findings,
}

impl Comparison<'_> {
    fn armed<T: Quantity + Ord + fmt::Display>(
        &mut self,
        key: &str,
        part: &str,
        side: Side,
        written: Option<Written<T>>,
        bench: Option<Armed<T>>,
    ) {
        let (Some(written), Some(bench)) = (written, bench) else {
            return;
        };
        if let Some(threshold) = written.threshold {
            let looser = match side {
                Side::Above => threshold > bench.threshold,
                Side::Below => threshold < bench.threshold,
            };
            let hint = match side {
                Side::Above => "write at most",
                Side::Below => "write at least",
            };
            if looser {
                loosened(key, part, threshold, bench.threshold, hint, self.findings);
            }
        }
        self.upper(key, "for", written.persistence, Some(bench.persistence));
    }

    fn upper<T: Ord + Copy + fmt::Display>(
        &mut self,
        key: &str,
        part: &str,
        written: Option<T>,
        bench: Option<T>,
    ) {
        if let (Some(written), Some(bench)) = (written, bench)
            && written > bench
        {
            loosened(key, part, written, bench, "write at most", self.findings);
        }
    }
}

pub(super) fn not_loosened(scene: &Scene<'_>, findings: &mut Findings) {
    let (written, bench) = (&scene.draft.interlocks, &scene.facts.interlocks);
    let mut hold = Comparison { findings };
    let (above, below) = (Side::Above, Side::Below);
    hold.armed(
        "over_temperature",
        "above",
        above,
        written.over_temperature,
        bench.over_temperature,
    );
    hold.armed(
        "over_power",
        "above",
        above,
        written.over_power,
        bench.over_power,
    );
    hold.armed(
        "undervoltage",
        "below",
        below,
        written.undervoltage,
        bench.undervoltage,
    );
    hold.armed(
        "over_voltage",
        "above",
        above,
        written.over_voltage,
        bench.over_voltage,
    );
    hold.armed(
        "reversed_polarity",
        "below",
        below,
        written.reversed_polarity,
        bench.reversed_polarity,
    );
    hold.armed(
        "over_current",
        "above",
        above,
        written.over_current,
        bench.over_current,
    );
    hold.armed(
        "not_following",
        "short_by",
        above,
        written.not_following,
        bench.not_following,
    );
    hold.armed(
        "not_releasing",
        "above_by",
        above,
        written.not_releasing,
        bench.not_releasing,
    );
    hold.upper(
        "sensor_fault",
        "for",
        written.sensor_fault,
        bench.sensor_fault,
    );
    hold.upper("silence", "for", written.silence, bench.silence);
    hold.upper("charge", "", written.charge, bench.charge);
    hold.upper("energy", "", written.energy, bench.energy);
    hold.upper("time", "", written.time, bench.time);
    hold.upper("clock", "off_by", written.clock, bench.clock);
}

fn idle(
    key: &str,
    part: &str,
    why: String,
    (value, limit): (impl fmt::Display, impl fmt::Display),
    hint: String,
    findings: &mut Findings,
) {
    findings.push(
        Finding::new(Rule::InterlockCannotAct, part_of(key, part), why, hint).numbers(value, limit),
    );
}

fn threshold<T: Copy>(written: Option<Written<T>>) -> Option<T> {
    written?.threshold
}

/// Only what the sequence itself writes is judged: a bench's default that happens to be idle
/// for one DUT is no mistake of the sequence.
pub(super) fn can_act(scene: &Scene<'_>, findings: &mut Findings) {
    let written = &scene.draft.interlocks;
    let ranges = scene.facts.ranges;
    if let Some(trip) = threshold(written.over_voltage).filter(|&trip| trip >= ranges.voltage) {
        let why = format!(
            "`over_voltage` at {trip} can never act: the sink reads {} at most",
            ranges.voltage
        );
        let hint = format!("write less than {}", ranges.voltage);
        idle(
            "over_voltage",
            "above",
            why,
            (trip, ranges.voltage),
            hint,
            findings,
        );
    }
    if let Some(trip) = threshold(written.over_current).filter(|&trip| trip >= ranges.current) {
        let why = format!(
            "`over_current` at {trip} can never act: the sink reads {} at most",
            ranges.current
        );
        let hint = format!("write less than {}", ranges.current);
        idle(
            "over_current",
            "above",
            why,
            (trip, ranges.current),
            hint,
            findings,
        );
    }
    if let Some(trip) = threshold(written.undervoltage).filter(|&trip| trip <= Voltage::ZERO) {
        let why = format!("`undervoltage` at {trip} can never act: reversed polarity trips first");
        let hint = "write the least voltage the DUT may have".to_owned();
        idle(
            "undervoltage",
            "below",
            why,
            (trip, Voltage::ZERO),
            hint,
            findings,
        );
    }
    if let Some(trip) = threshold(written.reversed_polarity).filter(|&trip| trip > Voltage::ZERO) {
        let why = format!("`reversed_polarity` at {trip} says nothing about polarity");
        let hint = "write 0 V or less; for a voltage that is too low use `undervoltage`".to_owned();
        idle(
            "reversed_polarity",
            "below",
            why,
            (trip, Voltage::ZERO),
            hint,
            findings,
        );
    }
    over_power_can_act(scene, findings);
    following_can_act(scene, findings);
}

fn over_power_can_act(scene: &Scene<'_>, findings: &mut Findings) {
    let merged = scene.merged;
    let (Some(trip), Some(current), Some(voltage)) = (
        threshold(scene.draft.interlocks.over_power),
        merged.over_current,
        merged.over_voltage,
    ) else {
        return;
    };
    let reached = voltage.threshold.times(current.threshold);
    if trip >= reached {
        let why = format!(
            "`over_power` at {trip} can never act: `over_current` at {} and `over_voltage` at {} \
             trip by {reached}",
            current.threshold, voltage.threshold
        );
        let hint = format!("write less than {reached}");
        idle("over_power", "above", why, (trip, reached), hint, findings);
    }
}

fn following_can_act(scene: &Scene<'_>, findings: &mut Findings) {
    let written = &scene.draft.interlocks;
    if let (Some(trip), Some(most)) = (threshold(written.not_following), most_of_all(scene))
        && trip >= most
    {
        let why = format!(
            "`not_following` at {trip} can never act: no step draws more than {most}, \
             so no readback can fall that short"
        );
        let hint = format!("write less than {most}");
        idle(
            "not_following",
            "short_by",
            why,
            (trip, most),
            hint,
            findings,
        );
    }
    if let (Some(trip), Some(most)) = (threshold(written.not_releasing), scene.merged.over_current)
        && trip >= most.threshold
    {
        let most = most.threshold;
        let why =
            format!("`not_releasing` at {trip} can never act: `over_current` trips at {most}");
        let hint = format!("write less than {most}");
        idle(
            "not_releasing",
            "above_by",
            why,
            (trip, most),
            hint,
            findings,
        );
    }
}

/// What is beyond the sink itself is another rule's finding, and one is enough.
fn beyond_sink(scene: &Scene<'_>, step: &StepDraft, power: Power) -> bool {
    let current = currents(step).into_iter().max();
    power > scene.facts.power_max || current > Some(scene.facts.current_max)
}

pub(super) fn not_at_once(scene: &Scene<'_>, findings: &mut Findings) {
    let merged = scene.merged;
    if let Some(trip) = merged.over_current.map(|armed| armed.threshold) {
        each_current(scene, &mut |step, current, why| {
            if current >= trip && current <= scene.facts.current_max {
                let message = format!("{why}, at which `over_current` at {trip} trips");
                let hint = format!(
                    "draw less than {trip}, or raise `over_current` as far as the bench lets you"
                );
                findings.push(
                    Finding::new(Rule::InterlockAtOnce, action_key(step), message, hint)
                        .numbers(current, trip),
                );
            }
        });
    }
    if let Some(trip) = merged.over_power.map(|armed| armed.threshold) {
        each_power(scene, &mut |step, power, why| {
            if power >= trip && !beyond_sink(scene, step, power) {
                let message = format!("{why}, at which `over_power` at {trip} trips");
                let hint = format!(
                    "stay below {trip}, or raise `over_power` as far as the bench lets you"
                );
                findings.push(
                    Finding::new(Rule::InterlockAtOnce, action_key(step), message, hint)
                        .numbers(power, trip),
                );
            }
        });
    }
    voltages_at_once(scene, findings);
}

fn voltages_at_once(scene: &Scene<'_>, findings: &mut Findings) {
    let (dut, merged) = (&scene.draft.dut, scene.merged);
    if let (Some(most), Some(armed)) = (dut.voltage_max, merged.over_voltage)
        && armed.threshold < most
    {
        let trip = armed.threshold;
        findings.push(
            Finding::new(
                Rule::InterlockAtOnce,
                place("over_voltage"),
                format!("`over_voltage` at {trip} trips below the {most} that the DUT may have"),
                format!("write at least {most}, or check the DUT's `voltage_max`"),
            )
            .numbers(trip, most),
        );
    }
    if let (Some(most), Some(armed)) = (dut.voltage_max, merged.undervoltage)
        && armed.threshold >= most
    {
        let trip = armed.threshold;
        findings.push(
            Finding::new(
                Rule::InterlockAtOnce,
                place("undervoltage"),
                format!(
                    "`undervoltage` at {trip} trips on any voltage the DUT can have, {most} at most"
                ),
                format!("write less than {most}"),
            )
            .numbers(trip, most),
        );
    }
}

pub(super) fn guards_dut(scene: &Scene<'_>, findings: &mut Findings) {
    let (Some(least), Some(armed)) = (scene.draft.dut.voltage_min, scene.merged.undervoltage)
    else {
        return;
    };
    let trip = armed.threshold;
    if trip < least && trip > Voltage::ZERO {
        findings.push(
            Finding::new(
                Rule::UndervoltageBelowDut,
                place("undervoltage"),
                format!(
                    "`undervoltage` at {trip} lets the DUT go below its least voltage, {least}"
                ),
                format!("write at least {least}"),
            )
            .numbers(trip, least),
        );
    }
}

/// The longest readback interval in the sequence, and where it stands.
fn slowest(scene: &Scene<'_>) -> (Span, String) {
    let mut slowest = (scene.readback(), "/readback".to_owned());
    scene.draft.each_step(&mut |step| {
        if let Some(interval) = step.readback.filter(|&interval| interval > slowest.0) {
            slowest = (interval, step.key("readback"));
        }
    });
    slowest
}

pub(super) fn silence_leaves_room(scene: &Scene<'_>, findings: &mut Findings) {
    let Some(silence) = scene.merged.silence else {
        return;
    };
    let (interval, pointer) = slowest(scene);
    let least = interval.saturating_add(interval);
    if silence < least {
        findings.push(
            Finding::new(
                Rule::SilenceBelowReadback,
                pointer,
                format!(
                    "`silence` at {silence} trips when one readback of every {interval} is lost"
                ),
                format!(
                    "read back at least every {}",
                    Span::from_micros(silence.micros() / 2)
                ),
            )
            .numbers(silence, least),
        );
    }
}

/// Of the interlocks with a persistence, only this one has no copy in the sink.
pub(super) fn persistence_judgeable(scene: &Scene<'_>, findings: &mut Findings) {
    let Some(armed) = scene.merged.not_following else {
        return;
    };
    let (interval, _) = slowest(scene);
    let persistence = armed.persistence;
    if persistence > Span::ZERO && persistence < interval {
        findings.push(
            Finding::new(
                Rule::PersistenceBelowReadback,
                place("not_following"),
                format!(
                    "`not_following` for {persistence} cannot be told apart within a readback \
                     interval of {interval}: one crossing in it trips"
                ),
                format!("read back at least every {persistence}, or accept that it trips sooner"),
            )
            .numbers(persistence, interval),
        );
    }
}
