//! Voltage, current and temperature against time, one above the other on one time axis.

use std::collections::BTreeMap;

use journal::{Bucket, Manifest};
use plot::{
    Anchor, Area, Drawing, Field, Limit, Markup, Sample, Scale, Sheet, Shelf, Trace, width,
};
use quantity::HostTime;

use crate::evidence::{Course, Evidence, Stage};
use crate::wording::{action, exact};

use super::{data, in_words};

/// Height of a line of text, pixels.
const ROW: f64 = 14.0;
/// Room above a panel for its unit.
const HEAD: f64 = 26.0;
/// Steps beyond which their borders would only make the panels grey.
const BORDERS_MAX: usize = 40;
/// Rows of text at most.
const ROWS_MAX: usize = 3;

/// The plot, before it is laid out.
pub(super) struct Plot {
    traces: Vec<Trace>,
    stretches: Vec<Stretch>,
    events: Vec<(f64, &'static str)>,
    /// Seconds from the first readback to the last.
    seconds: f64,
    /// Seconds in the axis's unit, and its name.
    unit: (f64, &'static str),
}

/// Steps of one label in a row.
struct Stretch {
    from: f64,
    to: f64,
    text: String,
}

impl Plot {
    pub(super) fn of(manifest: &Manifest, evidence: &Evidence) -> Self {
        let start = evidence
            .readbacks
            .map_or(HostTime::from_micros(0), |(first, _)| first);
        let seconds = evidence.length().map_or(0.0, quantity::Span::seconds);
        let since = |at: HostTime| at.saturating_since(start).seconds().min(seconds);
        let mut traces = traces(manifest, evidence, start);
        // A sensor that never gave a value has no panel.
        traces.retain(|trace| trace.range().is_some());
        Self {
            traces,
            stretches: stretches(&evidence.course, since),
            events: evidence
                .course
                .marks
                .iter()
                .filter_map(|mark| Some((since(mark.at), mark.word?)))
                .collect(),
            seconds,
            unit: match seconds {
                seconds if seconds < 180.0 => (1.0, "time / s"),
                seconds if seconds < 10_800.0 => (60.0, "time / min"),
                seconds if seconds < 345_600.0 => (3_600.0, "time / h"),
                _ => (86_400.0, "time / d"),
            },
        }
    }

    pub(super) fn data(&self) -> Markup {
        data::block(&self.traces, 3)
    }

    pub(super) fn drawn(&self, sheet: &Sheet) -> Markup {
        let mut drawing = Drawing::new();
        let (left, right) = sheet.inner();
        let x = Scale {
            min: 0.0,
            // Some air behind the end, where a trip would lie on the frame.
            max: self.seconds.max(1e-3) * 1.02,
            from: left,
            to: right,
        };
        let by_unit = Scale {
            max: x.max / self.unit.0,
            ..x
        };
        let ticks = by_unit.ticks(sheet.ticks);
        let (events, event_rows) = self.placed_events(&x);
        let top = event_rows;
        let mut fields: Vec<(Field, f64)> = Vec::new();
        let mut bottom = top;
        for trace in &self.traces {
            let Some((low, high)) = trace.range() else {
                continue;
            };
            let (factor, unit) = super::scaled_unit(trace.unit, low, high);
            let (frame_top, frame_bottom) = (bottom + HEAD, bottom + HEAD + sheet.panel);
            let y = Scale::around(low * factor, high * factor, (frame_bottom, frame_top));
            let field = Field { x: by_unit, y };
            drawing.frame(&field, &ticks, unit);
            fields.push((Field { x, y }, factor));
            bottom = frame_bottom;
        }
        let borders = self.borders(&x, (top + HEAD, bottom));
        for border in &borders {
            let place = f64::midpoint(border.left, border.right);
            drawing.line("border", (place, border.top), (place, border.bottom));
        }
        let lines: Vec<Area> = events
            .iter()
            .map(|&(place, ..)| Area::of_line(place, top, bottom))
            .collect();
        for ((field, factor), trace) in fields.iter().zip(&self.traces) {
            drawing.trace(sheet, field, trace, *factor, (&lines, &borders));
        }
        for (place, row, word) in events {
            let base = 11.0 + rows(row) * ROW;
            drawing.line("event", (place, base + 3.0), (place, bottom));
            let (anchor, text_at) = if place + width(word) > right {
                (Anchor::End, place - 3.0)
            } else {
                (Anchor::Start, place + 3.0)
            };
            if !word.is_empty() {
                drawing.word("event-name", anchor, (text_at, base), word);
            }
        }
        if let Some((field, _)) = fields.last() {
            let below = Field {
                x: by_unit,
                y: field.y,
            };
            drawing.numbers_below(&below, &ticks, self.unit.1);
        }
        let height = bottom + 22.0 + self.steps(&mut drawing, &x, bottom + 26.0);
        drawing.read_off(&fields);
        let words: Vec<String> = self.traces.iter().map(in_words).collect();
        let description = format!("{} {}", words.join(" "), self.steps_in_words());
        let title = "Voltage, current and heat sink temperature against time";
        drawing.finish(sheet, height, "time", title, &description)
    }

    /// Each event's place, its row and its word; a word that finds no room is left out.
    fn placed_events(&self, x: &Scale) -> (Vec<(f64, usize, &'static str)>, f64) {
        let mut taken = Shelf::default();
        let mut placed = Vec::new();
        for &(at, word) in &self.events {
            let place = x.place(at);
            let wide = width(word) + 8.0;
            let (from, to) = if place + wide > x.to {
                (place - wide, place + 2.0)
            } else {
                (place - 2.0, place + wide)
            };
            match taken.place(from, to, ROWS_MAX) {
                Some(row) => placed.push((place, row, word)),
                None => placed.push((place, ROWS_MAX - 1, "")),
            }
        }
        let height = rows(taken.rows()) * ROW;
        (placed, height)
    }

    /// Where the steps' borders stand; none where there are too many.
    fn borders(&self, x: &Scale, (top, bottom): (f64, f64)) -> Vec<Area> {
        if self.stretches.len() > BORDERS_MAX {
            return Vec::new();
        }
        let borders = self.stretches.iter().skip(1);
        borders
            .map(|stretch| Area::of_line(x.place(stretch.from), top, bottom))
            .collect()
    }

    /// Brackets under the time axis with the steps' labels; gives their height.
    fn steps(&self, drawing: &mut Drawing, x: &Scale, y: f64) -> f64 {
        if self.stretches.is_empty() {
            return 0.0;
        }
        let crowded = self.stretches.len() > 3 * BORDERS_MAX;
        let mut by_text: BTreeMap<&str, Vec<&Stretch>> = BTreeMap::new();
        for stretch in &self.stretches {
            let (from, to) = (x.place(stretch.from), x.place(stretch.to));
            if !crowded || to - from > 3.0 {
                drawing.line("step", (from + 0.8, y), ((to - 0.8).max(from + 1.2), y));
            }
            by_text.entry(&stretch.text).or_default().push(stretch);
        }
        let mut taken = Shelf::default();
        for (stretch, text_at, row) in named(&mut taken, by_text, x) {
            let base = y + 16.0 + rows(row) * ROW;
            let middle = stretch.middle(x);
            if x.place(stretch.to) - x.place(stretch.from) < 2.0 * stretch.half() {
                drawing.line("leader", (middle, y + 1.5), (middle, base - 10.0));
            }
            drawing.word("step-name", Anchor::Middle, (text_at, base), &stretch.text);
        }
        9.0 + rows(taken.rows()) * ROW
    }

    fn steps_in_words(&self) -> String {
        let mut names: Vec<&str> = Vec::new();
        for stretch in &self.stretches {
            if !names.contains(&stretch.text.as_str()) && names.len() < 12 {
                names.push(&stretch.text);
            }
        }
        if names.is_empty() {
            "No step was carried out.".to_owned()
        } else {
            format!("Steps: {}.", names.join(", "))
        }
    }
}

impl Stretch {
    fn middle(&self, x: &Scale) -> f64 {
        x.place(f64::midpoint(self.from, self.to))
    }

    /// Half of what its text takes along the axis.
    fn half(&self) -> f64 {
        width(&self.text) / 2.0 + 3.0
    }

    /// Where the middle of its text can stand without leaving the page.
    fn text_at(&self, x: &Scale) -> f64 {
        let half = self.half();
        let least = (x.from - 30.0 + half).min(x.to - half);
        self.middle(x).clamp(least, (x.to - half).max(least))
    }
}

/// Names each label once, the longest steps first: in the first row beside any step of that
/// label if one of them has room, else in a row below. What finds no room stays unnamed here.
fn named<'a>(
    taken: &mut Shelf,
    by_text: BTreeMap<&str, Vec<&'a Stretch>>,
    x: &Scale,
) -> Vec<(&'a Stretch, f64, usize)> {
    let length = |one: &Stretch| one.to - one.from;
    let longest = |all: &[&Stretch]| all.iter().map(|one| length(one)).fold(0.0, f64::max);
    let mut groups: Vec<Vec<&Stretch>> = by_text.into_values().collect();
    groups.sort_by(|one, other| longest(other).total_cmp(&longest(one)));
    let mut placed = Vec::new();
    for group in groups {
        let least = 0.8 * longest(&group);
        let candidates = || group.iter().filter(|one| length(one) >= least);
        let mut find = |rows_max: usize| {
            candidates().find_map(|one| {
                let (at, half) = (one.text_at(x), one.half());
                let row = taken.place(at - half, at + half, rows_max)?;
                Some((*one, at, row))
            })
        };
        placed.extend(find(1).or_else(|| find(ROWS_MAX)));
    }
    placed
}

fn rows(count: usize) -> f64 {
    f64::from(u32::try_from(count).unwrap_or(0))
}

fn traces(manifest: &Manifest, evidence: &Evidence, start: HostTime) -> Vec<Trace> {
    let armed = &manifest.plan.interlocks;
    let runs = |of: &dyn Fn(&Bucket) -> Option<[f64; 3]>| {
        super::runs(evidence, |bucket| {
            let x = super::middle(bucket).saturating_since(start).seconds();
            let [low, mean, high] = of(bucket)?;
            Some(Sample {
                x,
                low,
                mean,
                high,
                weight: super::weight(bucket),
            })
        })
    };
    let limit = |name: &str, value: f64, shown: String| Limit {
        value,
        name: format!("{name} {shown}"),
    };
    let (under, over) = (armed.undervoltage.threshold, armed.over_voltage.threshold);
    let (current, hot) = (
        armed.over_current.threshold,
        armed.over_temperature.threshold,
    );
    vec![
        Trace {
            name: "voltage",
            unit: "V",
            runs: runs(&|bucket| {
                let voltage = bucket.voltage;
                Some([
                    voltage.min.volts(),
                    voltage.mean.volts(),
                    voltage.max.volts(),
                ])
            }),
            limits: vec![
                limit("undervoltage", under.volts(), exact(&under)),
                limit("over-voltage", over.volts(), exact(&over)),
            ],
            from_zero: false,
        },
        Trace {
            name: "current",
            unit: "A",
            runs: runs(&|bucket| {
                let current = bucket.current;
                Some([
                    current.min.amperes(),
                    current.mean.amperes(),
                    current.max.amperes(),
                ])
            }),
            limits: vec![limit("over-current", current.amperes(), exact(&current))],
            from_zero: true,
        },
        Trace {
            name: "heat sink temperature",
            unit: "degC",
            runs: runs(&|bucket| {
                let temperature = bucket.temperature?;
                Some([
                    temperature.min.degrees_celsius(),
                    temperature.mean.degrees_celsius(),
                    temperature.max.degrees_celsius(),
                ])
            }),
            limits: vec![limit(
                "over-temperature",
                hot.degrees_celsius(),
                exact(&hot),
            )],
            from_zero: false,
        },
    ]
}

fn stretches(course: &Course, since: impl Fn(HostTime) -> f64) -> Vec<Stretch> {
    let mut stretches: Vec<Stretch> = Vec::new();
    for stage in &course.stages {
        let text = name_of(stage);
        let (from, to) = (since(stage.begin), since(stage.end));
        match stretches.last_mut() {
            Some(last) if last.text == text => last.to = to,
            Some(_) | None => stretches.push(Stretch { from, to, text }),
        }
    }
    stretches
}

fn name_of(stage: &Stage) -> String {
    stage.label.clone().unwrap_or_else(|| action(&stage.step))
}
