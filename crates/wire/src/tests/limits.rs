//! What encoding refuses, the longest lines, and the speed of decoding.

use std::string::{String, ToString};
use std::{format, println};

use quantity::{Charge, Current, Energy, Power, Resistance, SinkTime, Span, Temperature, Voltage};

use crate::{
    Abilities, Cause, Counters, Decoder, EncodeError, HostLine, LINE_BYTES_MAX, LimitKind,
    LineBuffer, Mode, Order, OrderNumber, Readback, ReasonRefused, Reset, SinkLine, SinkState,
    Step, TemperatureReading,
};

const LAST: OrderNumber = OrderNumber(u16::MAX);

fn latest() -> SinkTime {
    SinkTime::from_micros(i64::MAX.unsigned_abs())
}

fn order(order: Order) -> HostLine {
    HostLine::Order {
        number: LAST,
        order,
    }
}

fn refusal(line: &HostLine) -> String {
    let mut buffer = LineBuffer::new();
    HostLine::Off { token: 1 }.encode(&mut buffer).unwrap();
    let error = line.encode(&mut buffer).unwrap_err();
    assert!(
        buffer.as_bytes().is_empty(),
        "a refused line must leave nothing to send"
    );
    error.to_string()
}

fn step(mode: Mode, start: SinkTime, ramp: u64, hold: u64) -> HostLine {
    let (ramp, hold) = (Span::from_micros(ramp), Span::from_micros(hold));
    order(Order::Step(Step {
        mode,
        start,
        ramp,
        hold,
    }))
}

#[test]
fn values_outside_their_range_are_refused_and_named() {
    let ampere = Mode::Current(Current::from_microamperes(1_000_000));
    assert_eq!(
        refusal(&step(
            Mode::Current(Current::from_microamperes(-1)),
            SinkTime::ZERO,
            0,
            1
        )),
        "field TARGET of `step` is -1, the protocol carries 0 to 999999999"
    );
    assert_eq!(
        refusal(&step(ampere, SinkTime::ZERO, 0, 0)),
        "field HOLD of `step` is 0, the protocol carries 1 to 2678400000000"
    );
    assert_eq!(
        refusal(&step(ampere, SinkTime::from_micros(u64::MAX), 0, 1)),
        format!(
            "field START of `step` is {0}, the protocol carries 0 to {0}",
            i64::MAX
        )
    );
    assert_eq!(
        refusal(&HostLine::Hello {
            token: 1,
            session: 0
        }),
        "field SESSION of `hello` is 0, the protocol carries 1 to 4294967295"
    );
    assert_eq!(
        refusal(&HostLine::Order {
            number: OrderNumber::NONE,
            order: Order::Reset
        }),
        "field N of `reset` is 0, the protocol carries 1 to 65535"
    );
    assert_eq!(
        refusal(&order(Order::Deadman {
            interval: Span::from_micros(10_000_001)
        })),
        "field INTERVAL of `deadman` is 10000001, the protocol carries 100000 to 10000000"
    );
    let limit = LimitKind::Power(Power::from_microwatts(1_000_000_000));
    assert_eq!(
        refusal(&order(Order::Limit {
            limit,
            persistence: Span::ZERO
        })),
        "field VALUE of `limit` is 1000000000, the protocol carries 0 to 999999999"
    );
}

#[test]
fn a_burst_line_takes_no_more_samples_than_fit() {
    let mut buffer = LineBuffer::new();
    let widest = (
        Current::from_microamperes(-99_999_999),
        Voltage::from_microvolts(999_999_999),
    );
    let line = |len| SinkLine::Burst {
        burst: u16::MAX,
        index: u16::MAX,
        len,
        samples: [widest; 4],
    };
    assert_eq!(
        line(4).encode(&mut buffer),
        Err(EncodeError::TooLong { kind: "b" })
    );
    assert!(buffer.as_bytes().is_empty());
    assert_eq!(
        line(0).encode(&mut buffer),
        Err(EncodeError::Samples { len: 0 })
    );
    assert_eq!(
        line(5).encode(&mut buffer),
        Err(EncodeError::Samples { len: 5 })
    );
    assert_eq!(line(3).encode(&mut buffer), Ok(()));
}

fn widest_readback() -> SinkLine {
    let current = Current::from_microamperes(-99_999_999);
    let voltage = Voltage::from_microvolts(-99_999_999);
    SinkLine::Readback {
        readback: u16::MAX,
        time_low: u32::MAX,
        values: Readback {
            current,
            current_min: current,
            current_max: current,
            voltage,
            voltage_min: voltage,
            voltage_max: voltage,
            temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(-99_999)),
            state: SinkState::Latched(Cause::Watchdog),
        },
    }
}

fn widest_counters() -> SinkLine {
    SinkLine::Counters {
        readback: u16::MAX,
        counters: Counters {
            time: latest(),
            charge: Charge::from_microcoulombs(i64::MIN),
            energy: Energy::from_microjoules(i64::MIN),
            step: LAST,
            queued: u16::MAX,
            damaged: u16::MAX,
        },
    }
}

#[test]
fn the_longest_lines_fit() {
    let mut buffer = LineBuffer::new();
    let longest = |line: Result<(), EncodeError>, buffer: &LineBuffer, bytes: usize| {
        assert_eq!(line, Ok(()));
        assert_eq!(buffer.as_bytes().len(), bytes, "{buffer:?}");
        assert!(bytes <= LINE_BYTES_MAX);
    };
    let sink_lines = [
        (widest_counters(), 93),
        (widest_readback(), 94),
        (
            SinkLine::No {
                number: LAST,
                reason: ReasonRefused::Session,
            },
            22,
        ),
        (
            SinkLine::Trip {
                event: u16::MAX,
                time: latest(),
                cause: Cause::VoltageHigh,
                value: i64::MIN,
            },
            70,
        ),
        (
            SinkLine::Front {
                token: u16::MAX,
                tick: Span::from_micros(1_000_000),
                queue: u16::MAX,
                fastest: Span::from_micros(3_600_000_000),
                burst: u16::MAX,
                abilities: Abilities {
                    power: true,
                    resistance: true,
                    burst: true,
                    isolator: true,
                },
            },
            51,
        ),
        (
            SinkLine::About {
                token: u16::MAX,
                protocol: u16::MAX,
                firmware: u32::MAX,
                serial: u32::MAX,
                reset: Reset::Watchdog,
            },
            54,
        ),
    ];
    for (line, bytes) in sink_lines {
        longest(line.encode(&mut buffer), &buffer, bytes);
    }
    let resistance = Mode::Resistance(Resistance::from_microohms(i64::from(i32::MAX)));
    let host_line = step(resistance, latest(), 2_678_400_000_000, 2_678_400_000_000);
    longest(host_line.encode(&mut buffer), &buffer, 86);
}

/// A night of twelve hours at a readback pair a tenth of a second is 864,000 lines, to be decoded
/// well within half a second. The fastest of many batches counts, since a test may share its
/// processor, and the bound leaves room for slower ones; the figure is printed.
#[test]
#[expect(clippy::disallowed_methods, reason = "speed is what is tested")]
fn a_nights_lines_are_decoded_within_seconds() {
    const BATCHES: u32 = 40;
    const PAIRS: u32 = 1_000;
    let mut pair = std::vec::Vec::new();
    let mut buffer = LineBuffer::new();
    for line in [widest_counters(), widest_readback()] {
        line.encode(&mut buffer).unwrap();
        pair.extend_from_slice(buffer.as_bytes());
    }
    let bytes = pair.repeat(PAIRS as usize);
    let mut decoder = Decoder::<SinkLine>::new();
    let mut fastest = core::time::Duration::MAX;
    for _ in 0..BATCHES {
        let begun = std::time::Instant::now();
        let messages = decoder
            .feed(&bytes)
            .filter(|line| std::hint::black_box(line).is_ok());
        assert_eq!(messages.count(), 2 * PAIRS as usize);
        fastest = fastest.min(begun.elapsed());
    }
    let each = fastest / (2 * PAIRS);
    println!("{each:?} a line");
    assert!(each.as_nanos() < 2_000, "{each:?} a line");
}
