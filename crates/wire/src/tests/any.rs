//! Generators: every message the protocol can carry, and nothing else.

use proptest::prelude::*;
use quantity::{Charge, Current, Energy, Power, Resistance, SinkTime, Span, Temperature, Voltage};
use std::vec;
use std::vec::Vec;

use crate::{
    Abilities, Cause, Counters, HostLine, LimitKind, LineBuffer, Mode, Order, OrderNumber,
    Readback, ReasonRefused, Reset, SinkLine, SinkState, Step, TemperatureReading,
};

const MEASURED: core::ops::RangeInclusive<i64> = -99_999_999..=999_999_999;
const POSITIVE: core::ops::RangeInclusive<i64> = 1..=999_999_999;

/// Mostly anything of the range, often its ends: the worst cases live there.
fn within(range: core::ops::RangeInclusive<i64>) -> impl Strategy<Value = i64> {
    let (least, most) = (*range.start(), *range.end());
    prop_oneof![4 => range, 1 => Just(least), 1 => Just(most)]
}

fn micros(most: i64) -> impl Strategy<Value = u64> {
    within(0..=most).prop_map(i64::unsigned_abs)
}

fn span(least: i64, most: i64) -> impl Strategy<Value = Span> {
    within(least..=most).prop_map(|value| Span::from_micros(value.unsigned_abs()))
}

fn time() -> impl Strategy<Value = SinkTime> {
    prop_oneof![micros(i64::MAX), micros(50_000_000_000)].prop_map(SinkTime::from_micros)
}

fn current() -> impl Strategy<Value = Current> {
    within(MEASURED).prop_map(Current::from_microamperes)
}

fn voltage() -> impl Strategy<Value = Voltage> {
    within(MEASURED).prop_map(Voltage::from_microvolts)
}

fn temperature() -> impl Strategy<Value = Temperature> {
    within(-99_999..=999_999).prop_map(Temperature::from_millidegrees_celsius)
}

fn count() -> impl Strategy<Value = u16> {
    prop_oneof![1..=u16::MAX, Just(1), Just(u16::MAX)]
}

fn number() -> impl Strategy<Value = OrderNumber> {
    count().prop_map(OrderNumber)
}

fn limit() -> impl Strategy<Value = LimitKind> {
    prop_oneof![
        within(0..=999_999_999).prop_map(|v| LimitKind::Current(Current::from_microamperes(v))),
        within(0..=999_999_999).prop_map(|v| LimitKind::Power(Power::from_microwatts(v))),
        voltage().prop_map(LimitKind::VoltageHigh),
        voltage().prop_map(LimitKind::VoltageLow),
        temperature().prop_map(LimitKind::Temperature),
        within(0..=999_999_999).prop_map(|v| LimitKind::Excess(Current::from_microamperes(v))),
    ]
}

fn mode() -> impl Strategy<Value = Mode> {
    prop_oneof![
        within(0..=999_999_999).prop_map(|v| Mode::Current(Current::from_microamperes(v))),
        within(0..=999_999_999).prop_map(|v| Mode::Power(Power::from_microwatts(v))),
        within(1..=2_147_483_647).prop_map(|v| Mode::Resistance(Resistance::from_microohms(v))),
    ]
}

fn order() -> impl Strategy<Value = Order> {
    let step_span = 2_678_400_000_000;
    prop_oneof![
        (limit(), span(0, 60_000_000))
            .prop_map(|(limit, persistence)| Order::Limit { limit, persistence }),
        span(100_000, 10_000_000).prop_map(|interval| Order::Deadman { interval }),
        span(0, 3_600_000_000).prop_map(|interval| Order::Readback { interval }),
        (mode(), time(), span(0, step_span), span(1, step_span)).prop_map(
            |(mode, start, ramp, hold)| Order::Step(Step {
                mode,
                start,
                ramp,
                hold
            })
        ),
        time().prop_map(|from| Order::Clear { from }),
        Just(Order::Reset),
        any::<bool>().prop_map(|closed| Order::Isolator { closed }),
        (time(), any::<u16>(), any::<u16>()).prop_map(|(at, before, after)| Order::Burst {
            at,
            before,
            after
        }),
    ]
}

/// Every line a host can send.
pub(super) fn host_line() -> impl Strategy<Value = HostLine> {
    prop_oneof![
        1 => (any::<u16>(), 1..=u32::MAX)
            .prop_map(|(token, session)| HostLine::Hello { token, session }),
        1 => any::<u16>().prop_map(|token| HostLine::Clock { token }),
        1 => any::<u16>().prop_map(|token| HostLine::Off { token }),
        8 => (number(), order()).prop_map(|(number, order)| HostLine::Order { number, order }),
    ]
}

/// The causes, each of them.
pub(super) const CAUSES: [Cause; 9] = [
    Cause::Current,
    Cause::Power,
    Cause::VoltageHigh,
    Cause::VoltageLow,
    Cause::Temperature,
    Cause::Excess,
    Cause::Sensor,
    Cause::Deadman,
    Cause::Watchdog,
];

/// The reasons, each of them.
pub(super) const REASONS: [ReasonRefused; 10] = [
    ReasonRefused::Session,
    ReasonRefused::Unknown,
    ReasonRefused::Range,
    ReasonRefused::Limit,
    ReasonRefused::Unready,
    ReasonRefused::Full,
    ReasonRefused::Late,
    ReasonRefused::Latched,
    ReasonRefused::Cause,
    ReasonRefused::Ability,
];

/// The resets, each of them.
pub(super) const RESETS: [Reset; 5] = [
    Reset::Power,
    Reset::Pin,
    Reset::Watchdog,
    Reset::Software,
    Reset::Unknown,
];

fn cause() -> impl Strategy<Value = Cause> {
    proptest::sample::select(&CAUSES[..])
}

fn state() -> impl Strategy<Value = SinkState> {
    prop_oneof![
        Just(SinkState::Off),
        Just(SinkState::On),
        Just(SinkState::Saturated),
        cause().prop_map(SinkState::Latched),
    ]
}

fn counters() -> impl Strategy<Value = Counters> {
    let wide = i64::MIN..=i64::MAX;
    (
        time(),
        within(wide.clone()),
        within(wide),
        any::<u16>(),
        any::<u16>(),
        any::<u16>(),
    )
        .prop_map(|(time, charge, energy, step, queued, damaged)| Counters {
            time,
            charge: Charge::from_microcoulombs(charge),
            energy: Energy::from_microjoules(energy),
            step: OrderNumber(step),
            queued,
            damaged,
        })
}

fn readback() -> impl Strategy<Value = Readback> {
    let temperature = prop_oneof![
        4 => temperature().prop_map(TemperatureReading::Value),
        1 => Just(TemperatureReading::Open),
        1 => Just(TemperatureReading::Short),
    ];
    let currents = [current().boxed(), current().boxed(), current().boxed()];
    let voltages = [voltage().boxed(), voltage().boxed(), voltage().boxed()];
    (currents, voltages, temperature, state()).prop_map(
        |(
            [current, current_min, current_max],
            [voltage, voltage_min, voltage_max],
            temperature,
            state,
        )| {
            Readback {
                current,
                current_min,
                current_max,
                voltage,
                voltage_min,
                voltage_max,
                temperature,
                state,
            }
        },
    )
}

fn burst() -> impl Strategy<Value = SinkLine> {
    // Three samples always fit in a line; a fourth does when the values are short.
    let long = proptest::collection::vec((current(), voltage()), 1..=3);
    let short = proptest::collection::vec(
        (
            (-9_999_999_i64..=99_999_999).prop_map(Current::from_microamperes),
            (-9_999_999_i64..=99_999_999).prop_map(Voltage::from_microvolts),
        ),
        1..=4,
    );
    (count(), any::<u16>(), prop_oneof![long, short]).prop_map(|(burst, index, taken)| {
        let mut samples = [(Current::ZERO, Voltage::ZERO); 4];
        samples[..taken.len()].copy_from_slice(&taken);
        SinkLine::Burst {
            burst,
            index,
            len: u8::try_from(taken.len()).unwrap(),
            samples,
        }
    })
}

fn description() -> impl Strategy<Value = SinkLine> {
    let token = any::<u16>;
    let bits = || 1..=32_u8;
    prop_oneof![
        (
            token(),
            count(),
            any::<u32>(),
            any::<u32>(),
            proptest::sample::select(&RESETS[..])
        )
            .prop_map(
                |(token, protocol, firmware, serial, reset)| SinkLine::About {
                    token,
                    protocol,
                    firmware,
                    serial,
                    reset
                }
            ),
        (
            token(),
            span(1, 1_000_000),
            16..=u16::MAX,
            span(1, 3_600_000_000),
            token(),
            any::<[bool; 4]>()
        )
            .prop_map(
                |(token, tick, queue, fastest, burst, [power, resistance, captures, isolator])| {
                    let abilities = Abilities {
                        power,
                        resistance,
                        burst: captures,
                        isolator,
                    };
                    SinkLine::Front {
                        token,
                        tick,
                        queue,
                        fastest,
                        burst,
                        abilities,
                    }
                }
            ),
        (
            token(),
            bits(),
            within(POSITIVE),
            0..=1_u8,
            within(POSITIVE)
        )
            .prop_map(|(token, bits, full_scale, span, sense)| SinkLine::Drive {
                token,
                bits,
                full_scale: Voltage::from_microvolts(full_scale),
                span,
                sense: Resistance::from_microohms(sense)
            }),
        (token(), bits(), within(POSITIVE), within(POSITIVE)).prop_map(
            |(token, bits, current, voltage)| SinkLine::Sense {
                token,
                bits,
                current: Current::from_microamperes(current),
                voltage: Voltage::from_microvolts(voltage)
            }
        ),
        (token(), 1..=u32::MAX, time()).prop_map(|(token, session, time)| SinkLine::Ready {
            token,
            session,
            time
        }),
    ]
}

/// Every line a sink can send.
pub(super) fn sink_line() -> impl Strategy<Value = SinkLine> {
    prop_oneof![
        1 => number().prop_map(|number| SinkLine::Ok { number }),
        1 => any::<u16>().prop_map(|token| SinkLine::OffDone { token }),
        1 => (any::<u16>(), proptest::sample::select(&REASONS[..]))
            .prop_map(|(number, reason)| SinkLine::No { number: OrderNumber(number), reason }),
        1 => (number(), number()).prop_map(|(number, expected)| SinkLine::NoGap { number, expected }),
        1 => (any::<u16>(), time()).prop_map(|(token, time)| SinkLine::Clock { token, time }),
        3 => (count(), counters())
            .prop_map(|(readback, counters)| SinkLine::Counters { readback, counters }),
        5 => (count(), any::<u32>(), readback()).prop_map(|(readback, time_low, values)| {
            SinkLine::Readback { readback, time_low, values }
        }),
        1 => (count(), time(), number())
            .prop_map(|(event, time, step)| SinkLine::Edge { event, time, step }),
        1 => (count(), time()).prop_map(|(event, time)| SinkLine::End { event, time }),
        1 => (count(), time(), cause(), within(i64::MIN..=i64::MAX))
            .prop_map(|(event, time, cause, value)| SinkLine::Trip { event, time, cause, value }),
        3 => burst(),
        1 => count().prop_map(|burst| SinkLine::BurstDone { burst }),
        3 => description(),
    ]
}

/// The line of a host message.
pub(super) fn host_bytes(line: &HostLine) -> Vec<u8> {
    let mut buffer = LineBuffer::new();
    line.encode(&mut buffer)
        .expect("the generators keep to the ranges");
    buffer.as_bytes().to_vec()
}

/// The line of a sink message.
pub(super) fn sink_bytes(line: &SinkLine) -> Vec<u8> {
    let mut buffer = LineBuffer::new();
    line.encode(&mut buffer)
        .expect("the generators keep to the ranges");
    buffer.as_bytes().to_vec()
}
