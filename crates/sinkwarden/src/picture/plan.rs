//! A plan's current over time, as the check reckons it.

use daemon::view::CheckView;
use plot::{Anchor, Drawing, Field, Scale, WIDE, width};

/// Height of the sheet, pixels.
const HEIGHT: f64 = 260.0;

/// Draws the planned current; repeats that are not drawn out are a shaded band.
pub(crate) fn plan(view: &CheckView) -> String {
    let outline = &view.outline;
    let (unit, seconds) = unit_of(view.forecast.duration_s);
    let bands = &outline.bands;
    let top = outline
        .current_a
        .iter()
        .copied()
        .chain(bands.iter().map(|[.., largest]| *largest))
        .fold(0.0, f64::max);
    let milli = top < 1.0;
    let factor = if milli { 1e3 } else { 1.0 };
    let end = (view.forecast.duration_s / seconds).max(f64::MIN_POSITIVE);
    let field = Field {
        x: Scale {
            min: 0.0,
            max: end,
            from: WIDE.left,
            to: WIDE.width - WIDE.right,
        },
        y: Scale {
            min: 0.0,
            max: (top * factor * 1.2).max(1e-3),
            from: HEIGHT - 30.0,
            to: 24.0,
        },
    };
    let mut drawing = Drawing::new();
    for [from, to, least, largest] in bands {
        let (from, to) = (from / seconds, to / seconds);
        let (low, high) = (least * factor, largest * factor);
        drawing.region(
            "region",
            &field,
            &[(from, low), (from, high), (to, high), (to, low)],
        );
        let (left, right) = (field.x.place(from), field.x.place(to));
        let name = "repeats, to and fro";
        if right - left > width(name) + 8.0 {
            let middle = f64::midpoint(left, right);
            let base = field.y.place(f64::midpoint(low, high)) + 4.0;
            drawing.word("name", Anchor::Middle, (middle, base), name);
        }
    }
    // A band interrupts the line: it goes on behind it.
    let points: Vec<(f64, f64)> = outline
        .time_s
        .iter()
        .zip(&outline.current_a)
        .map(|(time, current)| (time / seconds, current * factor))
        .collect();
    let behind = |from: f64, to: f64| {
        bands
            .iter()
            .any(|[begin, end, ..]| from <= begin / seconds && end / seconds <= to)
    };
    let mut run: Vec<(f64, f64)> = Vec::new();
    for point in points {
        if let Some(last) = run.last()
            && last.0 < point.0
            && behind(last.0, point.0)
        {
            drawing.path("curve", &field, &run);
            run.clear();
        }
        run.push(point);
    }
    drawing.path("curve", &field, &run);
    let ticks = field.x.ticks(WIDE.ticks);
    drawing.frame(&field, &ticks, if milli { "mA" } else { "A" });
    drawing.numbers_below(&field, &ticks, unit);
    drawing.finish_alone(
        &WIDE,
        HEIGHT,
        &format!("{}: planned current on {}", view.title, view.sink),
        "Planned current over time, reckoned from the data sheet's values.",
    )
}

/// The unit of time that a plan is told in, and its seconds.
fn unit_of(seconds: f64) -> (&'static str, f64) {
    if seconds >= 3.0 * 3600.0 {
        ("h", 3600.0)
    } else if seconds >= 180.0 {
        ("min", 60.0)
    } else {
        ("s", 1.0)
    }
}
