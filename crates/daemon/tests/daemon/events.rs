use std::io::{BufRead as _, BufReader};
use std::time::Duration;

use crate::desk::{Desk, SHORT};

/// One event of the stream.
#[derive(Debug, Clone, PartialEq, Eq)]
struct Seen {
    id: u64,
    name: String,
    data: String,
}

/// Follows the stream after an event, until enough has been seen.
fn follow(desk: &Desk, last: Option<u64>, is_enough: impl Fn(&Seen) -> bool) -> Vec<Seen> {
    let agent: ureq::Agent = ureq::Agent::config_builder()
        .timeout_global(Some(Duration::from_secs(60)))
        .build()
        .into();
    let mut request = agent.get(format!("{}/v1/events", desk.url));
    if let Some(last) = last {
        request = request.header("Last-Event-ID", last.to_string());
    }
    let mut answer = request.call().unwrap();
    let lines = BufReader::new(answer.body_mut().as_reader()).lines();
    let mut seen = Vec::new();
    let mut event = Seen {
        id: 0,
        name: String::new(),
        data: String::new(),
    };
    for line in lines.map_while(Result::ok) {
        if let Some(id) = line.strip_prefix("id: ") {
            event.id = id.parse().unwrap();
        } else if let Some(name) = line.strip_prefix("event: ") {
            name.clone_into(&mut event.name);
        } else if let Some(data) = line.strip_prefix("data: ") {
            data.clone_into(&mut event.data);
        } else if line.is_empty() && !event.name.is_empty() {
            let done = is_enough(&event);
            seen.push(event.clone());
            event.name.clear();
            if done {
                return seen;
            }
        }
    }
    panic!("the stream ended before enough was seen: {seen:?}");
}

fn is_recorded(event: &Seen) -> bool {
    event.name == "run" && event.data.contains("recorded")
}

#[test]
fn a_run_is_followed_from_its_beginning_to_its_record() {
    let desk = Desk::open(50);
    let begun = follow(&desk, None, |_| true);
    assert_eq!(begun[0].name, "sink", "{begun:?}");
    let run = desk.start(SHORT);
    let seen = follow(&desk, Some(begun[0].id), is_recorded);
    let news: Vec<String> = seen
        .iter()
        .filter(|event| event.name == "run")
        .map(|event| {
            let data: serde_json::Value = serde_json::from_str(&event.data).unwrap();
            assert_eq!(data["run"], run.id.to_string());
            let news = &data["news"];
            let word = news.as_str().map(str::to_owned);
            word.unwrap_or_else(|| news.as_object().unwrap().keys().next().unwrap().clone())
        })
        .collect();
    assert_eq!(news[0], "began");
    assert!(news.contains(&"step".to_owned()), "{news:?}");
    assert_eq!(news[news.len() - 2..], ["ended", "recorded"]);
    assert!(seen.iter().any(|event| event.name == "sink"));
}

#[test]
fn a_viewer_that_comes_back_misses_nothing() {
    let desk = Desk::open(50);
    let start = follow(&desk, None, |_| true)[0].id;
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let whole = follow(&desk, Some(start), is_recorded);
    assert!(whole.windows(2).all(|pair| pair[0].id < pair[1].id));
    // Cut off after every third event, and taken up there.
    let mut pieces = Vec::new();
    let mut last = start;
    while !pieces.last().is_some_and(is_recorded) {
        let count = std::cell::Cell::new(0);
        let piece = follow(&desk, Some(last), |event| {
            count.set(count.get() + 1);
            count.get() == 3 || is_recorded(event)
        });
        last = piece.last().unwrap().id;
        pieces.extend(piece);
    }
    assert_eq!(pieces, whole);
}

#[test]
fn a_viewer_from_before_a_restart_is_told_that_events_are_gone() {
    let desk = Desk::open(50);
    let seen = follow(&desk, Some(17), |_| true);
    assert_eq!(seen[0].name, "gone");
    assert!(seen[0].data.contains("\"after\":17"), "{seen:?}");
}
