//! The host's session against the reference firmware, over links that fail: the two ends of the
//! protocol that no one wrote together.

#![expect(
    clippy::unwrap_used,
    clippy::indexing_slicing,
    reason = "helpers of tests stand outside `#[test]`: a failure there is a failed test"
)]

use std::collections::BTreeMap;

use proptest::prelude::*;
use quantity::{
    Current, HostTime, Power, Quantity as _, Ratio, SinkTime, Span, Temperature, Voltage,
};
use simulator::{
    FaultyDevice, FirmwareConfig, LinkFaults, SimulatedSink, SinkParts, Source, Supply, SupplySpec,
};
use transport::port::VirtualDevice;
use transport::session::{Expected, Heard, RebootEvidence, Session, SessionConfig};
use wire::{Abilities, LimitKind, Mode, Order, OrderId, Reading, Reset, Step};

const START: HostTime = HostTime::from_micros(1_790_000_000_000_000);

fn figures() -> FirmwareConfig {
    FirmwareConfig {
        serial: 4711,
        tick: Span::from_millis(1),
        queue: 32,
        fastest_readback: Span::from_millis(20),
        burst: 256,
        abilities: Abilities {
            power: true,
            resistance: true,
            burst: true,
            isolator: false,
        },
        drive_bits: 16,
        drive_full_scale: Voltage::from_microvolts(409_600),
        drive_spans_full_scale: false,
        sense_resistor: quantity::Resistance::from_milliohms(100),
        sense_bits: 16,
        sense_current: Current::from_microamperes(4_096_000),
        sense_voltage: Voltage::from_microvolts(8_192_000),
    }
}

fn sink() -> SimulatedSink {
    let spec: SupplySpec = serde_json::from_str(r#"{"voltage": "5 V"}"#).unwrap();
    let supply = Supply::new(&spec).unwrap();
    SimulatedSink::new(SinkParts {
        bytes_per_second: Some(11_520),
        ..SinkParts::error_free(figures(), Source::Supply(Box::new(supply)))
    })
    .unwrap()
}

fn limits() -> Vec<Order> {
    [
        LimitKind::Current(Current::from_milliamperes(2_000)),
        LimitKind::Power(Power::from_milliwatts(12_000)),
        LimitKind::VoltageHigh(Voltage::from_millivolts(6_000)),
        LimitKind::VoltageLow(Voltage::from_millivolts(1_000)),
        LimitKind::Temperature(Temperature::from_millidegrees_celsius(80_000)),
        LimitKind::Excess(Current::from_milliamperes(200)),
    ]
    .map(|limit| Order::Limit {
        limit,
        persistence: Span::from_millis(5),
    })
    .to_vec()
}

struct Bench {
    session: Session,
    device: FaultyDevice<SimulatedSink>,
    heard: Vec<Heard>,
    next: u64,
}

impl Bench {
    fn new(faults: &LinkFaults, seed: u64) -> Self {
        let config = SessionConfig::for_link(
            11_520,
            Expected {
                serial: Some(4711),
                ..Expected::default()
            },
        );
        Self {
            session: Session::new(config, 77),
            device: FaultyDevice::new(sink(), faults, seed),
            heard: Vec::new(),
            next: 1,
        }
    }
    fn now(&self) -> HostTime {
        START + self.device.now()
    }
    fn settle(&mut self) {
        while let Some(heard) = self.session.poll_heard() {
            self.heard.push(heard);
        }
        let mut bytes = Vec::new();
        self.session.take_transmit(&mut bytes);
        self.device.receive(&bytes);
    }
    fn order(&mut self, order: Order) -> OrderId {
        let id = OrderId(self.next);
        self.next += 1;
        self.session.order(id, order, self.now());
        self.settle();
        id
    }
    fn pass(&mut self, span: Span) {
        let end = self.device.now() + span;
        self.session.tick(self.now());
        self.settle();
        while self.device.now() < end {
            let due = self
                .session
                .deadline()
                .map_or(end, |(due, _)| due.saturating_since(START))
                .min(end)
                .max(self.device.now());
            let mut bytes = Vec::new();
            self.device.advance(due, &mut bytes);
            let now = self.now();
            if bytes.is_empty() {
                self.session.tick(now);
            } else {
                self.session.receive(&bytes, now);
            }
            self.settle();
        }
    }
    fn readings(&self) -> Vec<Reading> {
        self.heard
            .iter()
            .filter_map(|h| {
                if let Heard::Reading(r) = h {
                    Some(*r)
                } else {
                    None
                }
            })
            .collect()
    }
}

/// A staircase of steps queued ahead, an `off` that overtakes a step, a restart of the sink.
fn run(faults: &LinkFaults, seed: u64) {
    let mut bench = Bench::new(faults, seed);
    bench.pass(Span::from_secs(40));
    let Some(Heard::Connected { .. }) = bench
        .heard
        .iter()
        .find(|h| matches!(h, Heard::Connected { .. }))
    else {
        panic!("{:?}", bench.heard)
    };
    let mut ids = Vec::new();
    bench.order(Order::Deadman {
        interval: Span::from_secs(10),
    });
    for order in limits() {
        bench.order(order);
    }
    bench.order(Order::Readback {
        interval: Span::from_millis(100),
    });
    bench.pass(Span::from_secs(8));
    let begin = bench.device.device().sink_time() + Span::from_secs(8);
    let mut charge = 0;
    for place in 0..16_u64 {
        let milliamperes = 100 + 50 * i64::try_from(place).unwrap();
        charge += milliamperes * 250;
        ids.push(bench.order(Order::Step(Step {
            mode: Mode::Current(Current::from_milliamperes(milliamperes)),
            start: begin + Span::from_millis(250 * place),
            ramp: Span::ZERO,
            hold: Span::from_millis(250),
        })));
    }
    bench.pass(Span::from_secs(30));
    let outcomes = bench
        .heard
        .iter()
        .filter(|h| matches!(h, Heard::Acknowledged { .. }))
        .count();
    assert_eq!(outcomes, 24, "{:?}", bench.heard);
    let mut edges = BTreeMap::new();
    for heard in &bench.heard {
        if let Heard::Edge { time, order } | Heard::StepSeen { time, order } = heard {
            edges.entry(*order).or_insert(*time);
        }
    }
    for (place, id) in ids.iter().enumerate() {
        if let Some(time) = edges.get(id) {
            let due = begin + Span::from_millis(250 * place as u64);
            assert!(
                *time >= due && *time <= due + Span::from_millis(250),
                "{id:?}"
            );
        }
    }
    let readings = bench.readings();
    assert!(readings.windows(2).all(|p| p[0].time < p[1].time));
    let last = readings.iter().rev().find_map(|r| r.counters).unwrap();
    let measured = last.charge.microcoulombs();
    assert!(
        (measured - charge).abs() < charge / 100,
        "{measured} uC of {charge}"
    );
    off_overtakes_a_step(&mut bench);
    a_restart_is_noticed(&mut bench);
}

fn off_overtakes_a_step(bench: &mut Bench) {
    bench.order(Order::Step(Step {
        mode: Mode::Current(Current::from_milliamperes(300)),
        start: SinkTime::ZERO,
        ramp: Span::ZERO,
        hold: Span::from_secs(60),
    }));
    bench.session.off(bench.now());
    bench.settle();
    bench.pass(Span::from_secs(5));
    assert!(bench.heard.contains(&Heard::OffAcknowledged));
    assert!(bench.device.device().current_a() < 0.001);
    bench.pass(Span::from_secs(5));
    assert!(bench.device.device().current_a() < 0.001);
}

fn a_restart_is_noticed(bench: &mut Bench) {
    bench.device.device_mut().restart(Reset::Watchdog);
    bench.heard.clear();
    bench.pass(Span::from_secs(10));
    let evidence = bench.heard.iter().find_map(|h| {
        if let Heard::SinkRebooted { evidence } = h {
            Some(*evidence)
        } else {
            None
        }
    });
    assert!(
        matches!(evidence, Some(RebootEvidence::ClockWentBack { .. })),
        "{:?}",
        bench.heard
    );
}

#[test]
fn over_a_sound_link_everything_is_executed_and_seen() {
    run(&LinkFaults::default(), 1);
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(24))]
    #[test]
    fn over_a_faulty_link_each_step_runs_once_in_time_and_no_charge_is_lost(seed: u64, drop in 0_u32..15, corrupt in 0_u32..600, dup in 0_u32..10, delay in 0_u64..80) {
        let faults = LinkFaults {
            drop_line: Ratio::from_base_units(i128::from(drop) * 10_000).unwrap(),
            corrupt_byte: Ratio::from_base_units(i128::from(corrupt)).unwrap(),
            duplicate_line: Ratio::from_base_units(i128::from(dup) * 10_000).unwrap(),
            delay_max: Span::from_millis(delay),
            ..LinkFaults::default()
        };
        run(&faults, seed);
    }
}
