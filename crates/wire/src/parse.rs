//! From the fields of a checked line to a message, one function per kind.
//!
//! Invariants: called only with a line whose checksum is right; every function takes all of the
//! line's fields or fails.

use quantity::{Charge, Current, Energy, Power, Resistance, Temperature, Voltage};

use crate::decode::LineError;
use crate::field::{self, Field};
use crate::fields::{Fields, in_range};
use crate::message::{
    Abilities, Counters, HostLine, LimitKind, Mode, Order, Readback, SinkLine, SinkState, Step,
    TemperatureReading,
};
use crate::word::Word;

/// Reads a line from the host.
pub(crate) fn host_line(mut fields: Fields<'_>) -> Result<HostLine, LineError> {
    let kind = fields.text()?;
    let line = match kind {
        b"hello" => HostLine::Hello {
            token: fields.number(field::TOKEN)?,
            session: fields.number(field::SESSION)?,
        },
        b"clock" => HostLine::Clock {
            token: fields.number(field::TOKEN)?,
        },
        b"off" => HostLine::Off {
            token: fields.number(field::TOKEN)?,
        },
        _ => {
            let read: fn(&mut Fields<'_>) -> Result<Order, LineError> = match kind {
                b"limit" => limit,
                b"deadman" => deadman,
                b"readback" => readback_interval,
                b"step" => step,
                b"clear" => clear,
                b"reset" => |_| Ok(Order::Reset),
                b"isolator" => isolator,
                b"burst" => burst_order,
                _ => return Err(LineError::UnknownKind),
            };
            let number = fields.order_number(field::NUMBER)?;
            HostLine::Order {
                number,
                order: read(&mut fields)?,
            }
        }
    };
    fields.end()?;
    Ok(line)
}

fn limit(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    let which = fields.text()?;
    let mut value = |field: Field| fields.integer(field);
    let limit = match which {
        b"current" => LimitKind::Current(Current::from_microamperes(value(field::LIMIT_CURRENT)?)),
        b"power" => LimitKind::Power(Power::from_microwatts(value(field::LIMIT_POWER)?)),
        b"voltage-high" => {
            LimitKind::VoltageHigh(Voltage::from_microvolts(value(field::LIMIT_VOLTAGE)?))
        }
        b"voltage-low" => {
            LimitKind::VoltageLow(Voltage::from_microvolts(value(field::LIMIT_VOLTAGE)?))
        }
        b"temperature" => LimitKind::Temperature(Temperature::from_millidegrees_celsius(value(
            field::LIMIT_TEMPERATURE,
        )?)),
        b"excess" => LimitKind::Excess(Current::from_microamperes(value(field::LIMIT_CURRENT)?)),
        _ => return Err(LineError::Word { field: "WHICH" }),
    };
    Ok(Order::Limit {
        limit,
        persistence: fields.span(field::PERSIST)?,
    })
}

fn deadman(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    Ok(Order::Deadman {
        interval: fields.span(field::DEADMAN)?,
    })
}

fn readback_interval(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    Ok(Order::Readback {
        interval: fields.span(field::READBACK)?,
    })
}

fn step(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    let mode = fields.text()?;
    // The word is judged before the start, so that the error names the first wrong field.
    let target: fn(&mut Fields<'_>) -> Result<Mode, LineError> = match mode {
        b"current" => |fields| Ok(Mode::Current(fields.current(field::TARGET_CURRENT)?)),
        b"power" => |fields| {
            fields
                .integer(field::TARGET_POWER)
                .map(Power::from_microwatts)
                .map(Mode::Power)
        },
        b"resistance" => |fields| {
            let microohms = fields.integer(field::TARGET_RESISTANCE)?;
            Ok(Mode::Resistance(Resistance::from_microohms(microohms)))
        },
        _ => return Err(LineError::Word { field: "MODE" }),
    };
    let start = fields.time(field::START)?;
    Ok(Order::Step(Step {
        mode: target(fields)?,
        start,
        ramp: fields.span(field::RAMP)?,
        hold: fields.span(field::HOLD)?,
    }))
}

fn clear(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    Ok(Order::Clear {
        from: fields.time(field::FROM)?,
    })
}

fn isolator(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    Ok(Order::Isolator {
        closed: fields.integer(field::STATE_ISOLATOR)? == 1,
    })
}

fn burst_order(fields: &mut Fields<'_>) -> Result<Order, LineError> {
    Ok(Order::Burst {
        at: fields.time(field::AT)?,
        before: fields.number(field::BEFORE)?,
        after: fields.number(field::AFTER)?,
    })
}

/// Reads a line from the sink.
pub(crate) fn sink_line(mut fields: Fields<'_>) -> Result<SinkLine, LineError> {
    let read: fn(&mut Fields<'_>) -> Result<SinkLine, LineError> = match fields.text()? {
        b"r" => readback,
        b"c" => counters,
        b"b" => burst,
        b"ok" => ok,
        b"no" => no,
        b"clock" => clock,
        b"edge" => edge,
        b"end" => end,
        b"trip" => trip,
        b"about" => about,
        b"front" => front,
        b"drive" => drive,
        b"sense" => sense,
        b"ready" => ready,
        _ => return Err(LineError::UnknownKind),
    };
    let line = read(&mut fields)?;
    fields.end()?;
    Ok(line)
}

fn ok(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    let number = fields.text()?;
    if !fields.more() {
        let number = in_range(field::NUMBER, number)?;
        return narrow(field::NUMBER, number).map(|number| SinkLine::Ok {
            number: crate::OrderNumber(number),
        });
    }
    let token = narrow(field::TOKEN, in_range(field::TOKEN, number)?)?;
    match fields.text()? {
        b"off" => Ok(SinkLine::OffDone { token }),
        _ => Err(LineError::Word { field: "off" }),
    }
}

fn no(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    let number = fields.order_number(field::NUMBER_REFUSED)?;
    let reason = fields.text()?;
    if reason != b"gap" {
        let reason = Word::from_word(reason).ok_or(LineError::Word { field: "REASON" })?;
        return Ok(SinkLine::No { number, reason });
    }
    if !field::NUMBER.holds(i64::from(number.0)) {
        return Err(LineError::Range {
            field: field::NUMBER,
            value: i64::from(number.0),
        });
    }
    Ok(SinkLine::NoGap {
        number,
        expected: fields.order_number(field::EXPECTED)?,
    })
}

fn clock(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Clock {
        token: fields.number(field::TOKEN)?,
        time: fields.time(field::TIME)?,
    })
}

fn counters(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Counters {
        readback: fields.number(field::COUNT)?,
        counters: Counters {
            time: fields.time(field::TIME)?,
            charge: Charge::from_microcoulombs(fields.integer(field::CHARGE)?),
            energy: Energy::from_microjoules(fields.integer(field::ENERGY)?),
            step: fields.order_number(field::STEP_LAST)?,
            queued: fields.number(field::QUEUED)?,
            damaged: fields.number(field::DAMAGED)?,
        },
    })
}

fn readback(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Readback {
        readback: fields.number(field::COUNT)?,
        time_low: fields.number(field::TIME_LOW)?,
        values: Readback {
            current: fields.current(field::CURRENT)?,
            current_min: fields.current(field::CURRENT_MIN)?,
            current_max: fields.current(field::CURRENT_MAX)?,
            voltage: fields.voltage(field::VOLTAGE)?,
            voltage_min: fields.voltage(field::VOLTAGE_MIN)?,
            voltage_max: fields.voltage(field::VOLTAGE_MAX)?,
            temperature: temperature(fields)?,
            state: state(fields)?,
        },
    })
}

fn temperature(fields: &mut Fields<'_>) -> Result<TemperatureReading, LineError> {
    match fields.text()? {
        b"open" => Ok(TemperatureReading::Open),
        b"short" => Ok(TemperatureReading::Short),
        value => in_range(field::TEMPERATURE, value)
            .map(Temperature::from_millidegrees_celsius)
            .map(TemperatureReading::Value),
    }
}

fn state(fields: &mut Fields<'_>) -> Result<SinkState, LineError> {
    let number: u8 = fields.number(field::STATE)?;
    // The numbers between the states and the latches mean nothing in this version.
    SinkState::from_number(number).ok_or(LineError::Range {
        field: field::STATE,
        value: i64::from(number),
    })
}

fn edge(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Edge {
        event: fields.number(field::COUNT)?,
        time: fields.time(field::TIME)?,
        step: fields.order_number(field::STEP_BEGUN)?,
    })
}

fn end(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::End {
        event: fields.number(field::COUNT)?,
        time: fields.time(field::TIME)?,
    })
}

fn trip(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Trip {
        event: fields.number(field::COUNT)?,
        time: fields.time(field::TIME)?,
        cause: fields.word("CAUSE")?,
        value: fields.integer(field::TRIP_VALUE)?,
    })
}

fn burst(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    let burst = fields.number(field::COUNT)?;
    let index = fields.text()?;
    if index == b"done" {
        return Ok(SinkLine::BurstDone { burst });
    }
    let index = narrow(field::INDEX, in_range(field::INDEX, index)?)?;
    let mut samples = [(Current::ZERO, Voltage::ZERO); 4];
    let mut len = 0;
    for sample in &mut samples {
        // The first is taken in any case: a line without samples has too few fields.
        if len > 0 && !fields.more() {
            break;
        }
        *sample = fields.sample()?;
        len += 1;
    }
    Ok(SinkLine::Burst {
        burst,
        index,
        len,
        samples,
    })
}

fn about(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::About {
        token: fields.number(field::TOKEN)?,
        protocol: fields.number(field::PROTOCOL)?,
        firmware: fields.number(field::FIRMWARE)?,
        serial: fields.number(field::SERIAL)?,
        reset: fields.word("RESET")?,
    })
}

fn front(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Front {
        token: fields.number(field::TOKEN)?,
        tick: fields.span(field::TICK)?,
        queue: fields.number(field::QUEUE)?,
        fastest: fields.span(field::FASTEST)?,
        burst: fields.number(field::BURST)?,
        abilities: abilities(fields.number(field::ABILITIES)?),
    })
}

const fn abilities(sum: u8) -> Abilities {
    Abilities {
        power: sum & 1 != 0,
        resistance: sum & 2 != 0,
        burst: sum & 4 != 0,
        isolator: sum & 8 != 0,
    }
}

fn drive(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Drive {
        token: fields.number(field::TOKEN)?,
        bits: fields.number(field::BITS)?,
        full_scale: fields.voltage(field::FULL_SCALE)?,
        span: fields.number(field::SPAN)?,
        sense: Resistance::from_microohms(fields.integer(field::SENSE)?),
    })
}

fn sense(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Sense {
        token: fields.number(field::TOKEN)?,
        bits: fields.number(field::BITS)?,
        current: fields.current(field::SENSE_CURRENT)?,
        voltage: fields.voltage(field::SENSE_VOLTAGE)?,
    })
}

fn ready(fields: &mut Fields<'_>) -> Result<SinkLine, LineError> {
    Ok(SinkLine::Ready {
        token: fields.number(field::TOKEN)?,
        session: fields.number(field::SESSION)?,
        time: fields.time(field::TIME)?,
    })
}

fn narrow(field: Field, value: i64) -> Result<u16, LineError> {
    u16::try_from(value).map_err(|_| LineError::Range { field, value })
}
