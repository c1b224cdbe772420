//! A host as the daemon's worker is one: a session over a real serial port.

use std::convert::Infallible;
use std::path::Path;

use quantity::{Current, HostTime, Power, SinkTime, Span, Temperature, Voltage};
use transport::port::{BAUD_DEFAULT, HostClock, Inbox, Link, PortLink, SerialConfig, serial};
use transport::session::{Expected, Heard, RebootEvidence, Session, SessionConfig};
use wire::{LimitKind, Mode, Order, OrderId, Reading, Step};

/// Longer than anything takes on a busy machine.
pub(crate) const PATIENCE: Span = Span::from_secs(30);

pub(crate) struct Host {
    link: PortLink<Infallible>,
    pub(crate) session: Session,
    pub(crate) heard: Vec<Heard>,
    next: u64,
}

impl Host {
    pub(crate) fn open(path: &Path, session: u32) -> Self {
        let config = SerialConfig {
            path: path.to_str().unwrap().to_owned(),
            baud: BAUD_DEFAULT,
        };
        let (mut link, _) = serial(config, HostClock::start());
        let until = link.now() + PATIENCE;
        while !matches!(link.wait(until), Some(Inbox::LinkBack)) {
            assert!(link.now() < until, "the port did not open");
        }
        let config = SessionConfig::for_link(BAUD_DEFAULT / 10, Expected::default());
        let mut host = Self {
            session: Session::new(config, session),
            link,
            heard: Vec::new(),
            next: 1,
        };
        let now = host.now();
        host.session.tick(now);
        host.settle();
        host
    }

    fn now(&self) -> HostTime {
        self.link.now()
    }

    fn settle(&mut self) {
        while let Some(heard) = self.session.poll_heard() {
            self.heard.push(heard);
        }
        let mut bytes = Vec::new();
        let urgency = self.session.take_transmit(&mut bytes);
        if !bytes.is_empty() {
            self.link.send(&bytes, urgency);
        }
    }

    /// One wait of the worker, at most until then.
    fn turn(&mut self, until: HostTime) {
        let due = self
            .session
            .deadline()
            .map_or(until, |(due, _)| due.min(until));
        let inbox = self.link.wait(due);
        let now = self.now();
        match inbox {
            Some(Inbox::Bytes(bytes)) => self.session.receive(&bytes, now),
            Some(Inbox::LinkBack) => self.session.link_back(now),
            Some(Inbox::LinkLost(_)) => self.session.link_lost(now),
            Some(Inbox::Command(never)) => match never {},
            None => {}
        }
        self.session.tick(now);
        self.settle();
    }

    pub(crate) fn pass(&mut self, span: Span) {
        let until = self.now() + span;
        while self.now() < until {
            self.turn(until);
        }
    }

    /// Goes on until something wanted has been heard since the beginning.
    pub(crate) fn until<T>(&mut self, what: &str, wanted: impl Fn(&Heard) -> Option<T>) -> T {
        let until = self.now() + PATIENCE;
        loop {
            if let Some(found) = self.heard.iter().find_map(&wanted) {
                return found;
            }
            assert!(
                self.now() < until,
                "not heard: {what}; heard: {:?}",
                self.heard
            );
            self.turn(until);
        }
    }

    pub(crate) fn order(&mut self, order: Order) -> OrderId {
        let id = OrderId(self.next);
        self.next += 1;
        let now = self.now();
        self.session.order(id, order, now);
        self.settle();
        id
    }

    /// Gives an order and waits until it is executed.
    pub(crate) fn must(&mut self, order: Order) -> OrderId {
        let (id, outcome) = self.outcome(order);
        assert!(
            matches!(outcome, Heard::Acknowledged { .. }),
            "{order}: {outcome:?}"
        );
        id
    }

    /// Gives an order and waits for what becomes of it.
    pub(crate) fn outcome(&mut self, order: Order) -> (OrderId, Heard) {
        let id = self.order(order);
        let outcome = self.until(&format!("the answer to {order}"), |heard| match heard {
            Heard::Acknowledged { order }
            | Heard::Refused { order, .. }
            | Heard::Abandoned { order }
            | Heard::Withdrawn { order }
                if *order == id =>
            {
                Some(heard.clone())
            }
            _ => None,
        });
        (id, outcome)
    }

    pub(crate) fn off(&mut self) {
        let now = self.now();
        self.heard.retain(|heard| *heard != Heard::OffAcknowledged);
        self.session.off(now);
        self.settle();
        self.until("the answer to off", |heard| {
            (*heard == Heard::OffAcknowledged).then_some(())
        });
    }

    pub(crate) fn restart(&mut self, session: u32) {
        let now = self.now();
        self.session.restart(session, now);
        self.settle();
    }

    pub(crate) fn connected(&mut self) {
        self.until("the description", |heard| {
            matches!(heard, Heard::Connected { .. }).then_some(())
        });
    }

    /// The sink's time now, or a little later, from a fresh reading.
    pub(crate) fn sink_time(&mut self) -> SinkTime {
        self.reading().time
    }

    /// The next reading.
    pub(crate) fn reading(&mut self) -> Reading {
        self.heard
            .retain(|heard| !matches!(heard, Heard::Reading(_)));
        self.until("a reading", |heard| match heard {
            Heard::Reading(reading) if reading.counters.is_some() => Some(*reading),
            _ => None,
        })
    }

    pub(crate) fn rebooted(&self) -> Option<RebootEvidence> {
        self.heard.iter().find_map(|heard| match heard {
            Heard::SinkRebooted { evidence } => Some(*evidence),
            _ => None,
        })
    }

    pub(crate) fn edge(&mut self, order: OrderId) -> SinkTime {
        self.until(&format!("the edge of {order:?}"), |heard| match heard {
            Heard::Edge { time, order: of } if *of == order => Some(*time),
            _ => None,
        })
    }

    /// Limits wide enough for all of these tests, and readbacks.
    pub(crate) fn ready(&mut self) {
        for limit in [
            LimitKind::Current(Current::from_milliamperes(2_000)),
            LimitKind::Power(Power::from_milliwatts(12_000)),
            LimitKind::VoltageHigh(Voltage::from_millivolts(6_000)),
            LimitKind::VoltageLow(Voltage::from_millivolts(1_000)),
            LimitKind::Temperature(Temperature::from_millidegrees_celsius(80_000)),
            LimitKind::Excess(Current::from_milliamperes(200)),
        ] {
            self.order(Order::Limit {
                limit,
                persistence: Span::from_millis(5),
            });
        }
        self.order(Order::Deadman {
            interval: Span::from_secs(10),
        });
        self.must(Order::Readback {
            interval: Span::from_millis(50),
        });
    }
}

pub(crate) fn step(milliamperes: i64, start: SinkTime, hold: Span) -> Order {
    Order::Step(Step {
        mode: Mode::Current(Current::from_milliamperes(milliamperes)),
        start,
        ramp: Span::ZERO,
        hold,
    })
}
