//! A simulated sink whose errors are hidden is calibrated over HTTP with a simulated meter; then
//! the certificate is taken into use and everything it changes is looked at.

use std::path::Path;

use daemon::Config;
use journal::{Body, Record};
use quantity::{Current, Voltage};
use sequencer::event::Happening;
use serde_json::{Value, json};
use sink::bench::Bench;
use sink::calibration::{Certificate, Channel};
use sink::correction::Bound;
use sink::montecarlo::Random;
use tempfile::TempDir;
use wire::{LimitKind, Mode, Order};

use crate::desk::Desk;

const BENCH: &str = include_str!("../../../sink/src/bench/weir.toml");
/// How much faster than real time the sink is.
const FACTOR: u32 = 25;
/// What is hidden: the sink's true errors.
const SET_GAIN: f64 = 0.006;
const SET_OFFSET_A: f64 = 0.0014;
const SENSE_PER_K: f64 = 50e-6;
const AIR_DEGC: f64 = 23.0;

/// The bench on a supply whose voltage falls with the current, with errors of its own.
fn bench(certificate: Option<&str>) -> String {
    let left = BENCH.find("[sink.link.simulated.source]").unwrap();
    let front_end = BENCH.find("[sink.front_end]").unwrap();
    let source = "[sink.link.simulated.source]\n\
        supply = { voltage = \"4.3 V\", output_resistance = \"500 mohm\" }\n\
        temperature = \"23 degC\"\n\
        seed = 7\n\
        errors = { set_gain = \"0.6 %\", set_offset = \"1.4 mA\", current_gain = \"-0.9 %\", \
        current_offset = \"1.2 mA\", current_noise = \"500 uA\", voltage_gain = \"0.3 %\", \
        voltage_offset = \"2 mV\", voltage_noise = \"800 uV\", sense_drift = \"50 ppm/K\", \
        loop_time_constant = \"150 us\" }\n\n";
    let text = format!("{}{source}{}", &BENCH[..left], &BENCH[front_end..]);
    match certificate {
        Some(path) => text.replacen(
            "serial_number = 1",
            &format!("serial_number = 1\ncertificate = \"{path}\""),
            1,
        ),
        None => text,
    }
}

fn configure(config: &mut Config, folder: &Path, certificate: Option<&str>) {
    config.bench = Bench::from_toml(&bench(certificate)).unwrap();
    config.bench_path = folder.join("bench.toml");
}

fn open(folder: TempDir, certificate: Option<&str>) -> Desk {
    let path = folder.path().to_owned();
    Desk::open_in(folder, FACTOR, |config| {
        configure(config, &path, certificate);
    })
}

fn source() -> Value {
    json!({ "label": "bench supply", "kind": "supply", "voltage_min": "2 V",
            "voltage_max": "4.35 V", "current_max": "3 A" })
}

fn statement() -> Value {
    json!({
        "operator": "invented", "ambient": "23 degC", "temperature_spread_k": 25,
        "valid_for_days": 365,
        "current_meter": { "identity": "invented, no. 1", "range": "3 A", "of_reading": "0.05 %",
            "of_range": "0.01 %", "stated": { "normal": { "coverage_factor": 2.0 } },
            "resolution": "10 uA" },
        "voltage_meter": { "identity": "invented, no. 2", "range": "10 V", "of_reading": "0.05 %",
            "of_range": "0.01 %", "stated": { "normal": { "coverage_factor": 2.0 } },
            "resolution": "100 uV" },
    })
}

fn request(setpoints: &[&str]) -> Value {
    json!({
        "sink": "left", "dut": source(), "interval": "60 s", "readback": "100 ms",
        "interlocks": { "undervoltage": { "below": "2.4 V" } },
        "setpoints": setpoints, "identity": "weir-left-1", "statement": statement(),
    })
}

/// The simulated meters: what really flows, by the sink's hidden errors, and their own errors.
struct Meters {
    random: Random,
    /// Errors of the two, in standard deviations of their statements.
    common: (f64, f64),
}

impl Meters {
    fn new(seed: u64) -> Self {
        let mut random = Random::from_seed(seed);
        let common = (random.normal(), random.normal());
        Self { random, common }
    }

    /// True current and voltage at a nominal setpoint and a heat sink temperature.
    fn truth(nominal_a: f64, heat_sink_degc: f64) -> (f64, f64) {
        let per_code = 3.3 / 4096.0;
        let asked = (nominal_a / per_code).round() * per_code * (1.0 + SET_GAIN) + SET_OFFSET_A;
        let current = asked / (1.0 + SENSE_PER_K * (heat_sink_degc - AIR_DEGC));
        (current, 4.3 - 0.5 * current)
    }

    fn read(&mut self, nominal_a: f64, heat_sink_degc: f64) -> Value {
        let (current, voltage) = Self::truth(nominal_a, heat_sink_degc);
        let current_accuracy = 0.000_25 * current + 0.000_05 * 3.0;
        let voltage_accuracy = 0.000_25 * voltage + 0.000_05 * 10.0;
        let mut shown = |true_value: f64, accuracy: f64, common: f64, step: f64| {
            let value = true_value + common * accuracy + step * self.random.normal();
            (value / step).round() * step
        };
        let amperes: Vec<String> = (0..3)
            .map(|_| {
                format!(
                    "{:.5} A",
                    shown(current, current_accuracy, self.common.0, 1e-5)
                )
            })
            .collect();
        let volts = shown(voltage, voltage_accuracy, self.common.1, 1e-4);
        json!({ "current": amperes, "voltage": format!("{volts:.4} V") })
    }
}

/// Carries a calibration through as a script does; its outcome.
fn carry_through(desk: &Desk, request: &Value, meters: &mut Meters) -> Value {
    let begun = desk.post_json("/v1/calibrations", request);
    assert_eq!(begun.status, 201, "{begun:?}");
    let id = begun.json()["id"].as_str().unwrap().to_owned();
    let path = format!("/v1/calibrations/{id}");
    assert_eq!(begun.location.as_deref(), Some(path.as_str()));
    let early = desk.post_json(&format!("{path}/reading"), &json!({ "current": "1 mA" }));
    assert_eq!((early.status, early.code().as_str()), (409, "not-settled"));
    let points = request["setpoints"].as_array().unwrap().len();
    for point in 1..=points {
        desk.wait_for("the setpoint to settle", |desk| {
            let state = desk.get(&path).json();
            assert!(
                state["state"] == "settling" || state["state"] == "settled",
                "{state}"
            );
            state["state"] == "settled"
        });
        let state = desk.get(&path).json();
        assert_eq!(state["point"], point);
        let nominal = state["setpoint_a"].as_f64().unwrap();
        let temperature = state["nominal"]["temperature_degc"].as_f64().unwrap();
        let read = meters.read(nominal, temperature);
        let taken = desk.post_json(&format!("{path}/reading"), &read);
        assert_eq!(taken.status, 200, "{taken:?}");
    }
    assert_eq!(desk.get(&path).json()["state"], "taken");
    let finished = desk.post(&format!("{path}/finish"));
    assert_eq!(finished.status, 200, "{finished:?}");
    assert_eq!(desk.get(&path).json()["state"], "finished");
    desk.wait_for_run(&id, "the record", |run| run.sealed);
    finished.json()
}

const SETPOINTS: [&str; 12] = [
    "20 mA", "60 mA", "150 mA", "300 mA", "500 mA", "800 mA", "1.1 A", "1.4 A", "1.8 A", "2.2 A",
    "2.5 A", "2.8 A",
];

fn expanded(channel: &Channel, nominal: f64) -> f64 {
    let budget = channel.budget(nominal * 1e6).combined().unwrap();
    budget.expanded(0.95).unwrap().half_width / 1e6
}

#[test]
fn a_sink_is_calibrated_over_http_and_everything_is_corrected_at_once() {
    let desk = open(tempfile::tempdir().unwrap(), None);
    let outcome = carry_through(&desk, &request(&SETPOINTS), &mut Meters::new(1));
    let entry = outcome["bench_entry"].as_str().unwrap();
    assert_eq!(entry, "certificate = \"certificates/weir-left-1.json\"");
    // The errors that were hidden are found: the slope of what is set, the offset of what is read.
    let line = |place: usize, what: &str| {
        outcome["certificate"]["lines"][place][what]
            .as_f64()
            .unwrap()
    };
    assert!((line(0, "slope") - 1.006).abs() < 0.002, "{outcome}");
    assert!((line(0, "offset") - 0.0014).abs() < 0.001, "{outcome}");
    assert!((line(1, "slope") - 1.0 / 0.991).abs() < 0.002, "{outcome}");
    assert!((line(2, "slope") - 1.0 / 1.003).abs() < 0.002, "{outcome}");

    // Under the same name there is none a second time.
    let again = desk.post_json("/v1/calibrations", &request(&SETPOINTS));
    assert_eq!(
        (again.status, again.code().as_str()),
        (422, "calibration-refused")
    );
    let listed = desk.get("/v1/certificates?sink=left").json();
    assert_eq!(listed["certificates"][0]["identity"], "weir-left-1");
    assert_eq!(listed["certificates"][0]["validity"], "valid");
    let whole = desk.get("/v1/certificates/weir-left-1");
    let certificate = Certificate::from_json(&whole.text).unwrap();
    // The samples behind the readbacks tell what noise leaves of the converter's step.
    let points = &certificate.measurements;
    let samples = points
        .current_points
        .iter()
        .map(|point| point.spread.unwrap().samples);
    assert!(samples.eq(points.current_points.iter().map(|_| 100)));
    assert!(
        points
            .voltage_points
            .iter()
            .all(|point| point.spread.is_some())
    );
    assert_eq!(
        desk.get("/v1/certificates/none").code(),
        "no-such-certificate"
    );

    // Nothing is corrected until the bench file says so.
    assert_eq!(desk.get("/v1/sinks/left").json()["calibrated"], false);
    let desk = open(desk.close(), Some("certificates/weir-left-1.json"));
    assert_eq!(desk.get("/v1/sinks/left").json()["calibrated"], true);
    all_is_corrected(&desk, &certificate);

    // And another meter agrees.
    let mut verifying = request(&["100 mA", "1 A", "2.6 A"]);
    verifying["identity"] = Value::Null;
    verifying["verifies"] = json!("weir-left-1");
    let outcome = carry_through(&desk, &verifying, &mut Meters::new(2));
    assert_eq!(outcome["verification"]["passed"], true, "{outcome}");
    let points = outcome["verification"]["points"].as_array().unwrap();
    assert_eq!(points.len(), 9);
    let listed = desk.get("/v1/certificates").json();
    let verifications = listed["certificates"][0]["verifications"]
        .as_array()
        .unwrap();
    assert_eq!(verifications.len(), 1, "{listed}");
}

/// Limits told to the sink, setpoints, readings, charge and figures follow one certificate.
fn all_is_corrected(desk: &Desk, certificate: &Certificate) {
    let correction = certificate.correction;
    let channels = certificate.channels().unwrap();
    let hand = json!({ "sink": "left", "dut": source(), "interval": "60 s", "readback": "100 ms",
        "interlocks": { "undervoltage": { "below": "2.4 V" } } });
    let begun = desk.post_json("/v1/runs/by-hand", &hand);
    assert_eq!(begun.status, 201, "{begun:?}");
    let id = begun.json()["id"].as_str().unwrap().to_owned();
    let wanted_a = [0.05, 0.4, 1.3, 2.7];
    let mut outside = Vec::new();
    for wanted in wanted_a {
        let set = json!({ "setpoint": format!("{wanted} A") });
        let answer = desk.post_json(&format!("/v1/runs/{id}/setpoint"), &set);
        assert_eq!(answer.status, 200, "{answer:?}");
        let is_near = |run: &daemon::view::RunView| {
            let reading = run.reading.as_ref();
            reading.is_some_and(|reading| (reading.current_min_a - wanted).abs() < 0.02)
        };
        let run = desk.wait_for_run(&id, "the setpoint", is_near);
        let reading = run.reading.unwrap();
        let nominal = correction.to_nominal_setpoint(Current::from_amperes(wanted).unwrap());
        let heat_sink = reading.temperature_degc.unwrap();
        let (true_a, true_v) = Meters::truth(nominal.amperes(), heat_sink);
        for (what, error, most) in [
            (
                "set",
                true_a - wanted,
                expanded(&channels.current_set, wanted),
            ),
            (
                "read",
                reading.current_a - true_a,
                expanded(&channels.current_read, wanted),
            ),
            (
                "volts",
                reading.voltage_v - true_v,
                expanded(channels.voltage_read.as_ref().unwrap(), true_v),
            ),
        ] {
            if error.abs() > most {
                outside.push(format!("{what} at {wanted} A: {error} of {most}"));
            }
        }
    }
    // Of twelve intervals at 95 %, three or more miss once in fifty times; the seeds are fixed.
    assert!(outside.len() <= 2, "{outside:?}");
    assert_eq!(desk.post("/v1/sinks/left/off").json()["acknowledged"], true);
    let run = desk.wait_for_run(&id, "the record", |run| run.sealed);

    let record = Record::open(&desk.records().join(&run.record)).unwrap();
    let plan = &record.manifest().plan;
    assert_eq!(plan.correction, correction);
    let armed = &plan.interlocks;
    let (mut limits, mut steps, mut last) = (Vec::new(), Vec::new(), None);
    for entry in record.entries() {
        match entry.unwrap().body {
            Body::Order {
                order: Order::Limit { limit, .. },
                ..
            } => limits.push(limit),
            Body::Order {
                order: Order::Step(step),
                ..
            } => steps.push(step.mode),
            Body::Event(Happening::Reading(reading)) => last = Some(reading),
            Body::Event(_)
            | Body::Order { .. }
            | Body::Off
            | Body::Finding(_)
            | Body::Ended(_)
            | Body::Note(_) => {}
        }
    }
    let nominal_current =
        correction.current_limit_to_nominal(armed.over_current.threshold, Bound::Upper);
    assert!(
        limits.contains(&LimitKind::Current(nominal_current)),
        "{limits:?}"
    );
    let low = correction.voltage_limit_to_nominal(armed.undervoltage.threshold, Bound::Lower);
    assert!(limits.contains(&LimitKind::VoltageLow(low)), "{limits:?}");
    assert_ne!(low, armed.undervoltage.threshold);
    for wanted in wanted_a {
        let nominal = correction.to_nominal_setpoint(Current::from_amperes(wanted).unwrap());
        assert!(
            steps.contains(&Mode::Current(nominal)),
            "{wanted}: {steps:?}"
        );
    }
    // The last readback as the interface shows it is the record's own, corrected.
    let last = last.unwrap();
    let shown = run.reading.unwrap();
    let volts: Voltage = correction.terminal_voltage(last.values.voltage);
    assert!((shown.voltage_v - volts.volts()).abs() < 0.01, "{shown:?}");
    figures_follow(desk, &id, run.charge_ah);
}

fn figures_follow(desk: &Desk, id: &str, charge_ah: f64) {
    let figures = desk.get(&format!("/v1/records/{id}/figures")).json();
    assert_eq!(figures["figures"]["standing"], "calibrated", "{figures}");
    let charge = figures["figures"]["figures"]
        .as_array()
        .unwrap()
        .iter()
        .find(|figure| figure["name"] == "charge" || figure["name"] == "capacity");
    if let Some(charge) = charge {
        let value = charge["value"].as_f64().unwrap();
        assert!((value - charge_ah).abs() < 2e-3 * charge_ah, "{charge}");
    }
}

#[test]
fn the_python_example_calibrates_with_a_program_that_reads_the_meters() {
    let desk = open(tempfile::tempdir().unwrap(), None);
    let folder = desk.folder.path();
    let mut body = request(&["50 mA", "1 A", "2.5 A"]);
    body.as_object_mut().unwrap().remove("sink");
    std::fs::write(folder.join("calibration.json"), body.to_string()).unwrap();
    let reader = format!(
        "import json, sys\nstep = 3.3 / 4096\ncurrent = round(float(sys.argv[1]) / step) * step * {} + {SET_OFFSET_A}\nprint(json.dumps({{'current': f'{{current:.5f}} A', 'voltage': f'{{4.3 - 0.5 * current:.4f}} V'}}))\n",
        1.0 + SET_GAIN
    );
    std::fs::write(folder.join("reader.py"), reader).unwrap();
    let example = Path::new(env!("CARGO_MANIFEST_DIR")).join("../../docs/examples/calibrate.py");
    let output = std::process::Command::new("python3")
        .arg(example)
        .args([
            &desk.url,
            "left",
            "calibration.json",
            "python3",
            "reader.py",
        ])
        .current_dir(folder)
        .output()
        .unwrap();
    let said = String::from_utf8_lossy(&output.stdout);
    let wrong = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{said}\n{wrong}");
    assert!(said.contains("current set: +0.00"), "{said}");
    assert!(said.contains("certificates/weir-left-1.json"), "{said}");
    assert!(desk.get("/v1/certificates/weir-left-1").status == 200);
}

#[test]
fn without_a_certificate_a_record_says_that_it_is_nominal() {
    let desk = open(tempfile::tempdir().unwrap(), None);
    let hand = json!({ "sink": "left", "dut": source(), "interval": "2 s", "setpoint": "1 A",
        "interlocks": { "undervoltage": { "below": "2.4 V" } } });
    let begun = desk.post_json("/v1/runs/by-hand", &hand);
    let id = begun.json()["id"].as_str().unwrap().to_owned();
    desk.wait_for_run(&id, "the record", |run| run.sealed);
    let figures = desk.get(&format!("/v1/records/{id}/figures")).json();
    assert_eq!(
        figures["figures"]["standing"], "nominal_uncalibrated",
        "{figures}"
    );
}

#[test]
fn what_cannot_be_calibrated_is_refused_before_anything_flows() {
    let desk = open(tempfile::tempdir().unwrap(), None);
    let refused = |change: &dyn Fn(&mut Value), code: &str, says: &str| {
        let mut request = request(&SETPOINTS);
        change(&mut request);
        let answer = desk.post_json("/v1/calibrations", &request);
        assert_eq!(answer.code(), code, "{answer:?}");
        assert!(answer.text.contains(says), "{says}: {answer:?}");
    };
    let calibration = "calibration-refused";
    refused(
        &|to| to["setpoints"] = json!(["1 A"]),
        calibration,
        "1 setpoints",
    );
    refused(
        &|to| to["setpoints"] = json!(["0 A", "1 A"]),
        calibration,
        "the gate is off",
    );
    refused(
        &|to| to["setpoints"] = json!(["1 A", "9 A"]),
        "sequence-refused",
        "9 A",
    );
    refused(
        &|to| to["identity"] = json!("../evil"),
        calibration,
        "no identity",
    );
    refused(
        &|to| to["verifies"] = json!("x"),
        calibration,
        "give one of them",
    );
    refused(
        &|to| {
            to["identity"] = Value::Null;
            to["verifies"] = json!("x");
        },
        calibration,
        "no certificate `x`",
    );
    refused(&|to| to["readbacks"] = json!(1), calibration, "1 readbacks");
    refused(
        &|to| to["statement"]["valid_for_days"] = json!(0),
        calibration,
        "valid_for_days",
    );
    refused(
        &|to| to["statement"]["ambient"] = json!(23),
        "body-unreadable",
        "unit",
    );
    refused(
        &|to| to["interval"] = json!("1 ms"),
        "interval-refused",
        "1 ms",
    );
    assert!(
        desk.get("/v1/records").json()["records"]
            .as_array()
            .unwrap()
            .is_empty()
    );
    assert_eq!(desk.get("/v1/calibrations/x").code(), "no-such-calibration");
}

#[test]
fn a_calibration_that_nobody_renews_goes_off_and_keeps_its_points() {
    let desk = open(tempfile::tempdir().unwrap(), None);
    let mut request = request(&SETPOINTS);
    request["interval"] = json!("10 s");
    let begun = desk.post_json("/v1/calibrations", &request).json();
    let id = begun["id"].as_str().unwrap().to_owned();
    let path = format!("/v1/calibrations/{id}");
    for read in [
        json!({ "current": "20 mA" }),
        json!({ "current": "60 mA", "voltage": "4.15 V" }),
    ] {
        desk.wait_for("the setpoint to settle", |desk| {
            desk.get(&path).json()["state"] == "settled"
        });
        let taken = desk.post_json(&format!("{path}/reading"), &read);
        assert_eq!(taken.status, 200, "{taken:?}");
    }
    desk.wait_for("the end", |desk| desk.get(&path).json()["state"] == "ended");
    let late = desk.post_json(&format!("{path}/reading"), &json!({ "current": "60 mA" }));
    assert_eq!((late.status, late.code().as_str()), (409, "not-running"));
    assert!(late.text.contains("not asked for again"), "{late:?}");
    // Two current points and one voltage: no certificate comes of that, and it is said why.
    let finished = desk.post(&format!("{path}/finish"));
    assert_eq!(finished.code(), "calibration-refused");
    assert!(
        finished.text.contains("voltage read: 1 points"),
        "{finished:?}"
    );
}
