//! Every rule has a sequence that breaks it and one that just does not.

mod device;
mod flow;
mod interlocks;
mod reading;
mod recordings;
mod whole_run;

use quantity::{Current, Span, Voltage};
use serde_json::{Value, json};
use sink::bench::Bench;

use crate::Files;
use crate::calibration::Calibration;
use crate::compile::{Options, compile_with};
use crate::facts::Facts;
use crate::finding::Findings;
use crate::rule::{Rule, Severity};

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

    /// With a certificate: seconds it still holds, microamperes and microvolts it covers;
    /// `None`: it is of the current alone.
    fn calibrated(
        &mut self,
        seconds: u64,
        current: [i64; 2],
        voltage: impl Into<Option<[i64; 2]>>,
    ) {
        self.options.calibration = Calibration::Certificate {
            valid_for: Span::from_secs(seconds),
            current: current.map(Current::from_microamperes),
            voltage: voltage
                .into()
                .map(|ends| ends.map(Voltage::from_microvolts)),
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

fn cases() -> impl Iterator<Item = &'static Case> {
    [
        reading::CASES,
        recordings::CASES,
        flow::CASES,
        device::CASES,
        interlocks::CASES,
        whole_run::CASES,
    ]
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
