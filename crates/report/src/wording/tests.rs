//! Numbers and words as a reader sees them.

use expect_test::expect;
use quantity::Span;
use sequencer::event::{Crossing, Interlock};

use super::{count, crossing, duration, elapsed, prefixed, rfc3339, significant, words};

fn plain(text: &str) -> String {
    text.replace('\u{202f}', " ")
}

#[test]
fn significant_digits_are_kept_and_none_before_the_point_is_lost() {
    let shown: Vec<String> = [3.18719, 31.8719, 318.719, 31_871.9, 0.031_871_9, 0.0, -0.5]
        .iter()
        .map(|value| significant(*value, 4))
        .collect();
    expect!["3.187 31.87 318.7 31872 0.03187 0 -0.5000"].assert_eq(&shown.join(" "));
}

#[test]
fn small_values_get_a_prefix() {
    assert_eq!(plain(&prefixed(0.64, "A", 4)), "640.0 mA");
    assert_eq!(plain(&prefixed(0.000_02, "A", 2)), "20 µA");
    assert_eq!(plain(&prefixed(2.75, "V", 4)), "2.750 V");
    assert_eq!(plain(&prefixed(0.031, "ohm", 2)), "31 mΩ");
    assert_eq!(plain(&prefixed(0.5, "degC", 3)), "0.500 °C");
}

#[test]
fn spans_are_told_in_their_two_largest_units() {
    let told: Vec<String> = [
        0,
        900,
        40_000,
        1_500_000,
        75_000_000,
        18_090_000_000,
        90_000_000_000,
    ]
    .iter()
    .map(|micros| plain(&duration(Span::from_micros(*micros))))
    .collect();
    expect!["0 s, 900 µs, 40 ms, 1.5 s, 75 s, 5 h 1 min, 1 d 1 h"].assert_eq(&told.join(", "));
    assert_eq!(elapsed(Span::from_micros(18_090_450_000)), "5:01:30.4");
}

#[test]
fn thousands_stand_apart() {
    assert_eq!(plain(&count(999)), "999");
    assert_eq!(plain(&count(4_000_000)), "4 000 000");
}

#[test]
fn a_time_that_is_none_is_told_as_it_stands() {
    assert_eq!(
        rfc3339("2026-12-01T21:00:00+01:00"),
        "2026-12-01 20:00:00 UTC"
    );
    assert_eq!(rfc3339("yesterday"), "yesterday");
}

#[test]
fn every_interlock_has_its_value_in_its_unit() {
    let told: Vec<String> = Interlock::ALL
        .iter()
        .map(|&interlock| {
            plain(&crossing(&Crossing {
                interlock,
                value: 2_499_000,
                threshold: 2_500_000,
                by_sink: interlock == Interlock::OverPower,
            }))
        })
        .collect();
    expect![[r"
        over-temperature: 2499 °C against a limit of 2500 °C, seen first by the host
        over-power: 2.499 W against a limit of 2.500 W, seen first by the sink’s own copy
        undervoltage: 2.499 V against a limit of 2.500 V, seen first by the host
        over-voltage: 2.499 V against a limit of 2.500 V, seen first by the host
        reversed polarity: 2.499 V against a limit of 2.500 V, seen first by the host
        over-current: 2.499 A against a limit of 2.500 A, seen first by the host
        not following: 2.499 A against a limit of 2.500 A, seen first by the host
        not releasing: 2.499 A against a limit of 2.500 A, seen first by the host
        sensor fault: impossible reading, seen first by the host
        silence: 2.499 s against a limit of 2.500 s, seen first by the host
        charge: 694.2 µAh against a limit of 694.4 µAh, seen first by the host
        energy: 694.2 µWh against a limit of 694.4 µWh, seen first by the host
        time: 2.499 s against a limit of 2.500 s, seen first by the host
        record, seen first by the host
        clock: 2.499 s against a limit of 2.500 s, seen first by the host
        refusal, seen first by the host"]]
    .assert_eq(&told.join("\n"));
    assert_eq!(words(&Interlock::OverTemperature), "over-temperature");
}

#[test]
fn what_stands_in_backticks_is_quoted_on_paper() {
    assert_eq!(
        super::quoted("capture with `burst`"),
        "capture with “burst”"
    );
    assert_eq!(super::quoted("`a` and `b`"), "“a” and “b”");
    assert_eq!(super::quoted("nothing"), "nothing");
    assert_eq!(super::quoted("one ` alone"), "one ` alone");
}
