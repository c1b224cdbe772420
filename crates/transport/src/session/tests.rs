//! The session against a model of the sink's side, with and without faults on the way.

mod faults;
mod greeting;
mod listening;
mod off;
mod orders;
mod peer;
mod reboot;
mod speed;

use super::*;
use peer::Peer;
use quantity::{Current, Voltage};
use wire::{LimitKind, Mode, Step};

/// The invented bench of the examples: sink `left`, on a port of 115200 baud.
fn config() -> SessionConfig {
    SessionConfig::for_link(11_520, Expected::default())
}

fn at(millis: i64) -> HostTime {
    HostTime::from_micros(1_700_000_000_000_000 + millis * 1_000)
}

fn limit(milliamperes: i64) -> Order {
    Order::Limit {
        limit: LimitKind::Current(Current::from_milliamperes(milliamperes)),
        persistence: Span::ZERO,
    }
}

fn readback(millis: u64) -> Order {
    Order::Readback {
        interval: Span::from_millis(millis),
    }
}

fn step(milliamperes: i64) -> Order {
    Order::Step(Step {
        mode: Mode::Current(Current::from_milliamperes(milliamperes)),
        start: SinkTime::ZERO,
        ramp: Span::ZERO,
        hold: Span::from_secs(10),
    })
}

/// A session and the model it talks to over a link without faults or delay.
struct Bench {
    session: Session,
    peer: Peer,
    now: HostTime,
    heard: Vec<Heard>,
    bytes: Vec<u8>,
}

impl Bench {
    fn new() -> Self {
        Self::with(config())
    }

    fn with(config: SessionConfig) -> Self {
        Self {
            session: Session::new(config, 7),
            peer: Peer::new(at(-5_000)),
            now: at(0),
            heard: Vec::new(),
            bytes: Vec::new(),
        }
    }

    /// A bench whose session stands, with what was heard until then forgotten.
    fn open() -> Self {
        let mut bench = Self::new();
        bench.tick();
        assert!(bench.session.description().is_some(), "{:?}", bench.heard);
        bench.heard.clear();
        bench
    }

    fn tick(&mut self) {
        self.session.tick(self.now);
        self.settle();
    }

    fn order(&mut self, id: u64, order: Order) {
        self.session.order(OrderId(id), order, self.now);
        self.settle();
    }

    fn off(&mut self) {
        self.session.off(self.now);
        self.settle();
    }

    /// Lets the sink say something.
    fn say(&mut self, line: SinkLine) {
        self.peer.say(line);
        self.settle();
    }

    /// What the session wants to send, as lines, not delivered.
    fn swallow(&mut self) -> Vec<String> {
        self.bytes.clear();
        self.session.take_transmit(&mut self.bytes);
        String::from_utf8(self.bytes.clone())
            .unwrap()
            .lines()
            .filter(|line| !line.is_empty())
            .map(|line| line.rsplit_once(' ').unwrap().0.to_owned())
            .collect()
    }

    /// Carries bytes to and fro until both sides are silent.
    fn settle(&mut self) {
        loop {
            while let Some(heard) = self.session.poll_heard() {
                self.heard.push(heard);
            }
            self.bytes.clear();
            self.session.take_transmit(&mut self.bytes);
            self.peer.receive(&self.bytes, self.now);
            let answer = self.peer.take();
            if self.bytes.is_empty() && answer.is_empty() {
                return;
            }
            self.session.receive(&answer, self.now);
        }
    }

    /// Lets time pass, with every deadline met.
    fn pass(&mut self, millis: u64) {
        let end = self.now + Span::from_millis(millis);
        while let Some((due, _)) = self.session.deadline() {
            if due > end {
                break;
            }
            self.now = self.now.max(due);
            self.tick();
        }
        self.now = end;
    }

    /// What was heard, without the clock's estimates, since the last call.
    fn take_heard(&mut self) -> Vec<Heard> {
        std::mem::take(&mut self.heard)
            .into_iter()
            .filter(|heard| !matches!(heard, Heard::ClockEstimate(_)))
            .collect()
    }
}

fn acknowledged(id: u64) -> Heard {
    Heard::Acknowledged { order: OrderId(id) }
}

fn rebooted(heard: &[Heard]) -> Option<RebootEvidence> {
    heard.iter().find_map(|heard| {
        if let Heard::SinkRebooted { evidence } = heard {
            Some(*evidence)
        } else {
            None
        }
    })
}

fn volts(millivolts: i64) -> Voltage {
    Voltage::from_millivolts(millivolts)
}
