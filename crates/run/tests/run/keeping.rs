//! What a keeper owes its driver beside a run: answers to resets, and orders that do not outlive
//! their session.

use journal::{Body, Note};
use quantity::Span;
use run::{Effect, Keeper, KeeperConfig};
use sequencer::event::Ending;
use serde_json::json;
use simulator::device::SimulatedSink;
use simulator::link::LinkFaults;
use transport::port::VirtualDevice;
use wire::ReasonRefused;

use crate::bench::{EVENING, error_free, on_a_supply, plan, sink, supply_sequence};
use crate::history::{every_edge_is_of_one_recorded_order, no_order_is_lost_silently};
use crate::stack::{Stack, replays};
use crate::tapped::Tapped;

/// An idle keeper and its sink, driven for a while; gives the effects.
fn idle(keeper: &mut Keeper, sink: &mut Tapped, until: Span) -> Vec<Effect> {
    let mut effects = Vec::new();
    let (mut inbound, mut outbound) = (Vec::new(), Vec::new());
    loop {
        effects.extend(std::iter::from_fn(|| keeper.poll_effect()));
        outbound.clear();
        keeper.take_transmit(&mut outbound);
        sink.receive(&outbound);
        if VirtualDevice::now(sink) >= until {
            return effects;
        }
        let next = keeper.deadline().map(|at| at.saturating_since(EVENING));
        inbound.clear();
        sink.advance(next.map_or(until, |next| next.min(until)), &mut inbound);
        let now = EVENING.saturating_add(VirtualDevice::now(sink));
        if inbound.is_empty() {
            keeper.tick(now);
        } else {
            keeper.receive(&inbound, now);
        }
    }
}

#[test]
fn an_idle_sink_is_listened_to_reset_and_known_again_after_a_lost_link() {
    let entry = sink("left");
    let mut keeper = Keeper::new(KeeperConfig::for_sink(&entry).unwrap(), 1);
    let mut sink = Tapped::new(SimulatedSink::new(error_free(&entry)).unwrap());
    idle(&mut keeper, &mut sink, Span::from_secs(3));
    assert!(keeper.presence().description.is_some());
    assert!(keeper.presence().reading.is_some());

    let now = |seconds| EVENING.saturating_add(Span::from_secs(seconds));
    assert!(keeper.reset(now(3)));
    let effects = idle(&mut keeper, &mut sink, Span::from_secs(4));
    assert_eq!(effects, [Effect::Reset(Ok(()))]);

    keeper.link_lost("the cable is off", now(4));
    assert!(keeper.presence().description.is_none());
    keeper.link_back(now(4));
    idle(&mut keeper, &mut sink, Span::from_secs(6));
    assert!(keeper.presence().description.is_some());

    // A reset that no session will ever answer is answered all the same.
    let mut another = error_free(&entry);
    another.figures.serial = 9;
    let mut keeper = Keeper::new(KeeperConfig::for_sink(&entry).unwrap(), 1);
    let mut sink = Tapped::new(SimulatedSink::new(another).unwrap());
    let effects = idle(&mut keeper, &mut sink, Span::from_secs(2));
    assert!(matches!(effects[..], [Effect::NotTheSinkDescribed(_), ..]));
    assert!(keeper.reset(now(2)));
    let effects = idle(&mut keeper, &mut sink, Span::from_secs(3));
    let refused = Effect::Reset(Err(ReasonRefused::Session));
    assert!(effects.contains(&refused), "{effects:?}");
}

#[test]
fn an_order_that_waits_for_the_disk_does_not_outlive_its_session() {
    let entry = sink("left");
    let steps = json!([{ "repeat": { "times": 30, "steps": [
        { "draw": "800 mA", "for": "200 ms" }, { "draw": "50 mA", "for": "150 ms" }
    ] } }]);
    let text = supply_sequence("100 ms", &steps, &json!({ "on_interruption": "resume" }));
    let parts = on_a_supply(&entry);
    let mut stack = Stack::new(&entry, parts, plan(&text, &entry), &LinkFaults::default());
    stack.run_to(Span::from_secs(3));
    // Whatever is ordered now reaches the disk only when the next session stands.
    stack.disk = Some(Span::from_millis(600));
    stack.run_to(Span::from_millis(3_400));
    stack.act(|keeper, now| keeper.link_lost("the cable is off", now));
    stack.run_to(Span::from_millis(3_500));
    stack.act(Keeper::link_back);
    stack.disk = Some(Span::ZERO);
    let ending = stack.run_to_the_end(Span::from_secs(120));
    assert_eq!(ending, Ending::Finished, "{}", stack.tale());
    let unsent = stack.entries.iter().any(|entry| {
        matches!(&entry.body, Body::Note(Note::Text(text)) if text.contains("was not sent"))
    });
    assert!(unsent, "{}", stack.tale());
    replays(&stack.plan, &stack.entries, &ending);
    every_edge_is_of_one_recorded_order(&stack);
    no_order_is_lost_silently(&stack.entries);
}
