//! Properties of encoding and decoding together.

use proptest::prelude::*;
use std::vec::Vec;

use super::any::{host_bytes, host_line, sink_bytes, sink_line};
use crate::{Decoder, HostLine, LINE_BYTES_MAX, Line, LineError, SinkLine, checksum};

fn decode_all<T: Line>(bytes: &[u8]) -> Vec<Result<T, LineError>> {
    Decoder::new().feed(bytes).collect()
}

/// Whether a body happens to be followed by its own checksum, as one in 65,536 does.
fn ends_in_its_checksum(line: &[u8]) -> bool {
    let Some(at) = line.len().checked_sub(5) else {
        return false;
    };
    let (body, sum) = line.split_at(at);
    sum == std::format!(" {:04X}", checksum(body)).as_bytes()
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(2_000))]

    #[test]
    fn what_a_host_sends_arrives_unchanged(line in host_line()) {
        let bytes = host_bytes(&line);
        prop_assert!(bytes.len() <= LINE_BYTES_MAX);
        prop_assert_eq!(decode_all::<HostLine>(&bytes), [Ok(line)]);
    }

    #[test]
    fn what_a_sink_sends_arrives_unchanged(line in sink_line()) {
        let bytes = sink_bytes(&line);
        prop_assert!(bytes.len() <= LINE_BYTES_MAX);
        prop_assert_eq!(decode_all::<SinkLine>(&bytes), [Ok(line)]);
    }
}

proptest! {
    // Each case goes through every place of its line.
    #![proptest_config(ProptestConfig::with_cases(200))]

    #[test]
    fn any_one_changed_byte_spoils_a_line(line in sink_line(), change in 1..=u8::MAX) {
        let bytes = sink_bytes(&line);
        for at in 0..bytes.len() - 1 {
            let mut changed = bytes.clone();
            changed[at] ^= change;
            let results = decode_all::<SinkLine>(&changed);
            prop_assert!(!results.is_empty());
            prop_assert!(results.iter().all(Result::is_err), "byte {} of {:?}", at, results);
        }
    }

    #[test]
    fn any_one_changed_byte_spoils_an_order(line in host_line(), change in 1..=u8::MAX) {
        let bytes = host_bytes(&line);
        for at in 0..bytes.len() - 1 {
            let mut changed = bytes.clone();
            changed[at] ^= change;
            let results = decode_all::<HostLine>(&changed);
            prop_assert!(!results.is_empty());
            prop_assert!(results.iter().all(Result::is_err), "byte {} of {:?}", at, results);
        }
    }

    #[test]
    fn a_truncated_line_is_no_message(line in sink_line()) {
        let bytes = sink_bytes(&line);
        for len in 1..bytes.len() - 1 {
            let mut truncated = bytes[..len].to_vec();
            // A burst sample can by chance read as the checksum of what precedes it.
            prop_assume!(!ends_in_its_checksum(&truncated));
            truncated.push(b'\n');
            let results = decode_all::<SinkLine>(&truncated);
            prop_assert_eq!(results.len(), 1);
            prop_assert!(results[0].is_err(), "{} bytes of {:?}", len, line);
        }
    }

    #[test]
    fn a_truncated_order_is_no_message(line in host_line()) {
        let bytes = host_bytes(&line);
        for len in 1..bytes.len() - 1 {
            let mut truncated = bytes[..len].to_vec();
            truncated.push(b'\n');
            let results = decode_all::<HostLine>(&truncated);
            prop_assert_eq!(results.len(), 1);
            prop_assert!(results[0].is_err(), "{} bytes of {:?}", len, line);
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(2_000))]

    #[test]
    fn arbitrary_bytes_give_no_message_without_their_checksum(
        bytes in proptest::collection::vec(any::<u8>(), 0..300),
    ) {
        for line in bytes.split(|byte| *byte == b'\n') {
            let line = line.strip_suffix(b"\r").unwrap_or(line);
            let mut ended = line.to_vec();
            ended.push(b'\n');
            for result in decode_all::<SinkLine>(&ended) {
                prop_assert!(result.is_err() || ends_in_its_checksum(line));
            }
            for result in decode_all::<HostLine>(&ended) {
                prop_assert!(result.is_err() || ends_in_its_checksum(line));
            }
        }
        // The whole, lines one after the other, must not panic either.
        prop_assert!(decode_all::<SinkLine>(&bytes).len() <= bytes.len());
    }

    #[test]
    fn fields_under_a_right_checksum_never_panic_and_are_read_in_one_way(
        body in "(r|c|b|ok|no|trip|step|limit|burst|hello)( (-?[0-9]{1,21}|[a-z-]{1,12}|)){0,9}",
    ) {
        let body = body.as_bytes();
        let mut line = body.to_vec();
        line.extend(std::format!(" {:04X}", checksum(body)).into_bytes());
        // Whatever is accepted encodes to the very same line: there is one way to write it.
        if let Ok(message) = SinkLine::decode(&line) {
            let again = sink_bytes(&message);
            prop_assert_eq!(again.strip_suffix(b"\n"), Some(&line[..]));
        }
        if let Ok(message) = HostLine::decode(&line) {
            let again = host_bytes(&message);
            prop_assert_eq!(again.strip_suffix(b"\n"), Some(&line[..]));
        }
    }

    #[test]
    fn a_message_survives_any_noise_in_front_of_it(
        noise in proptest::collection::vec(any::<u8>(), 0..200),
        line in sink_line(),
    ) {
        let mut bytes = noise;
        bytes.push(b'\n');
        bytes.extend(sink_bytes(&line));
        let results = decode_all::<SinkLine>(&bytes);
        prop_assert_eq!(results.last(), Some(&Ok(line)));
    }

    #[test]
    fn it_does_not_matter_in_which_pieces_bytes_arrive(
        lines in proptest::collection::vec(sink_line(), 1..4),
        noise in "(\r|\n|[ -~]{0,120}|\x01)",
        cuts in proptest::collection::vec(1..60_usize, 1..20),
    ) {
        let mut bytes: Vec<u8> = lines.iter().flat_map(sink_bytes).collect();
        bytes.extend(noise.bytes());
        bytes.extend(lines.iter().flat_map(sink_bytes));
        let whole = decode_all::<SinkLine>(&bytes);
        let mut one_by_one = Decoder::<SinkLine>::new();
        let single: Vec<_> = bytes.iter().filter_map(|byte| one_by_one.push(*byte)).collect();
        prop_assert_eq!(&single, &whole);
        let mut in_pieces = Decoder::<SinkLine>::new();
        let mut pieces = Vec::new();
        let mut rest = &bytes[..];
        for cut in cuts.iter().cycle() {
            let (piece, after) = rest.split_at(rest.len().min(*cut));
            pieces.extend(in_pieces.feed(piece));
            rest = after;
            if rest.is_empty() {
                break;
            }
        }
        prop_assert_eq!(&pieces, &whole);
    }
}
