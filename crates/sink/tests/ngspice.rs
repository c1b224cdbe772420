//! The envelope's circuit against ngspice as it runs here: operating points and both walls of the
//! example bench's sinks.
//!
//! ngspice is a general-purpose analogue circuit simulator (Debian package `ngspice`). Where it is
//! not installed the test says so; `cargo xtask test` counts that as skipped. A sweep that was
//! stored beside the tests holds the circuit everywhere.

#![expect(
    clippy::unwrap_used,
    clippy::print_stderr,
    reason = "a test may panic, and says what it skips"
)]

use std::fmt::Write as _;
use std::fs;
use std::process::Command;

use quantity::{Resistance, Voltage};
use sink::bench::{Bench, SinkEntry, Transfer};
use sink::circuit::{Circuit, Wall};
use sink::envelope::{Duration, Envelope, Limit};

/// A netlist of our own: op-amp with its gain and its rails, MOSFET by the square law (level 1,
/// nothing but threshold and factor), sense resistor, source with its resistance.
fn netlist(circuit: &Circuit, sink: &SinkEntry, sets: &[f64]) -> String {
    let Transfer::SquareLaw { threshold, factor } = &sink.mosfet.transfer else {
        panic!("the example's MOSFETs go by the square law");
    };
    let mut text = format!(
        "* one current sink\n\
         Vsource supply 0 DC {source}\n\
         Rseries supply drain {series}\n\
         Ron drain inner {on}\n\
         M1 inner gate sense sense NSQ L=1u W=1u\n\
         Rsense sense 0 {resistor}\n\
         Vset set 0 DC 0\n\
         Bamp gate 0 V = min(max({gain} * (V(set) - V(sense)), 0), {rail})\n\
         .model NSQ NMOS(LEVEL=1 VTO={vto} KP={kp} LAMBDA=0 GAMMA=0 RS=0 RD=0 IS=1e-30)\n\
         .options reltol=1e-9 abstol=1e-13 vntol=1e-10 gmin=1e-18 itl1=2000\n\
         .control\nset numdgt=12\nset noaskquit\n",
        source = circuit.source,
        series = circuit.series.max(1e-6),
        on = circuit.drain,
        resistor = circuit.sense,
        gain = circuit.gain,
        rail = circuit.gate_max,
        vto = threshold.volts(),
        kp = factor.amperes_per_square_volt(),
    );
    for set in sets {
        let _ = writeln!(text, "alter Vset dc = {set}\nop\nprint -i(Vsource)");
    }
    text.push_str("quit\n.endc\n.end\n");
    text
}

/// The source's currents for some set voltages; `None` where ngspice is not installed.
fn simulated(circuit: &Circuit, sink: &SinkEntry, sets: &[f64]) -> Option<Vec<f64>> {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("sink.cir");
    fs::write(&file, netlist(circuit, sink, sets)).unwrap();
    let run = Command::new("ngspice").arg("-b").arg(&file).output();
    let output = match run {
        Ok(output) => output,
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => {
            eprintln!("skipped: ngspice is not installed; to mend: apt-get install ngspice");
            return None;
        }
        Err(error) => panic!("ngspice cannot be started: {error}"),
    };
    let told = String::from_utf8_lossy(&output.stdout);
    let currents: Vec<f64> = told
        .lines()
        .filter(|line| line.contains("i(vsource)") || line.contains("i(Vsource)"))
        .filter_map(|line| line.rsplit('=').next()?.trim().parse().ok())
        .collect();
    assert_eq!(
        currents.len(),
        sets.len(),
        "ngspice answered otherwise than with one current a setting:\n{told}\n{}",
        String::from_utf8_lossy(&output.stderr)
    );
    Some(currents)
}

fn sink(name: &str) -> SinkEntry {
    let bench = Bench::from_toml(include_str!("../src/bench/weir.toml")).unwrap();
    bench.sink(name).unwrap().clone()
}

fn near(is: f64, expected: f64, what: &str) {
    assert!(
        (is / expected - 1.0).abs() < 1e-5,
        "{what}: {is} A, ngspice says {expected} A"
    );
}

#[test]
fn operating_points_are_those_of_the_circuit_simulator() {
    for (name, sets) in [
        ("left", [0.01, 0.1, 0.25, 0.3]),
        ("right", [0.01, 0.1, 0.3, 0.5]),
    ] {
        let sink = sink(name);
        let circuit = Circuit::of(&sink, 4.2, 0.05);
        let Some(currents) = simulated(&circuit, &sink, &sets) else {
            return;
        };
        for (set, expected) in sets.into_iter().zip(currents) {
            let point = circuit.settle(set);
            assert_eq!(point.wall, Wall::Following);
            near(point.current, expected, &format!("{name} set to {set} V"));
        }
    }
}

/// The source's wall: half a volt through everything in its way, the op-amp at its rail. The
/// envelope names it and rounds down.
#[test]
fn the_source_s_wall_is_where_the_circuit_simulator_has_it() {
    for name in ["left", "right"] {
        let sink = sink(name);
        let envelope = Envelope::of(&sink).unwrap();
        let circuit = Circuit::of(&sink, 0.3, 0.06 + envelope.leads_ohms());
        let Some(currents) = simulated(&circuit, &sink, &[5.0]) else {
            return;
        };
        let largest = circuit.largest();
        assert_eq!(largest.wall, Wall::Source);
        near(largest.current, currents[0], name);
        let ceiling = envelope.ceiling(
            Voltage::from_millivolts(300),
            Resistance::from_milliohms(60),
            Duration::Continuous,
        );
        assert_eq!(ceiling.binding, Limit::Source);
        let below = currents[0] - ceiling.current.amperes();
        assert!((-1e-5..2e-5).contains(&below), "{name}: {below} A apart");
    }
}

/// The gate's wall: a gate drive of 3 V against a threshold of 2.2 V and the sense resistor's drop.
#[test]
fn the_gate_s_wall_is_where_the_circuit_simulator_has_it() {
    let mut sink = sink("right");
    sink.gate_drive.voltage_max = Voltage::from_millivolts(2_700);
    let envelope = Envelope::of(&sink).unwrap();
    let circuit = Circuit::of(&sink, 10.0, envelope.leads_ohms());
    let Some(currents) = simulated(&circuit, &sink, &[5.0]) else {
        return;
    };
    let largest = circuit.largest();
    assert_eq!(largest.wall, Wall::Gate);
    near(largest.current, currents[0], "right");
    let ceiling = envelope.ceiling(
        Voltage::from_millivolts(10_000),
        Resistance::ZERO,
        Duration::Continuous,
    );
    assert_eq!(ceiling.binding, Limit::GateDrive);
    let below = currents[0] - ceiling.current.amperes();
    assert!((-1e-5..2e-5).contains(&below), "{below} A apart");
}
