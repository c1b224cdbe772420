//! Words, numbers that stand for states, order numbers, and orders as people read them.

use std::string::{String, ToString};
use std::vec::Vec;

use expect_test::expect;
use quantity::{Current, Power, Resistance, SinkTime, Span, Temperature, Voltage};

use super::any::{CAUSES, REASONS, RESETS};
use crate::word::Word;
use crate::{Cause, LimitKind, Mode, Order, OrderNumber, ReasonRefused, Reset, SinkState, Step};

#[test]
fn every_word_reads_back_as_itself() {
    for cause in CAUSES {
        assert_eq!(Cause::from_word(cause.to_string().as_bytes()), Some(cause));
    }
    for reason in REASONS {
        assert_eq!(
            ReasonRefused::from_word(reason.to_string().as_bytes()),
            Some(reason)
        );
    }
    for reset in RESETS {
        assert_eq!(Reset::from_word(reset.to_string().as_bytes()), Some(reset));
    }
    assert_eq!(Cause::from_word(b"Current"), None);
    assert_eq!(Cause::from_word(b""), None);
}

#[test]
fn every_state_has_one_number_and_other_numbers_have_no_state() {
    let known: Vec<u8> = (0..=u8::MAX)
        .filter(|number| SinkState::from_number(*number).is_some())
        .collect();
    assert_eq!(known, [0, 1, 2, 17, 18, 19, 20, 21, 22, 23, 24, 25]);
    for number in known {
        assert_eq!(
            SinkState::from_number(number).map(SinkState::number),
            Some(number)
        );
    }
}

#[test]
fn order_numbers_run_from_one_to_65535_and_never_give_zero() {
    assert_eq!(OrderNumber::NONE.next(), OrderNumber::FIRST);
    assert_eq!(OrderNumber(65_534).next(), OrderNumber(65_535));
    assert_eq!(OrderNumber(65_535).next(), OrderNumber::FIRST);
}

fn step(mode: Mode, start: u64, ramp: u64, hold: u64) -> Order {
    Order::Step(Step {
        mode,
        start: SinkTime::from_micros(start),
        ramp: Span::from_micros(ramp),
        hold: Span::from_micros(hold),
    })
}

fn limit(limit: LimitKind, persistence: u64) -> Order {
    Order::Limit {
        limit,
        persistence: Span::from_micros(persistence),
    }
}

#[test]
fn orders_read_as_a_person_would_say_them() {
    let current = |microamperes| Mode::Current(Current::from_microamperes(microamperes));
    let orders = [
        step(current(640_000), 12_000_000, 0, 18_000_000_000),
        step(current(420_000), 0, 120_000, 500_000),
        step(current(0), 1_999_999, 0, 60_000_000),
        step(
            Mode::Power(Power::from_microwatts(2_500_000)),
            5_000_000,
            0,
            1_000_000,
        ),
        step(
            Mode::Resistance(Resistance::from_microohms(8_200_000)),
            5_000_000,
            0,
            1_000_000,
        ),
        limit(LimitKind::Current(Current::from_microamperes(3_200_000)), 0),
        limit(LimitKind::Power(Power::from_microwatts(12_000_000)), 1_000),
        limit(
            LimitKind::VoltageHigh(Voltage::from_microvolts(4_300_000)),
            0,
        ),
        limit(
            LimitKind::VoltageLow(Voltage::from_microvolts(2_700_000)),
            10_000,
        ),
        limit(
            LimitKind::Temperature(Temperature::from_millidegrees_celsius(85_000)),
            0,
        ),
        limit(LimitKind::Excess(Current::from_microamperes(50_000)), 5_000),
        Order::Deadman {
            interval: Span::from_micros(2_000_000),
        },
        Order::Readback {
            interval: Span::from_micros(100_000),
        },
        Order::Readback {
            interval: Span::ZERO,
        },
        Order::Clear {
            from: SinkTime::ZERO,
        },
        Order::Clear {
            from: SinkTime::from_micros(12_500_000),
        },
        Order::Reset,
        Order::Isolator { closed: true },
        Order::Isolator { closed: false },
        Order::Burst {
            at: SinkTime::from_micros(12_000_000),
            before: 50,
            after: 200,
        },
    ];
    let lines: Vec<String> = orders.iter().map(ToString::to_string).collect();
    expect![[r"
        step: 640 mA from 12.000 s, hold 5 h
        step: 420 mA at once, ramp 120 ms, hold 500 ms
        step: rest from 1.999 s, hold 1 min
        step: 2.5 W from 5.000 s, hold 1 s
        step: 8.2 ohm from 5.000 s, hold 1 s
        limit: current above 3.2 A
        limit: power above 12 W for 1 ms
        limit: voltage above 4.3 V
        limit: voltage below 2.7 V for 10 ms
        limit: temperature above 85 degC
        limit: current above the setpoint by 50 mA for 5 ms
        deadman: 2 s
        readback: every 100 ms
        readback: stopped
        clear: all steps
        clear: steps from 12.500 s on
        reset
        isolator: close
        isolator: open
        burst: 50 samples before 12.000 s, 200 from then on
    "]]
    .assert_eq(&(lines.join("\n") + "\n"));
}

#[test]
fn a_state_names_the_cause_of_its_latch() {
    assert_eq!(
        SinkState::Latched(Cause::VoltageLow).to_string(),
        "latched: voltage-low"
    );
    assert_eq!(SinkState::Saturated.to_string(), "out of headroom");
}
