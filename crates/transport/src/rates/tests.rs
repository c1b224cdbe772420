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

#[test]
fn the_table_for_users_says_what_is_computed() {
    let guide = include_str!("../../../../docs/wiring-and-ports.md");
    let rows = guide.lines().filter_map(|line| {
        let (port, rest) = line.strip_prefix("| ")?.split_once(" baud")?;
        let cells = rest.split('|').map(str::trim).collect::<Vec<_>>();
        let baud = port.replace(' ', "").parse::<u32>().ok()?;
        Some((baud, cells[1].replace(' ', ""), cells[2].to_owned()))
    });
    let mut seen = 0;
    for (baud, carried, interval) in rows {
        let bytes = bytes_per_second(baud);
        assert_eq!(carried, bytes.to_string(), "{baud} baud");
        let fastest = fastest_readback(bytes).unwrap();
        assert_eq!(interval.parse::<Span>(), Ok(fastest), "{baud} baud");
        seen += 1;
    }
    assert_eq!(seen, 7);
}
