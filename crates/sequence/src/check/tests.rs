//! Every rule has a sequence that breaks it and one that just does not.

use quantity::{Current, Power, Resistance, Span, Voltage};
use serde_json::{Value, json};
use sink::bench::Bench;
use sink::envelope::{Duration, Envelope};

use crate::calibration::Calibration;
use crate::compile::{Options, compile_with};
use crate::facts::Facts;
use crate::finding::Findings;
use crate::rule::{Rule, Severity};
use crate::{Files, plan::Armed};

/// What a case starts from: one discharge of an invented cell on the sink `left`.
const BASE: &str = include_str!("tests/base.json");

/// A sequence, a sink and options, each as a case changes them.
struct Bed {
    sequence: Value,
    /// Changes the text after the sequence was written out.
    text: fn(String) -> String,
    facts: Facts,
    files: Files,
    options: Options,
}

impl Bed {
    fn new() -> Self {
        let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
        let options = Options::default();
        let mut facts = Facts::of(bench.sink("left").unwrap(), options.correction);
        facts.baud = Some(115_200);
        Self {
            sequence: serde_json::from_str(BASE).unwrap(),
            text: |text| text,
            facts,
            files: Files::new(),
            options,
        }
    }

    fn step(&mut self, step: Value) {
        self.sequence["steps"][0] = step;
    }

    fn steps(&mut self, steps: Value) {
        self.sequence["steps"] = steps;
    }

    fn interlock(&mut self, key: &str, value: Value) {
        self.sequence["interlocks"][key] = value;
    }

    fn dut(&mut self, key: &str, value: Value) {
        self.sequence["dut"][key] = value;
    }

    /// With a certificate: seconds it still holds, microamperes and microvolts it covers.
    fn calibrated(&mut self, seconds: u64, current: [i64; 2], voltage: [i64; 2]) {
        self.options.calibration = Calibration::Certificate {
            valid_for: Span::from_secs(seconds),
            current: current.map(Current::from_microamperes),
            voltage: voltage.map(Voltage::from_microvolts),
        };
    }

    fn until(&mut self, until: &Value) {
        self.sequence["steps"][1]["until"] = json!([until]);
    }

    fn findings(&self) -> (String, Findings) {
        let text = serde_json::to_string_pretty(&self.sequence).unwrap();
        let text = (self.text)(text);
        let findings = match compile_with(&text, &self.facts, &self.files, &self.options) {
            Ok(compiled) => compiled.warnings,
            Err(refused) => refused.0,
        };
        (text, findings)
    }
}

struct Case {
    rule: Rule,
    breaks: fn(&mut Bed),
    holds: fn(&mut Bed),
}

const fn case(rule: Rule, breaks: fn(&mut Bed), holds: fn(&mut Bed)) -> Case {
    Case {
        rule,
        breaks,
        holds,
    }
}

fn remove(value: &mut Value, key: &str) {
    value.as_object_mut().unwrap().remove(key);
}

fn profile(points: &Value, interpolation: &str) -> Value {
    json!({ "profile": { "points": points, "interpolation": interpolation } })
}

/// A profile of a recording with one row a millisecond or as given, imported.
fn recording(csv: &str, import: &Value) -> Value {
    let csv = format!("time_ms,current_ma\n{csv}");
    json!({ "profile": { "csv": csv, "interpolation": "steps", "import": import } })
}

fn short_steps(bed: &mut Bed, micros: u64) {
    bed.facts.queue = 4;
    bed.steps(json!([{ "repeat": { "times": 100, "steps": [
        { "draw": "100 mA", "for": format!("{micros} us") },
        { "rest": format!("{micros} us") },
    ] } }]));
}

/// A sink whose heat sink can get rid of 2.5 W, and one step of ten hours.
fn small_heat_sink(bed: &mut Bed, above: i64) {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    let mut entry = bench.sink("left").unwrap().clone();
    entry.heat_sink.to_ambient = "20 K/W".parse().unwrap();
    let envelope = Envelope::of(&entry).unwrap();
    let ten_hours = Duration::Pulse(Span::from_secs(36_000));
    let voltage = Voltage::from_millivolts(4_200);
    let most = envelope
        .ceiling(voltage, Resistance::ZERO, ten_hours)
        .current;
    let current = most + Current::from_microamperes(above);
    bed.facts.envelope = Ok(envelope);
    // Without a rated capacity nothing is said about the charge of ten hours.
    remove(&mut bed.sequence["dut"], "rated_capacity");
    bed.interlock("undervoltage", json!({ "below": "2.5 V" }));
    bed.steps(json!([{ "draw": current.to_string(), "for": "10 h" }]));
}

fn text_of_bytes(text: &str, bytes: usize) -> String {
    format!("{text}{}", " ".repeat(bytes - text.len()))
}

const READING: &[Case] = &[
    case(
        Rule::JsonSyntax,
        |bed| bed.text = |text| text.replacen("\"sequence\": 1", "\"sequence\": 01", 1),
        |bed| bed.text = |text| text.replacen(' ', "\r\n\t", 1),
    ),
    case(
        Rule::JsonDuplicateKey,
        |bed| bed.text = |text| text.replacen("\"title\"", "\"title\": \"x\", \"title\"", 1),
        |bed| bed.text = |text| text.replacen("\"title\"", "\"note\": \"x\", \"title\"", 1),
    ),
    case(
        Rule::TooLarge,
        |bed| bed.text = |text| text_of_bytes(&text, 8_000_001),
        |bed| bed.text = |text| text_of_bytes(&text, 8_000_000),
    ),
    case(
        Rule::Version,
        |bed| bed.sequence["sequence"] = json!(2),
        |bed| bed.sequence["sequence"] = json!(1),
    ),
    case(
        Rule::UnknownKey,
        |bed| bed.sequence["readbak"] = json!("1 s"),
        |bed| bed.sequence["readback"] = json!("1 s"),
    ),
    case(
        Rule::MissingKey,
        |bed| remove(&mut bed.sequence, "title"),
        |bed| remove(&mut bed.sequence, "readback"),
    ),
    case(
        Rule::WrongKind,
        |bed| bed.sequence["steps"][1]["may_give_up"] = json!("yes"),
        |bed| bed.sequence["steps"][1]["may_give_up"] = json!(true),
    ),
    case(
        Rule::UnitMissing,
        |bed| bed.sequence["readback"] = json!(1),
        |bed| bed.sequence["readback"] = json!("1 s"),
    ),
    case(
        Rule::BadQuantity,
        |bed| bed.sequence["readback"] = json!("1 A"),
        |bed| bed.sequence["readback"] = json!("1000 ms"),
    ),
    case(
        Rule::BadWord,
        |bed| bed.dut("kind", json!("cel")),
        |bed| bed.dut("kind", json!("pack")),
    ),
    case(
        Rule::BadCount,
        |bed| bed.step(json!({ "repeat": { "times": 0, "steps": [{ "rest": "1 s" }] } })),
        |bed| bed.step(json!({ "repeat": { "times": 1, "steps": [{ "rest": "1 s" }] } })),
    ),
    case(
        Rule::BadText,
        |bed| bed.sequence["title"] = json!("x".repeat(121)),
        |bed| bed.sequence["title"] = json!("x".repeat(120)),
    ),
    case(
        Rule::ExactlyOne,
        |bed| bed.step(json!({ "rest": "1 s", "draw": "1 A" })),
        |bed| bed.step(json!({ "draw": "1 A", "for": "1 s" })),
    ),
    case(
        Rule::ClashingKeys,
        |bed| bed.step(json!({ "draw": "1 A", "for": "1 s", "at_most": "2 s" })),
        |bed| bed.step(json!({ "draw": "1 A", "at_most": "2 s", "until": [{ "charge": "1 C" }] })),
    ),
    case(
        Rule::ClashingKeys,
        |bed| bed.step(json!({ "rest": "2 s", "until": [{ "elapsed": "1 s", "for": "1 s" }] })),
        |bed| bed.step(json!({ "rest": "2 s", "until": [{ "elapsed": "1 s", "then": "end" }] })),
    ),
    case(
        Rule::ProfileSource,
        |bed| {
            bed.files
                .insert("p.csv".to_owned(), "time,current\n0,1\n1,1\n".to_owned());
            bed.step(json!({ "profile": { "file": "p.csv", "interpolation": "steps" } }));
        },
        |bed| {
            bed.files.insert(
                "p.csv".to_owned(),
                "time_s,current_a\n0,1\n1,1\n".to_owned(),
            );
            bed.step(json!({ "profile": { "file": "p.csv", "interpolation": "steps" } }));
        },
    ),
    case(
        Rule::ProfilePoints,
        |bed| {
            bed.step(profile(
                &json!([["0 s", "1 A"], ["2 s", "1 A"], ["1 s", "1 A"]]),
                "linear",
            ));
        },
        |bed| {
            bed.step(profile(
                &json!([["0 s", "1 A"], ["2 s", "1 A"], ["2 s", "1 A"]]),
                "linear",
            ));
        },
    ),
    case(
        Rule::ProfileLastCurrent,
        |bed| bed.step(profile(&json!([["0 s", "1 A"], ["2 s", "2 A"]]), "steps")),
        |bed| bed.step(profile(&json!([["0 s", "1 A"], ["2 s", "1 A"]]), "steps")),
    ),
];

const IMPORT: &[Case] = &[
    case(
        // 330 mV / 2^12 / 0.1 ohm is 805.7 uA.
        Rule::ImportError,
        |bed| bed.step(recording("0,100\n500,100\n", &json!({ "error": "805 uA" }))),
        |bed| bed.step(recording("0,100\n500,100\n", &json!({ "error": "806 uA" }))),
    ),
    case(
        Rule::ImportPeriod,
        |bed| {
            bed.step(recording(
                "0,100\n500,100\n",
                &json!({ "error": "2 mA", "period": "501 ms" }),
            ));
        },
        |bed| {
            bed.step(recording(
                "0,100\n500,100\n",
                &json!({ "error": "2 mA", "period": "500 ms" }),
            ));
        },
    ),
    case(
        Rule::ImportPeak,
        |bed| {
            bed.step(recording(
                "0,3000.1\n500,100\n600,100\n",
                &json!({ "error": "2 mA" }),
            ));
        },
        |bed| {
            bed.step(recording(
                "0,3000.1\n500,100\n600,100\n",
                &json!({ "error": "2 mA", "clip_above": "2.9 A" }),
            ));
        },
    ),
    case(
        Rule::ImportBelowFloor,
        |bed| {
            bed.step(recording(
                "0,2.4\n500,100\n600,100\n",
                &json!({ "error": "2 mA" }),
            ));
        },
        |bed| {
            bed.step(recording(
                "0,3.3\n500,100\n600,100\n",
                &json!({ "error": "2 mA" }),
            ));
        },
    ),
    case(
        // A pulse of a third of a tick.
        Rule::ImportEdges,
        |bed| {
            bed.step(recording(
                "0,100\n100.3,200\n100.6,100\n600,100\n",
                &json!({ "error": "2 mA" }),
            ));
        },
        |bed| {
            bed.step(recording(
                "0,100\n100.0,200\n101.0,100\n600,100\n",
                &json!({ "error": "2 mA" }),
            ));
        },
    ),
    case(
        Rule::ImportClipped,
        |bed| {
            bed.step(recording(
                "0,400.001\n500,100\n600,100\n",
                &json!({ "error": "2 mA", "clip_above": "400 mA" }),
            ));
        },
        |bed| {
            bed.step(recording(
                "0,400\n500,100\n600,100\n",
                &json!({ "error": "2 mA", "clip_above": "400 mA" }),
            ));
        },
    ),
    case(
        Rule::ImportCycles,
        |bed| {
            bed.step(recording(
                "0,100\n500,100\n501,100\n",
                &json!({ "error": "2 mA", "period": "500 ms" }),
            ));
        },
        |bed| {
            bed.step(recording(
                "0,100\n500,100\n1000,100\n",
                &json!({ "error": "2 mA", "period": "500 ms" }),
            ));
        },
    ),
    case(
        // Levels a converter step apart cannot take up what a jump before a slope costs.
        Rule::ImportCharge,
        |bed| {
            let rows = "0,100\n10,100\n10,500\n12,2500\n12,100\n20,100\n";
            let mut step = recording(rows, &json!({ "error": "806 uA" }));
            step["profile"]["interpolation"] = json!("linear");
            bed.step(step);
        },
        |bed| {
            let rows = "0,100\n10,100\n10,500\n210,700\n210,100\n220,100\n";
            let mut step = recording(rows, &json!({ "error": "2 mA" }));
            step["profile"]["interpolation"] = json!("linear");
            bed.step(step);
        },
    ),
];

const FLOW: &[Case] = &[
    case(
        Rule::TimeMissing,
        |bed| bed.step(json!({ "draw": "1 A" })),
        |bed| bed.step(json!({ "draw": "1 A", "for": "1 s" })),
    ),
    case(
        Rule::TimeZero,
        |bed| bed.step(json!({ "rest": "0 s" })),
        |bed| bed.step(json!({ "rest": "1 ms" })),
    ),
    case(
        Rule::EndlessRepeat,
        |bed| {
            bed.step(json!({ "repeat": {
                "steps": [{ "rest": "1 s" }], "until": [{ "voltage_below": "3 V" }] } }));
        },
        |bed| {
            bed.step(json!({ "repeat": {
                "steps": [{ "rest": "1 s" }], "until": [{ "voltage_below": "3 V" }],
                "at_most": "1 h" } }));
        },
    ),
    case(
        Rule::LabelDuplicate,
        |bed| bed.step(json!({ "rest": "1 s", "label": "discharge" })),
        |bed| bed.step(json!({ "rest": "1 s", "label": "Discharge" })),
    ),
    case(
        Rule::LabelUnknown,
        |bed| bed.step(json!({ "rest": "1 s", "then": { "skip_to": "dicharge" } })),
        |bed| bed.step(json!({ "rest": "1 s", "then": { "skip_to": "discharge" } })),
    ),
    case(
        Rule::SkipBackward,
        |bed| bed.sequence["steps"][1]["then"] = json!({ "skip_to": "discharge" }),
        |bed| bed.step(json!({ "rest": "1 s", "then": { "skip_to": "discharge" } })),
    ),
    case(
        Rule::SkipIntoRepeat,
        |bed| {
            bed.sequence["steps"][2] = json!({ "repeat": {
                "times": 2, "steps": [{ "rest": "1 s" }, { "rest": "1 s", "label": "in" }] } });
            bed.until(&json!({ "voltage_below": "3 V", "then": { "skip_to": "in" } }));
        },
        |bed| {
            bed.sequence["steps"][2] = json!({ "repeat": {
                "times": 2, "steps": [
                    { "rest": "1 s", "then": { "skip_to": "in" } },
                    { "rest": "1 s" }, { "rest": "1 s", "label": "in" }] } });
        },
    ),
    case(
        Rule::Unreachable,
        |bed| bed.step(json!({ "rest": "1 s", "then": "end" })),
        |bed| {
            bed.step(json!({ "rest": "1 s", "then": "end",
                "until": [{ "voltage_above": "3 V" }] }));
        },
    ),
    case(
        Rule::RampStartUnknown,
        |bed| {
            bed.steps(json!([
                { "draw_power": "1 W", "for": "1 s" }, { "ramp": { "to": "1 A", "over": "1 s" } }]));
        },
        |bed| {
            bed.steps(json!([
                { "draw": "1 A", "for": "1 s" }, { "ramp": { "to": "2 A", "over": "1 s" } }]));
        },
    ),
    case(
        Rule::UntilNeverHolds,
        |bed| {
            bed.step(json!({ "draw": "1 A", "at_most": "10 s", "until": [{ "charge": "10 C" }] }));
        },
        |bed| {
            bed.step(
                json!({ "draw": "1 A", "at_most": "10 s", "until": [{ "charge": "9.999 C" }] }),
            );
        },
    ),
    case(
        Rule::UntilBehindInterlock,
        |bed| bed.until(&json!({ "voltage_below": "2.5 V" })),
        |bed| bed.until(&json!({ "voltage_below": "2.500001 V" })),
    ),
];

const DEVICE: &[Case] = &[
    case(
        Rule::DutVoltages,
        |bed| bed.dut("voltage_min", json!("4.2 V")),
        |bed| bed.dut("voltage_min", json!("2.499999 V")),
    ),
    case(
        Rule::DutCurrent,
        |bed| bed.dut("current_max", json!("0 A")),
        |bed| bed.dut("current_max", json!("640 mA")),
    ),
    case(
        Rule::DutCellCount,
        |bed| bed.dut("series", json!(2)),
        |bed| {
            bed.dut("series", json!(2));
            bed.dut("kind", json!("pack"));
        },
    ),
    case(
        Rule::DutLabel,
        |bed| remove(&mut bed.sequence["dut"], "label"),
        |bed| {
            remove(&mut bed.sequence["dut"], "label");
            bed.options.dut_label = Some("K-03".to_owned());
        },
    ),
    case(
        Rule::DutVoltageRange,
        |bed| bed.facts.voltage_max = Voltage::from_microvolts(4_199_999),
        |bed| bed.facts.voltage_max = Voltage::from_microvolts(4_200_000),
    ),
    case(
        Rule::RatedCapacityMissing,
        |bed| remove(&mut bed.sequence["dut"], "rated_capacity"),
        |bed| {
            remove(&mut bed.sequence["dut"], "rated_capacity");
            bed.sequence["steps"][1]["draw"] = json!("640 mA");
        },
    ),
    case(
        Rule::CurrentNegative,
        |bed| bed.step(json!({ "draw": "-1 mA", "for": "1 s" })),
        |bed| bed.step(json!({ "draw": "0 mA", "for": "1 s" })),
    ),
    case(
        Rule::CurrentAboveSink,
        |bed| {
            bed.facts.current_max = Current::from_milliamperes(1000);
            bed.step(json!({ "draw": "1.000001 A", "for": "1 s" }));
        },
        |bed| {
            bed.facts.current_max = Current::from_milliamperes(1000);
            bed.step(json!({ "draw": "1 A", "for": "1 s" }));
        },
    ),
    case(
        // At the least voltage, where the undervoltage interlock acts: 5 W / 2.5 V.
        Rule::CurrentAboveDut,
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_power": "5.00001 W", "for": "1 s" }));
        },
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_power": "5 W", "for": "1 s" }));
        },
    ),
    case(
        // At the largest voltage: 4.2 V / 2.1 ohm is 2 A.
        Rule::CurrentAboveDut,
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_resistance": "2.09999 ohm", "for": "1 s" }));
        },
        |bed| {
            bed.dut("current_max", json!("2 A"));
            bed.step(json!({ "draw_resistance": "2.1 ohm", "for": "1 s" }));
        },
    ),
    case(
        // 4.2 V times 2 A.
        Rule::PowerAboveSink,
        |bed| {
            bed.facts.power_max = Power::from_milliwatts(8_399);
            bed.step(json!({ "draw": "2 A", "for": "1 s" }));
        },
        |bed| {
            bed.facts.power_max = Power::from_milliwatts(8_400);
            bed.step(json!({ "draw": "2 A", "for": "1 s" }));
        },
    ),
    case(
        Rule::AboveEnvelope,
        |bed| small_heat_sink(bed, 1),
        |bed| small_heat_sink(bed, 0),
    ),
    case(
        // (200 uV + 50 uV) / 0.1 ohm.
        Rule::CurrentBelowFloor,
        |bed| bed.step(json!({ "draw": "2.499 mA", "for": "1 s" })),
        |bed| bed.step(json!({ "draw": "2.5 mA", "for": "1 s" })),
    ),
    case(
        // 330 mV / 2^12 / 0.1 ohm is 806 uA; half of it is 2 % of 20.15 mA.
        Rule::CoarseStep,
        |bed| bed.step(json!({ "draw": "20.14 mA", "for": "1 s" })),
        |bed| bed.step(json!({ "draw": "20.15 mA", "for": "1 s" })),
    ),
    case(
        Rule::AbilityMissing,
        |bed| {
            bed.facts.holds_power = false;
            bed.step(json!({ "draw_power": "1 W", "for": "1 s" }));
        },
        |bed| {
            bed.facts.holds_power = false;
            bed.step(json!({ "draw_resistance": "3 ohm", "for": "1 s" }));
        },
    ),
    case(
        Rule::ShorterThanTick,
        |bed| bed.step(json!({ "rest": "999 us" })),
        |bed| bed.step(json!({ "rest": "1 ms" })),
    ),
    case(
        // The jump to 1 A takes one tick, the slope another.
        Rule::ShorterThanTick,
        |bed| {
            bed.step(profile(
                &json!([["0 s", "1 A"], ["1999 us", "2 A"]]),
                "linear",
            ));
        },
        |bed| bed.step(profile(&json!([["0 s", "1 A"], ["2 ms", "2 A"]]), "linear")),
    ),
    case(
        Rule::OffTick,
        |bed| bed.step(json!({ "rest": "1500 us" })),
        |bed| bed.step(json!({ "rest": "2 ms" })),
    ),
    case(
        // 512 samples of 1 ms.
        Rule::BurstTooLong,
        |bed| {
            bed.step(json!({ "draw": "1 A", "for": "1 s",
                "burst": { "before": "13 ms", "after": "500 ms" } }));
        },
        |bed| {
            bed.step(json!({ "draw": "1 A", "for": "1 s",
                "burst": { "before": "12 ms", "after": "500 ms" } }));
        },
    ),
    case(
        // Four steps of 96 bytes at 86.8 us a byte, slowed by readbacks, and 100 ms: 136.2 ms.
        Rule::QueueRunsDry,
        |bed| short_steps(bed, 34_000),
        |bed| short_steps(bed, 35_000),
    ),
    case(
        Rule::ReadbackTooFast,
        |bed| {
            bed.facts.baud = None;
            bed.sequence["readback"] = json!("19.999 ms");
        },
        |bed| {
            bed.facts.baud = None;
            bed.sequence["readback"] = json!("20 ms");
        },
    ),
    case(
        Rule::ReadbackTooSlow,
        |bed| {
            bed.facts.interlocks.silence = Some(Span::from_secs(60));
            bed.sequence["readback"] = json!("10001 ms");
        },
        |bed| {
            bed.facts.interlocks.silence = Some(Span::from_secs(60));
            bed.sequence["readback"] = json!("10 s");
        },
    ),
    case(
        // 180 bytes of 10 bits at 115200 baud, over two thirds: 23.4375 ms.
        Rule::ReadbackAbovePort,
        |bed| bed.sequence["readback"] = json!("23437 us"),
        |bed| bed.sequence["readback"] = json!("23438 us"),
    ),
];

const INTERLOCKS: &[Case] = &[
    case(
        Rule::InterlocksMissing,
        |bed| bed.sequence["interlocks"] = json!({}),
        |bed| bed.interlock("over_current", json!({ "above": "2 A" })),
    ),
    case(
        Rule::InterlocksMissing,
        |bed| bed.facts.interlocks.over_power = None,
        |bed| {
            bed.facts.interlocks.over_power = None;
            bed.interlock("over_power", json!({ "above": "10 W" }));
        },
    ),
    case(
        Rule::InterlockLoosened,
        |bed| bed.interlock("over_temperature", json!({ "above": "75.001 degC" })),
        |bed| bed.interlock("over_temperature", json!({ "above": "75 degC" })),
    ),
    case(
        Rule::InterlockLoosened,
        |bed| {
            bed.interlock(
                "over_temperature",
                json!({ "above": "70 degC", "for": "501 ms" }),
            );
        },
        |bed| {
            bed.interlock(
                "over_temperature",
                json!({ "above": "70 degC", "for": "500 ms" }),
            );
        },
    ),
    case(
        // 4.4 V times 2 A.
        Rule::InterlockCannotAct,
        |bed| {
            bed.interlock("over_current", json!({ "above": "2 A" }));
            bed.interlock("over_power", json!({ "above": "8.8 W" }));
        },
        |bed| {
            bed.interlock("over_current", json!({ "above": "2 A" }));
            bed.interlock("over_power", json!({ "above": "8.799 W" }));
        },
    ),
    case(
        Rule::InterlockCannotAct,
        |bed| {
            bed.facts.interlocks.undervoltage = None;
            bed.interlock("undervoltage", json!({ "below": "0 V" }));
        },
        |bed| {
            bed.facts.interlocks.undervoltage = None;
            bed.interlock("undervoltage", json!({ "below": "2.5 V" }));
        },
    ),
    case(
        // No step draws more than 0,2 It, 640 mA.
        Rule::InterlockCannotAct,
        |bed| {
            bed.facts.interlocks.not_following = None;
            bed.interlock(
                "not_following",
                json!({ "short_by": "640 mA", "for": "1 s" }),
            );
        },
        |bed| {
            bed.facts.interlocks.not_following = None;
            bed.interlock(
                "not_following",
                json!({ "short_by": "639 mA", "for": "1 s" }),
            );
        },
    ),
    case(
        Rule::InterlockAtOnce,
        |bed| bed.interlock("over_current", json!({ "above": "640 mA" })),
        |bed| bed.interlock("over_current", json!({ "above": "640.001 mA" })),
    ),
    case(
        Rule::InterlockAtOnce,
        |bed| bed.interlock("over_voltage", json!({ "above": "4.199 V" })),
        |bed| bed.interlock("over_voltage", json!({ "above": "4.2 V" })),
    ),
    case(
        Rule::UndervoltageBelowDut,
        |bed| bed.interlock("undervoltage", json!({ "below": "2.499 V" })),
        |bed| bed.interlock("undervoltage", json!({ "below": "2.5 V" })),
    ),
    case(
        Rule::SilenceBelowReadback,
        |bed| bed.sequence["readback"] = json!("1001 ms"),
        |bed| bed.sequence["readback"] = json!("1 s"),
    ),
    case(
        Rule::PersistenceBelowReadback,
        |bed| bed.until(&json!({ "voltage_below": "2.75 V", "for": "199 ms" })),
        |bed| bed.until(&json!({ "voltage_below": "2.75 V", "for": "200 ms" })),
    ),
    case(
        Rule::PersistenceBelowReadback,
        |bed| {
            bed.facts.interlocks.not_following = Some(Armed {
                threshold: Current::from_milliamperes(50),
                persistence: Span::from_millis(199),
            });
        },
        |bed| {
            bed.facts.interlocks.not_following = Some(Armed {
                threshold: Current::from_milliamperes(50),
                persistence: Span::from_millis(200),
            });
        },
    ),
];

const RUN: &[Case] = &[
    case(
        // 3.2 Ah at 1 A is 192 min.
        Rule::ChargeAboveRated,
        |bed| bed.step(json!({ "draw": "1 A", "for": "193 min" })),
        |bed| bed.step(json!({ "draw": "1 A", "for": "192 min" })),
    ),
    case(
        // 10 min, 7 h and 1 min.
        Rule::LimitOutOfReach,
        |bed| bed.interlock("time", json!("431 min")),
        |bed| bed.interlock("time", json!("430 min")),
    ),
    case(
        // A cell of 3.2 Ah at 0,2 It: 5 h, with 11 min of rest.
        Rule::LimitBeforeEnd,
        |bed| bed.interlock("time", json!("310 min")),
        |bed| bed.interlock("time", json!("311 min")),
    ),
    case(
        Rule::LimitBeforeEnd,
        |bed| bed.interlock("charge", json!("3.1999 Ah")),
        |bed| bed.interlock("charge", json!("3.2 Ah")),
    ),
    case(
        Rule::CertificateExpires,
        |bed| bed.calibrated(431 * 60 - 1, [1, 3_000_000], [1_000_000, 5_000_000]),
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [1_000_000, 5_000_000]),
    ),
    case(
        Rule::CertificateAbsent,
        |bed| bed.options.calibration = Calibration::Absent,
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [1_000_000, 5_000_000]),
    ),
    case(
        // 0,2 It of 3.2 Ah is 640 mA.
        Rule::BeyondCalibration,
        |bed| bed.calibrated(431 * 60, [1, 639_999], [1_000_000, 5_000_000]),
        |bed| bed.calibrated(431 * 60, [640_000, 640_000], [1_000_000, 5_000_000]),
    ),
    case(
        Rule::BeyondCalibration,
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [2_500_001, 5_000_000]),
        |bed| bed.calibrated(431 * 60, [1, 3_000_000], [2_500_000, 4_200_000]),
    ),
    case(
        // 431 min of five readbacks a second, 400 bytes each: 51.72 MB.
        Rule::DiskSpace,
        |bed| bed.options.disk_free_bytes = Some(51_719_999),
        |bed| bed.options.disk_free_bytes = Some(51_720_000),
    ),
    case(
        Rule::RecordLarge,
        |bed| bed.options.disk_free_bytes = Some(103_439_998),
        |bed| bed.options.disk_free_bytes = Some(103_440_000),
    ),
];

fn cases() -> impl Iterator<Item = &'static Case> {
    [READING, IMPORT, FLOW, DEVICE, INTERLOCKS, RUN]
        .into_iter()
        .flatten()
}

#[test]
fn the_base_has_no_finding() {
    let (_, findings) = Bed::new().findings();
    assert_eq!(findings, Findings::default(), "{findings}");
}

#[test]
fn every_rule_is_broken_by_a_sequence_and_just_held_by_another() {
    for case in cases() {
        let rule = case.rule;
        let mut bed = Bed::new();
        (case.breaks)(&mut bed);
        let (_, findings) = bed.findings();
        assert!(
            findings.rules().contains(&rule),
            "not broken: {rule}\n{findings}"
        );
        let mut bed = Bed::new();
        (case.holds)(&mut bed);
        let (_, findings) = bed.findings();
        assert!(
            !findings.rules().contains(&rule),
            "not held: {rule}\n{findings}"
        );
        assert!(
            !findings.refuse(),
            "held, but refused for another reason: {rule}\n{findings}"
        );
    }
}

#[test]
fn every_rule_has_a_case() {
    let missing: Vec<&Rule> = Rule::ALL
        .iter()
        .filter(|rule| !cases().any(|case| case.rule == **rule))
        .collect();
    assert!(missing.is_empty(), "no case for {missing:?}");
}

#[test]
fn every_finding_stands_in_the_text_and_says_how_to_mend_it() {
    for case in cases() {
        let mut bed = Bed::new();
        (case.breaks)(&mut bed);
        let (text, findings) = bed.findings();
        for finding in findings.list {
            assert!(
                !finding.message.is_empty() && !finding.hint.is_empty(),
                "{finding}"
            );
            assert_eq!(finding.severity, finding.rule.severity());
            if finding.rule == Rule::TooLarge {
                continue;
            }
            let place = finding.place.clone().unwrap();
            let line = text.lines().nth(place.line as usize - 1).unwrap();
            assert!(
                place.column as usize <= line.chars().count() + 1,
                "{finding}"
            );
            assert!(place.caret + place.width <= 96, "{finding}");
        }
    }
}

#[test]
fn warnings_alone_do_not_refuse() {
    for case in cases().filter(|case| case.rule.severity() == Severity::Warning) {
        let mut bed = Bed::new();
        (case.breaks)(&mut bed);
        let (_, findings) = bed.findings();
        assert!(!findings.refuse(), "{findings}");
    }
}
