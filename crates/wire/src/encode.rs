//! From a message to its line.
//!
//! Invariants: what is encoded decodes to the same message; what would break a range of the
//! protocol is refused here, before it can reach a port.

use crate::field;
use crate::line::{EncodeError, LineBuffer, Writer};
use crate::message::{
    Abilities, Counters, HostLine, LimitKind, Mode, Order, OrderNumber, Readback, SinkLine, Step,
    TemperatureReading,
};
use quantity::{Current, Voltage};

impl HostLine {
    /// Writes the line with its checksum and line end.
    ///
    /// # Errors
    ///
    /// [`EncodeError`] if a value is outside the protocol's range; the buffer is then empty.
    pub fn encode(&self, line: &mut LineBuffer) -> Result<(), EncodeError> {
        match *self {
            Self::Hello { token, session } => Writer::new(line, "hello")
                .number(field::TOKEN, token)
                .number(field::SESSION, session)
                .finish(),
            Self::Clock { token } => Writer::new(line, "clock")
                .number(field::TOKEN, token)
                .finish(),
            Self::Off { token } => Writer::new(line, "off")
                .number(field::TOKEN, token)
                .finish(),
            Self::Order { number, ref order } => encode_order(line, number, order),
        }
    }
}

impl Order {
    /// The first word of the order's line.
    pub const fn kind(&self) -> &'static str {
        match self {
            Self::Limit { .. } => "limit",
            Self::Deadman { .. } => "deadman",
            Self::Readback { .. } => "readback",
            Self::Step(_) => "step",
            Self::Clear { .. } => "clear",
            Self::Reset => "reset",
            Self::Isolator { .. } => "isolator",
            Self::Burst { .. } => "burst",
        }
    }
}

fn encode_order(
    line: &mut LineBuffer,
    number: OrderNumber,
    order: &Order,
) -> Result<(), EncodeError> {
    let mut writer = Writer::new(line, order.kind());
    writer.number(field::NUMBER, number.0);
    match *order {
        Order::Limit { limit, persistence } => {
            limit_fields(&mut writer, limit);
            writer.micros(field::PERSIST, persistence.micros());
        }
        Order::Deadman { interval } => {
            writer.micros(field::DEADMAN, interval.micros());
        }
        Order::Readback { interval } => {
            writer.micros(field::READBACK, interval.micros());
        }
        Order::Step(step) => step_fields(&mut writer, &step),
        Order::Clear { from } => {
            writer.micros(field::FROM, from.micros());
        }
        Order::Reset => {}
        Order::Isolator { closed } => {
            writer.number(field::STATE_ISOLATOR, u8::from(closed));
        }
        Order::Burst { at, before, after } => {
            writer
                .micros(field::AT, at.micros())
                .number(field::BEFORE, before)
                .number(field::AFTER, after);
        }
    }
    writer.finish()
}

fn limit_fields(writer: &mut Writer<'_>, limit: LimitKind) {
    writer.word(limit.word());
    match limit {
        LimitKind::Current(current) | LimitKind::Excess(current) => {
            writer.number(field::LIMIT_CURRENT, current.microamperes());
        }
        LimitKind::Power(power) => {
            writer.number(field::LIMIT_POWER, power.microwatts());
        }
        LimitKind::VoltageHigh(voltage) | LimitKind::VoltageLow(voltage) => {
            writer.number(field::LIMIT_VOLTAGE, voltage.microvolts());
        }
        LimitKind::Temperature(temperature) => {
            writer.number(field::LIMIT_TEMPERATURE, temperature.millidegrees_celsius());
        }
    }
}

fn step_fields(writer: &mut Writer<'_>, step: &Step) {
    writer
        .word(step.mode.word())
        .micros(field::START, step.start.micros());
    match step.mode {
        Mode::Current(current) => writer.number(field::TARGET_CURRENT, current.microamperes()),
        Mode::Power(power) => writer.number(field::TARGET_POWER, power.microwatts()),
        Mode::Resistance(resistance) => {
            writer.number(field::TARGET_RESISTANCE, resistance.microohms())
        }
    };
    writer
        .micros(field::RAMP, step.ramp.micros())
        .micros(field::HOLD, step.hold.micros());
}

impl SinkLine {
    /// Writes the line with its checksum and line end.
    ///
    /// # Errors
    ///
    /// [`EncodeError`] if a value is outside the protocol's range, or if burst samples do not
    /// fit in one line; the buffer is then empty.
    #[expect(clippy::too_many_lines, reason = "one arm a kind, and nothing else")]
    pub fn encode(&self, line: &mut LineBuffer) -> Result<(), EncodeError> {
        match *self {
            Self::Ok { number } => Writer::new(line, "ok")
                .number(field::NUMBER, number.0)
                .finish(),
            Self::OffDone { token } => Writer::new(line, "ok")
                .number(field::TOKEN, token)
                .word("off")
                .finish(),
            Self::No { number, reason } => Writer::new(line, "no")
                .number(field::NUMBER_REFUSED, number.0)
                .word(reason.word())
                .finish(),
            Self::NoGap { number, expected } => Writer::new(line, "no")
                .number(field::NUMBER, number.0)
                .word("gap")
                .number(field::EXPECTED, expected.0)
                .finish(),
            Self::Clock { token, time } => Writer::new(line, "clock")
                .number(field::TOKEN, token)
                .micros(field::TIME, time.micros())
                .finish(),
            Self::Counters { readback, counters } => encode_counters(line, readback, &counters),
            Self::Readback {
                readback,
                time_low,
                values,
            } => encode_readback(line, readback, time_low, &values),
            Self::Edge { event, time, step } => Writer::new(line, "edge")
                .number(field::COUNT, event)
                .micros(field::TIME, time.micros())
                .number(field::STEP_BEGUN, step.0)
                .finish(),
            Self::End { event, time } => Writer::new(line, "end")
                .number(field::COUNT, event)
                .micros(field::TIME, time.micros())
                .finish(),
            Self::Trip {
                event,
                time,
                cause,
                value,
            } => Writer::new(line, "trip")
                .number(field::COUNT, event)
                .micros(field::TIME, time.micros())
                .word(cause.word())
                .number(field::TRIP_VALUE, value)
                .finish(),
            Self::Burst {
                burst,
                index,
                len,
                samples,
            } => encode_burst(line, burst, index, len, &samples),
            Self::BurstDone { burst } => Writer::new(line, "b")
                .number(field::COUNT, burst)
                .word("done")
                .finish(),
            Self::About {
                token,
                protocol,
                firmware,
                serial,
                reset,
            } => Writer::new(line, "about")
                .number(field::TOKEN, token)
                .number(field::PROTOCOL, protocol)
                .number(field::FIRMWARE, firmware)
                .number(field::SERIAL, serial)
                .word(reset.word())
                .finish(),
            Self::Front {
                token,
                tick,
                queue,
                fastest,
                burst,
                abilities,
            } => Writer::new(line, "front")
                .number(field::TOKEN, token)
                .micros(field::TICK, tick.micros())
                .number(field::QUEUE, queue)
                .micros(field::FASTEST, fastest.micros())
                .number(field::BURST, burst)
                .number(field::ABILITIES, encode_abilities(abilities))
                .finish(),
            Self::Drive {
                token,
                bits,
                full_scale,
                span,
                sense,
            } => Writer::new(line, "drive")
                .number(field::TOKEN, token)
                .number(field::BITS, bits)
                .number(field::FULL_SCALE, full_scale.microvolts())
                .number(field::SPAN, span)
                .number(field::SENSE, sense.microohms())
                .finish(),
            Self::Sense {
                token,
                bits,
                current,
                voltage,
            } => Writer::new(line, "sense")
                .number(field::TOKEN, token)
                .number(field::BITS, bits)
                .number(field::SENSE_CURRENT, current.microamperes())
                .number(field::SENSE_VOLTAGE, voltage.microvolts())
                .finish(),
            Self::Ready {
                token,
                session,
                time,
            } => Writer::new(line, "ready")
                .number(field::TOKEN, token)
                .number(field::SESSION, session)
                .micros(field::TIME, time.micros())
                .finish(),
        }
    }
}

fn encode_counters(
    line: &mut LineBuffer,
    readback: u16,
    counters: &Counters,
) -> Result<(), EncodeError> {
    Writer::new(line, "c")
        .number(field::COUNT, readback)
        .micros(field::TIME, counters.time.micros())
        .number(field::CHARGE, counters.charge.microcoulombs())
        .number(field::ENERGY, counters.energy.microjoules())
        .number(field::STEP_LAST, counters.step.0)
        .number(field::QUEUED, counters.queued)
        .number(field::DAMAGED, counters.damaged)
        .finish()
}

fn encode_readback(
    line: &mut LineBuffer,
    readback: u16,
    time_low: u32,
    values: &Readback,
) -> Result<(), EncodeError> {
    let mut writer = Writer::new(line, "r");
    writer
        .number(field::COUNT, readback)
        .number(field::TIME_LOW, time_low)
        .number(field::CURRENT, values.current.microamperes())
        .number(field::CURRENT_MIN, values.current_min.microamperes())
        .number(field::CURRENT_MAX, values.current_max.microamperes())
        .number(field::VOLTAGE, values.voltage.microvolts())
        .number(field::VOLTAGE_MIN, values.voltage_min.microvolts())
        .number(field::VOLTAGE_MAX, values.voltage_max.microvolts());
    match values.temperature {
        TemperatureReading::Value(value) => {
            writer.number(field::TEMPERATURE, value.millidegrees_celsius())
        }
        TemperatureReading::Open => writer.word("open"),
        TemperatureReading::Short => writer.word("short"),
    };
    writer.number(field::STATE, values.state.number()).finish()
}

fn encode_burst(
    line: &mut LineBuffer,
    burst: u16,
    index: u16,
    len: u8,
    samples: &[(Current, Voltage); 4],
) -> Result<(), EncodeError> {
    let mut writer = Writer::new(line, "b");
    writer
        .number(field::COUNT, burst)
        .number(field::INDEX, index);
    if !(1..=4).contains(&len) {
        writer.fail(EncodeError::Samples { len });
    }
    for (current, voltage) in samples.iter().take(usize::from(len)) {
        writer
            .number(field::CURRENT, current.microamperes())
            .number(field::VOLTAGE, voltage.microvolts());
    }
    writer.finish()
}

fn encode_abilities(abilities: Abilities) -> u8 {
    let Abilities {
        power,
        resistance,
        burst,
        isolator,
    } = abilities;
    u8::from(power) | u8::from(resistance) << 1 | u8::from(burst) << 2 | u8::from(isolator) << 3
}
