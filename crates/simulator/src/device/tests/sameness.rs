//! The bytes hang on the configuration, the seed and the bytes in; on nothing else.

use proptest::prelude::*;

use super::*;

/// What a test run does, in order.
#[derive(Debug, Clone)]
enum Act {
    Step(Mode, u64, u64),
    Wait(u64),
}

fn acts() -> impl Strategy<Value = Vec<Act>> {
    let mode = prop_oneof![
        (0..3_500_000_i64).prop_map(|ua| Mode::Current(Current::from_microamperes(ua))),
        (100_000..9_000_000_i64).prop_map(|uw| Mode::Power(Power::from_microwatts(uw))),
        (1_500_000..90_000_000_i64)
            .prop_map(|uohm| Mode::Resistance(Resistance::from_microohms(uohm))),
    ];
    let act = prop_oneof![
        (mode, 0..300_u64, 1..9_000_u64).prop_map(|(mode, ramp, hold)| Act::Step(mode, ramp, hold)),
        (1..4_000_u64).prop_map(Act::Wait),
    ];
    prop::collection::vec(act, 1..8)
}

fn errors() -> impl Strategy<Value = Errors> {
    (
        prop_oneof![Just(0.0), Just(2e-4)],
        prop_oneof![Just(0.0), Just(4e-4)],
        prop_oneof![Just(0.0), Just(3e-3)],
        -100_000..100_000_i32,
    )
        .prop_map(
            |(current_noise_a, loop_time_constant_s, set_gain, oscillator_ppb)| Errors {
                current_noise_a,
                voltage_noise_v: current_noise_a,
                loop_time_constant_s,
                set_gain,
                sense_per_k: 5e-5,
                oscillator_ppb,
                ..Errors::default()
            },
        )
}

fn parts(errors: Errors, charge: f64, seed: u64) -> SinkParts {
    SinkParts {
        errors,
        seed,
        ..SinkParts::error_free(figures(), cell_m(charge))
    }
}

fn act(host: &mut Host, acts: &[Act], slice_ms: u64) {
    host.begin(Span::from_millis(100));
    for act in acts {
        match *act {
            Act::Step(mode, ramp, hold) => {
                host.step(mode, Span::from_millis(ramp), Span::from_millis(hold));
            }
            Act::Wait(millis) => {
                let mut left = millis;
                while left > 0 {
                    let part = left.min(slice_ms);
                    host.wait_ms(part);
                    left -= part;
                }
            }
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(48))]

    #[test]
    fn skipping_slicing_and_asking_change_no_byte(
        acts in acts(), errors in errors(), charge in 0.005_f64..1.0, seed in any::<u64>(),
    ) {
        let mut skipping = Host::new(parts(errors, charge, seed));
        let mut ticking = skipping.clone();
        let mut slicing = skipping.clone();
        ticking.sink.set_skipping(false);
        act(&mut skipping, &acts, u64::MAX);
        act(&mut ticking, &acts, u64::MAX);
        act(&mut slicing, &acts, 7);
        prop_assert_eq!(&skipping.bytes, &ticking.bytes);
        prop_assert_eq!(&skipping.bytes, &slicing.bytes);
        prop_assert_eq!(skipping.sink.truth(), ticking.sink.truth());
        prop_assert_eq!(skipping.sink.truth(), slicing.sink.truth());
        prop_assert!(skipping.bytes.len() > 100);
    }
}

fn noisy(seed: u64) -> Vec<u8> {
    let errors = Errors {
        current_noise_a: 5e-4,
        voltage_noise_v: 5e-4,
        temperature_noise_k: 0.05,
        ..Errors::default()
    };
    let mut host = Host::new(parts(errors, 0.9, seed));
    host.begin(Span::from_millis(100));
    host.step(amperes(0.64), Span::ZERO, Span::from_secs(600));
    host.wait_s(20);
    host.bytes
}

#[test]
fn the_same_seed_gives_the_same_bytes_and_another_seed_others() {
    assert_eq!(noisy(11), noisy(11));
    assert_ne!(noisy(11), noisy(12));
}

#[test]
fn a_stop_at_each_output_loses_and_adds_nothing() {
    let mut whole = Host::new(parts(Errors::default(), 0.9, 1));
    whole.begin(Span::from_millis(100));
    whole.step(amperes(0.64), Span::ZERO, Span::from_secs(60));
    let mut stopping = whole.clone();
    let until = whole.sink.now() + Span::from_secs(9);
    whole.sink.advance(until, &mut whole.bytes);
    let mut stops = 0;
    while stopping.sink.advance_to_output(until, &mut stopping.bytes) < until {
        stops += 1;
        assert!(stops < 1000);
    }
    assert_eq!(whole.bytes, stopping.bytes);
    assert_eq!(stopping.sink.now(), until);
    assert!(stops >= 89, "{stops}");
}

#[test]
fn a_slow_line_delays_bytes_and_loses_none_it_has_room_for() {
    let slow = SinkParts {
        bytes_per_second: Some(5760),
        ..parts(Errors::default(), 0.9, 1)
    };
    let mut host = Host::new(slow);
    host.say(&HostLine::Hello {
        token: 1,
        session: 7,
    });
    host.wait_ms(5);
    assert!(host.bytes.len() <= 16 + 5 * 6, "{}", host.bytes.len());
    host.wait_ms(60);
    assert_eq!(host.heard().len(), 5);
}
