//! The simulated sink as a host meets it, held against the ledger of what truly happened.

mod faults;
mod limits_of_the_source;
mod sameness;
mod truth;

use quantity::{Current, Power, Resistance, SinkTime, Span, Temperature, Voltage};
use wire::{
    Abilities, Decoder, HostLine, LimitKind, LineBuffer, Mode, Order, OrderNumber, Readback,
    SinkLine, Step,
};

use super::*;
use crate::cell::{Cell, Spread, Start, type_k, type_m};

/// The figures of a sink for 3 A with a sense resistor of 0.1 ohm and converters of 16 bits.
pub(super) fn figures() -> FirmwareConfig {
    FirmwareConfig {
        serial: 1,
        tick: Span::from_millis(1),
        queue: 32,
        fastest_readback: Span::from_millis(10),
        burst: 256,
        abilities: Abilities {
            power: true,
            resistance: true,
            burst: true,
            isolator: false,
        },
        drive_bits: 16,
        drive_full_scale: Voltage::from_volts(0.4096).unwrap(),
        drive_spans_full_scale: false,
        sense_resistor: Resistance::from_ohms(0.1).unwrap(),
        sense_bits: 16,
        sense_current: Current::from_amperes(4.096).unwrap(),
        sense_voltage: Voltage::from_volts(8.192).unwrap(),
    }
}

pub(super) fn cell_k(state_of_charge: f64) -> Source {
    cell(&type_k(), state_of_charge)
}

pub(super) fn cell_m(state_of_charge: f64) -> Source {
    cell(&type_m(), state_of_charge)
}

fn cell(model: &crate::Model, state_of_charge: f64) -> Source {
    let start = Start {
        state_of_charge,
        temperature_degc: 23.0,
        ambient_degc: 23.0,
    };
    Source::Cell(Box::new(
        Cell::new(model, Spread::default(), start).unwrap(),
    ))
}

pub(super) fn amperes(value: f64) -> Mode {
    Mode::Current(Current::from_amperes(value).unwrap())
}

/// A host without a session of its own: sends what a test says, keeps all that comes back.
#[derive(Clone)]
pub(super) struct Host {
    pub(super) sink: SimulatedSink,
    pub(super) bytes: Vec<u8>,
    next: u16,
}

impl Host {
    pub(super) fn new(parts: SinkParts) -> Self {
        Self {
            sink: SimulatedSink::new(parts).unwrap(),
            bytes: Vec::new(),
            next: 1,
        }
    }

    pub(super) fn say(&mut self, line: &HostLine) {
        let mut text = LineBuffer::default();
        line.encode(&mut text).unwrap();
        self.sink.receive(text.as_bytes());
    }

    pub(super) fn order(&mut self, order: Order) {
        let number = OrderNumber(self.next);
        self.next += 1;
        self.say(&HostLine::Order { number, order });
        self.wait_ms(2);
    }

    /// Begins a session with wide limits, a long deadman and a readback interval.
    pub(super) fn begin(&mut self, readback: Span) {
        self.next = 1;
        self.say(&HostLine::Hello {
            token: 1,
            session: 7,
        });
        self.wait_ms(5);
        let limits = [
            LimitKind::Current(Current::from_amperes(4.0).unwrap()),
            LimitKind::Power(Power::from_watts(30.0).unwrap()),
            LimitKind::VoltageHigh(Voltage::from_volts(8.0).unwrap()),
            LimitKind::VoltageLow(Voltage::from_volts(0.0).unwrap()),
            LimitKind::Temperature(Temperature::from_degrees_celsius(80.0).unwrap()),
            LimitKind::Excess(Current::from_amperes(0.1).unwrap()),
        ];
        for limit in limits {
            let persistence = Span::from_millis(5);
            self.order(Order::Limit { limit, persistence });
        }
        self.order(Order::Deadman {
            interval: Span::from_secs(10),
        });
        self.order(Order::Readback { interval: readback });
    }

    pub(super) fn step(&mut self, mode: Mode, ramp: Span, hold: Span) {
        self.order(Order::Step(Step {
            mode,
            start: SinkTime::ZERO,
            ramp,
            hold,
        }));
    }

    pub(super) fn wait_ms(&mut self, millis: u64) {
        let until = self.sink.now() + Span::from_millis(millis);
        self.sink.advance(until, &mut self.bytes);
    }

    /// Waits, keeping the deadman quiet.
    pub(super) fn wait_s(&mut self, seconds: u64) {
        for second in 0..seconds {
            if second % 5 == 0 {
                self.say(&HostLine::Clock { token: 2 });
            }
            self.wait_ms(1000);
        }
    }

    pub(super) fn heard(&self) -> Vec<SinkLine> {
        let mut decoder = Decoder::<SinkLine>::new();
        decoder.feed(&self.bytes).map(Result::unwrap).collect()
    }

    pub(super) fn readbacks(&self) -> Vec<Readback> {
        let mut readbacks = Vec::new();
        for line in self.heard() {
            if let SinkLine::Readback { values, .. } = line {
                readbacks.push(values);
            }
        }
        readbacks
    }

    pub(super) fn counters(&self) -> wire::Counters {
        let mut last = None;
        for line in self.heard() {
            if let SinkLine::Counters { counters, .. } = line {
                last = Some(counters);
            }
        }
        last.unwrap()
    }

    pub(super) fn trip(&self) -> Option<(wire::Cause, i64)> {
        for line in self.heard() {
            if let SinkLine::Trip { cause, value, .. } = line {
                return Some((cause, value));
            }
        }
        None
    }
}
