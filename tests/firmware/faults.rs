//! Runs over a cable that loses, damages, repeats and delays bytes, by seed.

use std::path::Path;
use std::thread;
use std::time::Duration;

use quantity::{Current, Span};
use system_tests::bridge::{Bridge, Far, Faults};
use transport::session::Heard;
use wire::{OrderId, ReasonRefused};

use crate::host::{Host, step};
use crate::process::{Process, program};

const SCHEDULES: u64 = 20;
/// At once: the machine has few cores.
const TOGETHER: u64 = 5;

/// A mix that hangs on the seed: each kind alone, and all together.
fn faults(seed: u64) -> Faults {
    let chosen = |kind: u64| seed.is_multiple_of(5) || seed % 5 == kind;
    let ppm = 1_000 + u32::try_from(seed).unwrap() * 100;
    let when = |kind, ppm| if chosen(kind) { ppm } else { 0 };
    Faults {
        drop_ppm: when(1, ppm),
        corrupt_ppm: when(2, ppm),
        duplicate_ppm: when(3, ppm),
        stall_ppm: when(4, ppm / 2),
        stall_most: Duration::from_millis(120),
    }
}

/// Queues a step some seconds ahead. One that the cable holds up for longer is refused as late,
/// which is an outcome like any other, and ordered anew.
fn step_ahead(host: &mut Host, milliamperes: i64) -> OrderId {
    for _ in 0..5 {
        let start = host.sink_time() + Span::from_secs(3);
        let (id, outcome) = host.outcome(step(milliamperes, start, Span::from_secs(60)));
        match outcome {
            Heard::Acknowledged { .. } => return id,
            Heard::Refused {
                reason: ReasonRefused::Late,
                ..
            } => {}
            other => panic!("{other:?}"),
        }
    }
    panic!("five steps in a row were late");
}

/// One run: every order has one outcome, each step begins at most once, no charge is lost, off
/// is off.
fn run(program: &Path, seed: u64) {
    eprintln!("seed {seed}: {:?}", faults(seed));
    let folder = tempfile::tempdir().unwrap();
    let (_process, port) = Process::start(program, &["--source", "cell"]);
    let path = folder.path().join("sink");
    let mut bridge = Bridge::new(&path, 115_200, faults(seed), seed).unwrap();
    bridge.attach(Far::Local(port)).unwrap();
    let mut host = Host::open(bridge.path(), 100 + u32::try_from(seed).unwrap());
    host.connected();
    host.ready();
    let before = host.reading();
    let mut steps = Vec::new();
    for milliamperes in [200, 400, 200, 400, 200] {
        steps.push(step_ahead(&mut host, milliamperes));
    }
    // The edge's own line may be lost; that the step runs is seen all the same.
    for order in &steps {
        let order = *order;
        host.until("the step", |heard| match heard {
            Heard::Edge { order: of, .. } | Heard::StepSeen { order: of, .. } if *of >= order => {
                Some(())
            }
            _ => None,
        });
    }
    host.off();
    let off = loop {
        let reading = host.reading();
        if reading.values.state == wire::SinkState::Off {
            break reading;
        }
    };
    for order in &steps {
        let edges = host
            .heard
            .iter()
            .filter(|heard| matches!(heard, Heard::Edge { order: of, .. } if of == order))
            .count();
        assert!(edges <= 1, "seed {seed}: {order:?} began {edges} times");
    }
    // Between the least and the most that these currents give in the time.
    let charge = off.counters.unwrap().charge - before.counters.unwrap().charge;
    let most = Current::from_milliamperes(400).times(off.time.saturating_since(before.time));
    assert!(
        charge > quantity::Charge::ZERO && charge <= most,
        "seed {seed}: {charge}"
    );
    assert_eq!(host.rebooted(), None, "seed {seed}");
}

#[test]
fn twenty_faulty_cables_lose_no_order_and_no_step_begins_twice() {
    let program = program(None);
    thread::scope(|scope| {
        for first in 0..TOGETHER {
            let program = &program;
            scope.spawn(move || {
                for seed in (first..SCHEDULES).step_by(usize::try_from(TOGETHER).unwrap()) {
                    run(program, seed);
                }
            });
        }
    });
}
