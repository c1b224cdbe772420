//! A rehearsal of a night hears millions of readbacks.

use super::*;
use crate::port::HostClock;

const PAIRS: u64 = 200;
const BATCHES: usize = 200;

/// What a pair may cost besides its decoding, in nanoseconds. Measured: about 250 on a busy machine; the rest is
/// for slow machines.
const NANOSECONDS_MAX: u64 = 700;

/// The shortest time a batch took, per pair: the others were disturbed.
fn fastest(mut batch: impl FnMut()) -> u64 {
    let clock = HostClock::start();
    let mut times = Vec::new();
    for _ in 0..BATCHES {
        let begun = clock.now();
        batch();
        times.push(clock.now().saturating_since(begun).micros() * 1_000 / PAIRS);
    }
    times.into_iter().min().unwrap()
}

#[test]
fn a_readback_pair_costs_little_besides_its_decoding() {
    let mut bench = Bench::open();
    let mut pairs = Vec::new();
    for _ in 0..PAIRS * BATCHES as u64 {
        bench.now += Span::from_millis(100);
        bench.peer.say_pair(bench.now, 0, 0);
        pairs.push((bench.now, bench.peer.take()));
    }
    let mut chunks = pairs.chunks(usize::try_from(PAIRS).unwrap()).cycle();
    let decoding = fastest(|| {
        let mut decoder = Decoder::<SinkLine>::new();
        for (_, bytes) in chunks.next().unwrap() {
            let lines = decoder.feed(bytes).flatten().count();
            assert_eq!(lines, 2);
        }
    });
    let whole = fastest(|| {
        for (now, bytes) in chunks.next().unwrap() {
            bench.session.receive(bytes, *now);
            let heard = std::iter::from_fn(|| bench.session.poll_heard());
            let readings = heard.filter(|heard| matches!(heard, Heard::Reading(_)));
            assert_eq!(readings.count(), 1);
            std::hint::black_box(bench.session.deadline());
        }
    });
    let own = whole.saturating_sub(decoding);
    assert!(
        own < NANOSECONDS_MAX,
        "{own} ns a pair besides {decoding} ns of decoding"
    );
    println!("{own} ns a pair besides {decoding} ns of decoding");
}
