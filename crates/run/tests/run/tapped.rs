//! The simulated sink with an ear on both its lines: what it truly was told, and truly said.

use quantity::{Current, Power, Span, Temperature, Voltage};
use simulator::device::SimulatedSink;
use transport::port::VirtualDevice;
use wire::{Decoder, HostLine, LimitKind, LineBuffer, Order, SinkLine};

/// A sink whose lines are overheard at the sink itself, before any link can harm them.
pub(crate) struct Tapped {
    pub(crate) sink: SimulatedSink,
    /// The sink is never told the run's own limits, so that only the host judges them.
    pub(crate) deaf: bool,
    /// Sound lines that reached it, with the true time.
    pub(crate) told: Vec<(Span, HostLine)>,
    /// Lines it sent, with the true time.
    pub(crate) said: Vec<(Span, SinkLine)>,
    inward: Decoder<HostLine>,
    outward: Decoder<SinkLine>,
}

impl Tapped {
    pub(crate) fn new(sink: SimulatedSink) -> Self {
        Self {
            sink,
            deaf: false,
            told: Vec::new(),
            said: Vec::new(),
            inward: Decoder::new(),
            outward: Decoder::new(),
        }
    }

    /// When it first said, after `from`, that it had turned off: on its own or as told.
    pub(crate) fn off_after(&self, from: Span) -> Option<Span> {
        let says_off = |line: &SinkLine| {
            matches!(
                line,
                SinkLine::Trip { .. } | SinkLine::OffDone { .. } | SinkLine::End { .. }
            )
        };
        let off = self
            .said
            .iter()
            .find(|(at, line)| *at >= from && says_off(line));
        off.map(|(at, _)| *at)
    }
}

impl VirtualDevice for Tapped {
    fn now(&self) -> Span {
        self.sink.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        let before = out.len();
        self.sink.advance_to_output(until, out);
        let now = self.sink.now();
        let lines = self.outward.feed(&out[before..]);
        self.said
            .extend(lines.map(|line| (now, line.expect("a sink says only sound lines"))));
    }

    fn receive(&mut self, bytes: &[u8]) {
        let now = self.sink.now();
        let lines: Vec<_> = self.inward.feed(bytes).flatten().collect();
        self.told.extend(lines.iter().map(|line| (now, *line)));
        if !self.deaf {
            self.sink.receive(bytes);
            return;
        }
        for line in lines {
            let mut text = LineBuffer::new();
            lax(line).encode(&mut text).unwrap();
            self.sink.receive(text.as_bytes());
        }
    }
}

/// The same line, but for limits that nothing crosses.
fn lax(line: HostLine) -> HostLine {
    let HostLine::Order {
        number,
        order: Order::Limit { limit, persistence },
    } = line
    else {
        return line;
    };
    let limit = match limit {
        LimitKind::Current(_) => LimitKind::Current(Current::from_milliamperes(99_000)),
        LimitKind::Power(_) => LimitKind::Power(Power::from_milliwatts(999_000)),
        LimitKind::VoltageHigh(_) => LimitKind::VoltageHigh(Voltage::from_millivolts(99_000)),
        LimitKind::VoltageLow(_) => LimitKind::VoltageLow(Voltage::ZERO),
        LimitKind::Temperature(_) => {
            LimitKind::Temperature(Temperature::from_whole_degrees_celsius(200))
        }
        LimitKind::Excess(_) => LimitKind::Excess(Current::from_milliamperes(99_000)),
    };
    HostLine::Order {
        number,
        order: Order::Limit { limit, persistence },
    }
}
