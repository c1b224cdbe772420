//! Voltage against the charge delivered.

use journal::Manifest;
use plot::{Anchor, Area, Drawing, Field, Limit, Markup, Sample, Scale, Sheet, Trace};
use sequence::plan::DutKind;

use crate::evidence::Evidence;
use crate::wording::exact;

use super::{data, in_words};

/// Charge below which a curve against charge shows nothing, ampere hours.
const LEAST_AH: f64 = 1e-6;

/// The plot, before it is laid out.
pub(super) struct Plot {
    trace: Trace,
    total_ah: f64,
    rated: Option<(f64, String)>,
}

impl Plot {
    /// `None` for a supply, which has no capacity, and where next to no charge was delivered.
    pub(super) fn of(manifest: &Manifest, evidence: &Evidence) -> Option<Self> {
        let dut = &manifest.plan.dut;
        let total_ah = evidence.charge.total_ah();
        if dut.kind == DutKind::Supply || total_ah < LEAST_AH {
            return None;
        }
        let undervoltage = manifest.plan.interlocks.undervoltage.threshold;
        let trace = Trace {
            name: "voltage",
            unit: "V",
            runs: super::runs(evidence, |bucket| {
                let voltage = bucket.voltage;
                Some(Sample {
                    x: evidence.charge.at(super::middle(bucket)),
                    low: voltage.min.volts(),
                    mean: voltage.mean.volts(),
                    high: voltage.max.volts(),
                    weight: super::weight(bucket),
                })
            }),
            limits: vec![Limit {
                value: undervoltage.volts(),
                name: format!("undervoltage {}", exact(&undervoltage)),
            }],
            from_zero: false,
        };
        Some(Self {
            trace,
            total_ah,
            rated: dut.rated_capacity.map(|rated| {
                let ah = rated.ampere_hours();
                (ah, format!("rated {}", exact(&rated)))
            }),
        })
    }

    pub(super) fn data(&self) -> Markup {
        data::block(std::slice::from_ref(&self.trace), 7)
    }

    pub(super) fn drawn(&self, sheet: &Sheet) -> Markup {
        let mut drawing = Drawing::new();
        let (left, right) = sheet.inner();
        let (factor, name) = if self.total_ah < 0.1 {
            (1e3, "charge / mAh")
        } else {
            (1.0, "charge / Ah")
        };
        let near = |&&(rated, _): &&(f64, String)| rated < self.total_ah * 1.25;
        let rated = self.rated.as_ref().filter(near);
        let longest = rated.map_or(self.total_ah, |(rated, _)| rated.max(self.total_ah));
        let x = Scale {
            min: 0.0,
            max: longest * 1.02,
            from: left,
            to: right,
        };
        let by_unit = Scale {
            max: x.max * factor,
            ..x
        };
        let (low, high) = self.trace.range().unwrap_or((0.0, 1.0));
        let (top, bottom) = (20.0, 20.0 + sheet.panel * 1.5);
        let y = Scale::around(low, high, (bottom, top));
        let ticks = by_unit.ticks(sheet.ticks);
        let framed = Field { x: by_unit, y };
        drawing.frame(&framed, &ticks, "V");
        let mut lines: Vec<Area> = Vec::new();
        if let Some((ah, text)) = rated {
            let place = x.place(*ah);
            lines.push(Area::of_line(place, top, bottom));
            drawing.line("limit", (place, top), (place, bottom));
            drawing.word("limit-name", Anchor::End, (place - 5.0, top + 16.0), text);
        }
        let field = Field { x, y };
        drawing.trace(sheet, &field, &self.trace, 1.0, (&lines, &[]));
        drawing.numbers_below(&framed, &ticks, name);
        drawing.read_off(&[(field, 1.0)]);
        let description = format!(
            "{} {} delivered in all.",
            in_words(&self.trace),
            crate::wording::prefixed(self.total_ah, "Ah", 4)
        );
        let title = "Voltage against charge delivered";
        drawing.finish(sheet, bottom + 22.0, "charge", title, &description)
    }
}
