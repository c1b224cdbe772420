//! A model of the sink's side: numbering, answers, sessions, nothing of the physics.

use std::collections::VecDeque;

use quantity::{
    Charge, Current, Energy, HostTime, Resistance, SinkTime, Span, Temperature, Voltage,
};
use wire::{
    Abilities, Counters, Decoder, HostLine, LineBuffer, Order, OrderNumber, Readback,
    ReasonRefused, Reset, SinkLine, SinkState, TemperatureReading,
};

/// What the model did, in order.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Deed {
    /// Began a session.
    Began(u32),
    /// Executed an order.
    Did(Order),
    /// Turned off.
    Off,
}

/// The model.
pub(super) struct Peer {
    decoder: Decoder<HostLine>,
    out: Vec<u8>,
    started: HostTime,
    session: Option<u32>,
    /// Orders executed in this session.
    done: u64,
    answers: VecDeque<(OrderNumber, SinkLine)>,
    pub(super) deeds: Vec<Deed>,
    pub(super) refuse: Option<ReasonRefused>,
    pub(super) damaged: u16,
    pub(super) readbacks: u16,
    pub(super) serial: u32,
    pub(super) hello_count: u32,
    /// Parts per million by which its clock runs fast.
    pub(super) rate_ppm: i64,
}

fn number(place: u64) -> OrderNumber {
    OrderNumber(u16::try_from((place - 1) % 65_535 + 1).unwrap())
}

impl Peer {
    pub(super) fn new(started: HostTime) -> Self {
        Self {
            decoder: Decoder::new(),
            out: Vec::new(),
            started,
            session: None,
            done: 0,
            answers: VecDeque::new(),
            deeds: Vec::new(),
            refuse: None,
            damaged: 0,
            readbacks: 0,
            serial: 4711,
            hello_count: 0,
            rate_ppm: 0,
        }
    }

    pub(super) fn time(&self, now: HostTime) -> SinkTime {
        let passed = now.micros() - self.started.micros();
        SinkTime::from_micros(u64::try_from(passed + passed * self.rate_ppm / 1_000_000).unwrap())
    }

    /// Starts anew: all is forgotten, the clock too.
    pub(super) fn reboot(&mut self, now: HostTime) {
        self.decoder.clear();
        self.started = now;
        self.session = None;
        self.readbacks = 0;
        self.deeds.push(Deed::Off);
    }

    /// As after so many orders in the session that stands.
    pub(super) fn pretend_done(&mut self, done: u64) {
        self.done = done;
        self.answers.clear();
    }

    pub(super) fn say(&mut self, line: SinkLine) {
        let mut buffer = LineBuffer::new();
        line.encode(&mut buffer).unwrap();
        self.out.extend_from_slice(buffer.as_bytes());
    }

    pub(super) fn take(&mut self) -> Vec<u8> {
        std::mem::take(&mut self.out)
    }

    pub(super) fn receive(&mut self, bytes: &[u8], now: HostTime) {
        for byte in bytes {
            match self.decoder.push(*byte) {
                None => {}
                Some(Err(_)) => self.damaged = self.damaged.wrapping_add(1),
                Some(Ok(line)) => self.answer(line, now),
            }
        }
    }

    fn answer(&mut self, line: HostLine, now: HostTime) {
        match line {
            HostLine::Hello { token, session } => {
                self.hello_count += 1;
                if self.session != Some(session) || self.done > 0 {
                    self.session = Some(session);
                    self.done = 0;
                    self.answers.clear();
                    self.deeds.push(Deed::Began(session));
                }
                for line in self.description(token, session, now) {
                    self.say(line);
                }
            }
            HostLine::Clock { token } => {
                let time = self.time(now);
                self.say(SinkLine::Clock { token, time });
            }
            HostLine::Off { token } => {
                self.deeds.push(Deed::Off);
                self.say(SinkLine::OffDone { token });
            }
            HostLine::Order { number, order } => self.execute(number, order),
        }
    }

    fn execute(&mut self, given: OrderNumber, order: Order) {
        let expected = number(self.done + 1);
        let answer = if self.session.is_none() {
            SinkLine::No {
                number: given,
                reason: ReasonRefused::Session,
            }
        } else if let Some((_, answer)) = self.answers.iter().find(|(own, _)| *own == given) {
            *answer
        } else if given != expected {
            SinkLine::NoGap {
                number: given,
                expected,
            }
        } else {
            self.done += 1;
            let answer = if let Some(reason) = self.refuse.take() {
                SinkLine::No {
                    number: given,
                    reason,
                }
            } else {
                self.deeds.push(Deed::Did(order));
                SinkLine::Ok { number: given }
            };
            self.answers.push_back((given, answer));
            if self.answers.len() > 16 {
                self.answers.pop_front();
            }
            answer
        };
        self.say(answer);
    }

    pub(super) fn description(&self, token: u16, session: u32, now: HostTime) -> [SinkLine; 5] {
        [
            SinkLine::About {
                token,
                protocol: 1,
                firmware: 10_203,
                serial: self.serial,
                reset: Reset::Power,
            },
            SinkLine::Front {
                token,
                tick: Span::from_micros(1_000),
                queue: 32,
                fastest: Span::from_millis(20),
                burst: 512,
                abilities: Abilities {
                    power: true,
                    resistance: true,
                    burst: true,
                    isolator: false,
                },
            },
            SinkLine::Drive {
                token,
                bits: 12,
                full_scale: Voltage::from_millivolts(300),
                span: 0,
                sense: Resistance::from_milliohms(100),
            },
            SinkLine::Sense {
                token,
                bits: 12,
                current: Current::from_milliamperes(3_000),
                voltage: Voltage::from_millivolts(6_000),
            },
            SinkLine::Ready {
                token,
                session,
                time: self.time(now),
            },
        ]
    }

    /// The two lines of the next readback pair.
    pub(super) fn pair(&mut self, now: HostTime, charge: i64, step: u16) -> [SinkLine; 2] {
        self.readbacks = self.readbacks % 65_535 + 1;
        let time = self.time(now);
        let counters = Counters {
            time,
            charge: Charge::from_microcoulombs(charge),
            energy: Energy::from_microjoules(0),
            step: OrderNumber(step),
            queued: 0,
            damaged: self.damaged,
        };
        let time_low = u32::try_from(time.micros() & 0xFFFF_FFFF).unwrap();
        [
            SinkLine::Counters {
                readback: self.readbacks,
                counters,
            },
            SinkLine::Readback {
                readback: self.readbacks,
                time_low,
                values: values(),
            },
        ]
    }

    pub(super) fn say_pair(&mut self, now: HostTime, charge: i64, step: u16) {
        for line in self.pair(now, charge, step) {
            self.say(line);
        }
    }
}

pub(super) fn values() -> Readback {
    Readback {
        current: Current::from_milliamperes(500),
        current_min: Current::from_milliamperes(499),
        current_max: Current::from_milliamperes(501),
        voltage: Voltage::from_millivolts(3_700),
        voltage_min: Voltage::from_millivolts(3_690),
        voltage_max: Voltage::from_millivolts(3_710),
        temperature: TemperatureReading::Value(Temperature::from_millidegrees_celsius(31_500)),
        state: SinkState::On,
    }
}
