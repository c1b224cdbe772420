//! A simulated sink as a port, with someone in between who may change its lines.

use quantity::{Current, Resistance, Span, Voltage};
use simulator::{FirmwareConfig, SimulatedSink, SinkParts, Source, Supply, SupplySpec};
use transport::port::{HostClock, Pace, VirtualDevice, VirtualLink};
use wire::{Abilities, Reset, checksum};

use crate::{LinkPort, Options, Report, run};

pub(crate) fn figures() -> FirmwareConfig {
    FirmwareConfig {
        serial: 4711,
        tick: Span::from_millis(1),
        queue: 16,
        fastest_readback: Span::from_millis(20),
        burst: 128,
        abilities: Abilities {
            power: true,
            resistance: true,
            burst: true,
            isolator: false,
        },
        drive_bits: 12,
        drive_full_scale: Voltage::from_microvolts(409_600),
        drive_spans_full_scale: false,
        sense_resistor: Resistance::from_milliohms(100),
        sense_bits: 12,
        sense_current: Current::from_microamperes(4_096_000),
        sense_voltage: Voltage::from_microvolts(8_192_000),
    }
}

pub(crate) fn sink(figures: FirmwareConfig, reset: Reset) -> SimulatedSink {
    let spec: SupplySpec = serde_json::from_str(r#"{"voltage": "4 V"}"#).unwrap();
    let supply = Supply::new(&spec).unwrap();
    SimulatedSink::new(SinkParts {
        bytes_per_second: Some(11_520),
        reset,
        ..SinkParts::error_free(figures, Source::Supply(Box::new(supply)))
    })
    .unwrap()
}

/// A sink that is looked at afterwards.
pub(crate) struct Lent<'a>(pub(crate) &'a mut SimulatedSink);

impl VirtualDevice for Lent<'_> {
    fn now(&self) -> Span {
        self.0.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        VirtualDevice::advance(self.0, until, out);
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.0.receive(bytes);
    }
}

/// What someone in between makes of a line, given without its checksum: any number of lines.
pub(crate) type Tamper = fn(&str) -> Vec<String>;

pub(crate) fn untouched(line: &str) -> Vec<String> {
    vec![line.to_owned()]
}

/// A device whose lines pass through someone's hands.
pub(crate) struct Tampered {
    device: SimulatedSink,
    from_host: Tamper,
    from_sink: Tamper,
    partial: [Vec<u8>; 2],
}

impl Tampered {
    pub(crate) fn new(device: SimulatedSink, from_host: Tamper, from_sink: Tamper) -> Self {
        Self {
            device,
            from_host,
            from_sink,
            partial: [Vec::new(), Vec::new()],
        }
    }
}

fn pass(partial: &mut Vec<u8>, bytes: &[u8], tamper: Tamper) -> Vec<u8> {
    let mut out = Vec::new();
    for byte in bytes {
        partial.push(*byte);
        if *byte != b'\n' {
            continue;
        }
        let line = std::mem::take(partial);
        // Only a sound line is understood; all else goes on as it is.
        let text = std::str::from_utf8(&line)
            .ok()
            .and_then(|text| text.trim_end().rsplit_once(' '))
            .filter(|(body, sum)| format!("{:04X}", checksum(body.as_bytes())) == *sum);
        match text {
            None => out.extend_from_slice(&line),
            Some((body, _)) => {
                for body in tamper(body) {
                    let sum = checksum(body.as_bytes());
                    out.extend_from_slice(format!("{body} {sum:04X}\n").as_bytes());
                }
            }
        }
    }
    out
}

impl VirtualDevice for Tampered {
    fn now(&self) -> Span {
        self.device.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        let mut bytes = Vec::new();
        VirtualDevice::advance(&mut self.device, until, &mut bytes);
        out.extend(pass(&mut self.partial[1], &bytes, self.from_sink));
    }

    fn receive(&mut self, bytes: &[u8]) {
        let bytes = pass(&mut self.partial[0], bytes, self.from_host);
        self.device.receive(&bytes);
    }
}

/// A device before which the port holds lines back, each for so long, from a certain line on and
/// as often as said.
pub(crate) struct HeldBack {
    pub(crate) device: SimulatedSink,
    pub(crate) from: &'static str,
    pub(crate) for_span: Span,
    pub(crate) times: u32,
    held: Vec<u8>,
    until: Span,
}

impl HeldBack {
    pub(crate) fn new(
        device: SimulatedSink,
        from: &'static str,
        for_span: Span,
        times: u32,
    ) -> Self {
        Self {
            device,
            from,
            for_span,
            times,
            held: Vec::new(),
            until: Span::ZERO,
        }
    }

    fn let_go(&mut self) {
        let held = std::mem::take(&mut self.held);
        self.device.receive(&held);
    }
}

impl VirtualDevice for HeldBack {
    fn now(&self) -> Span {
        self.device.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        if !self.held.is_empty() && self.until <= until {
            VirtualDevice::advance(&mut self.device, self.until, out);
            self.let_go();
        }
        VirtualDevice::advance(&mut self.device, until, out);
    }

    fn receive(&mut self, bytes: &[u8]) {
        let begins = self.times > 0 && bytes.starts_with(self.from.as_bytes());
        if begins && self.held.is_empty() {
            self.times -= 1;
            self.until = self.device.now() + self.for_span;
        }
        self.held.extend_from_slice(bytes);
        if self.until <= self.device.now() {
            self.let_go();
        }
    }
}

/// A device before which a port sends what it has in lumps: at every whole multiple of a time.
pub(crate) struct Lumped {
    pub(crate) device: SimulatedSink,
    pub(crate) every: Span,
    pub(crate) waiting: Vec<u8>,
}

impl VirtualDevice for Lumped {
    fn now(&self) -> Span {
        self.device.now()
    }

    fn advance(&mut self, until: Span, out: &mut Vec<u8>) {
        let every = self.every.micros();
        loop {
            let passed = self.device.now().micros() / every;
            let lump = Span::from_micros((passed + 1) * every);
            // The device comes back as soon as it has said something.
            VirtualDevice::advance(&mut self.device, lump.min(until), &mut self.waiting);
            if self.device.now() == lump {
                out.append(&mut self.waiting);
            }
            if !out.is_empty() || self.device.now() >= until {
                return;
            }
        }
    }

    fn receive(&mut self, bytes: &[u8]) {
        self.device.receive(bytes);
    }
}

pub(crate) fn prove(device: impl VirtualDevice, options: &Options) -> Report {
    let (link, _commands) = VirtualLink::new(device, Pace::Unbounded, HostClock::start());
    let mut port = LinkPort::new(link);
    run(&mut port, options, &mut |_| {}).unwrap()
}

pub(crate) fn with_source() -> Options {
    Options {
        source: Some(Current::from_milliamperes(500)),
        ..Options::default()
    }
}
