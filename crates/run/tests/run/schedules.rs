//! Links that lose, damage, repeat, delay, stall and are pulled out, by a thousand seeds.
//!
//! One seed alone: `SINKWARDEN_FAULT_SEED=17 cargo test -p run schedules`.

use journal::Body;
use quantity::{Ratio, Span};
use sequencer::event::{Ending, Happening};
use serde_json::json;
use simulator::link::{LinkFaults, Outage};
use simulator::noise::Noise;

use crate::bench::{on_a_supply, plan, sink, supply_sequence};
use crate::history::{
    every_edge_is_of_one_recorded_order, last_recorded_charge_c, last_said_charge_c,
    no_order_is_lost_silently, the_counters_hold_the_charge,
};
use crate::stack::{NO_CURRENT_A, Stack, replays};

const DEADMAN: Span = Span::from_secs(2);

/// What happens to one run.
#[derive(Debug)]
struct Schedule {
    faults: LinkFaults,
    /// The port says that the cable is off, as USB does and a serial line does not.
    told: bool,
    resumes: bool,
    disk: Span,
}

fn schedule(seed: u64) -> Schedule {
    let mut chance = Noise::new(seed);
    let mut share = |permille: u64| {
        let drawn = if chance.below(2) == 0 {
            0
        } else {
            chance.below(permille + 1)
        };
        Ratio::from_fraction(f64::from(u32::try_from(drawn).unwrap()) / 10_000.0).unwrap()
    };
    let (drop_byte, corrupt_byte, duplicate_byte) = (share(20), share(20), share(20));
    let (drop_line, duplicate_line) = (share(500), share(500));
    let mut millis = |least: u64, most: u64| Span::from_millis(least + chance.below(most - least));
    let delay_min = millis(0, 20);
    let delay_max = delay_min.saturating_add(millis(0, 80));
    let outage = |from, lasts| Outage { from, lasts };
    let stalls = vec![outage(millis(1_000, 45_000), millis(10, 1_500))];
    let unplugged = vec![outage(millis(1_000, 45_000), millis(100, 7_000))];
    let disk = millis(0, 60);
    let kind = millis(0, 16).micros() / 1_000;
    Schedule {
        faults: LinkFaults {
            drop_byte,
            corrupt_byte,
            duplicate_byte,
            drop_line,
            duplicate_line,
            delay_min,
            delay_max,
            stalls: if kind & 1 == 0 { stalls } else { Vec::new() },
            unplugged: if kind & 2 == 0 { unplugged } else { Vec::new() },
        },
        told: kind & 4 == 0,
        resumes: kind & 8 == 0,
        disk,
    }
}

fn run(seed: u64) -> Ending {
    let schedule = schedule(seed);
    let entry = sink("left");
    let steps = json!([{ "repeat": { "times": 20, "steps": [
        { "draw": "800 mA", "for": "1 s" }, { "draw": "50 mA", "for": "700 ms" },
        { "rest": "300 ms" }
    ] } }]);
    let more = json!({ "on_interruption": if schedule.resumes { "resume" } else { "end" } });
    let text = supply_sequence("200 ms", &steps, &more);
    let mut parts = on_a_supply(&entry);
    parts.seed = seed;
    let mut stack = Stack::new(&entry, parts, plan(&text, &entry), &schedule.faults);
    stack.disk = Some(schedule.disk);
    let outage = schedule.faults.unplugged.first().copied();
    if let Some(outage) = outage {
        let end = outage.from.saturating_add(outage.lasts);
        stack.run_to(outage.from);
        if schedule.told {
            stack.act(|keeper, now| keeper.link_lost("the cable is off", now));
        }
        stack.run_to(end.min(outage.from.saturating_add(DEADMAN)));
        // What reaches the sink last has left before the cable was off.
        let dead = outage
            .from
            .saturating_add(DEADMAN)
            .saturating_add(Span::from_millis(2));
        stack.stride = Span::from_millis(50);
        stack.currents = Some(Vec::new());
        stack.run_to(end);
        let currents = stack.currents.take().unwrap_or_default();
        for (at, current) in currents {
            assert!(
                at < dead || at >= end || current < NO_CURRENT_A,
                "{current} A at {at}"
            );
        }
        stack.stride = Span::from_secs(3600);
        if schedule.told {
            stack.act(run::Keeper::link_back);
        }
    }
    let ending = stack.run_to_the_end(Span::from_secs(150));
    // The idle keeper asks for readbacks of its own, which tell what the sink counted last.
    stack.stand_idle(stack.passed().saturating_add(Span::from_secs(6)));
    assert!(stack.sink().current_a() < NO_CURRENT_A);
    replays(&stack.plan, &stack.entries, &ending);
    every_edge_is_of_one_recorded_order(&stack);
    no_order_is_lost_silently(&stack.entries);
    the_counters_hold_the_charge(&stack);
    the_record_holds_the_charge(&stack);
    ending
}

/// The last readback of a run whose sink could say that it is off holds all that flowed.
fn the_record_holds_the_charge(stack: &Stack) {
    let off = stack
        .entries
        .iter()
        .rposition(|entry| matches!(entry.body, Body::Event(Happening::OffAcknowledged)));
    let Some(off) = off else { return };
    let counted_after = stack.entries[off..]
        .iter()
        .filter_map(journal::Entry::reading)
        .any(|reading| reading.counters.is_some());
    if counted_after
        && stack.entries[off..]
            .iter()
            .all(|entry| !is_order(&entry.body))
    {
        let recorded = last_recorded_charge_c(&stack.entries).unwrap();
        assert!((recorded - last_said_charge_c(stack)).abs() < 1e-9);
    }
}

fn is_order(body: &Body) -> bool {
    matches!(body, Body::Order { .. })
}

#[test]
fn a_thousand_schedules_of_faults_execute_nothing_twice_and_lose_nothing_silently() {
    let seeds = match std::env::var("SINKWARDEN_FAULT_SEED") {
        Ok(seed) => {
            let seed = seed.parse().unwrap();
            seed..seed + 1
        }
        Err(_) => 0..1_000,
    };
    let alone = seeds.end - seeds.start == 1;
    let mut failed = Vec::new();
    let mut finished = 0;
    for seed in seeds {
        match std::panic::catch_unwind(|| run(seed)) {
            Ok(Ending::Finished) => finished += 1,
            Ok(_) => {}
            Err(_) => failed.push(seed),
        }
    }
    assert!(failed.is_empty(), "failed with the seeds {failed:?}");
    assert!(
        alone || finished >= 300,
        "only {finished} runs came to their end"
    );
}
