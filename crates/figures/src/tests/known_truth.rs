//! Known truth: every figure within its own interval at 95 % as often as that claims, over a
//! thousand sinks that err at random within what is stated of them, and no uncertainty larger
//! than three times the scatter that is seen.
//!
//! Nine of the fourteen lie between 93 and 97 %. Where two bounds of like size meet (the reference
//! meter's, and the drift of the sense resistor), only the larger is convolved as a rectangle, and
//! up to 98 % are covered.

use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::sync::Mutex;

use simulator::cell::Model;
use simulator::front_end::Errors;
use simulator::source::Source;
use simulator::supply::{Supply, SupplySpec};
use sink::accumulate::Moments;
use sink::bench::{Bench, SinkEntry};
use sink::montecarlo::Random;

use super::bench::{Setup, cell, left};
use super::certificate::{MeterErrors, certificate};
use crate::{Figure, Figures, Name, work_out};

const SEEDS: u64 = 1000;

/// 10 mAh, 50 mohm, falling from 4.1 V in a straight line.
const CELL: &str = r#"{
  "format": "sinkwarden cell model 1", "name": "small", "origin": "a worked case, not a cell",
  "rated_capacity": "10 mAh", "capacity": "10 mAh",
  "largest_voltage": "4.2 V", "cut_off_voltage": "2.5 V", "reference_temperature": "23 degC",
  "state_of_charge": [0, 1], "open_circuit_voltage_v": [2.6, 4.1],
  "series_resistance_ohm": [0.05, 0.05] }"#;

const DISCHARGE: &str = r#"{ "sequence": 1, "title": "Small cell",
  "dut": { "label": "small", "kind": "cell", "rated_capacity": "10 mAh",
           "voltage_min": "2.5 V", "voltage_max": "4.2 V", "current_max": "1 A" },
  "readback": "500 ms",
  "interlocks": { "undervoltage": { "below": "2.5 V", "for": "0 s" } },
  "steps": [ { "rest": "2 s" },
             { "draw": "100 mA", "for": "3 s", "label": "first" },
             { "draw": "500 mA", "for": "2 s", "label": "second" },
             { "draw": "500 mA", "until": [ { "voltage_below": "2.75 V", "for": "1 s" } ],
               "at_most": "10 min", "label": "discharge" },
             { "rest": "2 s" } ] }"#;

const SWEEP: &str = r#"{ "sequence": 1, "title": "Sweep and knee",
  "dut": { "label": "supply", "kind": "supply", "voltage_min": "100 mV", "voltage_max": "3.6 V",
           "current_max": "1 A" },
  "readback": "100 ms",
  "interlocks": { "undervoltage": { "below": "100 mV", "for": "1 s" } },
  "steps": [ { "rest": "1 s" },
             { "draw": "50 mA", "for": "1 s" }, { "draw": "150 mA", "for": "1 s" },
             { "draw": "250 mA", "for": "1 s" }, { "draw": "350 mA", "for": "1 s" },
             { "draw": "450 mA", "for": "1 s" },
             { "ramp": { "from": "450 mA", "to": "650 mA", "over": "4 s" },
               "until": [ { "voltage_below": "1.5 V" } ], "may_give_up": true, "label": "up" },
             { "rest": "1 s" } ] }"#;

const SOAK: &str = r#"{ "sequence": 1, "title": "Soak",
  "dut": { "label": "supply", "kind": "supply", "voltage_min": "2.9 V", "voltage_max": "3.6 V",
           "current_max": "2 A" },
  "readback": "1 s",
  "interlocks": { "undervoltage": { "below": "2.9 V", "for": "20 ms" } },
  "steps": [ { "rest": "30 s" }, { "draw": "1 A", "for": "6 min", "label": "soak" } ] }"#;

/// What was claimed of one figure against what was true.
#[derive(Default)]
struct Claim {
    errors: Moments,
    standard: Moments,
    covered: u64,
    count: u64,
}

#[derive(Default)]
struct Claims(BTreeMap<Name, Claim>);

impl Claims {
    fn take(&mut self, figures: &Figures, name: Name, truth: f64) {
        let found = |figure: &&Figure| figure.name == name;
        let figure = figures.figures.iter().find(found);
        let figure = figure.unwrap_or_else(|| panic!("no {name:?}: {:?}", figures.missing));
        let error = figure.value - truth;
        let claim = self.0.entry(name).or_default();
        claim.errors.add(error);
        claim
            .standard
            .add(figure.uncertainty.unwrap().standard_uncertainty);
        claim.covered += u64::from(error.abs() <= figure.expanded.unwrap().half_width);
        claim.count += 1;
    }

    fn check(&self) {
        let mut table = String::new();
        let mut wrong = Vec::new();
        for (name, claim) in &self.0 {
            #[expect(clippy::cast_precision_loss, reason = "a thousand")]
            let share = claim.covered as f64 / claim.count as f64;
            let scatter = claim
                .errors
                .standard_deviation()
                .unwrap()
                .hypot(claim.errors.mean().unwrap());
            let times = claim.standard.mean().unwrap() / scatter;
            writeln!(
                table,
                "{name:?}: {share:.3} covered, u is {times:.2} times the scatter; {:.2e} off by \
                 {:.2e} on average",
                claim.standard.mean().unwrap(),
                claim.errors.mean().unwrap(),
            )
            .unwrap();
            if !(0.93..=0.98).contains(&share) || times > 3.0 {
                wrong.push(*name);
            }
        }
        assert!(
            wrong.is_empty(),
            "{wrong:?} do not claim what they hold:\n{table}"
        );
    }
}

/// Makes so many nights on both cores; each has its own seed, so the order does not matter.
fn nights(seeds: u64, one: impl Fn(u64, &Mutex<Claims>) + Sync) {
    let claims = Mutex::new(Claims::default());
    std::thread::scope(|scope| {
        for part in 0..2 {
            let (claims, one) = (&claims, &one);
            scope.spawn(move || {
                for seed in (part..seeds).step_by(2) {
                    one(seed, claims);
                }
            });
        }
    });
    claims.into_inner().unwrap().check();
}

/// A sink whose converters err within what a home-built one does, and its certificate by a meter
/// that errs within what it states.
fn calibrated<'a>(text: &'a str, entry: &'a SinkEntry, seed: u64) -> (Setup<'a>, Random) {
    let mut random = Random::from_seed(7_000 + seed);
    let mut uniform = || 2.0 * random.unit() - 1.0;
    let mut setup = Setup::new(text, entry);
    setup.parts.seed = seed;
    setup.parts.errors = Errors {
        current_gain: 0.03 * uniform(),
        current_offset_a: 0.005 * uniform(),
        current_noise_a: 500e-6,
        voltage_gain: 0.01 * uniform(),
        voltage_offset_v: 0.005 * uniform(),
        voltage_noise_v: 1.2e-3,
        ..Errors::default()
    };
    let meter = MeterErrors {
        current: uniform(),
        voltage: uniform(),
    };
    setup.certificate = Some(certificate(&setup.parts.errors, meter, seed));
    // Since the calibration the sense resistor was warmed or cooled by up to the 5 K that the
    // certificate allows for, at 50 ppm/K.
    setup.parts.errors.current_gain += 250e-6 * uniform();
    (setup, random)
}

#[test]
fn a_cells_figures_hold_what_they_claim() {
    let entry = left();
    let model: Model = serde_json::from_str(CELL).unwrap();
    nights(SEEDS, |seed, claims| {
        let (mut setup, mut random) = calibrated(DISCHARGE, &entry, seed);
        setup.parts.source = cell(&model, 1.0);
        // The host's clock errs within what is allowed for it, which only times tell.
        let host = 1.0 + 50e-6 * (2.0 * random.unit() - 1.0);
        let night = setup.night();
        let figures = work_out(&night.record).unwrap();
        let (began_s, ended_s) = (night.step_began_s(1), night.step_began_s(4));
        let crossed_s = night.device.crossings().first().unwrap().at_s.unwrap();
        let truth = night.truth;
        // After the crossing a steady current at the cut-off voltage.
        let amperes = {
            let first = 0.1 * 3.0;
            (truth.charge_c - first) / (ended_s - began_s - 3.0)
        };
        let beyond_c = amperes * (ended_s - crossed_s);
        let charge_c = truth.charge_c - beyond_c;
        let energy_j = truth.terminal_j - beyond_c * 2.73;
        // Per coulomb 1.5 V over 36 C.
        let fall = 1.5 / 36.0;
        let mut claims = claims.lock().unwrap();
        claims.take(
            &figures,
            Name::DeliveredCharge,
            truth.charge_c / 3600.0 * host,
        );
        claims.take(
            &figures,
            Name::DeliveredEnergy,
            truth.terminal_j / 3600.0 * host,
        );
        claims.take(
            &figures,
            Name::MeanVoltage,
            truth.terminal_j / truth.charge_c,
        );
        claims.take(&figures, Name::Duration, (ended_s - began_s) * host);
        claims.take(&figures, Name::Capacity, charge_c / 3600.0 * host);
        claims.take(&figures, Name::Energy, energy_j / 3600.0 * host);
        claims.take(&figures, Name::DcResistance, 0.05 + fall * 2.0 * 0.5 / 0.4);
        claims.take(&figures, Name::ResistanceAt1S, 0.05 + fall);
    });
}

fn supply(text: &str) -> Source {
    let spec: SupplySpec = serde_json::from_str(text).unwrap();
    Source::Supply(Box::new(Supply::new(&spec).unwrap()))
}

#[test]
fn a_supplys_figures_hold_what_they_claim() {
    // A bench that lets a supply's voltage fall.
    let bench = include_str!("../../../sink/src/bench/weir.toml").replace(
        r#"{ below = "2.3 V", for = "20 ms" }"#,
        r#"{ below = "100 mV", for = "1 s" }"#,
    );
    let entry = Bench::from_toml(&bench)
        .unwrap()
        .sink("left")
        .unwrap()
        .clone();
    nights(SEEDS, |seed, claims| {
        let mut random = Random::from_seed(90_000 + seed);
        // A limit between two readbacks' currents, wherever.
        let limit = 0.5 + 0.05 * random.unit();
        let (mut setup, _) = calibrated(SWEEP, &entry, seed);
        setup.parts.source = supply(&format!(
            r#"{{ "voltage": "3.3 V", "output_resistance": "60 mohm",
                 "current_limit": "{:.0} uA" }}"#,
            limit * 1e6
        ));
        let figures = work_out(&setup.night().record).unwrap();
        let mut claims = claims.lock().unwrap();
        claims.take(&figures, Name::LoadRegulation, 0.060 * 0.45);
        claims.take(&figures, Name::OutputResistance, 0.060);
        claims.take(&figures, Name::CurrentLimitKnee, limit);
    });
}

/// The left sink: 2.5 K/W with 6 min, here 2 min; 1 A at 3.24 V, less what 100 mohm of sense
/// resistor and the leads take.
#[test]
fn heat_figures_hold_what_they_claim() {
    let mut entry = left();
    entry.heat_sink.time_constant = quantity::Span::from_secs(120);
    nights(SEEDS, |seed, claims| {
        let (mut setup, _) = calibrated(SOAK, &entry, seed);
        setup.parts.errors.current_noise_a = 0.0;
        setup.parts.errors.voltage_noise_v = 0.0;
        setup.parts.errors.temperature_noise_k = 0.05;
        setup.parts.source = supply(r#"{ "voltage": "3.3 V", "output_resistance": "60 mohm" }"#);
        let night = setup.night();
        let figures = work_out(&night.record).unwrap();
        // Power by the source's own ledger of the heat in the MOSFET.
        let watts = night.truth.mosfet_j / 360.0;
        let settled = 23.0 + 2.5 * watts;
        let mut claims = claims.lock().unwrap();
        claims.take(&figures, Name::SettledTemperature, settled);
        claims.take(&figures, Name::ThermalResistance, 2.5);
        claims.take(
            &figures,
            Name::JunctionMargin,
            150.0 - settled - 1.5 * watts,
        );
    });
}
