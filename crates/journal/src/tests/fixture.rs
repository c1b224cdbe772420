//! The invented scenario: the bench `weir`, its sink `left`, the cell K-01.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use proptest::prelude::*;
use quantity::{Charge, Current, Energy, HostTime, Power, SinkTime, Span, Temperature, Voltage};
use sequence::plan::{
    Action, Armed, Dut, DutKind, Interlocks, Next, OnInterruption, Op, Plan, PlanStep, Ranges,
};
use sequencer::event::{Ending, Finding, Happening};
use sink::correction::{Correction, Curve};
use wire::{
    Cause, Counters, Mode, Order, OrderId, OrderNumber, Readback, Reading, SinkState, Step,
    TemperatureReading,
};

use crate::{Body, ClockKind, Ended, Entry, Manifest, Note, Options, SequenceText, Writer};

/// 2026-12-01T20:00:00Z.
pub(crate) const START: HostTime = HostTime::from_micros(1_796_155_200_000_000);

pub(crate) fn manifest() -> Manifest {
    Manifest {
        format: crate::FORMAT,
        record: "weir-left-0001".into(),
        created: "2026-12-01T20:00:00Z".into(),
        host: "weir".into(),
        software: "sinkwarden 0.1.0".into(),
        sink: "left".into(),
        clock: ClockKind::Virtual,
        bench: serde_json::json!({ "sense_resistor": "0.1 ohm", "thermal_k_per_w": 1.25 }),
        sequence: SequenceText {
            text: "{}".into(),
            files: BTreeMap::new(),
        },
        plan: plan(),
        certificate: Some(serde_json::json!({ "offset_a": 0.1 + 0.2, "slope": 1.0 / 3.0 })),
        description: None,
        resumed: Vec::new(),
        ended: None,
    }
}

pub(crate) fn ended() -> Ended {
    Ended {
        how: Ending::Finished,
        at: "2026-12-02T01:00:00Z".into(),
        reason: None,
    }
}

pub(crate) fn plan() -> Plan {
    let second = Span::from_secs(1);
    let amperes = |threshold| Armed {
        threshold,
        persistence: second,
    };
    Plan {
        title: "Capacity at 0.2 It (invented)".into(),
        sink: "left".into(),
        dut: Dut {
            label: "K-01".into(),
            kind: DutKind::Cell,
            rated_capacity: Some(Charge::from_microcoulombs(11_520_000_000)),
            voltage_min: Voltage::from_millivolts(2_500),
            voltage_max: Voltage::from_millivolts(4_200),
            current_max: Current::from_milliamperes(6_400),
            series: 1,
            parallel: 1,
        },
        ops: vec![step(Action::Rest, None), step(discharge(), Some(0))],
        labels: vec!["discharge, \"0.2 It\"".into()],
        interlocks: Interlocks {
            over_temperature: Armed {
                threshold: Temperature::from_millidegrees_celsius(70_000),
                persistence: second,
            },
            over_power: Armed {
                threshold: Power::from_milliwatts(12_000),
                persistence: second,
            },
            undervoltage: Armed {
                threshold: Voltage::from_millivolts(2_600),
                persistence: second,
            },
            over_voltage: Armed {
                threshold: Voltage::from_millivolts(4_250),
                persistence: second,
            },
            reversed_polarity: Armed {
                threshold: Voltage::ZERO,
                persistence: second,
            },
            over_current: amperes(Current::from_milliamperes(1_000)),
            not_following: amperes(Current::from_milliamperes(50)),
            not_releasing: amperes(Current::from_milliamperes(50)),
            sensor_fault: second,
            silence: second,
            charge: None,
            energy: None,
            time: None,
            clock: second,
        },
        deadman: Span::from_secs(2),
        readback: Span::from_millis(100),
        on_interruption: OnInterruption::Resume,
        ranges: Ranges {
            current: Current::from_milliamperes(3_300),
            voltage: Voltage::from_millivolts(6_600),
        },
        tick: Span::from_millis(1),
        queue: 16,
        isolator: false,
        by_hand: false,
        correction: Correction {
            current_read: Curve::line(2_000, -30_000_000).expect("a gain error of 3 %"),
            ..Correction::IDENTITY
        },
    }
}

fn discharge() -> Action {
    Action::Current {
        target: Current::from_milliamperes(640),
        ramp: Span::ZERO,
    }
}

fn step(action: Action, label: Option<u32>) -> Op {
    Op::Step(PlanStep {
        action,
        duration: Span::from_secs(18_000),
        until: Vec::new(),
        then: Next::GoOn,
        readback: None,
        may_give_up: false,
        burst: None,
        label,
        pointer: "/steps/0".into(),
    })
}

/// A readback as such a run gives them, by its place in the run.
pub(crate) fn reading(index: u64) -> Reading {
    let signed = i64::try_from(index).expect("a test's own number");
    let time = SinkTime::from_micros(5_000_000 + index * 100_000);
    let noise = (signed * 7_919) % 400;
    Reading {
        readback: u16::try_from(index % 65_536).expect("wrapped"),
        time,
        values: Readback {
            current: Current::from_microamperes(640_100 + noise),
            current_min: Current::from_microamperes(639_300 + noise / 2),
            current_max: Current::from_microamperes(641_050 + noise),
            voltage: Voltage::from_microvolts(3_900_000 - signed % 900_000 + noise),
            voltage_min: Voltage::from_microvolts(3_898_700 - signed % 900_000),
            voltage_max: Voltage::from_microvolts(3_901_600 - signed % 900_000 + noise),
            temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(
                31_250 + noise,
            )),
            state: SinkState::On,
        },
        counters: Some(Counters {
            time,
            charge: Charge::from_microcoulombs(64_010 * signed),
            energy: Energy::from_microjoules(249_600 * signed),
            step: OrderNumber(12),
            queued: 1,
            damaged: 0,
        }),
        lost: 0,
    }
}

/// Entry number `number` of an invented run: now and then something else than a readback.
pub(crate) fn entry(number: u64) -> Entry {
    let at = START + Span::from_millis(number * 100);
    let time = SinkTime::from_micros(5_000_000 + number * 100_000);
    let body = match number {
        1 => Body::Event(Happening::Connected { time }),
        2 => Body::Order {
            id: OrderId(1),
            order: order(),
        },
        3 => Body::Event(Happening::Acknowledged { order: OrderId(1) }),
        4 => Body::Finding(Finding::StepBegan { op: 1, time }),
        _ if number.is_multiple_of(50) => {
            Body::Note(Note::Text(format!("note {number}, \"quoted\"\n")))
        }
        _ => Body::Event(Happening::Reading(reading(number))),
    };
    Entry { number, at, body }
}

pub(crate) fn order() -> Order {
    Order::Step(Step {
        mode: Mode::Current(Current::from_milliamperes(640)),
        start: SinkTime::from_micros(6_000_000),
        ramp: Span::ZERO,
        hold: Span::from_secs(18_000),
    })
}

/// Small segments, so that a short record has several.
pub(crate) const SMALL: Options = Options {
    segment_bytes: 2_000,
};

/// A record of so many entries, committed but not sealed.
pub(crate) fn written(parent: &Path, entries: u64, options: Options) -> (PathBuf, Writer) {
    let folder = parent.join("record");
    let mut writer = Writer::create(&folder, manifest(), options).expect("an empty folder");
    for number in 1..=entries {
        writer.append(&entry(number)).expect("room");
    }
    writer.commit().expect("room");
    (folder, writer)
}

/// Any readback at all.
pub(crate) fn any_reading() -> impl Strategy<Value = Reading> {
    let electrical = (any::<[i64; 6]>(), any::<[i32; 6]>(), any::<bool>())
        .prop_map(|(wild, tame, is_wild)| if is_wild { wild } else { tame.map(i64::from) });
    let temperature = prop_oneof![
        any::<i64>().prop_map(|value| TemperatureReading::Value(
            Temperature::from_millidegrees_celsius(value)
        )),
        Just(TemperatureReading::Open),
        Just(TemperatureReading::Short),
    ];
    let state = prop_oneof![
        Just(SinkState::Off),
        Just(SinkState::On),
        Just(SinkState::Saturated),
        Just(SinkState::Latched(Cause::Deadman)),
        Just(SinkState::Latched(Cause::Watchdog)),
    ];
    let counters = proptest::option::of(any::<(bool, i64, i64, u16, u16, u16)>());
    (
        any::<(u16, u64, u16)>(),
        electrical,
        temperature,
        state,
        counters,
    )
        .prop_map(
            |((readback, time, lost), [a, b, c, d, e, f], temperature, state, counters)| {
                let time = SinkTime::from_micros(time);
                Reading {
                    readback,
                    time,
                    values: Readback {
                        current: Current::from_microamperes(a),
                        current_min: Current::from_microamperes(b),
                        current_max: Current::from_microamperes(c),
                        voltage: Voltage::from_microvolts(d),
                        voltage_min: Voltage::from_microvolts(e),
                        voltage_max: Voltage::from_microvolts(f),
                        temperature,
                        state,
                    },
                    counters: counters.map(|(same, charge, energy, step, queued, damaged)| {
                        Counters {
                            time: if same { time } else { SinkTime::ZERO },
                            charge: Charge::from_microcoulombs(charge),
                            energy: Energy::from_microjoules(energy),
                            step: OrderNumber(step),
                            queued,
                            damaged,
                        }
                    }),
                    lost,
                }
            },
        )
}
