//! Where words can stand without covering one another.

use crate::drawing::Field;
use crate::trace::Sample;

/// Width of a letter of a plot's text, pixels: on the wide side, since fonts differ.
const LETTER: f64 = 6.3;

/// About how wide a text is.
pub fn width(text: &str) -> f64 {
    let letters = u32::try_from(text.chars().count()).unwrap_or(u32::MAX);
    f64::from(letters) * LETTER
}

/// Rows of text along an axis.
#[derive(Debug, Default, Clone)]
pub struct Shelf {
    rows: Vec<Vec<(f64, f64)>>,
}

impl Shelf {
    /// Finds the first of at most `rows_max` rows in which `left..right` is free, and takes it.
    pub fn place(&mut self, left: f64, right: f64, rows_max: usize) -> Option<usize> {
        for row in 0..rows_max {
            if self.rows.len() <= row {
                self.rows.push(Vec::new());
            }
            let taken = self.rows.get_mut(row)?;
            if taken.iter().all(|&(from, to)| right <= from || left >= to) {
                taken.push((left, right));
                return Some(row);
            }
        }
        None
    }

    /// Rows in use.
    pub fn rows(&self) -> usize {
        self.rows.iter().filter(|row| !row.is_empty()).count()
    }
}

/// A rectangle on the paper; down is positive.
#[derive(Debug, Clone, Copy)]
pub struct Area {
    /// Left edge.
    pub left: f64,
    /// Right edge.
    pub right: f64,
    /// Upper edge.
    pub top: f64,
    /// Lower edge.
    pub bottom: f64,
}

impl Area {
    /// What a word takes whose base line begins at a place.
    pub fn of_word(x: f64, base: f64, wide: f64) -> Self {
        Self {
            left: x,
            right: x + wide,
            top: base - 10.0,
            bottom: base + 3.0,
        }
    }

    /// What an upright line takes.
    pub fn of_line(x: f64, top: f64, bottom: f64) -> Self {
        Self {
            left: x - 3.0,
            right: x + 3.0,
            top,
            bottom,
        }
    }

    /// Whether two cover a common place.
    pub fn overlaps(&self, other: &Self) -> bool {
        self.left < other.right
            && other.left < self.right
            && self.top < other.bottom
            && other.top < self.bottom
    }
}

/// Where ink of a curve and its shade is: a place along the axis, with the highest and the
/// lowest ink there.
#[derive(Debug, Clone, Default)]
pub struct Drawn(Vec<(f64, f64, f64)>);

impl Drawn {
    /// The ink of some runs of samples.
    pub fn of(field: &Field, runs: &[Vec<Sample>]) -> Self {
        let ink = |sample: &Sample| {
            (
                field.x.place(sample.x),
                field.y.place(sample.high),
                field.y.place(sample.low),
            )
        };
        Self(runs.iter().flatten().map(ink).collect())
    }

    /// Whether an area covers ink.
    pub fn touches(&self, area: &Area) -> bool {
        self.under(area.left - 3.0, area.right + 3.0)
            .is_some_and(|(top, bottom)| top < area.bottom + 2.0 && bottom > area.top - 2.0)
    }

    /// The highest and the lowest ink between two places; `None` where there is none.
    fn under(&self, left: f64, right: f64) -> Option<(f64, f64)> {
        // A line between two samples passes over what lies between them.
        let from = self
            .0
            .partition_point(|(x, ..)| *x < left)
            .saturating_sub(1);
        let to = self
            .0
            .partition_point(|(x, ..)| *x <= right)
            .saturating_add(1);
        let near = self.0.get(from..to.min(self.0.len()))?;
        let ink = |(top, bottom): (f64, f64), &(_, high, low): &(f64, f64, f64)| {
            (high.min(top), low.max(bottom))
        };
        (!near.is_empty()).then(|| near.iter().fold((f64::MAX, f64::MIN), ink))
    }

    /// Where a name stands nearest to its line and covers nothing.
    pub fn beside(&self, field: &Field, name: &str, taken: &[Area]) -> Option<(f64, f64)> {
        let wide = width(name);
        let (left, right) = (field.x.from + 10.0, field.x.to - wide - 10.0);
        let mut best: Option<(f64, (f64, f64))> = None;
        for part in 0..24 {
            let x = left + (right - left) * f64::from(part) / 23.0;
            let Some((top, bottom)) = self.under(x - 4.0, x + wide + 4.0) else {
                continue;
            };
            // The steeper the line under a name, the less it is at the line; best is just
            // right of the middle, and above.
            let steep = bottom - top + (f64::from(part) - 14.0).abs() * 0.2;
            for (base, cost) in [(top - 6.0, steep), (bottom + 14.0, steep + 3.0)] {
                let area = Area::of_word(x, base, wide);
                let inside = area.top > field.y.to + 6.0 && area.bottom < field.y.from - 6.0;
                let free = taken.iter().all(|other| !other.overlaps(&area));
                if inside && free && best.is_none_or(|(least, _)| cost < least) {
                    best = Some((cost, (x, base)));
                }
            }
        }
        best.map(|(_, place)| place)
    }
}
