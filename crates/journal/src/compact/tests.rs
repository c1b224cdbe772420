use proptest::prelude::*;
use quantity::HostTime;

use super::{COLUMN_NAMES, decode, encode};
use crate::tests::fixture::{START, any_reading, reading};

#[test]
fn there_is_a_name_for_every_column() {
    let mut line = Vec::new();
    assert!(encode(&mut line, START, 7, START, &reading(7)));
    let columns = line.split(|byte| *byte == b',').count();
    // The last column is the checksum, which comes after.
    assert_eq!(columns + 1, COLUMN_NAMES.len());
}

#[test]
fn what_is_not_of_the_form_is_refused() {
    let mut line = Vec::new();
    assert!(encode(&mut line, START, 7, START, &reading(7)));
    for length in 0..line.len() {
        let cut = &line[..length];
        // Cut within the last number, it is another, shorter number of the same form; the
        // checksum is what tells.
        if cut.last().is_some_and(u8::is_ascii_digit)
            && cut.split(|byte| *byte == b',').count() == COLUMN_NAMES.len() - 1
        {
            continue;
        }
        assert_eq!(decode(cut, START), None, "{}", String::from_utf8_lossy(cut));
    }
    for wrong in [
        &b"[1,2,65536,4,5,6,7,8,9,10,11,1,0,1,1,1,1,1"[..],
        b"[1,2,3,4,5,6,7,8,9,10,11,12,0,1,1,1,1,1",
        b"[1,2,3,4,9223372036854775807,-1,7,8,9,10,11,1,0,1,1,1,1,1",
        b"[99999999999999999999999,2,3,4,5,6,7,8,9,10,11,1,0,1,1,1,1,1",
        b"[1,2,3,4,5,6,7,8,9,10,11,1,0,1,1,1,1,1,1",
        b"[-1,2,3,4,5,6,7,8,9,10,11,1,0,1,1,1,1,1",
    ] {
        assert_eq!(
            decode(wrong, START),
            None,
            "{}",
            String::from_utf8_lossy(wrong)
        );
    }
}

proptest! {
    #[test]
    fn whatever_it_takes_it_gives_back_to_the_last_bit(
        reading in any_reading(),
        number in any::<u64>(),
        base in any::<i64>(),
        at in any::<i64>(),
    ) {
        let (base, at) = (HostTime::from_micros(base), HostTime::from_micros(at));
        let mut line = Vec::new();
        if encode(&mut line, base, number, at, &reading) {
            prop_assert_eq!(decode(&line, base), Some((number, at, reading)));
        } else {
            prop_assert!(line.is_empty(), "nothing is left behind");
        }
    }

    #[test]
    fn no_bytes_upset_it(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        // Only that it returns is asked here: believing nothing is the checksum's work.
        let _ = decode(&bytes, START);
    }
}
