//! The published documents are what the code says: schema, tables, examples.

use std::fmt::Write as _;

use expect_test::expect_file;
use serde_json::{Value, json};
use sink::bench::Bench;

use crate::format::SEQUENCE;
use crate::rule::Rule;
use crate::shape::{Kind, Object, Shape, Word};
use crate::{Files, Findings, Options, compile, schema};

const DOCUMENT: &str = include_str!("../../../../docs/sequences.md");

fn findings(sequence: &str) -> Result<Findings, Findings> {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    let sink = bench.sink("left").unwrap();
    match compile(sequence, sink, &Files::new(), &Options::default()) {
        Ok(compiled) => Ok(compiled.warnings),
        Err(refused) => Err(refused.0),
    }
}

/// The fenced blocks of a document: what stands behind the fence, and the text.
fn blocks(document: &str) -> Vec<(&str, String)> {
    let mut blocks = Vec::new();
    let mut lines = document.lines();
    while let Some(line) = lines.next() {
        if let Some(kind) = line.strip_prefix("```") {
            let text: Vec<&str> = lines.by_ref().take_while(|line| *line != "```").collect();
            blocks.push((
                kind,
                text.iter()
                    .fold(String::new(), |all, line| all + line + "\n"),
            ));
        }
    }
    blocks
}

/// An example of the document as a whole sequence: steps and parts are put into the base.
fn whole(example: &str) -> String {
    let value: Value = serde_json::from_str(example).unwrap();
    let mut base: Value = serde_json::from_str(include_str!("../check/tests/base.json")).unwrap();
    if value.get("sequence").is_some() {
        return example.to_owned();
    }
    if let Value::Object(parts) = value {
        base.as_object_mut().unwrap().extend(parts);
    } else {
        base["steps"] = value;
    }
    serde_json::to_string_pretty(&base).unwrap()
}

#[test]
fn every_example_of_the_document_compiles() {
    let mut count = 0;
    for (kind, example) in blocks(DOCUMENT) {
        if kind == "json" {
            let example = whole(&example);
            if let Err(findings) = findings(&example) {
                panic!("{example}\n{findings}");
            }
            count += 1;
        }
        if kind == "csv" {
            let step = json!([{ "profile": { "interpolation": "steps", "csv": example } }]);
            if let Err(findings) = findings(&whole(&step.to_string())) {
                panic!("{example}\n{findings}");
            }
        }
    }
    assert!(count > 8, "only {count} examples were found");
}

#[test]
fn the_first_example_has_no_warning() {
    let (_, first) = blocks(DOCUMENT)
        .into_iter()
        .find(|(kind, _)| *kind == "json")
        .unwrap();
    assert_eq!(findings(&first), Ok(Findings::default()));
}

fn words(words: &[Word]) -> String {
    let listed: Vec<String> = words
        .iter()
        .map(|word| format!("`\"{}\"` ({})", word.word, word.meaning))
        .collect();
    listed.join(", ")
}

fn kind(kind: Kind) -> &'static str {
    match kind {
        Kind::Current => "current",
        Kind::RatedCurrent => "current, also in `It`",
        Kind::Voltage => "voltage",
        Kind::Power => "power",
        Kind::Resistance => "resistance",
        Kind::Charge => "charge",
        Kind::Energy => "energy",
        Kind::Temperature => "temperature",
        Kind::Time => "time",
    }
}

fn value(shape: &Shape) -> String {
    match *shape {
        Shape::Text { longest } => format!("text of up to {longest} characters"),
        Shape::Quantity(of) => kind(of).to_owned(),
        Shape::Count { least, most } => format!("number from {least} to {most}"),
        Shape::Bool => "true or false".to_owned(),
        Shape::Word(choice) => words(choice),
        Shape::Version(version) => version.to_string(),
        Shape::Object(object) => {
            let keys: Vec<String> = object
                .fields
                .iter()
                .map(|field| format!("`{}`", field.key))
                .collect();
            if keys.len() > 3 {
                "object, see below".to_owned()
            } else {
                format!("object with {}", keys.join(", "))
            }
        }
        Shape::List {
            of: Shape::Object(object),
            ..
        } => {
            format!("list of {}s", object.meaning.trim_start_matches("a "))
        }
        Shape::List { .. } => "list of pairs".to_owned(),
        Shape::Tuple(_) => "pair".to_owned(),
        Shape::WordOr(choice, _) => format!("{} or `{{\"skip_to\": \"label\"}}`", words(choice)),
    }
}

fn keys(object: &Object) -> String {
    let mut out = "| key | value | meaning |\n|---|---|---|\n".to_owned();
    for field in object.fields {
        let must = if field.required { " (required)" } else { "" };
        let value = value(&field.shape);
        writeln!(
            out,
            "| `{}`{must} | {value} | {} |",
            field.key, field.meaning
        )
        .unwrap();
    }
    out
}

fn rules() -> String {
    let mut out = "| rule | | what it asks for |\n|---|---|---|\n".to_owned();
    for rule in Rule::ALL {
        writeln!(
            out,
            "| `{rule}` | {} | {} |",
            rule.severity(),
            rule.summary()
        )
        .unwrap();
    }
    out
}

/// Every object of the format, each once.
fn objects<'a>(object: &'a Object, found: &mut Vec<&'a Object>) {
    if found.iter().any(|other| other.name == object.name) {
        return;
    }
    found.push(object);
    for field in object.fields {
        let mut shape = field.shape;
        if let Shape::List { of, .. } = shape {
            shape = *of;
        }
        if let Shape::Object(inner) | Shape::WordOr(_, inner) = shape {
            objects(inner, found);
        }
    }
}

/// The document with the text between the marks of a section replaced.
fn with_section(document: &str, name: &str, text: &str) -> String {
    let (begin, end) = (
        format!("<!-- begin {name} -->\n"),
        format!("<!-- end {name} -->"),
    );
    let Some((before, rest)) = document.split_once(&begin) else {
        return document.to_owned();
    };
    let (_, after) = rest.split_once(&end).unwrap();
    format!("{before}{begin}{text}{end}{after}")
}

#[test]
fn the_document_s_tables_and_findings_are_the_code_s() {
    let mut document = with_section(DOCUMENT, "rules", &rules());
    let mut found = Vec::new();
    objects(&SEQUENCE, &mut found);
    for object in found {
        document = with_section(&document, object.name, &keys(object));
    }
    let (_, refused) = blocks(DOCUMENT)
        .into_iter()
        .find(|(kind, _)| *kind == "json refused")
        .unwrap();
    let said = findings(&refused).unwrap_err().to_string();
    let (before, rest) = document.split_once("```text\n").unwrap();
    let (_, after) = rest.split_once("```").unwrap();
    let document = format!("{before}```text\n{said}```{after}");
    expect_file!["../../../../docs/sequences.md"].assert_eq(&document);
}

#[test]
fn the_published_schema_is_the_code_s() {
    let text = serde_json::to_string_pretty(&schema()).unwrap() + "\n";
    expect_file!["../../../../docs/sequence.schema.json"].assert_eq(&text);
}

#[test]
fn every_reference_of_the_schema_leads_somewhere() {
    fn references<'a>(value: &'a Value, found: &mut Vec<&'a str>) {
        match value {
            Value::Object(map) => {
                if let Some(Value::String(target)) = map.get("$ref") {
                    found.push(target);
                }
                map.values().for_each(|value| references(value, found));
            }
            Value::Array(list) => list.iter().for_each(|value| references(value, found)),
            Value::Null | Value::Bool(_) | Value::Number(_) | Value::String(_) => {}
        }
    }
    let schema = schema();
    let mut found = Vec::new();
    references(&schema, &mut found);
    assert!(found.len() > 50);
    for target in found {
        let pointer = target.strip_prefix('#').unwrap();
        assert!(
            schema.pointer(pointer).is_some_and(Value::is_object),
            "{target}"
        );
    }
}
