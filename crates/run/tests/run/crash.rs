//! A host that dies in mid-run, and one that takes over from what the disk holds.

use quantity::Span;
use sequencer::event::Ending;
use serde_json::json;
use simulator::link::LinkFaults;

use crate::bench::{on_a_supply, plan, sink, supply_sequence};
use crate::history::{
    every_edge_is_of_one_recorded_order, last_recorded_charge_c, the_counters_hold_the_charge,
};
use crate::stack::{NO_CURRENT_A, Stack, replays};

fn crashed(on_interruption: &str, at: Span, disk: Span) -> Stack {
    let entry = sink("left");
    let steps = json!([{ "repeat": { "times": 8, "steps": [
        { "draw": "800 mA", "for": "1 s" }, { "draw": "50 mA", "for": "700 ms" },
        { "rest": "300 ms" }
    ] } }]);
    let text = supply_sequence(
        "100 ms",
        &steps,
        &json!({ "on_interruption": on_interruption }),
    );
    let parts = on_a_supply(&entry);
    let mut stack = Stack::new(&entry, parts, plan(&text, &entry), &LinkFaults::default());
    stack.disk = Some(disk);
    stack.run_to(at);
    stack.crash();
    // Whatever was queued, the sink is off when its deadman has acted.
    stack.run_to(at.saturating_add(Span::from_millis(2_002)));
    assert!(stack.sink().current_a() < NO_CURRENT_A);
    stack.run_to(at.saturating_add(Span::from_secs(30)));
    assert!(stack.sink().current_a() < NO_CURRENT_A);
    every_edge_is_of_one_recorded_order(&stack);
    stack
}

fn moments() -> impl Iterator<Item = (Span, Span)> {
    let moments = [3_000, 3_333, 4_001, 5_750, 7_123, 9_999, 12_345];
    moments
        .into_iter()
        .flat_map(|at| [0, 5, 90].map(|disk| (Span::from_millis(at), Span::from_millis(disk))))
}

#[test]
fn a_run_that_may_resume_goes_on_from_its_record_to_its_end() {
    for (at, disk) in moments() {
        let mut stack = crashed("resume", at, disk);
        stack.resume();
        let ending = stack.run_to_the_end(Span::from_secs(200));
        assert_eq!(ending, Ending::Finished, "{at} {disk}: {}", stack.tale());
        replays(&stack.plan, &stack.entries, &ending);
        every_edge_is_of_one_recorded_order(&stack);
        the_counters_hold_the_charge(&stack);
        // No charge is lost over the gap: the record's last counters hold what truly flowed.
        let recorded = last_recorded_charge_c(&stack.entries).unwrap();
        let truth = stack.sink().truth().charge_c;
        assert!((recorded - truth).abs() < 0.02, "{recorded} C of {truth} C");
        // Eight rounds of 835 mC. When the sink went off is not known to better than the time
        // between two lines of the host and the reaction; the latest is taken, so that no step
        // is held for longer than planned, and what is short is short by that much at most.
        let unknown = 0.8 * (2.0 / 3.0 + 0.2 + 0.1);
        assert!((6.68 - unknown..=6.70).contains(&truth), "{truth} C");
    }
}

#[test]
fn a_run_that_may_not_resume_ends_as_interrupted() {
    for (at, disk) in moments() {
        let mut stack = crashed("end", at, disk);
        stack.resume();
        let ending = stack.run_to_the_end(Span::from_secs(200));
        assert_eq!(ending, Ending::Interrupted, "{at} {disk}: {}", stack.tale());
        assert!(stack.sink().current_a() < NO_CURRENT_A);
        replays(&stack.plan, &stack.entries, &ending);
        every_edge_is_of_one_recorded_order(&stack);
    }
}
