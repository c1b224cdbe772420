//! When a supply's voltage had recovered after an edge, from captured samples: the instant at which
//! it came into a band about where it settles, to stay.
//!
//! Where noise hides the way into the band, there is a reason and no number.

use sink::accumulate::Moments;
use sink::regression::{Form, Point, Weights, fit};
use sink::uncertainty::{Budget, noise_before_steps, of_dithered_step, of_resolution};

use crate::contribution::{bounded, clocks, stated};
use crate::droop::Edge;
use crate::least_squares::number;
use crate::work::Workbench;

/// Half the band about the settled voltage in which it counts as recovered, a share of it.
pub(crate) const BAND: f64 = 0.005;

const DROWNED: &str = "the voltage comes back so slowly that noise hides when it is in the band; \
                       a quieter front end would tell";

/// The band reaches so many times the noise of a sample at least, or noise alone would leave it.
const BEYOND_NOISE: f64 = 5.0;

/// The slope of the line that meets the band is to be so many times its own uncertainty, and must
/// be so many.
const CLEAR: f64 = 8.0;
const CLEAR_LEAST: f64 = 3.0;

impl Workbench<'_> {
    /// When the voltage came into the band about where it settles, to stay.
    pub(crate) fn recovery(&self, edge: &Edge) -> Result<Recovered, &'static str> {
        let quarter = edge.after.len() / 4;
        let mean = |samples: &[(f64, f64)]| {
            samples.iter().map(|sample| sample.1).sum::<f64>() / number(samples.len())
        };
        let (rest, last) = edge.after.split_at(edge.after.len() - quarter);
        let (_, before_last) = rest.split_at(rest.len() - quarter);
        let settled = mean(last);
        let level = edge.level - edge.sign * settled;
        let step = self.instrument.voltage.step;
        let scatter: Moments = last.iter().map(|sample| sample.1).collect();
        let scatter = scatter.standard_deviation().unwrap_or(0.0);
        let noise = scatter.max(of_resolution(step));
        let band = (BAND * level.abs())
            .max(2.0 * step)
            .max(BEYOND_NOISE * noise);
        if (mean(before_last) - settled).abs() > 0.5 * band {
            return Err("the capture ends before the voltage has settled; capture for longer");
        }
        let beyond = |sample: &(f64, f64)| (sample.1 - settled).abs() - band;
        let outside = edge.after.iter().rposition(|sample| beyond(sample) > 0.0);
        let Some(outside) = outside else {
            return Err("no sample after the edge lies outside the band");
        };
        if outside + 1 >= edge.after.len() {
            return Err("the voltage is outside the band at the end of the capture");
        }
        // Steps that no noise averages out err in the mean as in every sample.
        let left = of_dithered_step(step, noise_before_steps(step, scatter));
        let noise_of_settled = left.hypot(scatter / number(quarter).sqrt());
        let crossing = crossing(&edge.after, outside, &beyond, (band, noise)).ok_or(DROWNED)?;
        let tick_s = self.plan.tick.seconds() * self.time_base.factor;
        // The line through an exponential course meets the band so much later than the course; one
        // through another course by up to half as much again, or half of it.
        let off_centre = crossing.ticks - crossing.centre;
        let spread = crossing.around.powi(2) / 6.0 - 0.5 * off_centre.powi(2);
        let later = spread.max(0.0) * crossing.fall / band;
        Ok(Recovered {
            seconds: (crossing.ticks - later) * tick_s,
            by_line: crossing.standard * tick_s,
            by_bend: 0.5 * later * tick_s,
            by_settled: noise_of_settled / crossing.fall * tick_s,
        })
    }

    pub(crate) fn recovery_budget(&self, recovered: &Recovered) -> Budget {
        Budget::new(vec![
            stated("line through the samples", recovered.by_line),
            bounded("course that is not straight", recovered.by_bend),
            stated("settled voltage", recovered.by_settled),
            clocks(recovered.seconds * self.time_base.uncertainty),
        ])
    }
}

/// When a voltage had recovered.
pub(crate) struct Recovered {
    pub(crate) seconds: f64,
    /// Standard uncertainty from the line that meets the band, seconds.
    by_line: f64,
    /// At most from a course that is not straight there, seconds.
    by_bend: f64,
    /// Standard uncertainty from the band's own middle, seconds.
    by_settled: f64,
}

/// Where a straight line through samples meets the band.
struct Crossing {
    ticks: f64,
    /// Standard uncertainty of the ticks.
    standard: f64,
    /// Volts a tick.
    fall: f64,
    /// Ticks on either side whose samples the line goes through.
    around: f64,
    /// The middle of those ticks.
    centre: f64,
}

/// The line through the last sample outside the band, the one after it, and as many on either side
/// as it takes to see its slope well; where so many reach over the whole band, or there are not so
/// many, as it takes to see it at all. `None` where noise hides it.
fn crossing(
    after: &[(f64, f64)],
    outside: usize,
    beyond: &impl Fn(&(f64, f64)) -> f64,
    (band, noise): (f64, f64),
) -> Option<Crossing> {
    let most = (outside + 1).min(after.len() - outside - 1);
    let mut seen = None;
    for around in 1..=most {
        let points: Vec<Point> = after
            .iter()
            .skip(outside + 1 - around)
            .take(2 * around)
            .map(|sample| Point {
                x: sample.0,
                y: beyond(sample),
                u: noise,
            })
            .collect();
        let line = fit(&points, Form::Polynomial(1), Weights::Known).ok()?;
        let slope = line.slope(0.0);
        let fall = -slope.value;
        let clear = fall / slope.standard_uncertainty;
        // The first of them is the last outside and the first inside: however fast, it is there.
        if around > 1 && number(around) * fall > 2.0 * band {
            break;
        }
        if clear > CLEAR_LEAST {
            // The line's value at no ticks is what it has to fall.
            let ticks = line.value(0.0) / fall;
            let standard = line.predict(ticks).standard_uncertainty / fall;
            seen = Some(Crossing {
                ticks,
                standard,
                fall,
                around: number(around),
                centre: points.iter().map(|point| point.x).sum::<f64>() / number(points.len()),
            });
        }
        if clear > CLEAR {
            break;
        }
    }
    seen
}
