//! Load regulation and output resistance of a supply, from the steps of a sweep.
//!
//! Each step that holds a current gives one point, its last readback. A supply that may give up
//! in a step is not asked there.

use sequence::plan::DutKind;
use sink::regression::{Fit, Form, Point, Weights, fit};
use sink::uncertainty::{Budget, DegreesOfFreedom};
use statrs::distribution::{ChiSquared, ContinuousCDF};

use crate::contribution::{ONE_EACH, observed, of_leads};
use crate::figure::{COMMON, Figure, Figures, Missing, Name, PROBABILITY, Rows, Unit};
use crate::walk::Sample;
use crate::work::Workbench;

/// Fewest different currents of a sweep.
const LEAST: usize = 3;

/// A readback that falls short of its step's current by more than this share of it, or by more
/// than three steps of the converter, is of a supply that did not follow.
const SHORT: f64 = 0.05;

const RESISTANCE: &str = "slope of a straight line through voltage over current, weighted least \
                          squares, one point a step: its last readback";
const RESISTANCE_SOURCE: &str =
    "least squares with covariance: JCGM 100:2008, H.3; the figure: common practice, no source";
const REGULATION: &str = "voltage at the smallest current of the sweep less that at the largest, \
                          each the last readback of its step";

/// A settled point of a sweep, true values.
struct Settled {
    amperes: f64,
    volts: f64,
    row: u64,
}

impl Workbench<'_> {
    /// Load regulation and output resistance, where there is a sweep.
    pub(crate) fn supply(&self, figures: &mut Figures) {
        if self.plan.dut.kind != DutKind::Supply {
            return;
        }
        let mut points = self.sweep();
        points.sort_by(|one, other| one.amperes.total_cmp(&other.amperes));
        let apart = 2.0 * self.instrument.current.step;
        let different = points
            .iter()
            .zip(points.iter().skip(1))
            .filter(|(one, other)| other.amperes - one.amperes > apart)
            .count();
        let (Some(least), Some(most)) = (points.first(), points.last()) else {
            return;
        };
        if different + 1 < LEAST {
            let reason = format!(
                "the run holds {} different currents, and a sweep needs {LEAST}",
                different + 1
            );
            figures
                .missing
                .push(Missing::new(Name::OutputResistance, reason));
            return;
        }
        let rows = Rows {
            first: points.iter().map(|point| point.row).min().unwrap_or(0),
            last: points.iter().map(|point| point.row).max().unwrap_or(0),
        };
        let regulation = least.volts - most.volts;
        let voltage = &self.instrument.voltage;
        let mut lines = voltage.of_difference(regulation, ONE_EACH, 1.0);
        lines.extend(of_leads(self.instrument, most.amperes - least.amperes));
        let how = format!(
            "{REGULATION}; from {:.4} A to {:.4} A",
            least.amperes, most.amperes
        );
        figures.figures.push(Figure::new(
            Name::LoadRegulation,
            None,
            (regulation, Unit::Volt),
            Budget::new(lines),
            (&how, COMMON),
            rows,
        ));
        match self.output_resistance(&points, rows) {
            Ok(figure) => figures.figures.push(figure),
            Err(reason) => figures
                .missing
                .push(Missing::new(Name::OutputResistance, reason)),
        }
    }

    fn sweep(&self) -> Vec<Settled> {
        let steps = self.stages.iter().zip(self.walked);
        steps
            .filter(|(stage, _)| !stage.step.may_give_up && !stage.is_beyond_counting())
            .filter_map(|(stage, delivered)| {
                let held = stage.held_current()?;
                let last: Sample = delivered.last.1?;
                let (read, volts) = self.true_values(&last);
                // In a rest none flows, whatever a converter that ends at zero makes of it.
                let amperes = if held > 0.0 { read } else { 0.0 };
                let tolerance = (SHORT * held).max(3.0 * self.instrument.current.step);
                (held - amperes <= tolerance).then_some(Settled {
                    amperes,
                    volts,
                    row: last.row,
                })
            })
            .collect()
    }

    fn output_resistance(&self, points: &[Settled], rows: Rows) -> Result<Figure, String> {
        let u = self.instrument.voltage.resolution();
        let weighed: Vec<Point> = points
            .iter()
            .map(|point| Point {
                x: point.amperes,
                y: point.volts,
                u,
            })
            .collect();
        let line = fit(&weighed, Form::Polynomial(1), Weights::Known)
            .map_err(|error| error.to_string())?;
        let (coefficients, covariance) = line.coefficients_about(0.0);
        let slope = coefficients.get(1).copied().unwrap_or(f64::NAN);
        let standard = covariance.get((1, 1)).copied().unwrap_or(f64::NAN).sqrt();
        let standard = if by_chance(&line) {
            standard / line.residual_deviation().max(1.0)
        } else {
            standard
        };
        let mut lines = vec![observed(
            "fit of the line",
            standard,
            DegreesOfFreedom::INFINITE,
        )];
        lines.extend(self.instrument.voltage.of_gain(slope));
        lines.extend(self.instrument.current.of_gain(slope));
        lines.extend(of_leads(self.instrument, 1.0));
        Ok(Figure::new(
            Name::OutputResistance,
            None,
            (-slope, Unit::Ohm),
            Budget::new(lines),
            (RESISTANCE, RESISTANCE_SOURCE),
            rows,
        ))
    }
}

/// Whether the points lie about the line as their noise lets expect, 95 times in a hundred. The fit
/// takes whatever they lie farther for a sign that they are worse known (Birge's ratio); without
/// such a sign the noise is believed.
fn by_chance(line: &Fit) -> bool {
    let freedom = line.degrees_of_freedom().number();
    ChiSquared::new(freedom).is_ok_and(|chance| chance.cdf(line.chi_square()) <= PROBABILITY)
}
