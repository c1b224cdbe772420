//! The numbers behind a plot, for the read-off: one JSON object.
//!
//! Names and units are literals of this crate, all else are numbers: nothing of the record's
//! text is in it, so nothing needs the script's own escaping.

use plot::{Markup, Sample, Trace};

/// `{"traces":[{"name":..,"unit":..,"x":[..],"low":[..],"mean":[..],"high":[..]}]}`, places with
/// so many decimals.
pub(super) fn block(traces: &[Trace], decimals: usize) -> Markup {
    let mut json = Markup::new();
    json.raw("{\"traces\":[");
    let mut between = "";
    for trace in traces {
        json.raw(between).raw("{\"name\":\"").raw(trace.name);
        json.raw("\",\"unit\":\"").raw(match trace.unit {
            "degC" => "°C",
            other => other,
        });
        json.raw("\"");
        list(&mut json, ",\"x\":[", trace, decimals, |sample| sample.x);
        list(&mut json, ",\"low\":[", trace, 4, |sample| sample.low);
        list(&mut json, ",\"mean\":[", trace, 4, |sample| sample.mean);
        list(&mut json, ",\"high\":[", trace, 4, |sample| sample.high);
        json.raw("}");
        between = ",";
    }
    json.raw("]}");
    json
}

fn list(
    json: &mut Markup,
    head: &'static str,
    trace: &Trace,
    decimals: usize,
    of: fn(&Sample) -> f64,
) {
    json.raw(head);
    let mut between = "";
    for sample in trace.runs.iter().flatten() {
        json.raw(between).number(of(sample), decimals);
        between = ",";
    }
    json.raw("]");
}
