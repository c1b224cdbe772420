//! Heat against recomputed values and closed forms.

use quantity::Temperature;

use super::{Lag, Network, Rise, derating, largest_to_ambient};

fn network() -> Network {
    // R 0.7 and 0.3 K/W with C 1 and 10 J/K: time constants 0.7 and 3 s.
    Network::new(vec![
        Lag {
            resistance: 0.7,
            time_constant: 0.7,
        },
        Lag {
            resistance: 0.3,
            time_constant: 3.0,
        },
    ])
}

/// Recomputed with a general numerical library from the sum of R (1 - exp(-t/RC)).
#[test]
fn a_foster_network_gives_its_step_response() {
    // Times evenly spaced in their logarithm.
    for (exponent, impedance) in [
        (-1.0, 0.103_020_64),
        (-0.25, 0.437_798_1),
        (0.5, 0.887_806_34),
        (1.25, 0.999_200_54),
        (2.0, 1.0),
    ] {
        let seconds = 10_f64.powf(exponent);
        let is = network().impedance(seconds);
        assert!((is - impedance).abs() < 1e-7, "{is} at {seconds} s");
    }
    assert!((network().resistance() - 1.0).abs() < 1e-12);
}

#[test]
fn a_rise_does_not_depend_on_how_time_is_cut() {
    let mut whole = Rise::at_rest(network());
    whole.advance(5.0, 2.0);
    let mut cut = Rise::at_rest(network());
    for _ in 0..2_000 {
        cut.advance(5.0, 0.001);
    }
    assert!((whole.kelvins() - cut.kelvins()).abs() < 1e-9);
    assert!((whole.kelvins() - 5.0 * network().impedance(2.0)).abs() < 1e-12);
    whole.advance(0.0, 1e6);
    assert!(whole.kelvins().abs() < 1e-12);
}

/// R_sa <= (T_j - T_a - P R_jc - P R_cs) / P: 150 and 30 degC, 15 W, 1.5 K/W.
#[test]
fn a_heat_sink_is_sized_by_its_largest_resistance() {
    let celsius = Temperature::from_whole_degrees_celsius;
    let largest = largest_to_ambient(celsius(150), celsius(30), 15.0, 1.5).unwrap();
    assert!((largest - 6.5).abs() < 1e-12);
    assert_eq!(
        largest_to_ambient(celsius(150), celsius(30), 100.0, 1.5),
        None
    );
    assert_eq!(
        largest_to_ambient(celsius(150), celsius(30), 0.0, 1.5),
        None
    );
}

/// k = (T_max - T) / (T_max - T_ref), and never more than one.
#[test]
fn a_rating_falls_in_a_straight_line() {
    assert!((derating(25.0, 70.0, 155.0) - 1.0).abs() < 1e-12);
    assert!((derating(112.5, 70.0, 155.0) - 0.5).abs() < 1e-12);
    assert!(derating(200.0, 70.0, 155.0).abs() < 1e-12);
}

/// Forty rounds of 10 s with 5 W and 20 s with 1 W, walked one by one and leapt over.
#[test]
fn rounds_leapt_over_end_where_rounds_walked_end() {
    let round = |rise: &mut Rise| {
        rise.advance(5.0, 10.0);
        rise.advance(1.0, 20.0);
    };
    let mut walked = Rise::at_rest(network());
    walked.advance(2.0, 1.0);
    let mut leapt = walked.clone();
    let before = leapt.clone();
    round(&mut leapt);
    leapt.repeat(&before, 30.0, 39.0);
    for _ in 0..40 {
        round(&mut walked);
    }
    assert!((leapt.kelvins() - walked.kelvins()).abs() < 1e-12);
    // A round too short for any lag to move leaves things as they are.
    let still = walked.clone();
    walked.repeat(&still, 0.0, 1e6);
    assert_eq!(walked, still);
}
