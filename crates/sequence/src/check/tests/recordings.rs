//! What an import of a recording loses.

use serde_json::{Value, json};

use super::{Case, case};
use crate::rule::Rule;

/// A profile of a recording with one row a millisecond or as given, imported.
fn recording(csv: &str, import: &Value) -> Value {
    let csv = format!("time_ms,current_ma\n{csv}");
    json!({ "profile": { "csv": csv, "interpolation": "steps", "import": import } })
}

pub(super) const CASES: &[Case] = &[
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
