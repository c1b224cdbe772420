//! Plans for the tests: a cell on a 3 A sink, and short programs for it.

use quantity::{Charge, Current, Energy, Power, Span, Temperature, Voltage};
use sequence::plan::{
    Action, Armed, Condition, Dut, DutKind, Interlocks, LoopHead, Next, OnInterruption, Op, Plan,
    PlanStep, Ranges, Until,
};
use sink::correction::Correction;

pub(super) fn milliamperes(value: i64) -> Current {
    Current::from_milliamperes(value)
}

pub(super) fn millivolts(value: i64) -> Voltage {
    Voltage::from_millivolts(value)
}

pub(super) fn millis(value: u64) -> Span {
    Span::from_millis(value)
}

pub(super) fn armed<T>(threshold: T, persistence: Span) -> Armed<T> {
    Armed {
        threshold,
        persistence,
    }
}

/// A plan with these instructions, for an invented cell and the invented sink `left`.
pub(super) fn plan(ops: Vec<Op>) -> Plan {
    Plan {
        title: "test".to_owned(),
        sink: "left".to_owned(),
        dut: Dut {
            label: "K-01".to_owned(),
            kind: DutKind::Cell,
            rated_capacity: Some(Charge::from_microcoulombs(11_520_000_000)),
            voltage_min: millivolts(2_500),
            voltage_max: millivolts(4_200),
            current_max: milliamperes(6_400),
            series: 1,
            parallel: 1,
        },
        ops,
        labels: vec!["discharge".to_owned(), "pulse".to_owned()],
        interlocks: Interlocks {
            over_temperature: armed(Temperature::from_whole_degrees_celsius(80), millis(500)),
            over_power: armed(Power::from_milliwatts(15_000), millis(200)),
            undervoltage: armed(millivolts(2_500), millis(50)),
            over_voltage: armed(millivolts(4_400), millis(50)),
            reversed_polarity: armed(millivolts(-200), Span::ZERO),
            over_current: armed(milliamperes(3_000), millis(20)),
            not_following: armed(milliamperes(50), millis(500)),
            not_releasing: armed(milliamperes(50), millis(100)),
            sensor_fault: millis(500),
            silence: millis(2_000),
            charge: Some(Charge::from_millicoulombs(12_000_000)),
            energy: Some(Energy::from_millijoules(50_000_000)),
            time: Some(Span::from_secs(100_000)),
            clock: millis(500),
        },
        deadman: millis(2_000),
        readback: millis(100),
        on_interruption: OnInterruption::End,
        ranges: Ranges {
            current: milliamperes(3_300),
            voltage: millivolts(20_000),
        },
        tick: millis(1),
        queue: 16,
        isolator: false,
        by_hand: false,
        correction: Correction::IDENTITY,
    }
}

pub(super) fn step(action: Action, duration: Span) -> PlanStep {
    PlanStep {
        action,
        duration,
        until: Vec::new(),
        then: Next::GoOn,
        readback: None,
        may_give_up: false,
        burst: None,
        label: None,
        pointer: String::new(),
    }
}

pub(super) fn current(target: i64, duration: Span) -> PlanStep {
    step(
        Action::Current {
            target: milliamperes(target),
            ramp: Span::ZERO,
        },
        duration,
    )
}

pub(super) fn draw(target: i64, duration: Span) -> Op {
    Op::Step(current(target, duration))
}

pub(super) fn rest(duration: Span) -> Op {
    Op::Step(step(Action::Rest, duration))
}

pub(super) fn until(condition: Condition, persistence: Span, then: Next) -> Until {
    Until {
        condition,
        persistence,
        then,
    }
}

pub(super) fn head(times: Option<u64>, end: u32) -> LoopHead {
    LoopHead {
        times,
        until: Vec::new(),
        at_most: None,
        end,
        label: None,
        pointer: String::new(),
    }
}

/// Two pulses of a logger, repeated.
pub(super) fn pulses(times: u64) -> Vec<Op> {
    vec![
        Op::LoopBegin(head(Some(times), 3)),
        draw(420, millis(50)),
        draw(4, millis(500)),
        Op::LoopEnd { begin: 0 },
    ]
}
