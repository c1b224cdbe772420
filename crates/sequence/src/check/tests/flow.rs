//! Times, repeats, labels, skips, conditions.

use serde_json::json;

use super::{Case, case};
use crate::rule::Rule;

pub(super) const CASES: &[Case] = &[
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
