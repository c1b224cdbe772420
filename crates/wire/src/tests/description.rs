//! Gathering a description, and every way it can go wrong.

use std::string::ToString;
use std::vec::Vec;

use quantity::{Current, Resistance, SinkTime, Span, Voltage};

use crate::{
    Abilities, Description, DescriptionBuilder, DescriptionError, OrderNumber, Reset, SinkLine,
};

const TOKEN: u16 = 7;
const SESSION: u32 = 42;

/// The invented bench's sink `left`.
fn left() -> Description {
    Description {
        protocol: 1,
        firmware: 10_203,
        serial: 17,
        reset: Reset::Power,
        tick: Span::from_micros(500),
        queue: 32,
        fastest_readback: Span::from_micros(20_000),
        burst: 1_024,
        abilities: Abilities {
            power: true,
            burst: true,
            ..Abilities::default()
        },
        drive_bits: 12,
        drive_full_scale: Voltage::from_microvolts(300_000),
        drive_spans_full_scale: true,
        sense_resistor: Resistance::from_microohms(100_000),
        sense_bits: 12,
        sense_current: Current::from_microamperes(3_300_000),
        sense_voltage: Voltage::from_microvolts(16_500_000),
    }
}

fn lines(token: u16, session: u32) -> [SinkLine; 5] {
    let left = left();
    [
        SinkLine::About {
            token,
            protocol: left.protocol,
            firmware: left.firmware,
            serial: left.serial,
            reset: left.reset,
        },
        SinkLine::Front {
            token,
            tick: left.tick,
            queue: left.queue,
            fastest: left.fastest_readback,
            burst: left.burst,
            abilities: left.abilities,
        },
        SinkLine::Drive {
            token,
            bits: left.drive_bits,
            full_scale: left.drive_full_scale,
            span: 1,
            sense: left.sense_resistor,
        },
        SinkLine::Sense {
            token,
            bits: left.sense_bits,
            current: left.sense_current,
            voltage: left.sense_voltage,
        },
        SinkLine::Ready {
            token,
            session,
            time: SinkTime::from_micros(1_234_567),
        },
    ]
}

type Taken = Result<Option<(Description, SinkTime)>, DescriptionError>;

fn take(builder: &mut DescriptionBuilder, lines: &[SinkLine]) -> Vec<Taken> {
    lines.iter().map(|line| builder.push(line)).collect()
}

fn complete() -> (Description, SinkTime) {
    (left(), SinkTime::from_micros(1_234_567))
}

#[test]
fn five_lines_in_order_make_a_description() {
    let mut builder = DescriptionBuilder::new(TOKEN, SESSION);
    let taken = take(&mut builder, &lines(TOKEN, SESSION));
    assert_eq!(
        taken,
        [Ok(None), Ok(None), Ok(None), Ok(None), Ok(Some(complete()))]
    );
}

#[test]
fn lines_of_other_kinds_may_stand_between() {
    let mut builder = DescriptionBuilder::new(TOKEN, SESSION);
    let between = SinkLine::Ok {
        number: OrderNumber::FIRST,
    };
    let mut last = Ok(None);
    for line in lines(TOKEN, SESSION) {
        assert_eq!(builder.push(&between), Ok(None));
        last = builder.push(&line);
    }
    assert_eq!(last, Ok(Some(complete())));
}

#[test]
fn a_missing_line_is_found_and_a_fresh_answer_is_taken() {
    let all = lines(TOKEN, SESSION);
    for missing in 0..4 {
        let mut builder = DescriptionBuilder::new(TOKEN, SESSION);
        let mut some = all.to_vec();
        some.remove(missing);
        let taken = take(&mut builder, &some);
        assert!(taken.iter().any(Result::is_err));
        assert!(taken.iter().all(|taken| !matches!(taken, Ok(Some(_)))));
        assert_eq!(take(&mut builder, &all).last(), Some(&Ok(Some(complete()))));
    }
}

#[test]
fn a_repeated_answer_begins_anew() {
    let all = lines(TOKEN, SESSION);
    let mut builder = DescriptionBuilder::new(TOKEN, SESSION);
    assert_eq!(
        take(&mut builder, &all[..3]),
        [Ok(None), Ok(None), Ok(None)]
    );
    assert_eq!(take(&mut builder, &all).last(), Some(&Ok(Some(complete()))));
}

#[test]
fn errors_say_what_was_due() {
    let mut builder = DescriptionBuilder::new(TOKEN, SESSION);
    let all = lines(TOKEN, SESSION);
    let late = builder.push(&all[1]).unwrap_err();
    assert_eq!(
        late.to_string(),
        "description line `front` came where `about` was due; ask again"
    );
    let other = builder.push(&lines(8, SESSION)[0]).unwrap_err();
    assert_eq!(
        other.to_string(),
        "description line `about` bears token 8, asked under 7; ask again"
    );
    let taken = take(&mut builder, &lines(TOKEN, 43));
    assert_eq!(
        taken[4],
        Err(DescriptionError::Session {
            expected: SESSION,
            found: 43
        })
    );
}

#[test]
fn another_protocol_version_is_named_at_once() {
    let mut builder = DescriptionBuilder::new(TOKEN, SESSION);
    let about = SinkLine::About {
        token: TOKEN,
        protocol: 2,
        firmware: 0,
        serial: 0,
        reset: Reset::Unknown,
    };
    let error = builder.push(&about).unwrap_err();
    assert_eq!(
        error.to_string(),
        "sink speaks protocol 2, this host 1; use matching versions"
    );
}
