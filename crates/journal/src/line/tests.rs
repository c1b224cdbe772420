//! Format version 1 is frozen: these texts do not change, or records of old could not be read.

use expect_test::{Expect, expect};
use proptest::prelude::*;
use quantity::{Charge, Current, HostTime, SinkTime, Span, Voltage};
use sequencer::event::{Crossing, Ending, Finding, Happening, Interlock};
use wire::{OrderId, SinkState, TemperatureReading};

use super::{LineFault, decode, encode};
use crate::tests::fixture::{START, any_reading, entry, order, reading};
use crate::{Body, ClockAlignment, Entry, Note, Side};

fn text(entry: &Entry) -> String {
    let mut line = Vec::new();
    encode(&mut line, START, entry);
    String::from_utf8(line).expect("lines are text")
}

#[expect(
    clippy::needless_pass_by_value,
    reason = "expected texts are written where they are used"
)]
fn check(number: u64, body: Body, expected: Expect) {
    let entry = Entry {
        number,
        at: HostTime::from_micros(START.micros() + 250_000),
        body,
    };
    let line = text(&entry);
    expected.assert_eq(&line);
    let back = decode(line.trim_end_matches('\n').as_bytes(), START);
    assert_eq!(back, Ok(entry), "what is read is what was written");
}

#[test]
fn a_readback_is_an_array() {
    check(
        1_201,
        Body::Event(Happening::Reading(reading(1_200))),
        expect![[r#"
            [1201,250000,1200,125000000,640100,800,950,3898800,1300,1600,31250,1,0,76812000,299520000,12,1,0,"2ec63149"]
        "#]],
    );
}

#[test]
fn a_readback_without_counters_has_nulls() {
    let mut reading = reading(1_200);
    reading.counters = None;
    reading.lost = 2;
    reading.values.temperature = TemperatureReading::Open;
    reading.values.state = SinkState::Off;
    check(
        7,
        Body::Event(Happening::Reading(reading)),
        expect![[r#"
            [7,250000,1200,125000000,640100,800,950,3898800,1300,1600,"open",0,2,null,null,null,null,null,"24f70feb"]
        "#]],
    );
}

#[test]
fn a_readback_that_columns_cannot_hold_is_an_object() {
    let mut reading = reading(1_200);
    reading.values.current_min = Current::MIN;
    check(
        7,
        Body::Event(Happening::Reading(reading)),
        expect![[r#"
            {"n":7,"at":1796155200250000,"event":{"reading":{"readback":1200,"time":125000000,"values":{"current":640100,"current_min":-9223372036854775808,"current_max":641050,"voltage":3898800,"voltage_min":3897500,"voltage_max":3900400,"temperature":{"value":31250},"state":"on"},"counters":{"time":125000000,"charge":76812000,"energy":299520000,"step":12,"queued":1,"damaged":0},"lost":0}},"crc":"943644ea"}
        "#]],
    );
}

#[test]
fn events_orders_findings_and_the_end_are_objects() {
    check(
        1,
        entry(1).body,
        expect![[r#"
        {"n":1,"at":1796155200250000,"event":{"connected":{"time":5100000}},"crc":"c5e59e1c"}
    "#]],
    );
    check(
        2,
        Body::Order {
            id: OrderId(1),
            order: order(),
        },
        expect![[r#"
            {"n":2,"at":1796155200250000,"order":{"id":1,"order":{"step":{"mode":{"current":640000},"start":6000000,"ramp":0,"hold":18000000000}}},"crc":"c5cac8da"}
        "#]],
    );
    check(
        3,
        Body::Off,
        expect![[r#"
        {"n":3,"at":1796155200250000,"off":true,"crc":"1c7bea81"}
    "#]],
    );
    check(
        4,
        Body::Event(Happening::LinkLost),
        expect![[r#"
        {"n":4,"at":1796155200250000,"event":"link_lost","crc":"7b77224a"}
    "#]],
    );
    check(
        5,
        Body::Finding(Finding::Crossed(Crossing {
            interlock: Interlock::Undervoltage,
            value: 2_599_000,
            threshold: 2_600_000,
            by_sink: false,
        })),
        expect![[r#"
            {"n":5,"at":1796155200250000,"finding":{"crossed":{"interlock":"undervoltage","value":2599000,"threshold":2600000,"by_sink":false}},"crc":"43ae411f"}
        "#]],
    );
    check(
        6,
        Body::Ended(Ending::Tripped(Interlock::Undervoltage)),
        expect![[r#"
            {"n":6,"at":1796155200250000,"ended":{"tripped":"undervoltage"},"crc":"7a732cbd"}
        "#]],
    );
}

#[test]
fn notes_are_objects() {
    check(
        1,
        Body::Note(Note::SessionBegun { session: 77 }),
        expect![[r#"
            {"n":1,"at":1796155200250000,"note":{"session_begun":{"session":77}},"crc":"8c085d2e"}
        "#]],
    );
    check(
        2,
        Body::Note(Note::ClockAligned(ClockAlignment {
            sink: SinkTime::from_micros(5_000_000),
            host: START,
            rate_ppb: -41_500,
            uncertainty: Span::from_micros(180),
            rate_uncertainty_ppb: 900,
        })),
        expect![[r#"
            {"n":2,"at":1796155200250000,"note":{"clock_aligned":{"sink":5000000,"host":1796155200000000,"rate_ppb":-41500,"uncertainty":180,"rate_uncertainty_ppb":900}},"crc":"5bc865d3"}
        "#]],
    );
    check(
        3,
        Body::Note(Note::Retransmitted {
            orders: 3,
            attempt: 1,
        }),
        expect![[r#"
            {"n":3,"at":1796155200250000,"note":{"retransmitted":{"orders":3,"attempt":1}},"crc":"bf3c762e"}
        "#]],
    );
    check(
        4,
        Body::Note(Note::DamagedLines {
            seen_by: Side::Sink,
            lines: 1,
        }),
        expect![[r#"
            {"n":4,"at":1796155200250000,"note":{"damaged_lines":{"seen_by":"sink","lines":1}},"crc":"f25044bc"}
        "#]],
    );
    check(
        5,
        Body::Note(Note::LinkLost {
            reason: "the port is gone".into(),
        }),
        expect![[r#"
            {"n":5,"at":1796155200250000,"note":{"link_lost":{"reason":"the port is gone"}},"crc":"db2e3a4e"}
        "#]],
    );
    check(
        6,
        Body::Note(Note::LinkBack),
        expect![[r#"
        {"n":6,"at":1796155200250000,"note":"link_back","crc":"1270b3b5"}
    "#]],
    );
    check(
        7,
        Body::Note(Note::Resumed {
            gap: Span::from_secs(93),
            last_number: 4_711,
        }),
        expect![[r#"
            {"n":7,"at":1796155200250000,"note":{"resumed":{"gap":93000000,"last_number":4711}},"crc":"f62ca1dc"}
        "#]],
    );
    let sample = (
        Current::from_milliamperes(640),
        Voltage::from_millivolts(3_700),
    );
    check(
        8,
        Body::Note(Note::Burst {
            capture: 2,
            index: 4,
            samples: vec![sample, sample],
        }),
        expect![[r#"
            {"n":8,"at":1796155200250000,"note":{"burst":{"capture":2,"index":4,"samples":[[640000,3700000],[640000,3700000]]}},"crc":"83a87c90"}
        "#]],
    );
    check(
        9,
        Body::Note(Note::BurstDone { capture: 2 }),
        expect![[r#"
            {"n":9,"at":1796155200250000,"note":{"burst_done":{"capture":2}},"crc":"c45f2fb6"}
        "#]],
    );
    check(
        10,
        Body::Note(Note::Text("two\nlines, \"quoted\", 0.1 Ω".into())),
        expect![[r#"
            {"n":10,"at":1796155200250000,"note":{"text":"two\nlines, \"quoted\", 0.1 Ω"},"crc":"7b99d642"}
        "#]],
    );
}

#[test]
fn a_readback_takes_no_more_than_130_bytes_after_twelve_hours_at_10_hz() {
    let index = 12 * 3_600 * 10;
    let mut reading = reading(index);
    if let Some(counters) = &mut reading.counters {
        counters.charge = Charge::from_microcoulombs(27_651_230_000);
    }
    let at = START + Span::from_secs(12 * 3_600);
    let line = text(&Entry {
        number: index,
        at,
        body: Body::Event(Happening::Reading(reading)),
    });
    assert!(line.len() <= 130, "{} bytes: {line}", line.len());
}

#[test]
fn any_changed_byte_of_a_line_is_found() {
    for number in [1, 2, 7, 50] {
        let line = text(&entry(number));
        let line = line.trim_end_matches('\n').as_bytes();
        for place in 0..line.len() {
            for flip in [0x01, 0x20, 0x80, 0xFF] {
                let mut altered = line.to_vec();
                altered[place] ^= flip;
                assert!(
                    decode(&altered, START).is_err(),
                    "byte {place} of entry {number}"
                );
            }
        }
    }
}

#[test]
fn a_checksum_that_holds_makes_no_entry_of_what_is_none() {
    for content in [
        "{\"n\":1,\"at\":2",
        "{\"n\":1,\"at\":2,\"off\":true,\"ended\":\"finished\"",
        "{\"n\":1,\"at\":2,\"off\":false",
        "{\"n\":1,\"at\":2,\"reading\":1",
        "[1,2,3",
    ] {
        let mut line = content.as_bytes().to_vec();
        let (seam, end) = if content.starts_with('[') {
            (super::ARRAY_SEAM, super::ARRAY_END)
        } else {
            (super::OBJECT_SEAM, super::OBJECT_END)
        };
        super::finish(&mut line, 0, seam, end);
        line.pop();
        assert!(
            matches!(decode(&line, START), Err(LineFault::Form(_))),
            "{content}"
        );
    }
}

proptest! {
    #[test]
    fn any_readback_comes_back_in_one_form_or_the_other(
        reading in any_reading(),
        number in any::<u64>(),
        at in any::<i64>(),
    ) {
        let body = Body::Event(Happening::Reading(reading));
        let entry = Entry { number, at: HostTime::from_micros(at), body };
        let line = text(&entry);
        prop_assert_eq!(decode(line.trim_end_matches('\n').as_bytes(), START), Ok(entry));
    }
}

#[test]
fn every_example_in_the_users_page_is_a_line_of_this_format() {
    let page = include_str!("../../../../docs/records.md");
    let examples: Vec<&str> = page
        .lines()
        .filter(|line| line.starts_with("{\"n\":") || line.starts_with('['))
        .collect();
    assert_eq!(examples.len(), 7);
    for example in examples {
        let entry = decode(example.as_bytes(), START).expect(example);
        assert_eq!(text(&entry).trim_end(), example);
    }
}
