use super::*;

#[track_caller]
fn check(baud: u32, micros: u64) {
    let fastest = fastest_readback(bytes_per_second(baud));
    assert_eq!(fastest, Some(Span::from_micros(micros)), "{baud} baud");
}

#[test]
fn a_readback_takes_no_more_than_two_thirds_of_the_port() {
    // 192 bytes at 10 bits each, times 3/2.
    check(9_600, 300_000);
    check(19_200, 150_000);
    check(57_600, 50_000);
    check(115_200, 25_000);
    check(230_400, 12_500);
    check(460_800, 6_250);
    check(921_600, 3_125);
}

#[test]
fn the_interval_is_rounded_up_never_down() {
    assert_eq!(fastest_readback(1_000_000), Some(Span::from_micros(288)));
    assert_eq!(fastest_readback(1_000_001), Some(Span::from_micros(288)));
    assert_eq!(fastest_readback(999_999), Some(Span::from_micros(289)));
}

#[test]
fn a_port_that_carries_nothing_has_no_readback() {
    assert_eq!(fastest_readback(0), None);
    assert_eq!(fastest_readback(bytes_per_second(9)), None);
}
