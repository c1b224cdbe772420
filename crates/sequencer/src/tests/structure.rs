//! Plans that cannot be run are refused, and the limits sent are on the safe side.

use quantity::{Current, Power, Resistance, Span};
use sequence::plan::{Action, Next, Op, Plan};
use sink::correction::{Correction, Curve};
use wire::{LimitKind, Mode, Order};

use super::bench::Bench;
use super::plans::{
    armed, current, draw, head, milliamperes, millis, millivolts, plan, rest, step,
};
use crate::event::Output;
use crate::orders::Limits;
use crate::replay::Recorded;
use crate::{PlanError, Sequencer};

fn refusal(plan: Plan) -> PlanError {
    Sequencer::new(plan).unwrap_err()
}

fn of(ops: Vec<Op>) -> PlanError {
    refusal(plan(ops))
}

#[test]
fn loops_that_do_not_match_never_end_or_never_breathe_are_refused() {
    let body = || draw(1, millis(10));
    assert_eq!(of(vec![]), PlanError::NoStep);
    let open = vec![Op::LoopBegin(head(Some(2), 5)), body()];
    assert_eq!(of(open), PlanError::LoopMismatch { op: 0 });
    let stray = vec![body(), Op::LoopEnd { begin: 0 }];
    assert_eq!(of(stray), PlanError::LoopMismatch { op: 1 });
    let crossed = vec![
        Op::LoopBegin(head(Some(2), 3)),
        Op::LoopBegin(head(Some(2), 4)),
        body(),
        Op::LoopEnd { begin: 0 },
        Op::LoopEnd { begin: 1 },
    ];
    assert_eq!(of(crossed), PlanError::LoopMismatch { op: 3 });
    let empty = vec![
        Op::LoopBegin(head(Some(2), 1)),
        Op::LoopEnd { begin: 0 },
        body(),
    ];
    assert_eq!(of(empty), PlanError::EmptyLoop { op: 0 });
    let endless = vec![
        Op::LoopBegin(head(None, 2)),
        body(),
        Op::LoopEnd { begin: 0 },
    ];
    assert_eq!(of(endless), PlanError::EndlessLoop { op: 0 });
    let idle = vec![
        Op::LoopBegin(head(Some(0), 2)),
        body(),
        Op::LoopEnd { begin: 0 },
    ];
    assert_eq!(of(idle), PlanError::IdleLoop { op: 0 });
}

#[test]
fn steps_that_no_sink_can_time_or_hold_are_refused() {
    let short = of(vec![draw(1, Span::from_micros(999))]);
    assert!(matches!(short, PlanError::TooShort { op: 0, .. }));
    assert!(
        short.to_string().contains("fold it into its neighbour"),
        "{short}"
    );
    assert_eq!(
        of(vec![draw(3_001, millis(10))]),
        PlanError::AboveLimit { op: 0 }
    );
    let power = Action::Power {
        target: Power::from_milliwatts(15_001),
    };
    assert_eq!(
        of(vec![Op::Step(step(power, millis(10)))]),
        PlanError::AboveLimit { op: 0 }
    );
    let short_circuit = Action::Resistance {
        target: Resistance::ZERO,
    };
    let refused = of(vec![Op::Step(step(short_circuit, millis(10)))]);
    assert_eq!(refused, PlanError::NotDrawing { op: 0 });
    assert_eq!(
        of(vec![draw(-1, millis(10))]),
        PlanError::NotDrawing { op: 0 }
    );
}

#[test]
fn a_target_whose_nominal_value_is_above_the_nominal_limit_is_refused() {
    let mut plan = plan(vec![draw(2_990, millis(10))]);
    // The sink sets 1 % too little, so 2990 mA take a nominal 3020 mA.
    plan.correction.current_set = Curve::line(0, -10_000_000).unwrap();
    assert_eq!(refusal(plan), PlanError::AboveLimit { op: 0 });
}

#[test]
fn skips_into_loops_and_to_nowhere_are_refused() {
    let mut skipping = current(1, millis(10));
    skipping.then = Next::SkipTo(2);
    let into = vec![
        Op::Step(skipping.clone()),
        Op::LoopBegin(head(Some(2), 3)),
        rest(millis(10)),
        Op::LoopEnd { begin: 1 },
    ];
    assert_eq!(of(into), PlanError::BadSkip { op: 0, target: 2 });
    skipping.then = Next::SkipTo(9);
    assert_eq!(
        of(vec![Op::Step(skipping)]),
        PlanError::BadSkip { op: 0, target: 9 }
    );
}

#[test]
fn intervals_that_would_trip_or_that_no_sink_takes_are_refused() {
    let sound = || plan(vec![draw(1, millis(10))]);
    let mut slow = sound();
    slow.readback = millis(2_000);
    assert!(matches!(refusal(slow), PlanError::SlowReadback { .. }));
    let mut slow_step = current(1, millis(10));
    slow_step.readback = Some(millis(5_000));
    assert!(matches!(
        of(vec![Op::Step(slow_step)]),
        PlanError::SlowReadback { .. }
    ));
    let mut deadman = sound();
    deadman.deadman = millis(50);
    assert!(matches!(refusal(deadman), PlanError::Deadman { .. }));
    let mut queue = sound();
    queue.queue = 2;
    assert!(matches!(refusal(queue), PlanError::ShortQueue { queue: 2 }));
    let mut label = current(1, millis(10));
    label.label = Some(7);
    assert_eq!(
        of(vec![Op::Step(label)]),
        PlanError::UnknownLabel { op: 0, label: 7 }
    );
}

#[test]
fn all_six_limits_come_before_anything_else_and_on_the_safe_side() {
    let mut plan = plan(vec![draw(1_000, millis(1_000))]);
    plan.correction = Correction {
        current_set: Curve::IDENTITY,
        current_read: Curve::line(2_000, 10_000_000).unwrap(),
        voltage_read: Curve::line(-3_000, -5_000_000).unwrap(),
        ..Correction::IDENTITY
    };
    let bench = super::bench::Bench::connected(plan);
    let orders: Vec<Order> = bench
        .record
        .iter()
        .filter_map(|recorded| match recorded {
            Recorded::Output(Output::Order { order, .. }) => Some(*order),
            Recorded::Output(_) | Recorded::Event(_) => None,
        })
        .collect();
    let limits: Vec<LimitKind> = orders
        .iter()
        .filter_map(|order| {
            if let Order::Limit { limit, .. } = order {
                Some(*limit)
            } else {
                None
            }
        })
        .collect();
    assert_eq!(limits.len(), 6);
    // (3 A - 2 mA) / 1.01 rounded down; (4.4 V + 3 mV) / 0.995 down; (2.5 V + 3 mV) / 0.995 up.
    assert_eq!(
        limits[0],
        LimitKind::Current(Current::from_microamperes(2_968_316))
    );
    assert_eq!(
        limits[2],
        LimitKind::VoltageHigh(quantity::Voltage::from_microvolts(4_425_125))
    );
    assert_eq!(
        limits[3],
        LimitKind::VoltageLow(quantity::Voltage::from_microvolts(2_515_578))
    );
    assert!(matches!(orders[6], Order::Deadman { .. }));
    assert!(matches!(orders[7], Order::Readback { .. }));
    assert_eq!(orders.len(), 8, "no step before a reading");
}

#[test]
fn a_power_is_converted_so_that_the_true_power_is_the_one_asked_for() {
    let mut plan = plan(vec![draw(1, millis(10))]);
    plan.correction = Correction {
        current_set: Curve::line(0, 20_000_000).unwrap(),
        current_read: Curve::IDENTITY,
        voltage_read: Curve::line(0, -10_000_000).unwrap(),
        ..Correction::IDENTITY
    };
    let limits = Limits::new(&plan);
    let target = Power::from_milliwatts(4_000);
    let Mode::Power(nominal) = limits.mode(&plan, Action::Power { target }, millivolts(4_000))
    else {
        panic!("a power stays a power")
    };
    // 1 A true is 0.980392 A nominal, 4 V true are 4.040404 V nominal.
    assert_eq!(nominal.microwatts() / 100, 3_961_180_i64 / 100);
    let target = Resistance::from_milliohms(4_000);
    let mode = limits.mode(&plan, Action::Resistance { target }, millivolts(4_000));
    let Mode::Resistance(nominal) = mode else {
        panic!("a resistance stays one")
    };
    assert_eq!(nominal.microohms() / 100, 4_121_213 / 100);
}

#[test]
fn a_sink_that_follows_never_exceeds_its_own_excess_limit() {
    let mut plan = plan(vec![draw(1, millis(10))]);
    plan.interlocks.not_releasing = armed(milliamperes(40), Span::ZERO);
    plan.correction.current_read = Curve::line(0, -20_000_000).unwrap();
    let setup = Limits::new(&plan).setup(&plan);
    let Order::Limit {
        limit: LimitKind::Excess(excess),
        ..
    } = setup[5]
    else {
        panic!("the sixth limit is the excess")
    };
    // At 3 A the readback shows 61 mA more than was set, though nothing is wrong.
    assert!(excess > milliamperes(61), "{excess}");
}

#[test]
fn an_isolator_is_closed_before_the_first_step() {
    let with = |isolator| {
        let mut plan = plan(vec![draw(1_000, millis(100))]);
        plan.isolator = isolator;
        let mut bench = Bench::connected(plan);
        bench.run(Span::from_secs(3));
        let orders = bench.record.iter().filter_map(|recorded| match recorded {
            Recorded::Output(Output::Order { order, .. }) => Some(*order),
            Recorded::Output(_) | Recorded::Event(_) => None,
        });
        orders.collect::<Vec<Order>>()
    };
    let closing = Order::Isolator { closed: true };
    let orders = with(true);
    let closed = orders.iter().position(|order| *order == closing);
    let step = orders
        .iter()
        .position(|order| matches!(order, Order::Step(_)));
    assert!(closed.is_some() && closed < step, "{orders:?}");
    assert!(!with(false).contains(&closing));
}
