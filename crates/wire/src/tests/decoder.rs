//! The decoder's named errors and its way of resuming.

use std::string::{String, ToString};
use std::vec::Vec;
use std::{format, vec};

use crate::{Decoder, HostLine, LINE_BYTES_MAX, Line, LineError, SinkLine, checksum};

fn signed(body: &str) -> String {
    format!("{body} {:04X}\n", checksum(body.as_bytes()))
}

fn sink_results(bytes: &[u8]) -> Vec<Result<SinkLine, LineError>> {
    Decoder::new().feed(bytes).collect()
}

fn sink_error(text: &str) -> String {
    match sink_results(text.as_bytes()).as_slice() {
        [Err(error)] => error.to_string(),
        other => panic!("{text:?} gave {other:?}"),
    }
}

#[test]
fn a_line_of_the_longest_length_is_judged_and_one_byte_more_is_not() {
    let longest = format!("{}\n", "x".repeat(LINE_BYTES_MAX - 1));
    assert_eq!(
        sink_results(longest.as_bytes()),
        [Err(LineError::ChecksumMissing)]
    );
    assert_eq!(
        sink_results(format!("x{longest}").as_bytes()),
        [Err(LineError::TooLong)]
    );
    assert_eq!(
        SinkLine::decode("x".repeat(LINE_BYTES_MAX).as_bytes()),
        Err(LineError::TooLong)
    );
}

#[test]
fn an_endless_line_is_reported_once_and_the_next_line_is_read() {
    let mut bytes = vec![b'7'; 10_000];
    bytes.push(b'\n');
    bytes.extend(signed("ok 7").into_bytes());
    let results = sink_results(&bytes);
    assert_eq!(results[0], Err(LineError::TooLong));
    assert!(results[1].is_ok());
    assert_eq!(results.len(), 2);
}

#[test]
fn a_carriage_return_is_ignored_before_the_line_end_only() {
    let line = signed("ok 7");
    let body = line.trim_end();
    assert!(sink_results(format!("{body}\r\n").as_bytes())[0].is_ok());
    let stray = Err(LineError::NotPrintable { byte: b'\r' });
    assert_eq!(sink_results(format!("{body}\r\r\n").as_bytes()), [stray]);
    assert_eq!(sink_results(format!("\r{body}\n").as_bytes()), [stray]);
}

#[test]
fn an_empty_line_is_nothing() {
    assert_eq!(sink_results(b"\n\r\n\n"), []);
}

#[test]
fn the_first_fault_of_a_line_is_the_one_reported() {
    assert_eq!(
        sink_results(b"ok\x07\x08\n"),
        [Err(LineError::NotPrintable { byte: 7 })]
    );
    let mut long = vec![b'1'; 200];
    long.extend(b"\x07\n");
    assert_eq!(sink_results(&long), [Err(LineError::TooLong)]);
}

#[test]
fn a_cleared_decoder_has_forgotten_the_line_under_way() {
    let mut decoder = Decoder::<SinkLine>::new();
    assert_eq!(decoder.feed(b"ok \x01 1234\r").count(), 0);
    decoder.clear();
    let results: Vec<_> = decoder.feed(signed("ok 7").as_bytes()).collect();
    assert!(results[0].is_ok());
}

#[test]
fn errors_say_what_is_wrong_and_what_is_allowed() {
    let good = signed("ok 7");
    let bad = good.replace("ok 7", "ok 8");
    let sum = checksum(b"ok 7");
    let expected = checksum(b"ok 8");
    assert_eq!(
        sink_error(&bad),
        format!("line has checksum {sum:04X}, its bytes give {expected:04X}")
    );
    assert_eq!(
        sink_error(&signed("ok 70000")),
        "field N is 70000, the protocol carries 1 to 65535"
    );
    assert_eq!(
        sink_error(&signed("ok 007")),
        "field N is no decimal integer without sign `+` and leading zeros"
    );
    assert_eq!(
        sink_error(&signed("no 7 perhaps")),
        "field REASON is none of the words it may be"
    );
    assert_eq!(
        sink_error("\u{b5}A\n"),
        "line holds byte 0xC2, only printable ASCII is allowed"
    );
}

#[test]
fn each_direction_refuses_the_other_ones_kinds() {
    let order = signed("reset 7");
    assert_eq!(
        sink_results(order.as_bytes()),
        [Err(LineError::UnknownKind)]
    );
    let answer = signed("ok 7");
    let results: Vec<_> = Decoder::<HostLine>::new().feed(answer.as_bytes()).collect();
    assert_eq!(results, [Err(LineError::UnknownKind)]);
}

#[test]
fn only_a_line_with_the_right_checksum_arrived_whole() {
    let meant = Decoder::<SinkLine>::new()
        .feed(signed("ok 0").as_bytes())
        .next();
    assert!(meant.unwrap().unwrap_err().arrived_whole());
    let damaged = Decoder::<SinkLine>::new().feed(b"ok 7 0000\n").next();
    assert!(!damaged.unwrap().unwrap_err().arrived_whole());
}
