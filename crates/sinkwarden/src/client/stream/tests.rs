//! Events come out of the stream whole, in order, or not at all.

use super::*;

fn received(text: &str) -> Vec<Received> {
    let mut stream = Stream::new(text.as_bytes());
    std::iter::from_fn(|| stream.next().unwrap()).collect()
}

fn event(id: &str, name: &str, data: &str) -> Received {
    Received {
        id: Some(id.to_owned()),
        name: name.to_owned(),
        data: data.to_owned(),
    }
}

#[test]
fn an_event_has_its_number_its_name_and_its_data() {
    let text = "retry: 1000\nid: 7\nevent: sink\ndata: {\"a\":1}\n\nid: 8\nevent:run\ndata:x\n\n";
    assert_eq!(
        received(text),
        [event("7", "sink", "{\"a\":1}"), event("8", "run", "x")]
    );
}

#[test]
fn several_lines_of_data_are_one_text() {
    assert_eq!(
        received("id: 1\nevent: e\ndata: a\ndata: b\n\n"),
        [event("1", "e", "a\nb")]
    );
}

#[test]
fn comments_and_empty_events_are_passed_over_and_a_number_alone_is_kept() {
    let text = ": keep-alive\n\nid: 3\n\nevent: e\ndata: x\n\n";
    assert_eq!(received(text), [event("3", "e", "x")]);
}

#[test]
fn line_ends_may_have_a_carriage_return() {
    assert_eq!(
        received("id: 1\r\nevent: e\r\ndata: x\r\n\r\n"),
        [event("1", "e", "x")]
    );
}

#[test]
fn an_event_that_the_end_cuts_off_is_none() {
    assert_eq!(received("id: 1\nevent: e\ndata: x\n"), []);
    assert_eq!(received("id: 1\nevent: e\ndata: x"), []);
}

#[test]
fn what_is_no_text_ends_the_stream_with_an_error() {
    let mut stream = Stream::new(&b"data: \xff\n\n"[..]);
    assert_eq!(
        stream.next().unwrap_err().kind(),
        io::ErrorKind::InvalidData
    );
}
