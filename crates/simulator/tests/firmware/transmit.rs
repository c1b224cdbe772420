//! Section 7: what is dropped when nobody reads, and what never is.

use crate::bench::{Bench, TICK_US, line};

#[test]
fn readbacks_are_dropped_first_then_events_and_answers_still_fit() {
    let mut bench = Bench::on(100_000);
    bench.host_alive = false;
    bench.must("deadman", "10000000");
    bench.must("readback", "20000");
    // Nobody reads for a second: fifty pairs, of which the ring keeps a few.
    bench.ticks(1_000);
    for i in 0..20 {
        bench.raw(&line(&format!(
            "step {} current 0 100000 0 3600000000",
            bench.next
        )));
        bench.next += 1;
        bench.ticks(i % 2 + 1);
    }
    bench.raw(&line("clock 77"));
    let lines = bench.heard();
    let count = |kind: &str| lines.iter().filter(|line| line.starts_with(kind)).count();
    assert_eq!(count("c "), count("r "), "pairs are whole");
    assert!((1..10).contains(&count("c ")));
    assert!((1..20).contains(&count("edge ")), "{lines:#?}");
    // Every one of the twenty was answered before room for answers ran out.
    assert_eq!(count("ok "), 20);
    assert_eq!(lines.last().unwrap(), "clock 77 1034000");
    // Reading again shows in K what was lost.
    let (counters, _) = bench.readback();
    assert!(counters[0] > 50);
    assert_eq!(bench.heard_kind("edge").len(), 0);
}

#[test]
fn an_order_whose_answer_has_no_room_is_not_executed_but_off_is() {
    let mut bench = Bench::on(100_000);
    let first = bench.next;
    for i in 0..500 {
        bench.raw(&line(&format!("deadman {} 2000000", first + i)));
    }
    // What could not be answered was as good as lost: sent again, it is executed.
    let answers = bench.heard_kind("ok");
    assert!((20..500).contains(&answers.len()));
    let expected = first + u16::try_from(answers.len()).unwrap();
    let gap = bench.say(&format!("deadman {} 2000000", expected + 1));
    assert_eq!(gap, [format!("no {} gap {expected}", expected + 1)]);
    bench.next = expected;
    bench.must("deadman", "2000000");

    for _ in 0..500 {
        bench.raw(&line("clock 1"));
    }
    bench.raw(&line("off 2"));
    assert!(!bench.tick().gate);
}

#[test]
fn a_trickle_of_any_width_carries_whole_lines() {
    for width in [1, 2, 7, 31, 97] {
        let mut bench = Bench::on(100_000);
        bench.must("readback", "20000");
        let mut bytes = Vec::new();
        for _ in 0..3_000 {
            bench.tick();
            bench.firmware.transmit(&mut bytes, width);
        }
        bench.firmware.transmit(&mut bytes, usize::MAX);
        let text = String::from_utf8(bytes).unwrap();
        for whole in text.lines() {
            let (body, _) = whole.rsplit_once(' ').unwrap();
            assert_eq!(line(body), format!("{whole}\n").into_bytes());
        }
        assert!(text.lines().count() > 2);
    }
}

#[test]
fn a_line_in_pieces_is_one_line() {
    let mut bench = Bench::cold();
    for byte in line("clock 5") {
        bench.now += TICK_US;
        bench.raw(&[byte]);
    }
    assert_eq!(bench.heard(), [format!("clock 5 {}", bench.now)]);
}
