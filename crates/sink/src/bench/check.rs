//! Whether a bench's entries agree with themselves and with physics.
//!
//! Everything is looked at; all findings are told at once.

use quantity::{Current, Quantity, Resistance, Span, Textual, Voltage};

use super::place::{Finding, Step};
use super::{
    Bench, Conductor, DEADMAN_MAX, DEADMAN_MIN, Element, Link, Mosfet, ReadError, SinkEntry,
    Transfer,
};

pub(super) fn check(bench: &Bench) -> Vec<Finding> {
    let mut findings = Findings::default();
    if let Some(fault) = name_fault(&bench.name, "bench") {
        findings.add(&[Step::Key("name")], fault);
    }
    if bench.records.as_os_str().is_empty() {
        findings.add(
            &[Step::Key("records")],
            "no folder; name one for the records of the runs",
        );
    }
    if bench.sinks.is_empty() {
        findings.add(&[], "no sink; describe at least one under [[sink]]");
    }
    for (index, sink) in bench.sinks.iter().enumerate() {
        let mut place = Place {
            findings: &mut findings,
            index,
        };
        if bench
            .sinks
            .iter()
            .take(index)
            .any(|other| other.name == sink.name)
        {
            place.add(
                &["name"],
                format!(
                    "a second sink is called `{}`; give each its own name",
                    sink.name
                ),
            );
        }
        check_sink(sink, &mut place);
    }
    findings.0
}

#[derive(Default)]
struct Findings(Vec<Finding>);

impl Findings {
    fn add(&mut self, path: &[Step], message: impl Into<String>) {
        self.0.push(Finding {
            path: path.to_vec(),
            message: message.into(),
        });
    }
}

/// What is wrong with a name, if anything.
fn name_fault(name: &str, what: &str) -> Option<String> {
    let starts_well = name.starts_with(|c: char| c.is_ascii_lowercase());
    let all_well = name
        .chars()
        .all(|c| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '-');
    if starts_well && all_well && name.len() <= 32 {
        return None;
    }
    Some(format!(
        "the {what}'s name `{name}` cannot stand in a path or a URL; use up to 32 lower-case \
         letters, digits and hyphens, beginning with a letter"
    ))
}

/// Collects findings about one sink.
struct Place<'a> {
    findings: &'a mut Findings,
    index: usize,
}

impl Place<'_> {
    fn add(&mut self, keys: &[&'static str], message: impl Into<String>) {
        let mut path = vec![Step::Key("sink"), Step::Index(self.index)];
        path.extend(keys.iter().copied().map(Step::Key));
        self.findings.add(&path, message);
    }

    fn positive<Q: Quantity + std::fmt::Display>(&mut self, keys: &[&'static str], value: Q) {
        if value.base_units() <= 0 {
            self.add(
                keys,
                format!(
                    "{value} is not above zero; give the {} from the data sheet",
                    Q::DIMENSION
                ),
            );
        }
    }

    fn not_negative<Q: Quantity + std::fmt::Display>(&mut self, keys: &[&'static str], value: Q) {
        if value.base_units() < 0 {
            self.add(keys, format!("{value} is below zero; give its magnitude"));
        }
    }

    /// A threshold that the sink's own limit must cover.
    fn within<Q: Quantity + Ord + std::fmt::Display>(
        &mut self,
        keys: &[&'static str],
        value: Q,
        limit: Q,
        what: &str,
    ) {
        if value > limit {
            self.add(
                keys,
                format!("{value} is above {what}, {limit}; lower it to {limit} or less"),
            );
        }
    }
}

fn check_sink(sink: &SinkEntry, place: &mut Place<'_>) {
    if let Some(fault) = name_fault(&sink.name, "sink") {
        place.add(&["name"], fault);
    }
    check_link(sink, place);
    check_times(sink, place);
    check_front_end(sink, place);
    check_sensor(sink, place);
    check_mosfet(&sink.mosfet, place);
    check_heat_sink(sink, place);
    check_leads(sink, place);
    check_limits(sink, place);
    check_interlocks(sink, place);
}

fn check_link(sink: &SinkEntry, place: &mut Place<'_>) {
    match &sink.link {
        Link::Serial { path, baud } => {
            if path.as_os_str().is_empty() {
                place.add(
                    &["link", "serial", "path"],
                    "no port; name one, such as /dev/ttyACM0",
                );
            }
            if *baud < 9_600 {
                place.add(
                    &["link", "serial", "baud"],
                    format!("{baud} baud cannot carry the readbacks; use 9600 or more"),
                );
            }
        }
        Link::Tcp { address } => {
            let port = address
                .rsplit_once(':')
                .map(|(_, port)| port.parse::<u16>());
            if !matches!(port, Some(Ok(1..))) {
                place.add(
                    &["link", "tcp", "address"],
                    format!("`{address}` has no port; write host:port, such as 192.0.2.7:4000"),
                );
            }
        }
        Link::Simulated { .. } => {}
    }
}

fn check_times(sink: &SinkEntry, place: &mut Place<'_>) {
    if sink.deadman < DEADMAN_MIN || sink.deadman > DEADMAN_MAX {
        place.add(
            &["deadman"],
            format!(
                "{} is outside {DEADMAN_MIN} to {DEADMAN_MAX}; 2 s suits most benches",
                sink.deadman
            ),
        );
    }
    let readback = &sink.readback;
    place.positive(&["readback", "fastest"], readback.fastest);
    if readback.fastest < sink.front_end.tick {
        place.add(
            &["readback", "fastest"],
            format!(
                "{} is shorter than the tick of {}; make it at least one tick",
                readback.fastest, sink.front_end.tick
            ),
        );
    }
    if readback.usual < readback.fastest || readback.usual > readback.slowest {
        place.add(
            &["readback", "usual"],
            format!(
                "{} is outside {} to {}; choose an interval between them",
                readback.usual, readback.fastest, readback.slowest
            ),
        );
    }
    // Each readback is also what keeps the host sure of the sink.
    if readback.slowest > Span::from_secs(60) {
        place.add(
            &["readback", "slowest"],
            format!(
                "{} leaves a run unwatched for too long; use 1 min or less",
                readback.slowest
            ),
        );
    }
}

fn check_front_end(sink: &SinkEntry, place: &mut Place<'_>) {
    let front_end = &sink.front_end;
    place.positive(&["front_end", "tick"], front_end.tick);
    if front_end.tick > Span::from_millis(100) {
        place.add(
            &["front_end", "tick"],
            format!(
                "a sampling period of {} lets a crossing stand that long; use 100 ms or less",
                front_end.tick
            ),
        );
    }
    let resistor = &front_end.sense_resistor;
    let key = |name| ["front_end", "sense_resistor", name];
    place.positive(&key("resistance"), resistor.resistance);
    place.positive(&key("rating"), resistor.rating);
    place.not_negative(&key("tolerance"), resistor.tolerance);
    place.not_negative(
        &key("temperature_coefficient"),
        resistor.temperature_coefficient,
    );
    if resistor.no_rating_at <= resistor.full_rating_up_to {
        place.add(
            &key("no_rating_at"),
            format!(
                "{} is not above full_rating_up_to, {}; the rating falls from the one to the other",
                resistor.no_rating_at, resistor.full_rating_up_to
            ),
        );
    }
    check_bits(&["front_end", "dac", "bits"], front_end.dac.bits, place);
    check_bits(&["front_end", "adc", "bits"], front_end.adc.bits, place);
    place.positive(
        &["front_end", "dac", "full_scale"],
        front_end.dac.full_scale,
    );
    place.not_negative(&["front_end", "dac", "minimum"], front_end.dac.minimum);
    if front_end.dac.minimum >= front_end.dac.full_scale {
        place.add(
            &["front_end", "dac", "minimum"],
            format!(
                "{} is not below the full scale of {}; give the lowest output of the converter",
                front_end.dac.minimum, front_end.dac.full_scale
            ),
        );
    }
    place.positive(
        &["front_end", "adc", "current_full_scale"],
        front_end.adc.current_full_scale,
    );
    place.positive(
        &["front_end", "adc", "voltage_full_scale"],
        front_end.adc.voltage_full_scale,
    );
    check_read_error("current_error", front_end.adc.current_error, place);
    check_read_error("voltage_error", front_end.adc.voltage_error, place);
}

/// The stated error of a readback.
fn check_read_error<T: Quantity + Textual + std::fmt::Display>(
    name: &'static str,
    error: Option<ReadError<T>>,
    place: &mut Place<'_>,
) {
    let Some(error) = error else { return };
    let key = |part| ["front_end", "adc", name, part];
    place.not_negative(&key("of_reading"), error.of_reading.0);
    place.not_negative(&key("constant"), error.constant);
    if !error.stated.is_sound() {
        place.add(
            &key("stated"),
            "a coverage factor that is not above zero; data sheets state 2 or 3",
        );
    }
}

fn check_bits(keys: &[&'static str], bits: u8, place: &mut Place<'_>) {
    if !(6..=24).contains(&bits) {
        place.add(keys, format!("{bits} bits; converters have 6 to 24"));
    }
}

fn check_sensor(sink: &SinkEntry, place: &mut Place<'_>) {
    let sensor = &sink.front_end.temperature_sensor;
    let key = |name| ["front_end", "temperature_sensor", "divider", name];
    place.positive(&key("series"), sensor.divider.series);
    place.positive(&key("supply"), sensor.divider.supply);
    place.positive(&key("full_scale"), sensor.divider.full_scale);
    let element = ["front_end", "temperature_sensor", "element"];
    match &sensor.element {
        Element::NtcBeta {
            resistance_25,
            beta_kelvin,
        } => {
            place.positive(&element, *resistance_25);
            if !(500.0..=10_000.0).contains(beta_kelvin) {
                place.add(
                    &element,
                    format!("a Beta of {beta_kelvin} K; an NTC's lies between 500 and 10000"),
                );
            }
        }
        Element::SteinhartHart { a, b, c } => {
            if ![a, b, c].iter().all(|coefficient| coefficient.is_finite()) || *b <= 0.0 {
                place.add(
                    &element,
                    format!("coefficients {a}, {b}, {c} describe no NTC; b must be above zero"),
                );
            }
        }
        Element::NtcPoints(points) => {
            let [first, second, third] = points;
            let falls = first.at < second.at
                && second.at < third.at
                && first.resistance > second.resistance
                && second.resistance > third.resistance
                && third.resistance > Resistance::ZERO;
            if !falls {
                place.add(
                    &element,
                    "the three points of an NTC must rise in temperature and fall in resistance",
                );
            }
        }
        Element::Pt100 | Element::Pt1000 => {}
    }
}

fn check_mosfet(mosfet: &Mosfet, place: &mut Place<'_>) {
    place.positive(&["mosfet", "on_resistance"], mosfet.on_resistance);
    place.positive(&["mosfet", "voltage_max"], mosfet.voltage_max);
    place.positive(&["mosfet", "current_max"], mosfet.current_max);
    place.positive(&["mosfet", "junction_to_case"], mosfet.junction_to_case);
    match &mosfet.transfer {
        Transfer::SquareLaw { threshold, factor } => {
            place.positive(
                &["mosfet", "transfer", "square_law", "threshold"],
                *threshold,
            );
            place.positive(&["mosfet", "transfer", "square_law", "factor"], *factor);
        }
        Transfer::Table(points) => {
            let rises = points
                .windows(2)
                .all(|pair| matches!(pair, [a, b] if a.current < b.current && a.gate < b.gate));
            let starts = points
                .first()
                .is_some_and(|point| point.current >= Current::ZERO);
            if points.len() < 2 || !rises || !starts {
                place.add(
                    &["mosfet", "transfer", "table"],
                    "a transfer table needs two or more points, rising in gate voltage and current",
                );
            }
        }
    }
    let falls = mosfet
        .soa_dc
        .windows(2)
        .all(|pair| matches!(pair, [a, b] if a.voltage < b.voltage && a.current >= b.current));
    let above_zero = mosfet
        .soa_dc
        .iter()
        .all(|point| point.voltage > Voltage::ZERO && point.current > Current::ZERO);
    if !falls || !above_zero || mosfet.soa_dc.len() == 1 {
        place.add(
            &["mosfet", "soa_dc"],
            "the d.c. line needs two or more points above zero, by rising voltage and falling \
             current",
        );
    }
    check_foster(mosfet, place);
}

fn check_foster(mosfet: &Mosfet, place: &mut Place<'_>) {
    if mosfet.foster.is_empty() {
        return;
    }
    let sum: i128 = mosfet
        .foster
        .iter()
        .map(|pair| pair.resistance.base_units())
        .sum();
    let stated = mosfet.junction_to_case.base_units();
    // Data sheets round: 5 % apart is the same network.
    if (sum - stated).abs() * 20 > stated {
        place.add(
            &["mosfet", "foster"],
            format!(
                "the pairs add up to {} mK/W, but junction_to_case is {}; take both from one \
                 data sheet",
                sum / 1_000,
                mosfet.junction_to_case
            ),
        );
    }
    let all_positive = mosfet
        .foster
        .iter()
        .all(|pair| pair.resistance.base_units() > 0 && pair.time_constant > Span::ZERO);
    if !all_positive {
        place.add(
            &["mosfet", "foster"],
            "a pair has a resistance or time constant of zero; leave it out",
        );
    }
}

fn check_heat_sink(sink: &SinkEntry, place: &mut Place<'_>) {
    let heat_sink = &sink.heat_sink;
    place.not_negative(&["heat_sink", "from_case"], heat_sink.from_case);
    place.positive(&["heat_sink", "to_ambient"], heat_sink.to_ambient);
    place.positive(&["heat_sink", "time_constant"], heat_sink.time_constant);
    for (keys, temperature) in [
        (["heat_sink", "limit"], heat_sink.limit),
        (["mosfet", "junction_max"], sink.mosfet.junction_max),
    ] {
        if temperature <= sink.ambient {
            place.add(
                &keys,
                format!(
                    "{temperature} is not above the ambient of {}; nothing could be drawn",
                    sink.ambient
                ),
            );
        }
    }
}

fn check_leads(sink: &SinkEntry, place: &mut Place<'_>) {
    match sink.leads.conductor {
        Conductor::Measured { resistance } => {
            place.not_negative(
                &["leads", "conductor", "measured", "resistance"],
                resistance,
            );
        }
        Conductor::Copper {
            length,
            cross_section,
            ..
        } => {
            place.positive(&["leads", "conductor", "copper", "length"], length);
            place.positive(
                &["leads", "conductor", "copper", "cross_section"],
                cross_section,
            );
        }
        Conductor::Gauge { length, gauge } => {
            place.positive(&["leads", "conductor", "gauge", "length"], length);
            if gauge > 40 {
                place.add(
                    &["leads", "conductor", "gauge", "gauge"],
                    format!("gauge {gauge} is no lead; use 0 to 40"),
                );
            }
        }
    }
}

fn check_limits(sink: &SinkEntry, place: &mut Place<'_>) {
    let limits = &sink.limits;
    let front_end = &sink.front_end;
    place.positive(&["limits", "current"], limits.current);
    place.positive(&["limits", "power"], limits.power);
    place.positive(&["limits", "voltage"], limits.voltage);
    if let Some(settable) = front_end
        .dac
        .full_scale
        .over(front_end.sense_resistor.resistance)
    {
        place.within(
            &["limits", "current"],
            limits.current,
            settable,
            "what the converter can set over the sense resistor",
        );
    }
    place.within(
        &["limits", "current"],
        limits.current,
        front_end.adc.current_full_scale,
        "what the converter can read",
    );
    place.within(
        &["limits", "current"],
        limits.current,
        sink.mosfet.current_max,
        "what the MOSFET carries",
    );
    place.within(
        &["limits", "voltage"],
        limits.voltage,
        front_end.adc.voltage_full_scale,
        "what the converter can read",
    );
    place.within(
        &["limits", "voltage"],
        limits.voltage,
        sink.mosfet.voltage_max,
        "what the MOSFET blocks",
    );
    place.within(
        &["limits", "temperature"],
        limits.temperature,
        sink.heat_sink.limit,
        "the heat sink's limit",
    );
}

fn check_interlocks(sink: &SinkEntry, place: &mut Place<'_>) {
    let (interlocks, limits) = (&sink.interlocks, &sink.limits);
    place.within(
        &["interlocks", "over_temperature", "above"],
        interlocks.over_temperature.threshold,
        limits.temperature,
        "the sink's limit",
    );
    place.within(
        &["interlocks", "over_power", "above"],
        interlocks.over_power.threshold,
        limits.power,
        "the sink's limit",
    );
    place.within(
        &["interlocks", "over_voltage", "above"],
        interlocks.over_voltage.threshold,
        limits.voltage,
        "the sink's limit",
    );
    place.within(
        &["interlocks", "over_current", "above"],
        interlocks.over_current.threshold,
        limits.current,
        "the sink's limit",
    );
    place.within(
        &["interlocks", "reversed_polarity", "below"],
        interlocks.reversed_polarity.threshold,
        Voltage::ZERO,
        "zero: a voltage of the right polarity",
    );
    if interlocks.over_temperature.threshold <= sink.ambient {
        place.add(
            &["interlocks", "over_temperature", "above"],
            format!(
                "{} is not above the ambient of {}; it would trip at once",
                interlocks.over_temperature.threshold, sink.ambient
            ),
        );
    }
    if interlocks.undervoltage.threshold >= interlocks.over_voltage.threshold {
        place.add(
            &["interlocks", "undervoltage", "below"],
            format!(
                "{} is not below the over-voltage of {}; no voltage would pass",
                interlocks.undervoltage.threshold, interlocks.over_voltage.threshold
            ),
        );
    }
    place.positive(
        &["interlocks", "over_power", "above"],
        interlocks.over_power.threshold,
    );
    place.positive(
        &["interlocks", "over_current", "above"],
        interlocks.over_current.threshold,
    );
    place.positive(
        &["interlocks", "not_following", "short_by"],
        interlocks.not_following.threshold,
    );
    place.positive(
        &["interlocks", "not_releasing", "above_by"],
        interlocks.not_releasing.threshold,
    );
    place.positive(
        &["interlocks", "silence", "for"],
        interlocks.silence.persistence,
    );
    place.positive(
        &["interlocks", "clock", "off_by"],
        interlocks.clock.threshold,
    );
    if interlocks.silence.persistence < sink.readback.fastest {
        place.add(
            &["interlocks", "silence", "for"],
            format!(
                "{} is shorter than the fastest readback of {}; every run would trip",
                interlocks.silence.persistence, sink.readback.fastest
            ),
        );
    }
}
