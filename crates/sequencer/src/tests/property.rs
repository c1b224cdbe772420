//! What holds for every plan and every disturbance.

use proptest::prelude::*;
use quantity::{Charge, SinkTime, Span};
use sequence::plan::{Action, Condition, LoopHead, Next, OnInterruption, Op, Plan};
use wire::{Cause, Mode, Order};

use super::bench::Bench;
use super::plans::{head, milliamperes, millivolts, plan, step, until};
use crate::event::{Command, Ending, Happening, Output};
use crate::replay::{Recorded, replay};

/// A piece of a program: a step, or a loop of pieces.
#[derive(Debug, Clone)]
enum Piece {
    Step {
        target: i64,
        millis: u64,
        ramp: bool,
        condition: u8,
    },
    Loop {
        times: u64,
        at_most: Option<u64>,
        condition: u8,
        body: Vec<Piece>,
    },
}

fn pieces() -> impl Strategy<Value = Vec<Piece>> {
    let leaf = (0_i64..2_900, 1_u64..1_500, any::<bool>(), 0_u8..8).prop_map(
        |(target, millis, ramp, condition)| Piece::Step {
            target,
            millis,
            ramp,
            condition,
        },
    );
    let piece = leaf.prop_recursive(3, 24, 4, |inner| {
        let body = prop::collection::vec(inner, 1..4);
        (1_u64..5, prop::option::of(1_u64..3_000), 0_u8..8, body).prop_map(
            |(times, at_most, condition, body)| Piece::Loop {
                times,
                at_most,
                condition,
                body,
            },
        )
    });
    prop::collection::vec(piece, 1..5)
}

fn condition(kind: u8) -> Option<Condition> {
    match kind {
        0 => Some(Condition::VoltageBelow(millivolts(3_500))),
        1 => Some(Condition::Charge(Charge::from_millicoulombs(700))),
        2 => Some(Condition::CurrentAbove(milliamperes(2_000))),
        _ => None,
    }
}

/// Writes the pieces as instructions; without conditions if they are not wanted.
fn write(pieces: &[Piece], conditions: bool, ops: &mut Vec<Op>) {
    let untils = |kind: u8| {
        let found = condition(kind).filter(|_| conditions);
        found.map(|found| until(found, Span::from_millis(u64::from(kind) * 100), Next::GoOn))
    };
    for piece in pieces {
        match piece {
            Piece::Step {
                target,
                millis,
                ramp,
                condition,
            } => {
                let duration = Span::from_millis(*millis);
                let ramp = if *ramp { duration } else { Span::ZERO };
                let target = milliamperes(*target);
                let mut step = step(Action::Current { target, ramp }, duration);
                step.until.extend(untils(*condition));
                ops.push(Op::Step(step));
            }
            Piece::Loop {
                times,
                at_most,
                condition,
                body,
            } => {
                let begin = u32::try_from(ops.len()).unwrap();
                ops.push(Op::LoopBegin(LoopHead {
                    at_most: at_most.map(Span::from_millis),
                    until: untils(*condition).into_iter().collect(),
                    ..head(Some(*times), 0)
                }));
                write(body, conditions, ops);
                let end = u32::try_from(ops.len()).unwrap();
                ops.push(Op::LoopEnd { begin });
                if let Op::LoopBegin(head) = &mut ops[usize::try_from(begin).unwrap()] {
                    head.end = end;
                }
            }
        }
    }
}

fn program(pieces: &[Piece], conditions: bool) -> Plan {
    let mut ops = Vec::new();
    write(pieces, conditions, &mut ops);
    let mut plan = plan(ops);
    plan.on_interruption = OnInterruption::Resume;
    plan
}

/// How long the pieces last, worked out without the walker.
fn duration(pieces: &[Piece]) -> u64 {
    pieces
        .iter()
        .map(|piece| match piece {
            Piece::Step { millis, .. } => *millis,
            Piece::Loop {
                times,
                at_most,
                body,
                ..
            } => {
                let whole = times * duration(body);
                at_most.map_or(whole, |at_most| whole.min(at_most))
            }
        })
        .sum()
}

/// Something that comes in between.
#[derive(Debug, Clone, Copy)]
enum Disturbance {
    Hold,
    Continue,
    Stop,
    Latency(u64),
    LoseReadings(bool),
    LoseCounters(bool),
    LoseEdges(bool),
    Voltage(i64),
    SourceLimit(i64),
    Leak(i64),
    Trip,
    Reconnect,
    RecordFailed,
}

fn disturbance() -> impl Strategy<Value = Disturbance> {
    prop_oneof![
        4 => Just(Disturbance::Hold),
        6 => Just(Disturbance::Continue),
        1 => Just(Disturbance::Stop),
        4 => (1_u64..1_500).prop_map(Disturbance::Latency),
        4 => any::<bool>().prop_map(Disturbance::LoseReadings),
        4 => any::<bool>().prop_map(Disturbance::LoseCounters),
        4 => any::<bool>().prop_map(Disturbance::LoseEdges),
        2 => (2_300_i64..4_300).prop_map(Disturbance::Voltage),
        1 => (1_000_i64..5_000).prop_map(Disturbance::SourceLimit),
        1 => (0_i64..70).prop_map(Disturbance::Leak),
        1 => Just(Disturbance::Trip),
        3 => Just(Disturbance::Reconnect),
        1 => Just(Disturbance::RecordFailed),
    ]
}

fn disturb(bench: &mut Bench, disturbance: Disturbance) {
    match disturbance {
        Disturbance::Hold => bench.command(Command::Hold),
        Disturbance::Continue => bench.command(Command::Continue),
        Disturbance::Stop => bench.command(Command::Stop),
        Disturbance::Latency(millis) => bench.latency = Span::from_millis(millis),
        Disturbance::LoseReadings(lose) => bench.lose_readings = lose,
        Disturbance::LoseCounters(lose) => bench.lose_counters = lose,
        Disturbance::LoseEdges(lose) => bench.lose_edges = lose,
        Disturbance::Voltage(volts) => bench.emf = millivolts(volts),
        Disturbance::SourceLimit(limit) => bench.limit = milliamperes(limit),
        Disturbance::Leak(leak) => bench.leak = milliamperes(leak),
        Disturbance::Trip => {
            let time = bench.now;
            bench.happen(Happening::SinkTripped {
                time,
                cause: Cause::Power,
                value: 1,
            });
        }
        Disturbance::Reconnect => {
            bench.happen(Happening::LinkLost);
            bench.lose_readings = false;
            bench.connect();
        }
        Disturbance::RecordFailed => bench.happen(Happening::RecordFailed),
    }
}

/// No order above a limit; `Off` first of a trip; after the end nothing but `Off`.
fn check_outputs(bench: &Bench) {
    let limits = crate::orders::Limits::new(bench.sequencer.plan());
    let mut ended = false;
    let mut first_of_event = true;
    let mut ids = 0;
    for recorded in &bench.record {
        let Recorded::Output(output) = recorded else {
            first_of_event = true;
            continue;
        };
        if ended {
            assert_eq!(*output, Output::Off, "after the end");
        }
        match output {
            Output::Order { id, order } => {
                ids += 1;
                assert_eq!(id.0, ids, "orders are numbered without a gap");
                if let Order::Step(step) = order {
                    match step.mode {
                        Mode::Current(current) => assert!(current <= limits.current),
                        Mode::Power(power) => assert!(power <= limits.power),
                        Mode::Resistance(_) => {}
                    }
                    assert!(step.start > SinkTime::ZERO);
                    assert!(step.hold >= step.ramp.min(step.hold));
                }
            }
            Output::Ended(_) => ended = true,
            Output::Off => {
                assert!(first_of_event, "off waits for nothing");
            }
            Output::Finding(_) => {}
        }
        first_of_event = false;
    }
    assert_eq!(ended, bench.ended.is_some());
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(192))]

    #[test]
    fn a_program_without_conditions_takes_exactly_its_time(pieces in pieces()) {
        let mut bench = Bench::connected(program(&pieces, false));
        bench.limit = milliamperes(10_000);
        let ending = bench.run(Span::from_secs(3_000));
        prop_assert_eq!(ending, Some(Ending::Finished));
        let last = bench.record.iter().rev().find_map(|recorded| match recorded {
            Recorded::Output(Output::Order { order: Order::Step(step), .. }) => Some(*step),
            Recorded::Output(_) | Recorded::Event(_) => None,
        }).unwrap();
        let zero = bench.starts[0].1;
        let took = (last.start + last.hold).saturating_since(zero);
        prop_assert_eq!(took, Span::from_millis(duration(&pieces)));
        // Every step began when the one before was over.
        let begun: Vec<SinkTime> = bench.starts.iter().map(|(_, time)| *time).collect();
        prop_assert!(begun.is_sorted());
        check_outputs(&bench);
    }

    #[test]
    fn whatever_happens_orders_stay_within_limits_and_the_record_replays(
        pieces in pieces(),
        disturbances in prop::collection::vec((0_u64..2_500, disturbance()), 0..12),
    ) {
        let mut bench = Bench::connected(program(&pieces, true));
        for (millis, what) in disturbances {
            bench.run(Span::from_millis(millis));
            disturb(&mut bench, what);
        }
        bench.run(Span::from_secs(30));
        check_outputs(&bench);
        let plan = bench.sequencer.plan().clone();
        let summary = replay(plan, bench.record.clone()).unwrap();
        prop_assert_eq!(summary.ending, bench.ended.clone());
    }

    #[test]
    fn a_sink_that_does_as_told_never_trips(
        pieces in pieces(),
        holds in prop::collection::vec((0_u64..2_500, any::<bool>()), 0..6),
        latency in 1_u64..60,
    ) {
        let mut bench = Bench::connected(program(&pieces, true));
        bench.latency = Span::from_millis(latency);
        for (millis, hold) in holds {
            bench.run(Span::from_millis(millis));
            if bench.ended.is_none() {
                bench.command(if hold { Command::Hold } else { Command::Continue });
            }
        }
        bench.command(Command::Continue);
        let ending = bench.run(Span::from_secs(3_000));
        prop_assert!(
            ending == Some(Ending::Finished),
            "{:?}\n{}", ending, bench.chronicle()
        );
    }
}
