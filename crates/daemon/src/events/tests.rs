use super::*;
use crate::view::{LinkEvent, LinkState};

fn link(reason: &str) -> EventBody {
    EventBody::Link(LinkEvent {
        sink: "left".into(),
        at: "2026-12-01T00:00:00Z".into(),
        state: LinkState::Lost,
        reason: Some(reason.into()),
    })
}

fn reasons(events: &[Written]) -> Vec<String> {
    let reason = |event: &Written| {
        let data: serde_json::Value = serde_json::from_str(&event.data).unwrap();
        match event.name {
            "gone" => format!("gone, oldest {}", data["oldest"]),
            _ => data["reason"].as_str().unwrap().to_owned(),
        }
    };
    events.iter().map(reason).collect()
}

#[test]
fn a_viewer_gets_every_event_once_and_in_order() {
    let log = EventLog::new(1);
    let mut place = Place::after(log.latest());
    for number in 0..5 {
        log.push(&link(&number.to_string()));
    }
    assert_eq!(reasons(&log.take(&mut place, 3)), ["0", "1", "2"]);
    log.push(&link("5"));
    assert_eq!(reasons(&log.take(&mut place, 9)), ["3", "4", "5"]);
    assert!(log.take(&mut place, 9).is_empty());
}

#[test]
fn a_viewer_that_comes_too_late_is_told_once_what_is_gone() {
    let log = EventLog::with_room(0, 4, 4);
    for number in 1..=10 {
        log.push(&link(&number.to_string()));
    }
    let mut place = Place::after(2);
    assert_eq!(
        reasons(&log.take(&mut place, 3)),
        ["gone, oldest 7", "7", "8"]
    );
    assert_eq!(reasons(&log.take(&mut place, 9)), ["9", "10"]);
}

#[test]
fn numbers_go_on_ascending_over_a_restart() {
    let before = EventLog::new(1_000);
    for _ in 0..100 {
        before.push(&link("x"));
    }
    let after = EventLog::new(1_001);
    assert!(after.latest() > before.latest());
    let mut place = Place::after(before.latest());
    assert_eq!(
        reasons(&after.take(&mut place, 1)),
        [format!("gone, oldest {}", after.latest() + 1)]
    );
}
