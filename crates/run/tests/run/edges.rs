//! Edges: each at its scheduled time, however long the pulses go on and whatever the link does.

use journal::Body;
use quantity::{SinkTime, Span};
use sequencer::event::{Ending, Finding};
use serde_json::json;
use simulator::link::{LinkFaults, Outage};
use wire::{Order, SinkLine};

use crate::bench::{on_a_supply, plan, sink, supply_sequence};
use crate::stack::{Stack, replays};

const TICK: Span = Span::from_millis(1);
const LONG: Span = Span::from_millis(500);
const SHORT: Span = Span::from_millis(50);

/// Runs so many pairs of pulses; gives the edges that the sink said it made.
fn pulses(pairs: u64, readback: &str, faults: &LinkFaults) -> (Stack, Vec<SinkTime>) {
    let entry = sink("left");
    let steps = json!([{ "repeat": { "times": pairs, "steps": [
        { "draw": "100 mA", "for": "500 ms" }, { "draw": "900 mA", "for": "50 ms" }
    ] } }]);
    let text = supply_sequence(readback, &steps, &json!({}));
    let parts = on_a_supply(&entry);
    let mut stack = Stack::new(&entry, parts, plan(&text, &entry), faults);
    let ending = stack.run_to_the_end(Span::from_secs(pairs + 60));
    assert_eq!(ending, Ending::Finished, "{}", stack.tale());
    replays(&stack.plan, &stack.entries, &ending);
    let said = stack.link.device().said.iter();
    let edges = said.filter_map(|(_, line)| match line {
        SinkLine::Edge { time, .. } => Some(*time),
        _ => None,
    });
    let edges = edges.collect();
    (stack, edges)
}

/// Every edge within a tick of its order's start, and the starts exactly by the schedule.
fn keep_time(stack: &Stack, edges: &[SinkTime], pairs: u64) {
    let starts: Vec<SinkTime> = stack
        .entries
        .iter()
        .filter_map(|entry| match &entry.body {
            Body::Order {
                order: Order::Step(step),
                ..
            } => Some(step.start),
            _ => None,
        })
        .collect();
    assert_eq!(starts.len() as u64, 2 * pairs);
    assert_eq!(edges.len(), starts.len());
    let mut due = starts[0];
    for (place, (start, edge)) in starts.iter().zip(edges).enumerate() {
        assert_eq!(*start, due, "the start of step {place}");
        assert!(edge >= start && edge.saturating_since(*start) <= TICK);
        due += if place % 2 == 0 { LONG } else { SHORT };
    }
}

#[test]
fn ten_thousand_pairs_of_pulses_keep_their_time_to_a_tick() {
    let (stack, edges) = pulses(10_000, "1 s", &LinkFaults::default());
    keep_time(&stack, &edges, 10_000);
}

#[test]
fn a_link_that_delays_and_stalls_less_than_the_queue_holds_moves_no_edge() {
    let stalls = (1..50_u64).map(|n| Outage {
        from: Span::from_millis(97_000 * n),
        lasts: Span::from_millis(1_200),
    });
    let faults = LinkFaults {
        delay_min: Span::from_millis(2),
        delay_max: Span::from_millis(60),
        stalls: stalls.collect(),
        ..LinkFaults::default()
    };
    let (stack, edges) = pulses(3_000, "200 ms", &faults);
    let rescheduled = stack
        .entries
        .iter()
        .any(|entry| matches!(entry.body, Body::Finding(Finding::Rescheduled { .. })));
    assert!(!rescheduled);
    keep_time(&stack, &edges, 3_000);
}
