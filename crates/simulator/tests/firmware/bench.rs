//! A core on a table: a plant of few numbers in front of it, a host of plain text behind it.
//!
//! All figures are invented. The converters are chosen round, so that expected values can be
//! read: one code of current is 1 mA, one of voltage 2 mV, one of the setting converter 1 mA.

use quantity::{Current, Resistance, SinkTime, Span, Temperature, Voltage};
use simulator::firmware::{Drive, Firmware, FirmwareConfig, Sample};
use wire::{Abilities, Reset, TemperatureReading, checksum};

pub(crate) const TICK_US: u64 = 1_000;

/// The sink of the tests, all abilities included.
pub(crate) fn config() -> FirmwareConfig {
    FirmwareConfig {
        serial: 4711,
        tick: Span::from_micros(TICK_US),
        queue: 16,
        fastest_readback: Span::from_micros(20_000),
        burst: 64,
        abilities: Abilities {
            power: true,
            resistance: true,
            burst: true,
            isolator: true,
        },
        drive_bits: 12,
        drive_full_scale: Voltage::from_microvolts(409_600),
        drive_spans_full_scale: false,
        sense_resistor: Resistance::from_microohms(100_000),
        sense_bits: 12,
        sense_current: Current::from_microamperes(4_096_000),
        sense_voltage: Voltage::from_microvolts(8_192_000),
    }
}

/// What stands in front of the core: it follows the drive, until a test breaks it.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Plant {
    /// Code of the voltage.
    pub(crate) voltage_code: u16,
    /// The most current the source can give, in codes.
    pub(crate) most: u16,
    /// Current that flows whatever the drive says, in codes.
    pub(crate) leak: u16,
    /// What the temperature sensor says.
    pub(crate) temperature: TemperatureReading,
}

/// The sensor at so many thousandths of a degree.
pub(crate) fn celsius(millidegrees: i64) -> TemperatureReading {
    TemperatureReading::Value(Temperature::from_millidegrees_celsius(millidegrees))
}

/// A core with its plant and host.
#[derive(Debug, Clone)]
pub(crate) struct Bench {
    pub(crate) firmware: Firmware,
    pub(crate) plant: Plant,
    pub(crate) drive: Drive,
    /// Sink time of the last tick, in us.
    pub(crate) now: u64,
    /// Number of the next order.
    pub(crate) next: u16,
    /// Whether the host sends a `clock` with every hundredth tick.
    pub(crate) host_alive: bool,
    ticks: u64,
}

/// A host line with its checksum and line end.
pub(crate) fn line(text: &str) -> Vec<u8> {
    format!("{text} {:04X}\n", checksum(text.as_bytes())).into_bytes()
}

impl Bench {
    pub(crate) fn with(config: FirmwareConfig, reset: Reset) -> Self {
        Self {
            firmware: Firmware::new(config, reset).expect("a valid configuration"),
            plant: Plant {
                voltage_code: 1_850,
                most: 4_000,
                leak: 0,
                temperature: celsius(25_000),
            },
            drive: Drive::default(),
            now: 0,
            next: 1,
            host_alive: false,
            ticks: 0,
        }
    }

    /// Just powered up.
    pub(crate) fn cold() -> Self {
        Self::with(config(), Reset::Power)
    }

    /// With a session begun and all limits set wide: 3 A, 12 W, 5 V, 2 V, 80 degrees, 200 mA.
    pub(crate) fn ready() -> Self {
        let mut bench = Self::cold();
        bench.tick();
        bench.get_ready();
        bench
    }

    pub(crate) fn get_ready(&mut self) {
        self.say("hello 1 77");
        self.next = 1;
        for limit in [
            "current 3000000 0",
            "power 12000000 0",
            "voltage-high 5000000 0",
            "voltage-low 2000000 0",
            "temperature 80000 0",
            "excess 200000 0",
        ] {
            assert_eq!(self.order("limit", limit), format!("ok {}", self.next - 1));
        }
    }

    /// With a current in uA flowing, the host alive.
    pub(crate) fn on(microamperes: u32) -> Self {
        let mut bench = Self::ready();
        bench.host_alive = true;
        let answer = bench.order("step", &format!("current 0 {microamperes} 0 3600000000"));
        assert!(answer.starts_with("ok "), "{answer}");
        bench.ticks(3);
        bench.heard();
        bench
    }

    /// What the converters give now.
    pub(crate) fn sample(&self) -> Sample {
        let driven = if self.drive.gate {
            self.drive.code.min(self.plant.most)
        } else {
            0
        };
        Sample {
            current_code: driven.max(self.plant.leak),
            voltage_code: self.plant.voltage_code,
            temperature: self.plant.temperature,
        }
    }

    pub(crate) fn tick(&mut self) -> Drive {
        let sample = self.sample();
        self.now += TICK_US;
        self.drive = self.firmware.tick(SinkTime::from_micros(self.now), sample);
        self.ticks += 1;
        if self.host_alive && self.ticks.is_multiple_of(100) {
            self.firmware
                .receive(&line("clock 9"), SinkTime::from_micros(self.now));
        }
        self.drive
    }

    pub(crate) fn ticks(&mut self, count: u32) -> Drive {
        for _ in 0..count {
            self.tick();
        }
        self.drive
    }

    /// Raw bytes at the time of the last tick.
    pub(crate) fn raw(&mut self, bytes: &[u8]) {
        self.firmware
            .receive(bytes, SinkTime::from_micros(self.now));
    }

    /// All lines that wait, without their checksums; the checksums are checked.
    pub(crate) fn heard(&mut self) -> Vec<String> {
        let mut bytes = Vec::new();
        self.firmware.transmit(&mut bytes, usize::MAX);
        let text = String::from_utf8(bytes).expect("ASCII");
        assert!(
            text.is_empty() || text.ends_with('\n'),
            "a whole line: {text:?}"
        );
        text.lines()
            .map(|whole| {
                assert!(whole.len() < wire::LINE_BYTES_MAX, "too long: {whole}");
                let (body, crc) = whole.rsplit_once(' ').expect("a checksum");
                assert_eq!(crc, format!("{:04X}", checksum(body.as_bytes())), "{whole}");
                body.to_owned()
            })
            .collect()
    }

    /// Heard lines of one kind.
    pub(crate) fn heard_kind(&mut self, kind: &str) -> Vec<String> {
        let mut lines = self.heard();
        lines.retain(|line| line.split(' ').next() == Some(kind));
        lines
    }

    /// Says one line and returns what comes back at once.
    pub(crate) fn say(&mut self, text: &str) -> Vec<String> {
        self.heard();
        self.raw(&line(text));
        self.heard()
    }

    /// Sends the next order and returns its answer.
    pub(crate) fn order(&mut self, kind: &str, fields: &str) -> String {
        let number = self.next;
        self.next = if number == u16::MAX { 1 } else { number + 1 };
        let text = format!("{kind} {number} {fields}");
        let answers = self.say(text.trim_end());
        assert_eq!(answers.len(), 1, "one answer to `{text}`: {answers:?}");
        answers[0].clone()
    }

    /// Sends the next order, which must be executed.
    pub(crate) fn must(&mut self, kind: &str, fields: &str) {
        let number = self.next;
        assert_eq!(
            self.order(kind, fields),
            format!("ok {number}"),
            "{kind} {fields}"
        );
    }

    /// Sends the next order, which must be refused so.
    pub(crate) fn refused(&mut self, kind: &str, fields: &str, reason: &str) {
        let number = self.next;
        assert_eq!(
            self.order(kind, fields),
            format!("no {number} {reason}"),
            "{kind} {fields}"
        );
    }

    /// The fields of the next readback pair: `c` and `r`, without their kinds.
    pub(crate) fn readback(&mut self) -> (Vec<i128>, Vec<String>) {
        for _ in 0..100_000 {
            self.tick();
            let lines = self.heard();
            if let Some(at) = lines.iter().position(|line| line.starts_with("c ")) {
                let counters = lines[at]
                    .split(' ')
                    .skip(1)
                    .map(|f| f.parse().unwrap())
                    .collect();
                let readback = lines[at + 1].strip_prefix("r ").expect("c and r as a pair");
                return (counters, readback.split(' ').map(str::to_owned).collect());
            }
        }
        panic!("no readback came");
    }

    /// The state of the next readback; readbacks must be on.
    pub(crate) fn state(&mut self) -> String {
        self.readback().1[9].clone()
    }
}
