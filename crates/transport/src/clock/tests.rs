use super::*;

/// A sink whose clock started `offset` microseconds after the host's zero, and runs at
/// `1 + ppm / 1e6`.
struct Truth {
    offset: i64,
    ppm: i64,
}

impl Truth {
    fn sink(&self, host: i64) -> SinkTime {
        let passed = host - self.offset;
        SinkTime::from_micros(u64::try_from(passed + passed * self.ppm / 1_000_000).unwrap())
    }

    /// Asks at `host`; the ask takes `there`, the answer `back`.
    fn ask(
        &self,
        clock: &mut ClockAlignment,
        host: i64,
        there: i64,
        back: i64,
    ) -> Option<ClockFault> {
        clock.add(
            HostTime::from_micros(host),
            HostTime::from_micros(host + there + back),
            self.sink(host + there),
        )
    }
}

const SECOND: i64 = 1_000_000;

/// Round trips as on a serial port: mostly 1.6 ms, some up to 12 ms, asymmetric.
fn jitter(place: i64) -> (i64, i64) {
    let slow = if place % 7 == 3 { 9_000 } else { 0 };
    (700 + (place * 37) % 150 + slow, 800 + (place * 53) % 170)
}

fn run(truth: &Truth, seconds: i64) -> ClockAlignment {
    let mut clock = ClockAlignment::new(ClockBounds::default());
    for place in 0..seconds * 3 / 2 {
        let (there, back) = jitter(place);
        let fault = truth.ask(&mut clock, place * SECOND * 2 / 3, there, back);
        assert_eq!(fault, None, "at ask {place}");
    }
    clock
}

#[test]
fn a_sample_alone_aligns_to_within_half_its_round_trip() {
    let truth = Truth {
        offset: -30 * SECOND,
        ppm: 0,
    };
    let mut clock = ClockAlignment::new(ClockBounds::default());
    truth.ask(&mut clock, SECOND, 300, 1_700);
    let estimate = clock.estimate().unwrap();
    assert_eq!(estimate.uncertainty, Span::from_micros(1_001));
    assert_eq!(estimate.rate_ppb, 0);
    let host = HostTime::from_micros(SECOND + 300);
    let error = estimate
        .sink_at(host)
        .unwrap()
        .micros()
        .abs_diff(truth.sink(host.micros()).micros());
    assert!(error <= 1_000, "{error}");
}

#[test]
fn offset_and_rate_are_found_within_the_stated_bounds() {
    for ppm in [-18_000, -40, 0, 40, 250, 18_000] {
        let truth = Truth {
            offset: -4_000 * SECOND,
            ppm,
        };
        for seconds in [5, 60, 3_600] {
            let estimate = run(&truth, seconds).estimate().unwrap();
            let rate_error = (estimate.rate_ppb - ppm * 1_000).unsigned_abs();
            assert!(
                rate_error <= estimate.rate_uncertainty_ppb,
                "{ppm} ppm after {seconds} s: {estimate:?}"
            );
            let host = HostTime::from_micros(seconds * SECOND);
            let error = estimate
                .sink_at(host)
                .unwrap()
                .micros()
                .abs_diff(truth.sink(host.micros()).micros());
            assert!(
                error <= estimate.uncertainty_at(host).micros(),
                "{ppm} ppm after {seconds} s: {error} us off"
            );
        }
    }
}

#[test]
fn after_ten_minutes_the_rate_is_known_to_ten_parts_per_million() {
    let truth = Truth {
        offset: -SECOND,
        ppm: 40,
    };
    let estimate = run(&truth, 600).estimate().unwrap();
    assert!(estimate.rate_uncertainty_ppb < 10_000, "{estimate:?}");
    assert!(estimate.uncertainty < Span::from_millis(1), "{estimate:?}");
}

#[test]
fn the_line_maps_there_and_back() {
    let estimate = ClockEstimate {
        host: HostTime::from_micros(1_700_000_000_000_000),
        sink: SinkTime::from_micros(10_000_000),
        rate_ppb: 123_456,
        uncertainty: Span::from_micros(900),
        rate_uncertainty_ppb: 5_000,
    };
    for passed in [-9_000_000, 0, 1, 3_600_000_000, 86_400_000_000] {
        let host = HostTime::from_micros(1_700_000_000_000_000 + passed);
        let sink = estimate.sink_at(host).unwrap();
        let back = estimate.host_at(sink).unwrap();
        assert!(back.micros().abs_diff(host.micros()) <= 1);
    }
    assert_eq!(estimate.sink_at(HostTime::ZERO), None);
}

#[test]
fn a_jump_is_told_with_its_size_and_the_line_begins_anew() {
    let mut truth = Truth {
        offset: -SECOND,
        ppm: 40,
    };
    let mut clock = run(&truth, 60);
    truth.offset += 2 * SECOND;
    let fault = truth.ask(&mut clock, 61 * SECOND, 700, 800).unwrap();
    let ClockFault::Jumped { by, back: true } = fault else {
        panic!("{fault:?}");
    };
    assert!(by.micros().abs_diff(2_000_000) < 10_000, "{by:?}");
    assert_eq!(truth.ask(&mut clock, 62 * SECOND, 700, 800), None);
    let estimate = clock.estimate().unwrap();
    let host = HostTime::from_micros(62 * SECOND);
    let error = estimate
        .sink_at(host)
        .unwrap()
        .micros()
        .abs_diff(truth.sink(host.micros()).micros());
    assert!(error <= estimate.uncertainty_at(host).micros());
}

#[test]
fn a_slow_answer_is_no_jump() {
    let truth = Truth {
        offset: -SECOND,
        ppm: 40,
    };
    let mut clock = run(&truth, 60);
    assert_eq!(truth.ask(&mut clock, 61 * SECOND, 900_000, 1_000), None);
    assert_eq!(truth.ask(&mut clock, 63 * SECOND, 1_000, 1_900_000), None);
}

#[test]
fn a_rate_out_of_bounds_is_told_once_it_is_sure() {
    let truth = Truth {
        offset: -SECOND,
        ppm: -30_000,
    };
    let mut clock = ClockAlignment::new(ClockBounds::default());
    let mut told = None;
    for place in 0..30 {
        let (there, back) = jitter(place);
        told = told.or(truth.ask(&mut clock, place * SECOND / 2, there, back));
    }
    assert!(
        matches!(told, Some(ClockFault::Rate { ppb, .. }) if (ppb + 30_000_000).abs() < 2_000_000),
        "{told:?}"
    );
}

#[test]
fn memory_is_bounded_and_the_same_samples_give_the_same_line() {
    let truth = Truth {
        offset: -SECOND,
        ppm: 40,
    };
    let (one, other) = (run(&truth, 7_200), run(&truth, 7_200));
    assert!(one.samples.len() <= STRETCHES_MAX);
    assert_eq!(one.estimate(), other.estimate());
}

#[test]
fn a_long_gap_is_no_fault() {
    let truth = Truth {
        offset: -SECOND,
        ppm: 40,
    };
    let mut clock = run(&truth, 60);
    assert_eq!(truth.ask(&mut clock, 100 * 86_400 * SECOND, 700, 800), None);
}

#[test]
fn a_clock_that_does_not_run_straight_widens_the_bound() {
    let mut clock = ClockAlignment::new(ClockBounds::default());
    // The rate rises by 4 ppm each second, as of an RC oscillator that warms up.
    let sink = |host: i64| {
        let seconds = host / 1_000;
        SinkTime::from_micros(
            u64::try_from(SECOND + host + 2 * seconds * seconds / SECOND).unwrap(),
        )
    };
    for place in 0..400 {
        let host = place * SECOND * 2 / 3;
        let fault = clock.add(
            HostTime::from_micros(host),
            HostTime::from_micros(host + 1_500),
            sink(host + 750),
        );
        assert_eq!(fault, None);
    }
    let estimate = clock.estimate().unwrap();
    let host = 400 * SECOND * 2 / 3;
    let at = HostTime::from_micros(host);
    let error = estimate
        .sink_at(at)
        .unwrap()
        .micros()
        .abs_diff(sink(host).micros());
    assert!(error > 5_000, "{error} us is no test");
    assert!(
        error <= estimate.uncertainty_at(at).micros() * 11 / 10,
        "{error} us off: {estimate:?}"
    );
}

#[test]
fn a_steady_clock_makes_few_words() {
    let truth = Truth {
        offset: -SECOND,
        ppm: 40,
    };
    let mut clock = ClockAlignment::new(ClockBounds::default());
    let mut told: Option<ClockEstimate> = None;
    let mut words = 0;
    for place in 0..1_800 {
        truth.ask(&mut clock, place * 2 * SECOND, 0, 0);
        let estimate = clock.estimate().unwrap();
        if told.is_none_or(|told| told.materially_differs(&estimate)) {
            told = Some(estimate);
            words += 1;
        }
    }
    assert!((60..80).contains(&words), "{words} in an hour");
}
