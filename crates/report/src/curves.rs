//! The plots: voltage, current and temperature against time, voltage against charge.
//!
//! Drawn as in a printed paper: thin ink lines, ticks inside the frame, units on the axes, names
//! at the lines, no legend. The line is the mean of the readbacks in an interval, the shade
//! behind it reaches from the least to the largest, so that a dip of 40 ms in twelve hours still
//! shows. Each plot is drawn twice, for a page and for a phone, since text does not shrink well.
//!
//! What it deliberately does not do: need a script. The read-off is added by one where it runs;
//! its numbers stand in a data block beside the plot.

mod against_charge;
mod against_time;
mod data;

use journal::{Bucket, Manifest};
use plot::{Markup, NARROW, Sample, Trace, WIDE};
use quantity::{HostTime, Span};

use crate::evidence::Evidence;
use crate::wording::prefixed;

/// The plots of a record; empty without readbacks.
pub(crate) fn plots(manifest: &Manifest, evidence: &Evidence) -> Markup {
    let mut page = Markup::new();
    if evidence.buckets.is_empty() {
        return page;
    }
    let plot = against_time::Plot::of(manifest, evidence);
    figure(
        &mut page,
        "time",
        &[plot.drawn(&WIDE), plot.drawn(&NARROW)],
        &plot.data(),
        "Voltage, current and heat sink temperature against time from the first readback. Line: \
         mean of the readbacks in each of at most 600 equal intervals; shade: from their least to \
         their largest value. Dashed: limits of the interlocks. Below the axis: the steps.",
    );
    if let Some(plot) = against_charge::Plot::of(manifest, evidence) {
        figure(
            &mut page,
            "charge",
            &[plot.drawn(&WIDE), plot.drawn(&NARROW)],
            &plot.data(),
            "Voltage against the charge delivered, by the sink’s own counters. The figures below \
             hold the capacity with its uncertainty; this curve has none.",
        );
    }
    page
}

fn figure(
    page: &mut Markup,
    kind: &'static str,
    drawings: &[Markup],
    data: &Markup,
    caption: &'static str,
) {
    page.raw("<figure class=\"plot\" data-kind=\"").raw(kind);
    page.raw("\">");
    for drawing in drawings {
        page.add(drawing);
    }
    page.raw("<script type=\"application/json\">").add(data);
    page.raw("</script><figcaption>").raw(caption);
    page.raw("</figcaption></figure>\n");
}

/// A trace in words, for those who do not see it.
fn in_words(trace: &Trace) -> String {
    let samples = || trace.runs.iter().flatten();
    let (Some(first), Some(last)) = (samples().next(), samples().next_back()) else {
        return format!("{}: no value.", trace.name);
    };
    let lowest = samples().map(|sample| sample.low).fold(f64::MAX, f64::min);
    let highest = samples().map(|sample| sample.high).fold(f64::MIN, f64::max);
    let shown = |value: f64| prefixed(value, trace.unit, 4);
    format!(
        "{}: {} at the beginning, {} at the end, between {} and {}.",
        trace.name,
        shown(first.mean),
        shown(last.mean),
        shown(lowest),
        shown(highest)
    )
}

/// The host time for which a bucket's means stand.
fn middle(bucket: &Bucket) -> HostTime {
    let half = bucket.last_at.saturating_since(bucket.first_at).micros() / 2;
    bucket.first_at.saturating_add(Span::from_micros(half))
}

/// Readbacks in a bucket.
fn weight(bucket: &Bucket) -> f64 {
    #[expect(
        clippy::cast_precision_loss,
        reason = "it weighs a mean that is drawn to a tenth of a pixel"
    )]
    let count = bucket.count as f64;
    count
}

/// Buckets as samples, parted where the record says that the link was gone in between.
fn runs(evidence: &Evidence, sample: impl Fn(&Bucket) -> Option<Sample>) -> Vec<Vec<Sample>> {
    let mut runs: Vec<Vec<Sample>> = vec![Vec::new()];
    let mut before: Option<HostTime> = None;
    for bucket in &evidence.buckets {
        let parted = before.is_some_and(|before| {
            let mut losses = evidence.course.losses.iter();
            losses.any(|&lost| lost > before && lost <= bucket.first_at)
        });
        before = Some(bucket.last_at);
        if parted {
            runs.push(Vec::new());
        }
        if let (Some(run), Some(sample)) = (runs.last_mut(), sample(bucket)) {
            run.push(sample);
        }
    }
    runs.retain(|run| !run.is_empty());
    runs
}

/// The unit in which an axis is written, and by what its values are multiplied.
fn scaled_unit(unit: &'static str, low: f64, high: f64) -> (f64, &'static str) {
    let largest = low.abs().max(high.abs());
    match unit {
        "A" if largest < 1.0 => (1e3, "mA"),
        "V" if largest < 1.0 => (1e3, "mV"),
        "degC" => (1.0, "°C"),
        other => (1.0, other),
    }
}
