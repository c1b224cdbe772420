//! Section 3: capture around an edge, sent afterwards in small pieces.

use crate::bench::{Bench, TICK_US};

/// Runs until the capture is sent; the samples by index, and the number of lines.
fn collect(bench: &mut Bench, number: u16) -> (Vec<Option<(u32, u32)>>, usize) {
    let mut samples = vec![None; 64];
    let mut lines = 0;
    for _ in 0..1_000 {
        bench.tick();
        for text in bench.heard_kind("b") {
            lines += 1;
            let fields: Vec<&str> = text.split(' ').collect();
            assert_eq!(fields[1], number.to_string());
            if fields[2] == "done" {
                return (samples, lines);
            }
            let index: usize = fields[2].parse().unwrap();
            assert!(fields.len() <= 3 + 8);
            for (i, pair) in fields[3..].chunks(2).enumerate() {
                assert!(samples[index + i].is_none(), "sent once");
                samples[index + i] = Some((pair[0].parse().unwrap(), pair[1].parse().unwrap()));
            }
        }
    }
    panic!("no end of the capture");
}

#[test]
fn a_burst_holds_the_samples_before_and_after_its_time() {
    let mut bench = Bench::on(100_000);
    bench.ticks(50);
    for number in 1..4 {
        let at = bench.now + 30 * TICK_US;
        bench.must("burst", &format!("{at} 10 20"));
        bench.must("step", &format!("current {at} 900000 0 3600000000"));
        let (samples, lines) = collect(&mut bench, number);
        for (index, sample) in samples.iter().enumerate().take(30) {
            // The sample at AT still answers the step before; the edge is put out then.
            let expected = if index <= 10 { 100_000 } else { 900_000 };
            assert_eq!(*sample, Some((expected, 3_700_000)), "sample {index}");
        }
        assert!(samples[30..].iter().all(Option::is_none));
        assert_eq!(lines, 8 + 1);
        bench.must("step", "current 0 100000 0 3600000000");
        bench.ticks(30);
    }
}

#[test]
fn one_capture_at_a_time_until_it_is_wholly_sent() {
    let mut bench = Bench::on(100_000);
    let at = bench.now + 5 * TICK_US;
    bench.must("burst", &format!("{at} 2 40"));
    bench.refused("burst", &format!("{at} 2 40"), "full");
    bench.ticks(20);
    bench.refused("burst", &format!("{} 2 40", bench.now + TICK_US), "full");
    bench.ticks(30);
    assert!(bench.firmware.transmit_waiting() > 0);
    bench.refused("burst", &format!("{} 2 40", bench.now + TICK_US), "full");
    collect(&mut bench, 1);
    bench.must("burst", &format!("{} 2 40", bench.now + TICK_US));
}

#[test]
fn its_size_and_time_are_checked() {
    let mut bench = Bench::on(100_000);
    let at = bench.now + 5 * TICK_US;
    bench.refused("burst", &format!("{at} 0 0"), "range");
    bench.refused("burst", &format!("{at} 32 33"), "range");
    bench.refused("burst", &format!("{} 1 1", bench.now - 1), "late");
    bench.must("burst", &format!("{at} 64 0"));
}

#[test]
fn off_gives_a_capture_up_and_a_trip_does_not() {
    let mut bench = Bench::on(100_000);
    let at = bench.now + 5 * TICK_US;
    bench.must("burst", &format!("{at} 2 10"));
    bench.raw(&crate::bench::line("off 1"));
    bench.ticks(100);
    assert!(bench.heard_kind("b").is_empty());

    let mut bench = Bench::on(100_000);
    bench.ticks(20);
    let at = bench.now + 5 * TICK_US;
    bench.must("burst", &format!("{at} 2 10"));
    bench.plant.temperature = crate::bench::celsius(81_000);
    let (samples, _) = collect(&mut bench, 1);
    assert_eq!(samples.iter().flatten().count(), 12);
}

#[test]
fn pieces_go_only_when_nothing_else_waits() {
    let mut bench = Bench::on(100_000);
    bench.must("burst", &format!("{} 0 40", bench.now + TICK_US));
    bench.must("readback", "20000");
    bench.ticks(200);
    // Nobody reads: one piece at most lies in the way of an answer.
    let waiting = bench.heard();
    assert!(waiting.iter().filter(|line| line.starts_with("b ")).count() <= 1);
    collect(&mut bench, 1);
}

#[test]
fn a_capture_soon_after_power_up_has_fewer_samples_before() {
    let mut bench = Bench::ready();
    bench.must("burst", &format!("{} 40 2", bench.now + 3 * TICK_US));
    let (samples, _) = collect(&mut bench, 1);
    let first = samples.iter().position(Option::is_some).unwrap();
    assert_eq!(first, 40 - 3, "one tick before the order, two before AT");
    assert_eq!(samples.iter().flatten().count(), 5);
}
