use super::*;
use wire::{OrderNumber, Reading};

fn readings(heard: &[Heard]) -> Vec<Reading> {
    heard
        .iter()
        .filter_map(|heard| {
            if let Heard::Reading(reading) = heard {
                Some(*reading)
            } else {
                None
            }
        })
        .collect()
}

#[test]
fn a_pair_becomes_one_reading_with_its_full_time() {
    let mut bench = Bench::open();
    bench.peer.say_pair(bench.now, 17, 0);
    bench.settle();
    let [reading] = readings(&bench.heard)[..] else {
        panic!("{:?}", bench.heard);
    };
    assert_eq!(reading.time, bench.peer.time(bench.now));
    assert_eq!(reading.counters.unwrap().charge.microcoulombs(), 17);
    assert_eq!(reading.values.voltage_min, volts(3_690));
    assert_eq!(reading.lost, 0);
}

#[test]
fn lost_lines_of_pairs_are_counted_and_times_are_unwrapped() {
    let mut bench = Bench::open();
    // Close under the turn of the low 32 bits, 71 minutes after the sink's start.
    bench.now = HostTime::from_micros(at(-5_000).micros() + 0xFFFF_FFFF - 150_000);
    let mut sent = Vec::new();
    for lose in [&[][..], &[0], &[1], &[0, 1], &[0], &[]] {
        bench.now += Span::from_millis(100);
        let pair = bench.peer.pair(bench.now, 0, 0);
        sent.push(bench.peer.time(bench.now));
        for (place, line) in pair.into_iter().enumerate() {
            if !lose.contains(&place) {
                bench.peer.say(line);
            }
        }
    }
    bench.settle();
    let heard = readings(&bench.heard)
        .iter()
        .map(|reading| (reading.time, reading.counters.is_some(), reading.lost))
        .collect::<Vec<_>>();
    assert_eq!(
        heard,
        [
            (sent[0], true, 0),
            (sent[1], false, 0),
            (sent[4], false, 2),
            (sent[5], true, 0)
        ]
    );
    assert_eq!(bench.session.counts().readbacks_lost, 2);
}

#[test]
fn a_pair_come_twice_is_heard_once() {
    let mut bench = Bench::open();
    for line in bench.peer.pair(bench.now, 0, 0) {
        bench.peer.say(line);
        bench.peer.say(line);
    }
    bench.settle();
    assert_eq!(readings(&bench.heard).len(), 1);
}

#[test]
fn events_are_heard_and_a_gap_among_them_is_told() {
    let mut bench = Bench::open();
    bench.order(5, step(500));
    bench.heard.clear();
    let time = bench.peer.time(bench.now);
    bench.say(SinkLine::Edge {
        event: 65_534,
        time,
        step: OrderNumber(1),
    });
    bench.say(SinkLine::Trip {
        event: 2,
        time,
        cause: wire::Cause::Temperature,
        value: 81_000,
    });
    bench.say(SinkLine::End { event: 3, time });
    assert_eq!(
        bench.take_heard(),
        [
            Heard::Edge {
                time,
                order: OrderId(5)
            },
            Heard::EventsLost { count: 2 },
            Heard::SinkTripped {
                time,
                cause: wire::Cause::Temperature,
                value: 81_000
            },
            Heard::HoldExpired { time },
        ]
    );
}

#[test]
fn a_step_whose_edge_was_lost_is_seen_in_the_counters() {
    let mut bench = Bench::open();
    bench.order(5, step(500));
    bench.heard.clear();
    for _ in 0..2 {
        bench.now += Span::from_millis(100);
        bench.peer.say_pair(bench.now, 0, 1);
    }
    bench.settle();
    let seen = bench
        .heard
        .iter()
        .filter(|heard| matches!(heard, Heard::StepSeen { .. }))
        .collect::<Vec<_>>();
    assert_eq!(
        seen,
        [&Heard::StepSeen {
            time: SinkTime::from_micros(5_100_000),
            order: OrderId(5)
        }]
    );
}

#[test]
fn noise_is_counted_and_reported_once_a_second() {
    let mut bench = Bench::open();
    let noise = (0..=255_u8).cycle().take(2_560).collect::<Vec<_>>();
    for _ in 0..10 {
        bench.session.receive(&noise, bench.now);
        bench.now += Span::from_millis(50);
    }
    bench.now += Span::from_secs(1);
    bench.session.tick(bench.now);
    bench.settle();
    let reports = bench
        .heard
        .iter()
        .filter_map(|heard| {
            if let Heard::Damaged {
                by: Side::Host,
                lines,
            } = heard
            {
                Some(*lines)
            } else {
                None
            }
        })
        .collect::<Vec<_>>();
    assert_eq!(reports, [10, 90]);
    assert!(bench.session.description().is_some());
}

#[test]
fn a_flood_is_not_listened_to_beyond_what_the_link_can_carry() {
    let mut bench = Bench::open();
    let flood = vec![b'x'; 1_000_000];
    bench.session.receive(&flood, bench.now);
    bench.settle();
    let flooded = bench.session.counts().flooded_bytes;
    assert!(flooded > 930_000, "{flooded}");
    assert!(bench.heard.contains(&Heard::Flood { bytes: flooded }));
    bench.now += Span::from_secs(1);
    bench.order(1, limit(500));
    assert!(bench.heard.contains(&acknowledged(1)));
}

#[test]
fn lines_damaged_on_the_way_to_the_sink_are_told() {
    let mut bench = Bench::open();
    bench.peer.say_pair(bench.now, 0, 0);
    bench.settle();
    bench.peer.damaged = 3;
    bench.now += Span::from_millis(100);
    bench.peer.say_pair(bench.now, 0, 0);
    bench.settle();
    assert!(bench.heard.contains(&Heard::Damaged {
        by: Side::Sink,
        lines: 3
    }));
}

#[test]
fn burst_samples_come_through() {
    let mut bench = Bench::open();
    let samples = [(Current::from_milliamperes(1), volts(3_700)); 4];
    bench.say(SinkLine::Burst {
        burst: 1,
        index: 8,
        len: 2,
        samples: [
            samples[0],
            samples[0],
            (Current::ZERO, Voltage::ZERO),
            (Current::ZERO, Voltage::ZERO),
        ],
    });
    bench.say(SinkLine::BurstDone { burst: 1 });
    let heard = bench.take_heard();
    assert!(
        matches!(heard[0], Heard::BurstSamples { burst: 1, index: 8, len: 2, samples: s } if s[1] == samples[1])
    );
    assert_eq!(heard[1], Heard::BurstDone { burst: 1 });
}

#[test]
fn a_sink_clock_out_of_bounds_is_told_once() {
    let mut bench = Bench::new();
    bench.peer.rate_ppm = 50_000;
    bench.tick();
    bench.pass(20_000);
    let told = bench
        .heard
        .iter()
        .filter(|heard| matches!(heard, Heard::ClockOff { .. }))
        .count();
    assert_eq!(told, 1);
    let estimate = bench.session.clock().unwrap();
    assert!(
        (estimate.rate_ppb - 50_000_000).abs() < 1_000,
        "{estimate:?}"
    );
}
