//! Ticks and places.

use proptest::prelude::*;

use super::Scale;

#[test]
fn ticks_stand_at_round_values() {
    let scale = Scale {
        min: 2.41,
        max: 4.31,
        from: 100.0,
        to: 0.0,
    };
    let ticks = scale.ticks(4.5);
    let shown: Vec<String> = ticks
        .major
        .iter()
        .map(|value| format!("{value:.*}", ticks.decimals))
        .collect();
    assert_eq!(shown, ["2.5", "3.0", "3.5", "4.0"]);
    assert!((scale.place(2.41) - 100.0).abs() < 1e-9);
    assert!(scale.place(4.31).abs() < 1e-9);
}

#[test]
fn a_constant_has_air_around_it() {
    let scale = Scale::around(3.3, 3.3, (100.0, 0.0));
    assert!((scale.place(3.3) - 50.0).abs() < 1e-6);
}

proptest! {
    #[test]
    fn ticks_lie_within_and_are_neither_few_nor_many(
        low in -1e4..1e4_f64,
        span in 1e-3..1e5_f64,
        wanted in 3.0..9.0_f64,
    ) {
        let scale = Scale { min: low, max: low + span, from: 0.0, to: 500.0 };
        let ticks = scale.ticks(wanted);
        prop_assert!(!ticks.major.is_empty());
        prop_assert!(ticks.major.len() <= 12);
        for value in ticks.major.iter().chain(&ticks.minor) {
            prop_assert!(scale.contains(*value) || (value - scale.min).abs() < span * 1e-9);
        }
    }
}
