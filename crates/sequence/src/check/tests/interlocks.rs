//! Interlocks that are missing, loosened, or cannot act.

use quantity::{Current, Span};
use serde_json::json;

use super::{Case, case};
use crate::plan::Armed;
use crate::rule::Rule;

pub(super) const CASES: &[Case] = &[
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
