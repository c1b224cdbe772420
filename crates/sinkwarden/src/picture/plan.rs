//! A plan's current over time, as the check reckons it.

use daemon::view::{CheckView, OutlineView};
use plot::{Anchor, Drawing, Field, Scale, Shelf, WIDE, width};

/// Height of the sheet, pixels.
const HEIGHT: f64 = 290.0;
/// Rows of labels above the curve.
const ROWS: u16 = 3;
/// Height of a row, pixels.
const ROW: f64 = 15.0;
/// Most letters of a label that are shown.
const LETTERS: usize = 28;

/// Upper and lower end of the current's axis, pixels.
const TOP: f64 = 24.0;
const BOTTOM: f64 = HEIGHT - 30.0;
/// How much higher than the largest current the axis reaches, for the labels to stand in.
const HEADROOM: f64 = (BOTTOM - TOP) / (BOTTOM - TOP - ROW * (ROWS as f64) - 12.0);

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
            max: (top * factor * HEADROOM).max(1e-3),
            from: BOTTOM,
            to: TOP,
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
    labels(&mut drawing, &field, view, seconds, factor);
    drawing.finish_alone(
        &WIDE,
        HEIGHT,
        &format!("{}: planned current on {}", view.title, view.sink),
        "Planned current over time, reckoned from the data sheet's values.",
    )
}

/// The labels of steps, each above its first one with a leader down to the current; where there is
/// no room for all, the later ones are left out.
fn labels(drawing: &mut Drawing, field: &Field, view: &CheckView, seconds: f64, factor: f64) {
    let outline = &view.outline;
    let mut shelf = Shelf::default();
    let mut words = Vec::new();
    for labelled in &outline.labels {
        let middle = f64::midpoint(labelled.from_s, labelled.to_s);
        let name = shortened(&labelled.label);
        let wide = width(&name);
        let at = field.x.place(middle / seconds);
        let ends = (field.x.from + 6.0, field.x.to - wide - 6.0);
        let left = (at - wide / 2.0).clamp(ends.0, ends.1.max(ends.0));
        let Some(row) = shelf.place(left - 4.0, left + wide + 4.0, ROWS.into()) else {
            continue;
        };
        let base = field.y.to + ROW * (f64::from(u16::try_from(row).unwrap_or(0)) + 1.0);
        let foot = field.y.place(current_at(outline, middle) * factor) - 3.0;
        drawing.line("leader", (at, base + 4.0), (at, foot));
        words.push((left, base, name));
    }
    // Last, so that no leader goes through a word.
    for (left, base, name) in words {
        drawing.word("name", Anchor::Start, (left, base), &name);
    }
}

/// The planned current at a time that no edge is at.
fn current_at(outline: &OutlineView, at_s: f64) -> f64 {
    let behind = outline.time_s.partition_point(|&time| time < at_s);
    let point = |index: usize| {
        let time = outline.time_s.get(index)?;
        Some((*time, *outline.current_a.get(index)?))
    };
    let before = behind.checked_sub(1).and_then(point);
    match (before, point(behind)) {
        (Some((from, low)), Some((to, high))) => low + (high - low) * (at_s - from) / (to - from),
        (Some((_, current)), None) | (None, Some((_, current))) => current,
        (None, None) => 0.0,
    }
}

/// A label that is not longer than there is room for.
fn shortened(label: &str) -> String {
    if label.chars().count() <= LETTERS {
        return label.to_owned();
    }
    let mut short: String = label.chars().take(LETTERS - 1).collect();
    short.push('\u{2026}');
    short
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
