//! Known truth: every figure within its own interval at 95 % as often as that claims, over many
//! sinks that err at random within what is stated of them, and no uncertainty larger than three
//! times the scatter that is seen; with a certificate and without.
//!
//! Left out is what claims no interval: the peak temperature, which is what the sensor said.
//!
//! `SEEDS=1000 cargo test -p figures known_truth -- --nocapture` goes through a thousand of each
//! and prints the counts.

mod cell;
mod cell_model;
mod heat;
mod supply;

use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::sync::Mutex;

use quantity::{Current, Ratio, Text, Voltage};
use simulator::front_end::Errors;
use simulator::source::Source;
use simulator::supply::{Supply, SupplySpec};
use sink::accumulate::Moments;
use sink::bench::{ReadError, SinkEntry};
use sink::montecarlo::Random;
use sink::uncertainty::Stated;

use super::bench::Setup;
use super::certificate::{MeterErrors, certificate};
use crate::{Figure, Figures, Name, Standing};

/// As many as a test can wait for; more are asked for by `SEEDS`.
const SEEDS: u64 = 120;

/// Of a thousand intervals 930 to 970 are to cover. That is 2.9 standard deviations of what chance
/// makes of 95 %, and as many are left to fewer intervals.
const DEVIATIONS: f64 = 2.9;

/// What stands behind the sinks of a test.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Behind {
    Certificate,
    /// What the bench file states of resistor and converters.
    Tolerances,
}

const BOTH: [Behind; 2] = [Behind::Certificate, Behind::Tolerances];

/// What was claimed of one figure against what was true.
#[derive(Default)]
struct Claim {
    errors: Moments,
    standard: Moments,
    covered: u64,
    count: u64,
}

/// By figure, and which of its name.
#[derive(Default)]
struct Claims(BTreeMap<String, Claim>);

impl Claims {
    /// The figure of the whole run, or the only one.
    fn take(&mut self, figures: &Figures, name: Name, truth: f64) {
        self.check_one(figures, name, "", truth, |figure| figure.label.is_none());
    }

    /// The first of a label.
    fn take_of(&mut self, figures: &Figures, name: Name, label: &'static str, truth: f64) {
        self.check_one(figures, name, label, truth, |figure| {
            figure.label.as_deref() == Some(label)
        });
    }

    fn check_one(
        &mut self,
        figures: &Figures,
        name: Name,
        label: &'static str,
        truth: f64,
        wanted: impl Fn(&Figure) -> bool,
    ) {
        let mut found = figures.figures.iter();
        let figure = found.find(|figure| figure.name == name && wanted(figure));
        let figure = figure.unwrap_or_else(|| panic!("no {name:?} {label}: {:?}", figures.missing));
        self.add(
            format!("{name:?} {label}").trim_end(),
            figure.value - truth,
            figure.uncertainty.unwrap().standard_uncertainty,
            figure.expanded.unwrap().half_width,
        );
    }

    fn add(&mut self, of: &str, error: f64, standard: f64, half_width: f64) {
        let claim = self.0.entry(of.to_owned()).or_default();
        claim.errors.add(error);
        claim.standard.add(standard);
        claim.covered += u64::from(error.abs() <= half_width);
        claim.count += 1;
    }

    fn check(&self, what: &str) {
        let mut table = String::new();
        let mut wrong = Vec::new();
        for (of, claim) in &self.0 {
            let (share, count) = (number(claim.covered), number(claim.count));
            let scatter = claim
                .errors
                .standard_deviation()
                .unwrap()
                .hypot(claim.errors.mean().unwrap());
            let standard = claim.standard.mean().unwrap();
            writeln!(
                table,
                "{what}: {of}: {} of {} covered, u = {standard:.2e} is {:.2} times the scatter, \
                 off by {:.2e} on average",
                claim.covered,
                claim.count,
                standard / scatter,
                claim.errors.mean().unwrap(),
            )
            .unwrap();
            let expected = 0.95 * count;
            let chance = DEVIATIONS * (0.95 * 0.05 * count).sqrt();
            if (share - expected).abs() > chance || standard > 3.0 * scatter {
                wrong.push(of);
            }
        }
        println!("{table}");
        assert!(
            wrong.is_empty(),
            "{wrong:?} do not claim what they hold:\n{table}"
        );
    }
}

#[expect(clippy::cast_precision_loss, reason = "some thousand")]
fn number(count: u64) -> f64 {
    count as f64
}

fn seeds() -> u64 {
    std::env::var("SEEDS").map_or(SEEDS, |seeds| seeds.parse().unwrap())
}

/// Makes so many nights on both cores; each has its own seed, so the order does not matter.
fn nights(what: &str, one: impl Fn(u64, &Mutex<Claims>) + Sync) {
    let claims = Mutex::new(Claims::default());
    let seeds = seeds();
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
    claims.into_inner().unwrap().check(what);
}

/// A sink that errs within what stands behind it.
fn erring<'a>(
    behind: Behind,
    text: &'a str,
    entry: &'a SinkEntry,
    seed: u64,
) -> (Setup<'a>, Random) {
    let mut random = Random::from_seed(7_000 + seed);
    let mut uniform = || 2.0 * random.unit() - 1.0;
    let mut setup = Setup::new(text, entry);
    setup.parts.seed = seed;
    setup.parts.errors = Errors {
        current_noise_a: 500e-6,
        voltage_noise_v: 1.2e-3,
        ..Errors::default()
    };
    let errors = &mut setup.parts.errors;
    match behind {
        Behind::Certificate => {
            // What a home-built one errs by; its certificate is by a meter that errs within what it
            // states.
            errors.current_gain = 0.03 * uniform();
            errors.current_offset_a = 0.005 * uniform();
            errors.voltage_gain = 0.01 * uniform();
            errors.voltage_offset_v = 0.005 * uniform();
            let meter = MeterErrors {
                current: uniform(),
                voltage: uniform(),
            };
            setup.certificate = Some(certificate(errors, meter, seed));
            // Since the calibration the sense resistor was warmed or cooled by up to the 5 K that
            // the certificate allows for, at 50 ppm/K.
            errors.current_gain += 250e-6 * uniform();
        }
        Behind::Tolerances => {
            // The sense resistor's 1 %; and, together, the converter's share of the reading and its
            // constant.
            let (current, voltage) = (uniform(), uniform());
            errors.current_gain = 0.01 * uniform() + 0.002 * current;
            errors.current_offset_a = 0.001 * current;
            errors.voltage_gain = 0.002 * voltage;
            errors.voltage_offset_v = 0.004 * voltage;
            errors.sense_per_k = 50e-6 * uniform();
        }
    }
    (setup, random)
}

/// A bench entry whose reading converter states what it errs by.
fn stating(mut entry: SinkEntry) -> SinkEntry {
    let of_reading = Text(Ratio::from_parts_per_million(2_000));
    entry.front_end.adc.current_error = Some(ReadError {
        of_reading,
        constant: Current::from_milliamperes(1),
        stated: Stated::Rectangular,
    });
    entry.front_end.adc.voltage_error = Some(ReadError {
        of_reading,
        constant: Voltage::from_millivolts(4),
        stated: Stated::Rectangular,
    });
    entry
}

/// Figures must stand on what they are meant to.
fn assert_stands(figures: &Figures, behind: Behind) {
    let wanted = match behind {
        Behind::Certificate => Standing::Calibrated,
        Behind::Tolerances => Standing::NominalUncalibrated,
    };
    assert_eq!(figures.standing, wanted, "{:?}", figures.warnings);
}

fn supply(text: &str) -> Source {
    let spec: SupplySpec = serde_json::from_str(text).unwrap();
    Source::Supply(Box::new(Supply::new(&spec).unwrap()))
}
