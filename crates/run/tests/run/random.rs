//! Whatever the sequence, the commands, the disk and the faults: the invariants hold.

use journal::Body;
use proptest::prelude::*;
use quantity::{Current, Span, Voltage};
use sequencer::event::{Command, Ending, Happening as Heard, Interlock};
use serde_json::{Value, json};
use simulator::fault::{Fault, Happening};
use simulator::link::LinkFaults;
use wire::{HostLine, Mode, Order};

use crate::bench::{on_a_supply, plan, sink, supply_sequence};
use crate::history::{every_edge_is_of_one_recorded_order, no_order_is_lost_silently};
use crate::stack::{NO_CURRENT_A, Stack, replays};

/// What somebody or something does to a run.
#[derive(Debug, Clone)]
enum Deed {
    Command(Command),
    DiskFails,
}

fn step() -> impl Strategy<Value = Value> {
    (0..3_u8, 20..1_200_u32, 30..4_000_u32).prop_map(|(kind, level, millis)| {
        let time = format!("{millis} ms");
        match kind {
            0 => json!({ "rest": time }),
            1 => json!({ "draw": format!("{level} mA"), "for": time }),
            _ => json!({
                "draw": format!("{level} mA"),
                "until": [{ "charge": "100 mC" }],
                "at_most": time
            }),
        }
    })
}

fn fault() -> impl Strategy<Value = Option<Fault>> {
    let what = prop_oneof![
        Just(None),
        Just(Some(Happening::MosfetOpen)),
        Just(Some(Happening::FeedbackLost)),
        Just(Some(Happening::TemperatureOpen)),
        Just(Some(Happening::SupplyVoltage(Voltage::from_millivolts(
            2_700
        )))),
        Just(Some(Happening::VoltageSenseLost)),
    ];
    (what, 500..15_000_u64).prop_map(|(what, at)| {
        what.map(|what| Fault {
            at: Span::from_millis(at),
            what,
        })
    })
}

fn deeds() -> impl Strategy<Value = Vec<(u64, Deed)>> {
    let deed = prop_oneof![
        3 => Just(Deed::Command(Command::Hold)),
        3 => Just(Deed::Command(Command::Continue)),
        1 => Just(Deed::Command(Command::Stop)),
        1 => Just(Deed::DiskFails),
    ];
    proptest::collection::vec((10..4_000_u64, deed), 0..6)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 96, ..ProptestConfig::default() })]

    #[test]
    fn the_invariants_hold(
        steps in proptest::collection::vec(step(), 1..8),
        times in 1..4_u32,
        fault in fault(),
        deeds in deeds(),
        // Below the sequencer's reaction time of 200 ms: behind a disk that is always slower, every
        // step ordered anew comes too late again, and the run does not get on (the sink is off).
        disk in 0..150_u64,
    ) {
        let entry = sink("left");
        let steps = json!([{ "repeat": { "times": times, "steps": steps } }]);
        let more = json!({ "interlocks": { "over_current": { "above": "1300 mA" } } });
        let plan = plan(&supply_sequence("100 ms", &steps, &more), &entry);
        let mut parts = on_a_supply(&entry);
        parts.faults.extend(fault);
        let mut stack = Stack::new(&entry, parts, plan, &LinkFaults::default());
        stack.disk = Some(Span::from_millis(disk));
        for (after, deed) in deeds {
            let at = stack.passed().saturating_add(Span::from_millis(after));
            stack.run_to(at);
            match deed {
                Deed::Command(command) => stack.act(|keeper, now| {
                    keeper.command(command, now);
                }),
                Deed::DiskFails => {
                    stack.disk = None;
                    stack.act(run::Keeper::record_failed);
                }
            }
        }
        // A run left on hold goes on.
        stack.act(|keeper, now| {
            keeper.command(Command::Continue, now);
        });
        let ending = stack.run_to_the_end(Span::from_secs(300));
        // The last readback may be of the very tick in which the current went off.
        stack.stand_idle(stack.passed().saturating_add(Span::from_millis(2)));
        prop_assert!(stack.sink().current_a() < NO_CURRENT_A);
        replays(&stack.plan, &stack.entries, &ending);
        every_edge_is_of_one_recorded_order(&stack);
        no_order_is_lost_silently(&stack.entries);
        no_order_above_the_limit(&stack);
        off_comes_first_and_at_once(&stack, &ending);
    }
}

fn no_order_above_the_limit(stack: &Stack) {
    let limit = Current::from_milliamperes(1_300);
    for (_, line) in &stack.link.device().told {
        if let HostLine::Order {
            order: Order::Step(step),
            ..
        } = line
        {
            assert!(matches!(step.mode, Mode::Current(target) if target <= limit));
        }
    }
}

/// Nothing but `off` follows the end; a trip begins with `off`; and `off` waits for no disk.
fn off_comes_first_and_at_once(stack: &Stack, ending: &Ending) {
    let place = stack
        .entries
        .iter()
        .position(|entry| matches!(entry.body, Body::Ended(_)))
        .unwrap();
    let (before, after) = stack.entries.split_at(place);
    assert!(
        !after
            .iter()
            .any(|entry| matches!(entry.body, Body::Order { .. }))
    );
    if !matches!(ending, Ending::Tripped(_)) {
        return;
    }
    let event = before
        .iter()
        .rposition(|entry| entry.event().is_some())
        .unwrap();
    assert_eq!(before[event + 1].body, Body::Off);
    if *ending == Ending::Tripped(Interlock::Record) {
        let at = before[event].at;
        let off = after
            .iter()
            .find(|entry| matches!(entry.body, Body::Event(Heard::OffAcknowledged)))
            .unwrap();
        assert!(off.at.saturating_since(at) <= Span::from_millis(2));
    }
}
