//! Reading the text: JSON, keys, quantities, profiles.

use serde_json::json;

use super::{Case, case, profile, remove};
use crate::rule::Rule;

fn text_of_bytes(text: &str, bytes: usize) -> String {
    format!("{text}{}", " ".repeat(bytes - text.len()))
}

pub(super) const CASES: &[Case] = &[
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
