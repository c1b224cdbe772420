use std::io::{Read as _, Write as _};
use std::net::TcpStream;
use std::time::{Duration, Instant};

use daemon::view::{EndingWord, OffList, OffView, RunState, StateWord};

use crate::desk::Desk;
use crate::runs::long;

#[test]
fn off_turns_a_drawing_sink_off_at_once_however_busy_the_interface_is() {
    // In real time, with a readback every 20 ms.
    let desk = Desk::open(1);
    let sequence = long()
        .replace("200 ms", "20 ms")
        .replace("\"2 s\"", "\"200 ms\"");
    let run = desk.start(&sequence);
    let drawing = |run: &daemon::view::RunView| {
        run.reading
            .as_ref()
            .is_some_and(|reading| reading.current_a > 0.5)
    };
    desk.wait_for_run(run.id, "current", drawing);

    // Viewers that read nothing, requests that never end, and a rehearsal beside them.
    let _dead: Vec<TcpStream> = (0..40).map(|_| follow_without_reading(&desk)).collect();
    let body = serde_json::json!({"sequence": sequence, "sink": "right"}).to_string();
    let url = desk.url.clone();
    let load = std::thread::spawn(move || {
        let _ = ureq::post(format!("{url}/v1/sequences/rehearse"))
            .content_type("application/json")
            .send(body);
    });
    let asked = Instant::now();
    let answer = desk.post("/v1/sinks/left/off");
    let took = asked.elapsed();
    let off: OffView = serde_json::from_str(&answer.text).unwrap();
    assert!(off.acknowledged, "{off:?}");
    println!("off was acknowledged after {} ms", took.as_millis());
    // 100 ms is what it takes on a quiet machine; a loaded one may be slower by much.
    assert!(took < Duration::from_millis(900), "{took:?}");

    let run = desk.wait_for_run(run.id, "the run to end", |run| run.state == RunState::Ended);
    assert_eq!(run.ending.unwrap().how, EndingWord::Stopped);
    assert_eq!(run.reading.unwrap().state, StateWord::Off);
    // The last readback of the run still holds what was drawn before; the next does not.
    desk.wait_for("no current", |desk| {
        desk.get("/v1/sinks/left").json()["reading"]["current_max_a"].as_f64() < Some(0.01)
    });
    load.join().unwrap();
}

fn follow_without_reading(desk: &Desk) -> TcpStream {
    let address = desk.url.trim_start_matches("http://");
    let mut stream = TcpStream::connect(address).unwrap();
    write!(stream, "GET /v1/events HTTP/1.1\r\nHost: {address}\r\n\r\n").unwrap();
    stream
}

#[test]
fn off_for_every_sink_needs_no_body_and_no_run() {
    let desk = Desk::open(1);
    let answer = desk.post("/v1/off");
    let off: OffList = serde_json::from_str(&answer.text).unwrap();
    assert!(off.acknowledged, "{off:?}");
    let names: Vec<&str> = off.sinks.iter().map(|sink| sink.sink.as_str()).collect();
    assert_eq!(names, ["left", "right"]);
    // Nor a content type, nor anything else a client may forget.
    let address = desk.url.trim_start_matches("http://");
    let mut stream = TcpStream::connect(address).unwrap();
    write!(
        stream,
        "POST /v1/off HTTP/1.1\r\nHost: {address}\r\nConnection: close\r\n\r\n"
    )
    .unwrap();
    let mut answer = String::new();
    stream.read_to_string(&mut answer).unwrap();
    assert!(answer.starts_with("HTTP/1.1 200"), "{answer}");
}

#[test]
fn a_reset_is_answered_and_refused_while_a_run_is_in_progress() {
    let desk = Desk::open(20);
    assert_eq!(desk.post("/v1/sinks/left/reset").status, 200);
    let run = desk.start(&long());
    assert_eq!(desk.post("/v1/sinks/left/reset").code(), "sink-busy");
    desk.post("/v1/off");
    desk.wait_for_run(run.id, "the end", |run| run.state == RunState::Ended);
    assert_eq!(desk.post("/v1/sinks/middle/off").code(), "no-such-sink");
}
