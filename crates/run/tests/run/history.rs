//! What a sink truly did, told from both its lines, held against the record.

use std::collections::{BTreeMap, BTreeSet};

use journal::{Body, Entry, Note};
use quantity::Span;
use sequencer::event::Happening;
use wire::{HostLine, Order, OrderNumber, SinkLine};

use crate::stack::Stack;

/// What a sink was told and did within one session.
#[derive(Default)]
struct Session {
    begun: Span,
    orders: BTreeMap<OrderNumber, Vec<Order>>,
    edges: Vec<OrderNumber>,
}

fn sessions(stack: &Stack) -> Vec<Session> {
    let tapped = stack.link.device();
    let mut sessions: Vec<Session> = Vec::new();
    let mut latest = None;
    for (at, line) in &tapped.told {
        match line {
            HostLine::Hello { session, .. } if latest != Some(*session) => {
                latest = Some(*session);
                sessions.push(Session {
                    begun: *at,
                    ..Session::default()
                });
            }
            HostLine::Order { number, order } => {
                if let Some(session) = sessions.last_mut() {
                    session.orders.entry(*number).or_default().push(*order);
                }
            }
            HostLine::Hello { .. } | HostLine::Clock { .. } | HostLine::Off { .. } => {}
        }
    }
    for (at, line) in &tapped.said {
        if let SinkLine::Edge { step, .. } = line {
            let session = sessions.iter_mut().rev().find(|one| one.begun <= *at);
            session.unwrap().edges.push(*step);
        }
    }
    sessions
}

/// No step was begun twice, and none that the record does not hold.
pub(crate) fn every_edge_is_of_one_recorded_order(stack: &Stack) {
    let recorded: Vec<Order> = stack
        .entries
        .iter()
        .filter_map(|entry| match &entry.body {
            Body::Order { order, .. } => Some(*order),
            _ => None,
        })
        .collect();
    for session in sessions(stack) {
        let once: BTreeSet<_> = session.edges.iter().collect();
        assert_eq!(once.len(), session.edges.len(), "a step was begun twice");
        for (number, orders) in &session.orders {
            // A step that `off` overtook is sent again as a clearing; nothing else may differ.
            let steps: Vec<&Order> = orders
                .iter()
                .filter(|order| !matches!(order, Order::Clear { .. }))
                .collect();
            assert!(steps.windows(2).all(|pair| pair[0] == pair[1]));
            for order in steps {
                let is_step = matches!(order, Order::Step(_));
                assert!(!is_step || recorded.contains(order), "{order:?} unrecorded");
            }
            if session.edges.contains(number) {
                assert!(orders.iter().any(|order| matches!(order, Order::Step(_))));
            }
        }
    }
}

/// Every order in a closed record is answered, or the record says what became of it.
pub(crate) fn no_order_is_lost_silently(entries: &[Entry]) {
    let mut open = BTreeSet::new();
    for entry in entries {
        match &entry.body {
            Body::Order { id, .. } => {
                open.insert(id.0);
            }
            Body::Event(Happening::Acknowledged { order } | Happening::Refused { order, .. }) => {
                assert!(
                    open.remove(&order.0),
                    "order {} was answered twice",
                    order.0
                );
            }
            Body::Note(Note::Text(text)) => {
                let words: Vec<&str> = text.split(['/', ' ', ':']).collect();
                let said = ["was not sent", "will not begin", "without an answer"];
                if said.iter().any(|words| text.contains(words)) {
                    let place = words.iter().position(|word| *word == "order").unwrap();
                    let id: u64 = words[place + 1].parse().unwrap();
                    assert!(open.remove(&id), "order {id} was disposed of twice");
                }
            }
            _ => {}
        }
    }
    assert!(open.is_empty(), "orders {open:?} were lost silently");
}

/// The sink's own counters hold the charge that truly flowed, to what its converter resolves.
pub(crate) fn the_counters_hold_the_charge(stack: &Stack) {
    let truth = stack.sink().truth();
    let counted = last_said_charge_c(stack);
    // Half a code of 3.3 A / 4096 all the time, and a tick of 900 mA for what is not yet said.
    let bound = 0.5 * 3.3 / 4096.0 * truth.time_s + 0.9e-3;
    assert!(
        (counted - truth.charge_c).abs() <= bound,
        "{counted} C counted, {} C given",
        truth.charge_c
    );
}

/// The charge in the last counters that the sink sent, whether or not they arrived.
pub(crate) fn last_said_charge_c(stack: &Stack) -> f64 {
    let mut said = stack.link.device().said.iter().rev();
    let charge = said.find_map(|(_, line)| match line {
        SinkLine::Counters { counters, .. } => Some(counters.charge.coulombs()),
        _ => None,
    });
    charge.unwrap_or(0.0)
}

/// The charge in the last counters of the record.
pub(crate) fn last_recorded_charge_c(entries: &[Entry]) -> Option<f64> {
    let mut readings = entries.iter().rev().filter_map(Entry::reading);
    let counters = readings.find_map(|reading| reading.counters);
    counters.map(|counters| counters.charge.coulombs())
}
