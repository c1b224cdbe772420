//! The envelope as a picture: voltage across, current up, a region for each limit that binds.
//!
//! The ink line is what the sink holds for ever; under it each region bears the name of the limit
//! that binds there. Above it stand thin lines for what it takes for a time, and dashed ones for
//! limits that do not bind, each with its name at its end.

use std::ops::Range;

use plot::{Anchor, Area, Drawing, Field, Scale, WIDE, width};
use quantity::{Resistance, Voltage};
use sink::envelope::{Duration, Envelope, Limit};

/// Height of the sheet, pixels.
const HEIGHT: f64 = 430.0;
/// Voltages looked at.
const PLACES: u32 = 600;
/// Rows that a name may be moved by before it is left out.
const ROWS: u32 = 12;
/// Height of a row.
const ROW: f64 = 14.0;
/// Between a line's end and its name.
const END_GAP: f64 = 8.0;

/// Voltage and current along a line.
type Points = Vec<(f64, f64)>;

/// Draws the envelope of a sink up to a voltage; pulses are drawn where they may have more than a steady current.
pub(crate) fn envelope(
    name: &str,
    envelope: &Envelope,
    voltage_max: Voltage,
    output: Resistance,
    durations: &[Duration],
) -> String {
    let picture = Picture::of(envelope, voltage_max.volts(), output, durations);
    let title = format!("The envelope of {name}");
    picture.draw().finish_alone(
        &WIDE,
        HEIGHT,
        &title,
        "Largest current over the source's voltage; each region bears the name of the limit that \
         binds there.",
    )
}

/// A stretch of the steady line in which one limit binds.
struct Stretch {
    limit: Limit,
    points: Points,
}

struct Picture {
    field: Field,
    voltage_max: f64,
    stretches: Vec<Stretch>,
    pulses: Vec<(String, Points)>,
    others: Vec<(Limit, Points)>,
}

impl Picture {
    fn of(
        envelope: &Envelope,
        voltage_max: f64,
        output: Resistance,
        durations: &[Duration],
    ) -> Self {
        let voltages: Vec<Voltage> = (0..=PLACES)
            .filter_map(|place| {
                let share = f64::from(place) / f64::from(PLACES);
                Voltage::from_volts(voltage_max * share).ok()
            })
            .collect();
        let steady: Vec<_> = voltages
            .iter()
            .map(|&voltage| {
                let ceiling = envelope.ceiling(voltage, output, Duration::Continuous);
                (voltage.volts(), ceiling)
            })
            .collect();
        let mut stretches: Vec<Stretch> = Vec::new();
        for (volts, ceiling) in &steady {
            let point = (*volts, ceiling.current.amperes());
            match stretches.last_mut() {
                Some(last) if last.limit == ceiling.binding => last.points.push(point),
                last => {
                    // Regions touch: the next begins where the one before ended.
                    let joint = last.and_then(|last| last.points.last().copied());
                    stretches.push(Stretch {
                        limit: ceiling.binding,
                        points: joint.into_iter().chain([point]).collect(),
                    });
                }
            }
        }
        let top = highest(stretches.iter().flat_map(|stretch| &stretch.points));
        let pulses: Vec<(String, Points)> = durations
            .iter()
            .filter(|duration| **duration != Duration::Continuous)
            .filter_map(|&duration| {
                let points: Points = voltages
                    .iter()
                    .map(|&voltage| {
                        let ceiling = envelope.ceiling(voltage, output, duration);
                        (voltage.volts(), ceiling.current.amperes())
                    })
                    .collect();
                let more = points
                    .iter()
                    .zip(&steady)
                    .any(|((_, amperes), (_, ceiling))| {
                        *amperes > ceiling.current.amperes() * 1.01 + 1e-6
                    });
                more.then(|| (duration.to_string(), points))
            })
            .collect();
        let pulses = together(pulses);
        let top = pulses
            .iter()
            .map(|(_, points)| highest(points))
            .fold(top, f64::max);
        let y = Scale {
            min: 0.0,
            max: top * 1.45,
            from: HEIGHT - 30.0,
            to: 24.0,
        };
        let binding: Vec<Limit> = stretches.iter().map(|stretch| stretch.limit).collect();
        let mut others: Vec<(Limit, Points)> = Vec::new();
        for (volts, ceiling) in &steady {
            for (limit, current) in &ceiling.limits {
                if binding.contains(limit) || *limit == Limit::Voltage {
                    continue;
                }
                let point = (*volts, current.amperes());
                match others.iter_mut().find(|(known, _)| known == limit) {
                    Some((_, points)) => points.push(point),
                    None => others.push((*limit, vec![point])),
                }
            }
        }
        others.retain(|(_, points)| points.iter().any(|(_, amperes)| y.contains(*amperes)));
        let (from, to) = (WIDE.left, WIDE.width - WIDE.right);
        let field = Field {
            x: Scale {
                min: 0.0,
                max: voltage_max / (1.0 - column(&others, y) / (to - from)),
                from,
                to,
            },
            y,
        };
        Self {
            field,
            voltage_max,
            stretches,
            pulses,
            others,
        }
    }

    fn draw(&self) -> Drawing {
        let mut drawing = Drawing::new();
        let field = &self.field;
        let mut names = Names::default();
        for (index, stretch) in self.stretches.iter().enumerate() {
            let class = if index % 2 == 0 {
                "region"
            } else {
                "region other"
            };
            let (Some(first), Some(last)) = (stretch.points.first(), stretch.points.last()) else {
                continue;
            };
            let mut corners = stretch.points.clone();
            corners.extend([(last.0, 0.0), (first.0, 0.0)]);
            drawing.region(class, field, &corners);
            if index > 0 {
                drawing.path("border", field, &[(first.0, 0.0), *first]);
            }
        }
        for (_, points) in &self.others {
            for run in inside(field, points) {
                drawing.path("limit", field, &run);
            }
        }
        for (_, points) in &self.pulses {
            drawing.path("planned", field, points);
        }
        let steady: Points = self
            .stretches
            .iter()
            .flat_map(|stretch| stretch.points.iter().copied())
            .collect();
        drawing.path("curve", field, &steady);
        let top = (self.voltage_max, field.y.max);
        drawing.path("limit", field, &[(self.voltage_max, 0.0), top]);
        let ticks = field.x.ticks(WIDE.ticks);
        drawing.frame(field, &ticks, "A");
        drawing.numbers_below(field, &ticks, "source, V");
        for stretch in &self.stretches {
            names.below(&mut drawing, field, stretch.limit.name(), &stretch.points);
        }
        names.take_line(field, &steady);
        for (_, points) in &self.pulses {
            names.take_line(field, points);
        }
        for (_, points) in &self.others {
            for run in inside(field, points) {
                names.take_line(field, &run);
            }
        }
        for (index, (name, points)) in self.pulses.iter().enumerate() {
            let own = own_points(points, &steady, self.pulses.get(..index).unwrap_or(&[]));
            names.above(&mut drawing, field, "limit-name", name, &own);
        }
        for (limit, points) in &self.others {
            let last = points.last().filter(|last| field.y.contains(last.1));
            let stands =
                last.is_some_and(|&last| names.at_end(&mut drawing, field, limit.name(), last));
            if stands {
                continue;
            }
            for run in inside(field, points).into_iter().take(1) {
                names.above(&mut drawing, field, "limit-name", limit.name(), &run);
            }
        }
        names.beside_upright(&mut drawing, field, self.voltage_max, Limit::Voltage.name());
        drawing
    }
}

/// Where names stand already.
#[derive(Default)]
struct Names {
    taken: Vec<Area>,
}

impl Names {
    fn free(&self, area: &Area, field: &Field) -> bool {
        let within = area.left > field.x.from + 4.0
            && area.right < field.x.to - 4.0
            && area.top > field.y.to + 4.0
            && area.bottom < field.y.from - 4.0;
        within && self.taken.iter().all(|other| !other.overlaps(area))
    }

    /// A region's name under its line; a region too narrow for it gets a leader.
    fn below(&mut self, drawing: &mut Drawing, field: &Field, name: &str, points: &[(f64, f64)]) {
        let (Some(first), Some(last)) = (points.first(), points.last()) else {
            return;
        };
        let wide = width(name);
        let middle = field.x.place(f64::midpoint(first.0, last.0));
        let lowest = field.x.to - wide - 8.0;
        let x = (middle - wide / 2.0).clamp(field.x.from + 8.0, lowest.max(field.x.from + 8.0));
        let line = ink(field, points, x..x + wide);
        let narrow = field.x.place(last.0) - field.x.place(first.0) < wide;
        for row in 0..ROWS {
            let base = line.end + 16.0 + f64::from(row) * ROW;
            let area = Area::of_word(x, base, wide);
            if !self.free(&area, field) {
                continue;
            }
            if narrow {
                let at = points.get(points.len() / 2).copied().unwrap_or(*first);
                let foot = (field.x.place(at.0), field.y.place(at.1) + 3.0);
                drawing.line("leader", foot, (foot.0, base - 10.0));
            }
            drawing.word("name", Anchor::Start, (x, base), name);
            self.taken.push(area);
            return;
        }
    }

    /// No name stands across a line.
    fn take_line(&mut self, field: &Field, points: &[(f64, f64)]) {
        for pair in points.windows(4) {
            let (Some(first), Some(last)) = (pair.first(), pair.last()) else {
                continue;
            };
            let (left, right) = (field.x.place(first.0), field.x.place(last.0));
            let ends = [field.y.place(first.1), field.y.place(last.1)];
            self.taken.push(Area {
                left,
                right,
                top: ends[0].min(ends[1]) - 1.0,
                bottom: ends[0].max(ends[1]) + 1.0,
            });
        }
    }

    /// A name right above its line where there is room along it, else right below.
    fn above(
        &mut self,
        drawing: &mut Drawing,
        field: &Field,
        class: &'static str,
        name: &str,
        points: &[(f64, f64)],
    ) {
        let wide = width(name);
        let (Some(first), Some(last)) = (points.first(), points.last()) else {
            return;
        };
        let (left, right) = (field.x.place(first.0) + 8.0, field.x.place(last.0) - wide);
        let mut best: Option<(f64, Area, f64, f64)> = None;
        for part in 0..40 {
            let x = left + (right - left) * (1.0 - f64::from(part) / 39.0);
            // A falling line passes close by a name's beginning.
            let line = ink(field, points, x - 8.0..x + wide);
            let steep = line.end - line.start;
            let below = ink(field, points, x..x + wide + 8.0).end + 13.0;
            for (base, cost) in [(line.start - 4.0, steep), (below, steep + 40.0)] {
                let area = Area::of_word(x, base, wide);
                if self.free(&area, field) && best.as_ref().is_none_or(|(least, ..)| cost < *least)
                {
                    best = Some((cost, area, x, base));
                }
            }
        }
        if let Some((_, area, x, base)) = best {
            drawing.word(class, Anchor::Start, (x, base), name);
            self.taken.push(area);
        }
    }

    /// A name right of its line's end, as near to its height as there is room; whether there is.
    fn at_end(
        &mut self,
        drawing: &mut Drawing,
        field: &Field,
        name: &str,
        end: (f64, f64),
    ) -> bool {
        let x = field.x.place(end.0) + END_GAP;
        let level = field.y.place(end.1) + 4.0;
        for part in 0..=6 * ROWS {
            // Down and up in turn, a third of a row further each time.
            let by = f64::from(part.div_ceil(2)) * ROW / 3.0;
            let base = if part % 2 == 0 {
                level - by
            } else {
                level + by
            };
            let area = Area::of_word(x, base, width(name));
            if self.free(&area, field) {
                drawing.word("limit-name", Anchor::Start, (x, base), name);
                self.taken.push(area);
                return true;
            }
        }
        false
    }

    /// A name beside an upright line, at its upper end.
    fn beside_upright(&mut self, drawing: &mut Drawing, field: &Field, volts: f64, name: &str) {
        let wide = width(name);
        let line = field.x.place(volts);
        for row in 0..ROWS {
            let base = field.y.to + 18.0 + f64::from(row) * ROW;
            for x in [line + END_GAP, line - wide - END_GAP] {
                let area = Area::of_word(x, base, wide);
                if self.free(&area, field) {
                    drawing.word("limit-name", Anchor::Start, (x, base), name);
                    self.taken.push(area);
                    return;
                }
            }
        }
    }
}

/// How wide the column right of the largest voltage is, in which names stand at their lines' ends.
fn column(others: &[(Limit, Points)], y: Scale) -> f64 {
    others
        .iter()
        .filter(|(_, points)| points.last().is_some_and(|last| y.contains(last.1)))
        .map(|(limit, _)| width(limit.name()) + 2.0 * END_GAP)
        .fold(WIDE.width * 0.05, f64::max)
}

/// The highest and the lowest ink of a line between two places: start is up.
fn ink(field: &Field, points: &[(f64, f64)], between: Range<f64>) -> Range<f64> {
    let places = points
        .iter()
        .map(|&(x, y)| (field.x.place(x), field.y.place(y)));
    let nearest = |at: f64| {
        places
            .clone()
            .min_by(|one, other| (one.0 - at).abs().total_cmp(&(other.0 - at).abs()))
            .map_or(field.y.from, |(_, y)| y)
    };
    let ends = [nearest(between.start), nearest(between.end)];
    let inner = places
        .clone()
        .filter(|(x, _)| between.contains(x))
        .map(|(_, y)| y);
    let all = inner.chain(ends);
    let (mut up, mut down) = (f64::MAX, f64::MIN);
    for y in all {
        up = up.min(y);
        down = down.max(y);
    }
    up..down
}

/// Lines that are one bear all their names.
fn together(pulses: Vec<(String, Points)>) -> Vec<(String, Points)> {
    let mut lines: Vec<(String, Points)> = Vec::new();
    for (name, points) in pulses {
        match lines
            .iter_mut()
            .find(|(_, known)| apart(known, &points).is_empty())
        {
            Some((names, _)) => {
                names.push_str(", ");
                names.push_str(name.strip_prefix("for ").unwrap_or(&name));
            }
            None => lines.push((name, points)),
        }
    }
    lines
}

/// Where a line has parted from those drawn before it: its name belongs there.
fn own_points(points: &Points, steady: &Points, earlier: &[(String, Points)]) -> Points {
    let at = |line: &Points, volts: f64| {
        line.iter()
            .find(|(x, _)| (x - volts).abs() < 1e-9)
            .map_or(f64::NAN, |(_, y)| *y)
    };
    let alike = |one: f64, other: f64| (one - other).abs() <= other.abs() * 0.01;
    points
        .iter()
        .filter(|(volts, amperes)| {
            !alike(*amperes, at(steady, *volts))
                && earlier
                    .iter()
                    .all(|(_, line)| !alike(*amperes, at(line, *volts)))
        })
        .copied()
        .collect()
}

/// The places at which two lines over the same voltages differ by more than a percent.
fn apart(one: &Points, other: &Points) -> Vec<f64> {
    one.iter()
        .zip(other)
        .filter(|((_, a), (_, b))| (a - b).abs() > b.abs() * 0.01)
        .map(|((volts, _), _)| *volts)
        .collect()
}

/// The runs of a line that lie in the field.
fn inside(field: &Field, points: &[(f64, f64)]) -> Vec<Points> {
    points
        .split(|(_, y)| !field.y.contains(*y))
        .filter(|run| run.len() > 1)
        .map(<[(f64, f64)]>::to_vec)
        .collect()
}

fn highest<'a>(points: impl IntoIterator<Item = &'a (f64, f64)>) -> f64 {
    points.into_iter().map(|(_, y)| *y).fold(0.0, f64::max)
}
