//! A drawing under construction: lines, words, frames and curves in scalable vector graphics.

use crate::STYLE;
use crate::markup::Markup;

use crate::label::{Area, Drawn, width};
use crate::scale::{Scale, Ticks};
use crate::sheet::Sheet;
use crate::trace::{Limit, Sample, Trace, thinned};

/// Places along a limit where its name might stand.
const LIMIT_PLACES: u32 = 24;

/// Length of a tick, pixels.
const TICK: f64 = 5.0;
/// Ticks wanted along a panel's vertical axis.
const VERTICAL_TICKS: f64 = 4.5;

/// The colours of a drawing in a file of its own: ink on paper, by day and by night.
const COLOURS: &str = include_str!("colours.css");

/// A framed field with its two scales.
#[derive(Debug, Clone, Copy)]
pub struct Field {
    /// Along.
    pub x: Scale,
    /// Up.
    pub y: Scale,
}

/// Where a word is held.
#[derive(Debug, Clone, Copy)]
pub enum Anchor {
    /// By its beginning.
    Start,
    /// By its middle.
    Middle,
    /// By its end.
    End,
}

/// A drawing.
#[derive(Debug, Clone, Default)]
pub struct Drawing {
    marks: Markup,
}

impl Drawing {
    /// An empty sheet.
    pub fn new() -> Self {
        Self::default()
    }

    /// The whole drawing as part of a page, with what it shows in words; `identity` is one of
    /// its own on that page.
    pub fn finish(
        self,
        sheet: &Sheet,
        height: f64,
        identity: &'static str,
        title: &str,
        description: &str,
    ) -> Markup {
        let mut svg = Markup::new();
        svg.raw("<svg class=\"").raw(sheet.class);
        svg.raw("\" role=\"img\" viewBox=\"0 0 ").at(sheet.width);
        svg.raw(" ").at(height).raw("\" aria-labelledby=\"");
        for part in ["t-", " d-"] {
            svg.raw(part).raw(identity).raw("-").raw(sheet.class);
        }
        svg.raw("\"><title id=\"t-").raw(identity).raw("-");
        svg.raw(sheet.class).raw("\">").text(title);
        svg.raw("</title><desc id=\"d-").raw(identity).raw("-");
        svg.raw(sheet.class).raw("\">").text(description);
        svg.raw("</desc>").add(&self.marks).raw("</svg>\n");
        svg
    }

    /// The whole drawing as a file of its own: paper, ink and fonts are in it, and no word on
    /// a screen in the dark is lost.
    pub fn finish_alone(
        self,
        sheet: &Sheet,
        height: f64,
        title: &str,
        description: &str,
    ) -> String {
        let mut svg = Markup::new();
        svg.raw("<svg xmlns=\"http://www.w3.org/2000/svg\" class=\"plot\" role=\"img\" width=\"");
        svg.at(sheet.width).raw("\" height=\"").at(height);
        svg.raw("\" viewBox=\"0 0 ").at(sheet.width);
        svg.raw(" ").at(height).raw("\">\n<title>").text(title);
        svg.raw("</title><desc>").text(description);
        svg.raw("</desc>\n<style>\n").raw(COLOURS).raw(STYLE);
        svg.raw("</style>\n<rect class=\"paper\" width=\"100%\" height=\"100%\"/>\n");
        svg.add(&self.marks).raw("\n</svg>\n");
        svg.into_string()
    }

    /// A straight line between two places on the paper.
    pub fn line(&mut self, class: &'static str, from: (f64, f64), to: (f64, f64)) {
        let marks = &mut self.marks;
        marks.raw("<line class=\"").raw(class).raw("\" x1=\"");
        marks.at(from.0).raw("\" y1=\"").at(from.1).raw("\" x2=\"");
        marks.at(to.0).raw("\" y2=\"").at(to.1).raw("\"/>");
    }

    /// A word, its base line at a place on the paper.
    pub fn word(&mut self, class: &'static str, anchor: Anchor, (x, y): (f64, f64), text: &str) {
        let marks = &mut self.marks;
        marks.raw("<text class=\"").raw(class).raw("\" x=\"");
        marks.at(x).raw("\" y=\"").at(y);
        marks.raw(match anchor {
            Anchor::Start => "\">",
            Anchor::Middle => "\" text-anchor=\"middle\">",
            Anchor::End => "\" text-anchor=\"end\">",
        });
        marks.text(text).raw("</text>");
    }

    /// The frame with ticks inside on all four sides; numbers at the left, and below if asked.
    pub fn frame(&mut self, field: &Field, horizontal: &Ticks, unit: &str) {
        let (left, right) = (field.x.from, field.x.to);
        let (bottom, top) = (field.y.from, field.y.to);
        let marks = &mut self.marks;
        marks
            .raw("<path class=\"frame\" d=\"M")
            .at(left)
            .raw(" ")
            .at(top);
        marks
            .raw("H")
            .at(right)
            .raw("V")
            .at(bottom)
            .raw("H")
            .at(left);
        marks.raw("Z");
        let vertical = field.y.ticks(VERTICAL_TICKS);
        for (values, length) in [(&horizontal.major, TICK), (&horizontal.minor, TICK / 2.0)] {
            for &value in values {
                let x = field.x.place(value);
                marks
                    .raw("M")
                    .at(x)
                    .raw(" ")
                    .at(bottom)
                    .raw("v")
                    .at(-length);
                marks.raw("M").at(x).raw(" ").at(top).raw("v").at(length);
            }
        }
        for (values, length) in [(&vertical.major, TICK), (&vertical.minor, TICK / 2.0)] {
            for &value in values {
                let y = field.y.place(value);
                marks.raw("M").at(left).raw(" ").at(y).raw("h").at(length);
                marks.raw("M").at(right).raw(" ").at(y).raw("h").at(-length);
            }
        }
        marks.raw("\"/>");
        for &value in &vertical.major {
            let number = format!("{:.*}", vertical.decimals, value + 0.0);
            let place = (left - 6.0, field.y.place(value) + 4.0);
            self.word("tick", Anchor::End, place, &number);
        }
        self.word("axis", Anchor::End, (left - 6.0, top - 6.0), unit);
    }

    /// The numbers below a frame, with the axis's name at its right end.
    pub fn numbers_below(&mut self, field: &Field, ticks: &Ticks, name: &str) {
        let y = field.y.from + 15.0;
        let end = field.x.to;
        let name_begins = end - width(name) - 8.0;
        for &value in &ticks.major {
            let number = format!("{:.*}", ticks.decimals, value + 0.0);
            let x = field.x.place(value);
            if x + width(&number) / 2.0 < name_begins {
                self.word("tick", Anchor::Middle, (x, y), &number);
            }
        }
        self.word("axis", Anchor::End, (end, y), name);
    }

    /// A trace: shade, line, limits, and its name where there is room beside it and clear of
    /// upright lines, and of borders if there is such a place.
    pub fn trace(
        &mut self,
        sheet: &Sheet,
        field: &Field,
        trace: &Trace,
        factor: f64,
        (lines, borders): (&[Area], &[Area]),
    ) {
        let runs: Vec<Vec<Sample>> = trace
            .runs
            .iter()
            .map(|run| {
                let times = |sample: &Sample| sample.times(factor);
                thinned(run, sheet.together).iter().map(times).collect()
            })
            .collect();
        let drawn = Drawn::of(field, &runs);
        let mut taken: Vec<Area> = lines.to_vec();
        for limit in &trace.limits {
            taken.extend(self.limit(field, limit, factor, &drawn, (lines, borders)));
        }
        for run in &runs {
            self.shade(field, run);
            self.curve(field, run);
        }
        let clear: Vec<Area> = taken.iter().chain(borders).copied().collect();
        let place = drawn
            .beside(field, trace.name, &clear)
            .or_else(|| drawn.beside(field, trace.name, &taken));
        if let Some(place) = place {
            self.word("name", Anchor::Start, place, trace.name);
        }
    }

    /// A dashed line, with its name where it covers no curve and no upright line, the nearer to an
    /// end the better; gives the areas it takes.
    fn limit(
        &mut self,
        field: &Field,
        limit: &Limit,
        factor: f64,
        drawn: &Drawn,
        (lines, borders): (&[Area], &[Area]),
    ) -> Vec<Area> {
        let value = limit.value * factor;
        if !field.y.contains(value) {
            return Vec::new();
        }
        let y = field.y.place(value);
        let (left, right) = (field.x.from, field.x.to);
        self.line("limit", (left, y), (right, y));
        let wide = width(&limit.name);
        let line = Area {
            left,
            right,
            top: y - 2.0,
            bottom: y + 2.0,
        };
        let (first, last) = (left + 10.0, right - wide - 10.0);
        let along = |part: u32| f64::from(part) / f64::from(LIMIT_PLACES);
        let place = |x: f64, base: f64| (Area::of_word(x, base, wide), (x, base));
        let places: Vec<(Area, (f64, f64))> = (0..=LIMIT_PLACES / 2)
            .flat_map(|part| {
                let away = along(part) * (last - first);
                [last - away, first + away]
            })
            .flat_map(|x| [place(x, y - 4.0), place(x, y + 12.0)])
            .collect();
        let inside = |area: &Area| area.top > field.y.to + 3.0 && area.bottom < field.y.from - 3.0;
        let mut fitting = places.iter().filter(|(area, _)| inside(area));
        let clear_of = |areas: &[Area], area: &Area| areas.iter().all(|one| !one.overlaps(area));
        let free = |area: &Area| !drawn.touches(area) && clear_of(lines, area);
        let found = fitting
            .clone()
            .find(|(area, _)| free(area) && clear_of(borders, area))
            .or_else(|| fitting.clone().find(|(area, _)| free(area)))
            .or_else(|| fitting.next());
        let Some((area, (x, base))) = found.copied() else {
            return vec![line];
        };
        self.word("limit-name", Anchor::Start, (x, base), &limit.name);
        vec![line, area]
    }

    /// An open line through points given in the field's units, a thin ink line if `class` is
    /// `curve`.
    pub fn path(&mut self, class: &'static str, field: &Field, points: &[(f64, f64)]) {
        self.outline(class, field, points, "\"/>");
    }

    /// A closed and filled area, its corners given in the field's units.
    pub fn region(&mut self, class: &'static str, field: &Field, points: &[(f64, f64)]) {
        self.outline(class, field, points, "Z\"/>");
    }

    fn outline(
        &mut self,
        class: &'static str,
        field: &Field,
        points: &[(f64, f64)],
        end: &'static str,
    ) {
        let marks = &mut self.marks;
        marks.raw("<path class=\"").raw(class).raw("\" d=\"");
        let mut verb = "M";
        for &(x, y) in points {
            marks.raw(verb).at(field.x.place(x)).raw(" ");
            marks.at(field.y.place(y));
            verb = "L";
        }
        marks.raw(end);
    }

    fn shade(&mut self, field: &Field, run: &[Sample]) {
        if run.iter().all(|sample| sample.high <= sample.low) {
            return;
        }
        let marks = &mut self.marks;
        marks.raw("<path class=\"shade\" d=\"");
        let mut verb = "M";
        for sample in run {
            marks.raw(verb).at(field.x.place(sample.x)).raw(" ");
            marks.at(field.y.place(sample.high));
            verb = "L";
        }
        for sample in run.iter().rev() {
            marks.raw("L").at(field.x.place(sample.x)).raw(" ");
            marks.at(field.y.place(sample.low));
        }
        marks.raw("Z\"/>");
    }

    fn curve(&mut self, field: &Field, run: &[Sample]) {
        if let [only] = run {
            let marks = &mut self.marks;
            marks.raw("<circle class=\"dot\" r=\"1.5\" cx=\"");
            marks.at(field.x.place(only.x)).raw("\" cy=\"");
            marks.at(field.y.place(only.mean)).raw("\"/>");
            return;
        }
        let marks = &mut self.marks;
        marks.raw("<path class=\"curve\" d=\"");
        let mut verb = "M";
        for sample in run {
            marks.raw(verb).at(field.x.place(sample.x)).raw(" ");
            marks.at(field.y.place(sample.mean));
            verb = "L";
        }
        marks.raw("\"/>");
    }

    /// What a read-off needs to know of this drawing, as attributes of the hairline's
    /// group, which stays hidden until a script moves it.
    pub fn read_off(&mut self, fields: &[(Field, f64)]) {
        let Some((first, _)) = fields.first() else {
            return;
        };
        let marks = &mut self.marks;
        marks.raw("<g class=\"read-off\" display=\"none\" data-x=\"");
        for value in [first.x.min, first.x.max] {
            marks.number(value, 6).raw(" ");
        }
        marks
            .at(first.x.from)
            .raw(" ")
            .at(first.x.to)
            .raw("\" data-y=\"");
        for (field, factor) in fields {
            for value in [field.y.min / factor, field.y.max / factor] {
                marks.number(value, 6).raw(" ");
            }
            marks.at(field.y.from).raw(" ").at(field.y.to).raw(" ");
        }
        marks.raw("\"><line class=\"hair\"/>");
        for _ in fields {
            marks.raw("<circle class=\"point\" r=\"2.6\"/>");
        }
        marks.raw("</g>");
    }
}
