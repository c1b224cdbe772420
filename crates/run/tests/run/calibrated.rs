//! Do a certificate's intervals cover the truth as often as they claim? A thousand sinks with
//! hidden gain, offset, floor, noise and temperature coefficient are calibrated through the whole
//! stack with a simulated meter, and then measured over their range at another temperature.

use quantity::{Current, Quantity, SinkTime, Span, Text, Textual, Voltage};
use run::KeeperConfig;
use run::rehearse::{Observer, rehearse};
use sequence::plan::Plan;
use sequence::{Options, compile};
use sequencer::Sequencer;
use sequencer::event::{Command, Finding};
use serde_json::json;
use simulator::bench_source::sink_parts;
use simulator::device::{SimulatedSink, SinkParts};
use simulator::front_end::Errors;
use simulator::source::Source;
use simulator::supply::{Supply, SupplySpec};
use sink::bench::SinkEntry;
use sink::calibration::{
    Certificate, Channel, CurrentPoint, Identity, Spread, Statement, VoltagePoint, calibrate,
};
use sink::montecarlo::Random;
use wire::Readback;

use crate::bench::{EVENING, sink};

const SEEDS: u64 = 1_000;
/// The supply: volts open, ohms inside.
const SUPPLY: (f64, f64) = (4.2, 0.5);
/// Samples of a readback: 100 ms of a tick of 1 ms.
const SAMPLES: u32 = 100;
/// By how many kelvins a sink may be warmer or cooler in use.
const SPREAD_K: f64 = 10.0;
/// The sense resistor's temperature coefficient, as its data sheet has it.
const PER_K: f64 = 50e-6;

const STATEMENT: &str = r#"
operator = "invented"
ambient = "23 degC"
temperature_spread_k = 10
valid_for_days = 365
[current_meter]
identity = "invented, no. 1"
range = "3 A"
of_reading = "0.05 %"
of_range = "0.01 %"
stated = { normal = { coverage_factor = 2 } }
resolution = "10 uA"
[voltage_meter]
identity = "invented, no. 2"
range = "10 V"
of_reading = "0.05 %"
of_range = "0.01 %"
stated = { normal = { coverage_factor = 2 } }
resolution = "100 uV"
"#;

/// What a step drew: the sink's readbacks in it, and the truth.
struct Held {
    readings: Vec<Readback>,
    true_a: f64,
}

impl Held {
    fn true_v(&self) -> f64 {
        SUPPLY.0 - SUPPLY.1 * self.true_a
    }

    fn spread<T: Textual + Quantity>(
        &self,
        extremes: impl Fn(&Readback) -> (T, T),
    ) -> Option<Spread<T>> {
        Spread::of(self.readings.iter().map(extremes), SAMPLES)
    }
}

/// Looks at the true current beside every readback.
#[derive(Default)]
struct Watch {
    true_a: f64,
    readings: Vec<(SinkTime, Readback, f64)>,
    ended: Vec<SinkTime>,
}

impl Observer for Watch {
    fn entry(&mut self, entry: &journal::Entry) {
        if let Some(reading) = entry.reading() {
            self.readings
                .push((reading.time, reading.values, self.true_a));
        }
        if let journal::Body::Finding(Finding::StepEnded { time, .. }) = entry.body {
            self.ended.push(time);
        }
    }

    fn intervene(&mut self, _passed: Span, device: &mut SimulatedSink) -> Option<Command> {
        self.true_a = device.current_a();
        None
    }
}

impl Watch {
    /// The last readbacks of each step, all of them long after its edge.
    fn held(&self) -> Vec<Held> {
        let of = |end: &SinkTime| {
            let from = SinkTime::from_micros(end.micros() - 700_000);
            let within: Vec<_> = self
                .readings
                .iter()
                .filter(|(time, ..)| (from..=*end).contains(time))
                .collect();
            Held {
                readings: within.iter().map(|(_, values, _)| *values).collect(),
                true_a: within.last().unwrap().2,
            }
        };
        self.ended.iter().map(of).collect()
    }
}

fn draws(currents: &[f64]) -> String {
    let steps: Vec<_> = currents
        .iter()
        .map(|current| json!({ "draw": format!("{current:.6} A"), "for": "1.2 s" }))
        .collect();
    json!({
        "sequence": 1, "title": "Calibration (invented)",
        "dut": { "label": "bench supply", "kind": "supply", "voltage_min": "2.5 V",
                 "voltage_max": "4.3 V", "current_max": "3 A" },
        "readback": "100 ms",
        "interlocks": { "undervoltage": { "below": "2.5 V" } },
        "steps": steps,
    })
    .to_string()
}

fn go_through(plan: Plan, entry: &SinkEntry, errors: Errors, seed: u64) -> Vec<Held> {
    let mut parts: SinkParts = sink_parts(entry).unwrap();
    parts.errors = errors;
    parts.seed = seed;
    let spec: SupplySpec = serde_json::from_value(json!({
        "voltage": format!("{} V", SUPPLY.0), "output_resistance": format!("{} ohm", SUPPLY.1),
    }))
    .unwrap();
    parts.source = Source::Supply(Box::new(Supply::new(&spec).unwrap()));
    let mut device = SimulatedSink::new(parts).unwrap();
    let mut watch = Watch::default();
    let config = KeeperConfig::for_sink(entry).unwrap();
    let sequencer = Sequencer::new(plan).unwrap();
    let at_most = Span::from_secs(120);
    let done = rehearse(sequencer, config, &mut device, EVENING, at_most, &mut watch).unwrap();
    assert_eq!(
        done.ending,
        sequencer::event::Ending::Finished,
        "seed {seed}"
    );
    watch.held()
}

/// The same sink so many kelvins warmer than it was: its sense resistor sets low and reads high.
fn warmer(errors: Errors, kelvin: f64) -> Errors {
    let grown = 1.0 + errors.sense_per_k * kelvin;
    Errors {
        set_gain: (1.0 + errors.set_gain) / grown - 1.0,
        set_offset_a: errors.set_offset_a / grown,
        current_gain: (1.0 + errors.current_gain) * grown - 1.0,
        ..errors
    }
}

/// What a thousand sinks and meters are drawn with.
#[derive(Debug, Clone, Copy)]
struct Case {
    /// Noise of one sample of the converter that reads the current.
    current_noise_a: f64,
    /// The same of the voltage.
    voltage_noise_v: f64,
    /// Whether the meters' accuracy is a bound within which all errors are as likely, or else
    /// twice a standard deviation.
    bounded: bool,
}

impl Case {
    fn statement(self) -> Statement {
        let text = if self.bounded {
            STATEMENT.replace("{ normal = { coverage_factor = 2 } }", "\"rectangular\"")
        } else {
            STATEMENT.to_owned()
        };
        Statement::from_toml(&text).unwrap()
    }

    /// A meter's error as a share of its stated accuracy.
    fn meter_error(self, random: &mut Random) -> f64 {
        if self.bounded {
            2.0 * random.unit() - 1.0
        } else {
            0.5 * random.normal()
        }
    }
}

/// Draws a sink and a meter, calibrates the one with the other.
fn calibrated(
    entry: &SinkEntry,
    case: Case,
    random: &mut Random,
    seed: u64,
) -> (Errors, Certificate) {
    let mut uniform = || 2.0 * random.unit() - 1.0;
    let errors = Errors {
        set_gain: 0.02 * uniform(),
        set_offset_a: 0.004 * uniform(),
        drive_floor_v: 0.0005 * (1.0 + uniform()),
        current_gain: 0.02 * uniform(),
        current_offset_a: 0.004 * uniform(),
        current_noise_a: case.current_noise_a,
        voltage_gain: 0.01 * uniform(),
        voltage_offset_v: 0.005 * uniform(),
        voltage_noise_v: case.voltage_noise_v,
        sense_per_k: if uniform() < 0.0 { -PER_K } else { PER_K },
        loop_time_constant_s: 150e-6,
        ..Errors::default()
    };
    let (current_error, voltage_error) = (case.meter_error(random), case.meter_error(random));
    let nominal: Vec<f64> = (0..12)
        .map(|point| 0.02 + 0.25 * f64::from(point))
        .collect();
    let plan = compile(
        &draws(&nominal),
        entry,
        &sequence::Files::new(),
        &Options::default(),
    )
    .unwrap()
    .plan;
    let held = go_through(plan, entry, errors, seed);
    assert_eq!(held.len(), nominal.len());
    let amperes = |value: f64| Text(Current::from_amperes((value * 1e5).round() / 1e5).unwrap());
    let volts = |value: f64| Text(Voltage::from_volts((value * 1e4).round() / 1e4).unwrap());
    let mut current_points = Vec::new();
    let mut voltage_points = Vec::new();
    for (nominal, held) in nominal.iter().zip(&held) {
        let accuracy = 0.000_5 * held.true_a + 0.000_1 * 3.0;
        current_points.push(CurrentPoint {
            setpoint: Current::from_amperes(*nominal).unwrap(),
            reference: vec![amperes(held.true_a + accuracy * current_error)],
            readback: held.readings.iter().map(|one| Text(one.current)).collect(),
            spread: held.spread(|one| (one.current_min, one.current_max)),
        });
        let accuracy = 0.000_5 * held.true_v() + 0.000_1 * 10.0;
        voltage_points.push(VoltagePoint {
            reference: vec![volts(held.true_v() + accuracy * voltage_error)],
            readback: held.readings.iter().map(|one| Text(one.voltage)).collect(),
            spread: held.spread(|one| (one.voltage_min, one.voltage_max)),
        });
    }
    let identity = Identity {
        name: format!("weir-left-{seed}"),
        serial_number: None,
        issued_unix_s: 1_796_155_200,
        record: None,
    };
    let measurements =
        case.statement()
            .measurements(entry, identity, current_points, voltage_points);
    (errors, calibrate(measurements).unwrap())
}

/// How many errors lie within their stated intervals.
#[derive(Default)]
struct Count {
    within: u32,
    all: u32,
}

impl Count {
    fn judge(&mut self, error: f64, channel: &Channel, nominal_micro: f64) {
        let budget = channel.budget(nominal_micro);
        let half_width = budget.expanded(0.95).unwrap().half_width / 1e6;
        self.within += u32::from(error.abs() <= half_width);
        self.all += 1;
    }

    fn share(&self) -> f64 {
        f64::from(self.within) / f64::from(self.all)
    }
}

fn check(case: Case) {
    let mut entry = sink("left");
    // An uncalibrated sink may be this far off; a narrower interlock would trip while calibrating.
    entry.interlocks.not_following.threshold = Current::from_milliamperes(300);
    entry.interlocks.not_releasing.threshold = Current::from_milliamperes(300);
    let (mut set, mut read, mut volts) = (Count::default(), Count::default(), Count::default());
    let (mut bottom, mut top) = (Count::default(), Count::default());
    for seed in 0..SEEDS {
        let mut random = Random::from_seed(seed);
        let (errors, certificate) = calibrated(&entry, case, &mut random, seed);
        let channels = certificate.channels().unwrap();
        let correction = certificate.correction;
        let wanted: Vec<f64> = (0..6).map(|_| 0.05 + 2.65 * random.unit()).collect();
        let options = Options {
            correction,
            ..Options::default()
        };
        let plan = compile(&draws(&wanted), &entry, &sequence::Files::new(), &options)
            .unwrap()
            .plan;
        let kelvin = SPREAD_K * (2.0 * random.unit() - 1.0);
        let held = go_through(plan, &entry, warmer(errors, kelvin), SEEDS + seed);
        for (wanted, held) in wanted.iter().zip(&held) {
            let nominal = correction.to_nominal_setpoint(Current::from_amperes(*wanted).unwrap());
            #[expect(clippy::cast_precision_loss, reason = "below 2^53 microamperes")]
            let nominal_micro = nominal.microamperes() as f64;
            let error = wanted - held.true_a;
            set.judge(error, &channels.current_set, nominal_micro);
            let part = if *wanted < 0.5 { &mut bottom } else { &mut top };
            part.judge(error, &channels.current_set, nominal_micro);
            let one = held.readings.last().unwrap();
            let shown = correction.current_from_readback(one.current).amperes();
            read.judge(
                shown - held.true_a,
                &channels.current_read,
                one.current.amperes() * 1e6,
            );
            let shown = correction.terminal_voltage(one.voltage).volts();
            volts.judge(
                shown - held.true_v(),
                channels.voltage_read.as_ref().unwrap(),
                one.voltage.volts() * 1e6,
            );
        }
    }
    for (what, count) in [("set", &set), ("read", &read), ("voltage", &volts)] {
        let share = count.share();
        assert!(
            (0.93..=0.97).contains(&share),
            "{what}: {share} of {}",
            count.all
        );
    }
    // Nor is it the top alone that covers for the bottom, or the other way round.
    for (what, count) in [("bottom", &bottom), ("top", &top)] {
        let share = count.share();
        assert!(
            (0.92..=0.985).contains(&share),
            "{what}: {share} of {}",
            count.all
        );
    }
}

/// An eighth of a code: every sample of a held current is the same one or two codes, and the mean
/// errs by what rounding leaves.
#[test]
fn set_and_read_values_of_calibrated_quiet_sinks_are_covered_as_claimed() {
    check(Case {
        current_noise_a: 100e-6,
        voltage_noise_v: 300e-6,
        bounded: false,
    });
}

/// A third of a code: some of the step is averaged away, and some is left.
#[test]
fn set_and_read_values_of_calibrated_sinks_are_covered_as_claimed() {
    check(Case {
        current_noise_a: 270e-6,
        voltage_noise_v: 800e-6,
        bounded: true,
    });
}

/// More than half a code: noise averages the steps away.
#[test]
fn set_and_read_values_of_calibrated_noisy_sinks_are_covered_as_claimed() {
    for bounded in [false, true] {
        check(Case {
            current_noise_a: 500e-6,
            voltage_noise_v: 1_500e-6,
            bounded,
        });
    }
}
