//! Holds a tree against a shape and finds everything that does not fit.

use std::str::FromStr;

use quantity::{
    Charge, Current, CurrentSpec, Energy, ParseError, ParseErrorKind, Power, Resistance, Span,
    Temperature, Textual, Voltage,
};

use super::{Kind, Object, Shape, Word};
use crate::finding::{Finding, Findings};
use crate::json::{Node, Value, child};
use crate::rule::Rule;

/// Every way in which a tree does not fit a shape.
pub(crate) fn judge(node: &Node, shape: &Shape, pointer: &str, findings: &mut Findings) {
    if node.value == Value::Damaged {
        return;
    }
    match *shape {
        Shape::Text { longest } => text(node, longest, pointer, findings),
        Shape::Quantity(kind) => quantity(node, kind, pointer, findings),
        Shape::Count { least, most } => count(node, least, most, pointer, findings),
        Shape::Bool => {
            if !matches!(node.value, Value::Bool(_)) {
                wrong_kind(node, "true or false", pointer, findings);
            }
        }
        Shape::Word(words) => word(node, words, pointer, findings),
        Shape::Version(known) => version(node, known, pointer, findings),
        Shape::Object(shape) => object(node, shape, pointer, findings),
        Shape::List { of, least } => list(node, of, least, pointer, findings),
        Shape::Tuple(shapes) => tuple(node, shapes, pointer, findings),
        Shape::WordOr(words, shape) => {
            if matches!(node.value, Value::Object(_)) {
                object(node, shape, pointer, findings);
            } else {
                word(node, words, pointer, findings);
            }
        }
    }
}

/// What stands there, in words.
fn described(node: &Node) -> String {
    match &node.value {
        Value::Null => "null".to_owned(),
        Value::Bool(value) => value.to_string(),
        Value::Number(number) => format!("the number {number}"),
        Value::Text(text) => format!("the text \"{}\"", shortened(text)),
        Value::List(_) => "a list".to_owned(),
        Value::Object(_) => "an object".to_owned(),
        Value::Damaged => "something damaged".to_owned(),
    }
}

fn shortened(text: &str) -> String {
    const LONGEST: usize = 40;
    if text.chars().count() <= LONGEST {
        return text.escape_debug().to_string();
    }
    let head: String = text.chars().take(LONGEST).collect();
    format!("{}...", head.escape_debug())
}

fn wrong_kind(node: &Node, wanted: &str, pointer: &str, findings: &mut Findings) {
    findings.push(Finding::new(
        Rule::WrongKind,
        pointer,
        format!("{} where {wanted} is wanted", described(node)),
        format!("write {wanted}"),
    ));
}

fn text(node: &Node, longest: usize, pointer: &str, findings: &mut Findings) {
    let Some(text) = node.text() else {
        return wrong_kind(node, "a text", pointer, findings);
    };
    let length = text.chars().count();
    if text.trim().is_empty() {
        let finding = Finding::new(
            Rule::BadText,
            pointer,
            "an empty text",
            "write something or leave the key out",
        );
        findings.push(finding);
    } else if length > longest {
        let finding = Finding::new(
            Rule::BadText,
            pointer,
            format!("a text of {length} characters is longer than the {longest} it may have"),
            format!("shorten it to {longest} characters"),
        );
        findings.push(finding.numbers(length, longest));
    }
}

fn parsed<T: FromStr<Err = ParseError>>(text: &str) -> Option<ParseError> {
    text.parse::<T>().err()
}

impl Kind {
    fn fault(self, text: &str) -> Option<ParseError> {
        match self {
            Self::Current => parsed::<Current>(text),
            Self::RatedCurrent => parsed::<CurrentSpec>(text),
            Self::Voltage => parsed::<Voltage>(text),
            Self::Power => parsed::<Power>(text),
            Self::Resistance => parsed::<Resistance>(text),
            Self::Charge => parsed::<Charge>(text),
            Self::Energy => parsed::<Energy>(text),
            Self::Temperature => parsed::<Temperature>(text),
            Self::Time => parsed::<Span>(text),
        }
    }

    fn dimension(self) -> quantity::Dimension {
        match self {
            Self::Current | Self::RatedCurrent => Current::dimension(),
            Self::Voltage => Voltage::dimension(),
            Self::Power => Power::dimension(),
            Self::Resistance => Resistance::dimension(),
            Self::Charge => Charge::dimension(),
            Self::Energy => Energy::dimension(),
            Self::Temperature => Temperature::dimension(),
            Self::Time => Span::dimension(),
        }
    }
}

fn quantity(node: &Node, kind: Kind, pointer: &str, findings: &mut Findings) {
    let wanted = kind.dimension();
    let example = wanted.example();
    match &node.value {
        Value::Number(number) => findings.push(Finding::new(
            Rule::UnitMissing,
            pointer,
            format!(
                "the number {number} has no unit where {} is wanted",
                wanted.with_article()
            ),
            format!("write a text with the unit, for example \"{example}\""),
        )),
        Value::Text(text) => {
            let Some(fault) = kind.fault(text) else {
                return;
            };
            let rule = if fault.kind == ParseErrorKind::UnitMissing {
                Rule::UnitMissing
            } else {
                Rule::BadQuantity
            };
            let hint = fault.hint();
            let whole = fault.to_string();
            // The error prints its hint behind a semicolon; here the hint has its own line.
            let message = whole
                .strip_suffix(&format!("; {hint}"))
                .unwrap_or(&whole)
                .to_owned();
            findings.push(Finding::new(rule, pointer, message, hint));
        }
        Value::Null | Value::Bool(_) | Value::List(_) | Value::Object(_) | Value::Damaged => {
            let wanted = format!(
                "{} as a text, for example \"{example}\",",
                wanted.with_article()
            );
            findings.push(Finding::new(
                Rule::WrongKind,
                pointer,
                format!("{} where {wanted} is wanted", described(node)),
                format!("write a text with the unit, for example \"{example}\""),
            ));
        }
    }
}

fn count(node: &Node, least: u64, most: u64, pointer: &str, findings: &mut Findings) {
    let Value::Number(number) = &node.value else {
        return wrong_kind(
            node,
            &format!("a whole number from {least} to {most}"),
            pointer,
            findings,
        );
    };
    let within = number
        .parse::<u64>()
        .is_ok_and(|number| (least..=most).contains(&number));
    if !within {
        findings.push(
            Finding::new(
                Rule::BadCount,
                pointer,
                format!("{number} is no whole number from {least} to {most}"),
                format!("write digits only, from {least} to {most}"),
            )
            .numbers(number, format!("{least} to {most}")),
        );
    }
}

fn word(node: &Node, words: &[Word], pointer: &str, findings: &mut Findings) {
    let listed = words
        .iter()
        .map(|word| format!("\"{}\"", word.word))
        .collect::<Vec<_>>()
        .join(", ");
    let Some(found) = node.text() else {
        return wrong_kind(node, &format!("one of {listed}"), pointer, findings);
    };
    if words.iter().any(|word| word.word == found) {
        return;
    }
    let hint = match nearest(found, words.iter().map(|word| word.word)) {
        Some(near) => format!("did you mean \"{near}\"? the words are {listed}"),
        None => format!("the words are {listed}"),
    };
    findings.push(Finding::new(
        Rule::BadWord,
        pointer,
        format!("\"{}\" is none of the words wanted here", shortened(found)),
        hint,
    ));
}

fn version(node: &Node, known: u64, pointer: &str, findings: &mut Findings) {
    let right = matches!(&node.value, Value::Number(number) if number.parse() == Ok(known));
    if !right {
        findings.push(Finding::new(
            Rule::Version,
            pointer,
            format!("{} is no version of the format", described(node)),
            format!("write {known}, the version that is known here"),
        ));
    }
}

fn list(node: &Node, of: &Shape, least: usize, pointer: &str, findings: &mut Findings) {
    let Value::List(elements) = &node.value else {
        return wrong_kind(node, "a list", pointer, findings);
    };
    if elements.len() < least {
        findings.push(
            Finding::new(
                Rule::BadCount,
                pointer,
                format!(
                    "a list of {} where at least {least} are wanted",
                    elements.len()
                ),
                "add what is missing or leave the key out",
            )
            .numbers(elements.len(), least),
        );
    }
    for (index, element) in elements.iter().enumerate() {
        judge(element, of, &format!("{pointer}/{index}"), findings);
    }
}

fn tuple(node: &Node, shapes: &[Shape], pointer: &str, findings: &mut Findings) {
    let elements = node.elements();
    if !matches!(node.value, Value::List(_)) || elements.len() != shapes.len() {
        return wrong_kind(
            node,
            &format!("a list of just {}", shapes.len()),
            pointer,
            findings,
        );
    }
    for (index, (element, shape)) in elements.iter().zip(shapes).enumerate() {
        judge(element, shape, &format!("{pointer}/{index}"), findings);
    }
}

fn object(node: &Node, shape: &Object, pointer: &str, findings: &mut Findings) {
    let Value::Object(members) = &node.value else {
        return wrong_kind(node, "an object", pointer, findings);
    };
    for member in members {
        let place = child(pointer, &member.key);
        match shape.fields.iter().find(|field| field.key == member.key) {
            Some(field) => judge(&member.node, &field.shape, &place, findings),
            None => unknown_key(node, shape, &member.key, &place, findings),
        }
    }
    for field in shape.fields {
        if field.required && node.get(field.key).is_none() && !renamed(node, shape, field.key) {
            findings.push(Finding::new(
                Rule::MissingKey,
                pointer,
                format!("{} has no `{}`", shape.meaning, field.key),
                format!("add `{}`: {}", field.key, field.meaning),
            ));
        }
    }
    choice(node, shape, pointer, findings);
}

fn unknown_key(node: &Node, shape: &Object, key: &str, place: &str, findings: &mut Findings) {
    let keys = shape.fields.iter().map(|field| field.key);
    let free = keys.clone().filter(|key| node.get(key).is_none());
    let hint = match nearest(key, free) {
        Some(near) => format!("did you mean `{near}`?"),
        None => format!("its keys are {}", keys.collect::<Vec<_>>().join(", ")),
    };
    findings.push(Finding::new(
        Rule::UnknownKey,
        place,
        format!("{} has no key `{}`", shape.meaning, shortened(key)),
        hint,
    ));
}

/// Whether an unknown key of the object is most likely this one, ill spelt: then one finding
/// is enough.
fn renamed(node: &Node, shape: &Object, wanted: &str) -> bool {
    let free = || {
        shape
            .fields
            .iter()
            .map(|field| field.key)
            .filter(|key| node.get(key).is_none())
    };
    node.members()
        .iter()
        .filter(|member| !shape.fields.iter().any(|field| field.key == member.key))
        .any(|member| nearest(&member.key, free()) == Some(wanted))
}

fn choice(node: &Node, shape: &Object, pointer: &str, findings: &mut Findings) {
    if shape.one_of.is_empty() {
        return;
    }
    let present: Vec<&str> = shape
        .one_of
        .iter()
        .copied()
        .filter(|key| node.get(key).is_some())
        .collect();
    let choices = shape.one_of.join(", ");
    if present.len() > 1 {
        findings.push(Finding::new(
            Rule::ExactlyOne,
            pointer,
            format!("{} has {} at once", shape.meaning, present.join(" and ")),
            format!("keep one of {choices}"),
        ));
    } else if present.is_empty() && !shape.one_of.iter().any(|key| renamed(node, shape, key)) {
        findings.push(Finding::new(
            Rule::ExactlyOne,
            pointer,
            format!("{} has none of {choices}", shape.meaning),
            "write one of them",
        ));
    }
}

/// The candidate that the word most likely stands for, if one is near enough.
pub(crate) fn nearest<'a>(
    word: &str,
    candidates: impl Iterator<Item = &'a str>,
) -> Option<&'a str> {
    if word.chars().count() > 40 {
        return None;
    }
    let plain = word.to_lowercase().replace([' ', '-'], "_");
    candidates
        .map(|candidate| (strsim::osa_distance(&plain, candidate), candidate))
        .filter(|&(distance, candidate)| {
            distance <= 1 + candidate.len() / 4 && distance < candidate.len()
        })
        .min()
        .map(|(_, candidate)| candidate)
}
