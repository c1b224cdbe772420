//! Twelve hours of a simulated sink at a tick of one millisecond, to be timed from outside:
//! `cargo build --release -p simulator --example night`, then `time` the program with `quiet`,
//! `noisy` or `plant` (noise, but no firmware: see what the source and the converters cost).
//!
//! The cell discharges at 0.2 A; readbacks come every 100 ms.
#![expect(
    clippy::print_stdout,
    reason = "an example says what it found; it is not part of the library"
)]

use quantity::{Current, Power, Resistance, SinkTime, Span, Temperature, Voltage};
use simulator::{Cell, Errors, FirmwareConfig, SimulatedSink, SinkParts, Source, Spread, Start};
use wire::{Abilities, HostLine, LimitKind, LineBuffer, Mode, Order, OrderNumber, Step};

type Outcome<T> = Result<T, Box<dyn std::error::Error>>;

fn figures() -> Outcome<FirmwareConfig> {
    Ok(FirmwareConfig {
        serial: 1,
        tick: Span::from_millis(1),
        queue: 32,
        fastest_readback: Span::from_millis(10),
        burst: 0,
        abilities: Abilities::default(),
        drive_bits: 12,
        drive_full_scale: Voltage::from_volts(0.33)?,
        drive_spans_full_scale: false,
        sense_resistor: Resistance::from_ohms(0.1)?,
        sense_bits: 12,
        sense_current: Current::from_amperes(3.3)?,
        sense_voltage: Voltage::from_volts(9.9)?,
    })
}

fn sink(noisy: bool) -> Outcome<SimulatedSink> {
    let start = Start {
        state_of_charge: 1.0,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    let cell = Cell::new(&simulator::cell::type_k(), Spread::default(), start)?;
    let mut parts = SinkParts::error_free(figures()?, Source::Cell(Box::new(cell)));
    if noisy {
        parts.errors = Errors {
            current_noise_a: 6e-4,
            voltage_noise_v: 1.5e-3,
            temperature_noise_k: 0.05,
            loop_time_constant_s: 2e-4,
            ..Errors::default()
        };
    }
    Ok(SimulatedSink::new(parts)?)
}

fn say(sink: &mut SimulatedSink, line: &HostLine) -> Outcome<()> {
    let mut text = LineBuffer::default();
    line.encode(&mut text).map_err(|error| error.to_string())?;
    sink.receive(text.as_bytes());
    Ok(())
}

fn begin(sink: &mut SimulatedSink) -> Outcome<()> {
    say(
        sink,
        &HostLine::Hello {
            token: 1,
            session: 1,
        },
    )?;
    let limits = [
        LimitKind::Current(Current::from_amperes(3.0)?),
        LimitKind::Power(Power::from_watts(15.0)?),
        LimitKind::VoltageHigh(Voltage::from_volts(5.0)?),
        LimitKind::VoltageLow(Voltage::from_volts(1.0)?),
        LimitKind::Temperature(Temperature::from_degrees_celsius(80.0)?),
        LimitKind::Excess(Current::from_amperes(0.2)?),
    ];
    let persistence = Span::from_millis(20);
    let mut orders: Vec<Order> = limits
        .into_iter()
        .map(|limit| Order::Limit { limit, persistence })
        .collect();
    orders.push(Order::Deadman {
        interval: Span::from_secs(10),
    });
    orders.push(Order::Readback {
        interval: Span::from_millis(100),
    });
    orders.push(Order::Step(Step {
        mode: Mode::Current(Current::from_amperes(0.2)?),
        start: SinkTime::ZERO,
        ramp: Span::ZERO,
        hold: Span::from_secs(13 * 3600),
    }));
    for (number, order) in (1..).zip(orders) {
        let number = OrderNumber(number);
        say(sink, &HostLine::Order { number, order })?;
    }
    Ok(())
}

fn main() -> Outcome<()> {
    let how = std::env::args().nth(1).unwrap_or_default();
    let mut sink = sink(how != "quiet")?;
    begin(&mut sink)?;
    let mut out = Vec::new();
    let mut bytes = 0;
    for seconds in (5..=12 * 3600).step_by(5) {
        if how == "plant" {
            sink.advance(Span::from_secs(seconds), &mut out);
        } else {
            sink.advance(Span::from_secs(seconds), &mut out);
            bytes += out.len();
            out.clear();
            say(&mut sink, &HostLine::Clock { token: 1 })?;
        }
    }
    let truth = sink.truth();
    println!(
        "{bytes} bytes, {:.6} Ah, {:.6} Wh",
        truth.charge_c / 3600.0,
        truth.terminal_j / 3600.0
    );
    Ok(())
}
