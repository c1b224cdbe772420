//! The frozen vectors of protocol version 1, which the reference firmware runs as well.
//!
//! If a test here fails, do not change the vector: see `firmware-protocol/vectors/README.md`.

use serde_json::{Value, json};
use std::string::String;
use std::vec::Vec;

use super::any::{host_bytes, sink_bytes};
use crate::{
    Abilities, Counters, Decoder, HostLine, LimitKind, Line, LineError, Mode, Order, Readback,
    SinkLine, Step, TemperatureReading,
};

const HOST_LINES: &str = include_str!("../../../../firmware-protocol/vectors/v1/host-lines.json");
const SINK_LINES: &str = include_str!("../../../../firmware-protocol/vectors/v1/sink-lines.json");
const BAD_HOST_LINES: &str =
    include_str!("../../../../firmware-protocol/vectors/v1/bad-host-lines.json");
const BAD_SINK_LINES: &str =
    include_str!("../../../../firmware-protocol/vectors/v1/bad-sink-lines.json");
const DIALOGUES: &str = include_str!("../../../../firmware-protocol/vectors/v1/dialogues.json");

fn list(file: &str, name: &str) -> Vec<Value> {
    let file: Value = serde_json::from_str(file).expect("the vectors are JSON");
    let list = file[name].as_array().expect("a list").clone();
    assert!(!list.is_empty());
    list
}

fn text<'a>(item: &'a Value, name: &str) -> &'a str {
    item[name]
        .as_str()
        .unwrap_or_else(|| panic!("{item} has no {name}"))
}

fn decode<T: Line>(line: &str) -> Vec<Result<T, LineError>> {
    let mut bytes = line.as_bytes().to_vec();
    bytes.push(b'\n');
    Decoder::new().feed(&bytes).collect()
}

#[test]
fn good_host_lines_are_read_and_written_as_they_stand() {
    for item in list(HOST_LINES, "lines") {
        let line = text(&item, "line");
        let results = decode::<HostLine>(line);
        let [Ok(message)] = results.as_slice() else {
            panic!("{line}: {results:?}")
        };
        assert_eq!(
            host_fields(message),
            (text(&item, "kind"), item["fields"].clone()),
            "{line}"
        );
        assert_eq!(host_bytes(message), std::format!("{line}\n").into_bytes());
    }
}

#[test]
fn good_sink_lines_are_read_and_written_as_they_stand() {
    for item in list(SINK_LINES, "lines") {
        let line = text(&item, "line");
        let results = decode::<SinkLine>(line);
        let [Ok(message)] = results.as_slice() else {
            panic!("{line}: {results:?}")
        };
        assert_eq!(
            sink_fields(message),
            (text(&item, "kind"), item["fields"].clone()),
            "{line}"
        );
        assert_eq!(sink_bytes(message), std::format!("{line}\n").into_bytes());
    }
}

fn check_bad<T: Line + core::fmt::Debug>(file: &str) {
    for item in list(file, "lines") {
        let results = decode::<T>(text(&item, "line"));
        let [Err(error)] = results.as_slice() else {
            panic!("{item}: {results:?}")
        };
        assert_eq!(error.name(), text(&item, "error"), "{item}");
        let class = if error.arrived_whole() {
            "faulty"
        } else {
            "damaged"
        };
        assert_eq!(class, text(&item, "class"), "{item}");
    }
}

#[test]
fn bad_host_lines_give_the_error_named() {
    check_bad::<HostLine>(BAD_HOST_LINES);
}

#[test]
fn bad_sink_lines_give_the_error_named() {
    check_bad::<SinkLine>(BAD_SINK_LINES);
}

#[test]
fn every_answer_of_the_dialogues_is_a_line_of_the_protocol() {
    let mut answers = 0;
    for dialogue in list(DIALOGUES, "dialogues") {
        for entry in dialogue["entries"].as_array().expect("entries") {
            for answer in entry["sink"].as_array().expect("answers") {
                let answer = answer.as_str().expect("a line");
                if answer.starts_with("about ") {
                    // Its firmware version is left open.
                    continue;
                }
                let results = decode::<SinkLine>(answer);
                assert!(
                    matches!(results.as_slice(), [Ok(_)]),
                    "{answer}: {results:?}"
                );
                answers += 1;
            }
        }
    }
    assert!(answers > 100);
}

fn host_fields(line: &HostLine) -> (&'static str, Value) {
    match *line {
        HostLine::Hello { token, session } => {
            ("hello", json!({ "TOKEN": token, "SESSION": session }))
        }
        HostLine::Clock { token } => ("clock", json!({ "TOKEN": token })),
        HostLine::Off { token } => ("off", json!({ "TOKEN": token })),
        HostLine::Order { number, ref order } => order_fields(number.0, order),
    }
}

fn order_fields(n: u16, order: &Order) -> (&'static str, Value) {
    match *order {
        Order::Limit { limit, persistence } => {
            let (which, value) = match limit {
                LimitKind::Current(current) => ("current", current.microamperes()),
                LimitKind::Power(power) => ("power", power.microwatts()),
                LimitKind::VoltageHigh(voltage) => ("voltage-high", voltage.microvolts()),
                LimitKind::VoltageLow(voltage) => ("voltage-low", voltage.microvolts()),
                LimitKind::Temperature(value) => ("temperature", value.millidegrees_celsius()),
                LimitKind::Excess(current) => ("excess", current.microamperes()),
            };
            let persist = persistence.micros();
            (
                "limit",
                json!({ "N": n, "WHICH": which, "VALUE": value, "PERSIST": persist }),
            )
        }
        Order::Deadman { interval } => {
            ("deadman", json!({ "N": n, "INTERVAL": interval.micros() }))
        }
        Order::Readback { interval } => {
            ("readback", json!({ "N": n, "INTERVAL": interval.micros() }))
        }
        Order::Step(step) => ("step", step_fields(n, &step)),
        Order::Clear { from } => ("clear", json!({ "N": n, "FROM": from.micros() })),
        Order::Reset => ("reset", json!({ "N": n })),
        Order::Isolator { closed } => ("isolator", json!({ "N": n, "STATE": i32::from(closed) })),
        Order::Burst { at, before, after } => (
            "burst",
            json!({ "N": n, "AT": at.micros(), "BEFORE": before, "AFTER": after }),
        ),
    }
}

fn step_fields(n: u16, step: &Step) -> Value {
    let (mode, target) = match step.mode {
        Mode::Current(current) => ("current", current.microamperes()),
        Mode::Power(power) => ("power", power.microwatts()),
        Mode::Resistance(resistance) => ("resistance", resistance.microohms()),
    };
    json!({
        "N": n,
        "MODE": mode,
        "START": step.start.micros(),
        "TARGET": target,
        "RAMP": step.ramp.micros(),
        "HOLD": step.hold.micros(),
    })
}

fn sink_fields(line: &SinkLine) -> (&'static str, Value) {
    match *line {
        SinkLine::Ok { number } => ("ok", json!({ "N": number.0 })),
        SinkLine::OffDone { token } => ("ok", json!({ "TOKEN": token, "WORD": "off" })),
        SinkLine::No { number, reason } => (
            "no",
            json!({ "N": number.0, "REASON": String::from(reason.word()) }),
        ),
        SinkLine::NoGap { number, expected } => (
            "no",
            json!({ "N": number.0, "REASON": "gap", "EXPECTED": expected.0 }),
        ),
        SinkLine::Clock { token, time } => {
            ("clock", json!({ "TOKEN": token, "TIME": time.micros() }))
        }
        SinkLine::Counters {
            readback,
            ref counters,
        } => ("c", counter_fields(readback, counters)),
        SinkLine::Readback {
            readback,
            time_low,
            ref values,
        } => ("r", readback_fields(readback, time_low, values)),
        SinkLine::Edge { event, time, step } => (
            "edge",
            json!({ "K": event, "TIME": time.micros(), "STEP": step.0 }),
        ),
        SinkLine::End { event, time } => ("end", json!({ "K": event, "TIME": time.micros() })),
        SinkLine::Trip {
            event,
            time,
            cause,
            value,
        } => {
            let (time, cause) = (time.micros(), cause.word());
            (
                "trip",
                json!({ "K": event, "TIME": time, "CAUSE": cause, "VALUE": value }),
            )
        }
        SinkLine::Burst {
            burst,
            index,
            len,
            samples,
        } => {
            let samples: Vec<[i64; 2]> = samples[..usize::from(len)]
                .iter()
                .map(|(current, voltage)| [current.microamperes(), voltage.microvolts()])
                .collect();
            (
                "b",
                json!({ "K": burst, "INDEX": index, "SAMPLES": samples }),
            )
        }
        SinkLine::BurstDone { burst } => ("b", json!({ "K": burst, "WORD": "done" })),
        SinkLine::About { .. }
        | SinkLine::Front { .. }
        | SinkLine::Drive { .. }
        | SinkLine::Sense { .. }
        | SinkLine::Ready { .. } => description_fields(line),
    }
}

fn counter_fields(readback: u16, counters: &Counters) -> Value {
    json!({
        "K": readback,
        "TIME": counters.time.micros(),
        "CHARGE": counters.charge.microcoulombs(),
        "ENERGY": counters.energy.microjoules(),
        "STEP": counters.step.0,
        "QUEUED": counters.queued,
        "DAMAGED": counters.damaged,
    })
}

fn readback_fields(readback: u16, time_low: u32, values: &Readback) -> Value {
    json!({
        "K": readback,
        "TIME32": time_low,
        "I": values.current.microamperes(),
        "IMIN": values.current_min.microamperes(),
        "IMAX": values.current_max.microamperes(),
        "V": values.voltage.microvolts(),
        "VMIN": values.voltage_min.microvolts(),
        "VMAX": values.voltage_max.microvolts(),
        "TEMP": match values.temperature {
            TemperatureReading::Value(value) => json!(value.millidegrees_celsius()),
            TemperatureReading::Open => json!("open"),
            TemperatureReading::Short => json!("short"),
        },
        "STATE": values.state.number(),
    })
}

#[expect(
    clippy::wildcard_enum_match_arm,
    reason = "the caller passes the five parts only"
)]
fn description_fields(line: &SinkLine) -> (&'static str, Value) {
    match *line {
        SinkLine::About {
            token,
            protocol,
            firmware,
            serial,
            reset,
        } => (
            "about",
            json!({
                "TOKEN": token,
                "PROTOCOL": protocol,
                "FIRMWARE": firmware,
                "SERIAL": serial,
                "RESET": reset.word(),
            }),
        ),
        SinkLine::Front {
            token,
            tick,
            queue,
            fastest,
            burst,
            abilities,
        } => (
            "front",
            json!({
                "TOKEN": token,
                "TICK": tick.micros(),
                "QUEUE": queue,
                "FASTEST": fastest.micros(),
                "BURST": burst,
                "ABILITIES": ability_sum(abilities),
            }),
        ),
        SinkLine::Drive {
            token,
            bits,
            full_scale,
            span,
            sense,
        } => (
            "drive",
            json!({
                "TOKEN": token,
                "BITS": bits,
                "FULLSCALE": full_scale.microvolts(),
                "SPAN": span,
                "SENSE": sense.microohms(),
            }),
        ),
        SinkLine::Sense {
            token,
            bits,
            current,
            voltage,
        } => (
            "sense",
            json!({
                "TOKEN": token,
                "BITS": bits,
                "CURRENT": current.microamperes(),
                "VOLTAGE": voltage.microvolts(),
            }),
        ),
        SinkLine::Ready {
            token,
            session,
            time,
        } => (
            "ready",
            json!({ "TOKEN": token, "SESSION": session, "TIME": time.micros() }),
        ),
        ref other => panic!("{other:?} is no part of a description"),
    }
}

fn ability_sum(abilities: Abilities) -> u32 {
    let Abilities {
        power,
        resistance,
        burst,
        isolator,
    } = abilities;
    [(power, 1), (resistance, 2), (burst, 4), (isolator, 8)]
        .into_iter()
        .map(|(able, value)| if able { value } else { 0 })
        .sum()
}
