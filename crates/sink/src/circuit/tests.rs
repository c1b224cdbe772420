//! The circuit against an independent circuit simulator.

use super::{Channel, Circuit, Wall};

/// The circuits of tests/data/sinkA.cir and sinkB.cir.
fn case_a() -> Circuit {
    Circuit {
        source: 5.0,
        series: 0.05,
        drain: 0.01,
        sense: 0.1,
        channel: Channel::SquareLaw {
            threshold: 2.5,
            factor: 4.0,
        },
        gate_max: 5.0,
        gain: 1e5,
    }
}

fn case_b() -> Circuit {
    Circuit {
        sense: 1.0,
        channel: Channel::SquareLaw {
            threshold: 3.0,
            factor: 20.0,
        },
        gate_max: 12.0,
        ..case_a()
    }
}

/// ngspice 39 (a general-purpose circuit simulator) on the netlists beside the
/// data: every point of both sweeps, current and node voltages, to 1e-6.
#[test]
fn the_simulator_s_sweeps_are_met() {
    let sweeps = [
        (case_a(), include_str!("../../tests/data/sinkA.csv")),
        (case_b(), include_str!("../../tests/data/sinkB.csv")),
    ];
    for (circuit, csv) in sweeps {
        let mut points = 0;
        for line in csv.lines().skip(1) {
            let [set, current, gate, sense, drain] = line
                .split(',')
                .map(|field| field.parse::<f64>().unwrap())
                .collect::<Vec<_>>()[..]
            else {
                panic!("five columns in {line}");
            };
            let point = circuit.settle(set);
            for (is, expected) in [
                (point.current, current),
                (point.gate, gate),
                (point.sense, sense),
                (point.drain, drain),
            ] {
                assert!(
                    ((is - expected) / expected).abs() < 1e-6,
                    "{is} is not {expected} at {set} V"
                );
            }
            points += 1;
        }
        assert!(points >= 40, "{points} points are not a sweep");
    }
}

/// The walls of both circuits, ngspice 39.
#[test]
fn the_walls_are_met_and_named() {
    let a = case_a().largest();
    assert!((a.current / 6.698_729_811 - 1.0).abs() < 1e-9);
    assert_eq!(a.wall, Wall::Gate);
    let b = case_b().largest();
    assert!((b.current / 4.665_881_315 - 1.0).abs() < 1e-9);
    assert_eq!(b.wall, Wall::Source);
}

/// I = (V_set - V_gate / gain) / R_sense below the wall.
#[test]
fn a_finite_gain_lets_the_current_fall_short() {
    let a = case_a().settle(0.5);
    assert!((a.current / 4.999_541_898 - 1.0).abs() < 1e-9);
    assert!((a.gate - 4.581_021).abs() < 1e-6);
    assert_eq!(a.wall, Wall::Following);
    let b = case_b().settle(3.0);
    assert!((b.current / 2.999_934_524 - 1.0).abs() < 1e-9);
}

#[test]
fn an_ideal_op_amp_sets_exactly_what_is_asked() {
    let ideal = Circuit {
        gain: f64::INFINITY,
        ..case_a()
    };
    assert!((ideal.settle(0.5).current - 5.0).abs() < 1e-12);
    assert!((ideal.settle(0.9).current - ideal.largest().current).abs() < 1e-12);
    assert_eq!(ideal.settle(0.9).wall, Wall::Gate);
}

#[test]
fn a_table_that_samples_the_square_law_gives_nearly_its_wall() {
    let points = (0..=100)
        .map(|step| {
            let gate = 2.5 + f64::from(step) * 0.03;
            (gate, 2.0 * (gate - 2.5).powi(2))
        })
        .collect();
    let table = Circuit {
        channel: Channel::Table(points),
        ..case_a()
    };
    let largest = table.largest();
    assert!((largest.current / 6.698_729_811 - 1.0).abs() < 1e-3);
    assert_eq!(largest.wall, Wall::Gate);
    // A source too weak for the gate's wall.
    let weak = Circuit {
        source: 0.5,
        ..table
    };
    assert_eq!(weak.largest().wall, Wall::Source);
    assert!((weak.largest().current - 0.5 / 0.16).abs() < 1e-6);
}

#[test]
fn no_source_gives_no_current() {
    let dead = Circuit {
        source: 0.0,
        ..case_a()
    };
    assert!(dead.largest().current.abs() < 1e-15);
    assert!(dead.settle(0.1).current.abs() < 1e-15);
}
