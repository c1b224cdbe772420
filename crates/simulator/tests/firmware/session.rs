//! Sections 1, 2, 3 and 5: lines, numbers, sessions, the description.

use crate::bench::{Bench, celsius, config, line};
use expect_test::expect;
use wire::Reset;

#[test]
fn hello_is_answered_by_the_description() {
    let mut bench = Bench::cold();
    bench.ticks(5);
    expect![[r"
        about 31 1 10000 4711 power
        front 31 1000 16 20000 64 15
        drive 31 12 409600 0 100000
        sense 31 12 4096000 8192000
        ready 31 4294967295 5000"]]
    .assert_eq(&bench.say("hello 31 4294967295").join("\n"));
}

#[test]
fn every_reset_reason_is_stated() {
    for (reset, word) in [
        (Reset::Power, "power"),
        (Reset::Pin, "pin"),
        (Reset::Watchdog, "watchdog"),
        (Reset::Software, "software"),
        (Reset::Unknown, "unknown"),
    ] {
        let mut bench = Bench::with(config(), reset);
        let about = bench.say("hello 0 1");
        assert_eq!(about[0], format!("about 0 1 10000 4711 {word}"));
    }
}

#[test]
fn a_watchdog_reset_is_reported_and_latched() {
    let mut bench = Bench::with(config(), Reset::Watchdog);
    bench.tick();
    assert_eq!(bench.heard(), ["trip 1 0 watchdog 0"]);
    bench.get_ready();
    bench.refused("step", "current 0 1000 0 1000000", "latched");
    bench.must("reset", "");
    bench.must("step", "current 0 1000 0 1000000");
}

#[test]
fn clock_answers_64_bit_time() {
    let mut bench = Bench::cold();
    bench.now = (1 << 32) + 5_000;
    bench.tick();
    assert_eq!(bench.say("clock 65535"), ["clock 65535 4294973296"]);
}

#[test]
fn a_return_before_the_line_end_is_ignored_and_elsewhere_it_damages() {
    let mut bench = Bench::cold();
    bench.raw(b"\n\r\n");
    let mut bytes = line("clock 1");
    bytes.insert(bytes.len() - 1, b'\r');
    bench.raw(&bytes);
    assert_eq!(bench.heard(), ["clock 1 0"]);
    assert_eq!(damaged(&mut bench), 0);
    bytes.insert(3, b'\r');
    bench.raw(&bytes);
    assert!(bench.heard().is_empty());
    assert_eq!(damaged(&mut bench), 1);
}

/// The count of damaged lines, by a readback of a fresh session.
fn damaged(bench: &mut Bench) -> i128 {
    bench.say("hello 2 99");
    bench.next = 1;
    bench.must("readback", "20000");
    bench.readback().0[6]
}

#[test]
fn damaged_lines_are_counted_and_never_acted_upon() {
    let mut bench = Bench::on(100_000);
    let good = String::from_utf8(line("off 7")).unwrap();
    for flipped in 0..good.len() - 1 {
        for bit in 0..7 {
            let mut bytes = good.clone().into_bytes();
            bytes[flipped] ^= 1 << bit;
            if bytes[flipped] == b'\n' || bytes[flipped] == b'\r' {
                continue;
            }
            bench.raw(&bytes);
            assert!(
                bench.heard().is_empty(),
                "{:?}",
                String::from_utf8_lossy(&bytes)
            );
        }
    }
    assert!(bench.tick().gate);
}

#[test]
fn damaged_lines_of_every_sort_count_one_each() {
    let mut bench = Bench::cold();
    bench.raw(b"clock 1 0000\n");
    bench.raw(b"clock 1\n");
    bench.raw(b"x\n");
    bench.raw(&[b'a'; 500]);
    bench.raw(b"\n");
    bench.raw(&line(&format!("clock {}", "1".repeat(85))));
    bench.raw(
        &String::from_utf8(line("clock 27"))
            .unwrap()
            .to_lowercase()
            .into_bytes(),
    );
    assert!(bench.heard().is_empty());
    // With a right checksum, refused as well.
    for (text, answer) in [
        ("clock 1 2", "no 0 range"),
        ("clock 65536", "no 0 range"),
        ("clock -1", "no 0 range"),
        ("clock 01", "no 0 range"),
        ("clock", "no 0 range"),
        ("clock  1", "no 0 range"),
        ("hello 3 0", "no 0 range"),
        ("hello 3 4294967296", "no 0 range"),
        ("off 3 4", "no 0 range"),
        ("OFF 3", "no 3 session"),
    ] {
        assert_eq!(bench.say(text), [answer], "{text}");
    }
    assert_eq!(damaged(&mut bench), 6 + 10);
}

#[test]
fn the_longest_line_is_96_bytes_with_its_end() {
    let mut bench = Bench::cold();
    let fits = format!("x{} 1", "y".repeat(87));
    assert_eq!(line(&fits).len(), 96);
    assert_eq!(bench.say(&fits), ["no 1 session"]);
    assert!(bench.say(&format!("x{fits}")).is_empty());
}

#[test]
fn an_order_without_a_session_is_refused() {
    let mut bench = Bench::cold();
    bench.tick();
    assert_eq!(
        bench.say("step 1 current 0 100000 0 1000000"),
        ["no 1 session"]
    );
    assert_eq!(bench.say("reset 5"), ["no 5 session"]);
    assert_eq!(bench.say("off 5"), ["ok 5 off"]);
    assert!(!bench.tick().gate);
}

#[test]
fn lines_that_outlived_a_reboot_are_refused() {
    let mut before = Bench::on(100_000);
    let number = before.next;
    before.must("step", "current 0 200000 0 1000000");
    // The same host goes on talking to a sink that has just started.
    let mut after = Bench::cold();
    assert_eq!(
        after.say(&format!("step {} current 0 200000 0 1000000", number + 1)),
        [format!("no {} session", number + 1)]
    );
    assert!(!after.ticks(5).gate);
}

#[test]
fn a_repeated_order_is_answered_again_and_not_executed_again() {
    let mut bench = Bench::on(100_000);
    let text = format!("step {} current 0 200000 0 1000000", bench.next);
    let first = bench.say(&text);
    bench.ticks(2);
    assert_eq!(bench.heard_kind("edge").len(), 1);
    assert_eq!(bench.say(&text), first);
    bench.ticks(2);
    assert!(bench.heard_kind("edge").is_empty());
}

#[test]
fn a_refusal_is_repeated_as_it_was() {
    let mut bench = Bench::ready();
    bench.refused("step", "current 0 3000001 0 1000000", "limit");
    bench.must("limit", "current 3100000 0");
    assert_eq!(
        bench.say("step 7 current 0 3000001 0 1000000"),
        ["no 7 limit"]
    );
}

#[test]
fn the_last_sixteen_answers_are_kept_and_no_more() {
    let mut bench = Bench::ready();
    for _ in 0..20 {
        bench.must("deadman", "1000000");
    }
    // 26 orders so far: 11 to 26 are kept.
    assert_eq!(bench.say("deadman 26 1000000"), ["ok 26"]);
    assert_eq!(bench.say("deadman 11 1000000"), ["ok 11"]);
    assert_eq!(bench.say("deadman 10 1000000"), ["no 10 gap 27"]);
    assert_eq!(bench.say("deadman 28 1000000"), ["no 28 gap 27"]);
    assert_eq!(bench.say("deadman 27 1000000"), ["ok 27"]);
}

#[test]
fn order_numbers_wrap_from_65535_to_1() {
    let mut bench = Bench::ready();
    while bench.next != u16::MAX {
        bench.must("deadman", "1000000");
    }
    bench.refused("deadman", "1", "range");
    assert_eq!(bench.next, 1);
    assert_eq!(bench.say("deadman 65535 1"), ["no 65535 range"]);
    assert_eq!(bench.say("deadman 65534 1000000"), ["ok 65534"]);
    bench.must("deadman", "1000000");
    bench.must("deadman", "1000000");
    assert_eq!(bench.say("deadman 65535 1"), ["no 65535 range"]);
    assert_eq!(bench.say("deadman 1 1000000"), ["ok 1"]);
    assert_eq!(bench.say("deadman 0 1000000"), ["no 0 range"]);
}

#[test]
fn a_refused_order_uses_up_its_number_but_a_gap_does_not() {
    let mut bench = Bench::ready();
    assert_eq!(bench.say("clear 9 0"), ["no 9 gap 7"]);
    bench.refused("wobble", "1 2 3", "unknown");
    bench.refused("limit", "charge 1 0", "unknown");
    bench.refused("step", "voltage 0 1 0 1", "unknown");
    bench.refused("clear", "-1", "range");
    bench.must("clear", "0");
}

#[test]
fn a_repeated_hello_only_repeats_the_description() {
    let mut bench = Bench::cold();
    let first = bench.say("hello 1 5");
    assert_eq!(bench.say("hello 1 5"), first);
    assert_eq!(bench.say("deadman 1 500000"), ["ok 1"]);
    assert_eq!(bench.say("deadman 2 500000"), ["ok 2"]);
}

#[test]
fn a_hello_begins_anew_once_a_number_is_used() {
    let mut bench = Bench::on(100_000);
    assert_eq!(bench.say("hello 4 77").len(), 5);
    assert!(!bench.tick().gate);
    bench.next = 1;
    bench.refused("step", "current 0 1000 0 1000", "unready");
}

#[test]
fn a_new_session_forgets_limits_queue_deadman_and_readbacks() {
    let mut bench = Bench::on(100_000);
    bench.must("readback", "20000");
    let later = bench.now + 50_000;
    bench.must("step", &format!("current {later} 200000 0 1000000"));
    bench.say("hello 4 78");
    assert!(!bench.ticks(200).gate);
    let lines = bench.heard();
    assert!(
        lines.iter().all(|line| line.starts_with("clock")),
        "{lines:?}"
    );
}

#[test]
fn a_latch_outlives_the_session_it_began_in() {
    let mut bench = Bench::on(100_000);
    bench.plant.temperature = celsius(80_001);
    bench.tick();
    bench.get_ready();
    bench.refused("step", "current 0 1000 0 1000000", "latched");
}

/// Every way a line can be lost, doubled or overtaken: go-back brings each order home once.
#[test]
fn lost_doubled_and_overtaking_lines_execute_each_order_once_and_in_turn() {
    let mut bench = Bench::on(100_000);
    bench.must("readback", "20000");
    let first = bench.next;
    let orders: Vec<String> = (0..8)
        .map(|i| {
            format!(
                "step {} current 0 {} 0 3600000000",
                first + i,
                110_000 + 1_000 * u32::from(i)
            )
        })
        .collect();
    let mut state = 0x2545_F491_u32;
    let mut begun = Vec::new();
    for _ in 0..200 {
        state ^= state << 13;
        state ^= state >> 17;
        state ^= state << 5;
        let pick = (state as usize) % orders.len();
        bench.raw(&line(&orders[pick]));
        bench.tick();
        for edge in bench.heard_kind("edge") {
            begun.push(edge.rsplit(' ').next().unwrap().parse::<u16>().unwrap());
        }
    }
    let expected: Vec<u16> = (first..first + 8).collect();
    assert_eq!(begun, expected);
}
