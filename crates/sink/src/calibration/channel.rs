//! One curve of a certificate: its fit, its test for straightness, its budget.
//!
//! A straight line is fitted, and a second-order curve beside it. The curve is
//! taken only where the extra-sum-of-squares F-test of both, at a level of 1 %,
//! demands it: one in a hundred straight sinks gets a curve that it did not need,
//! and pays with a somewhat larger uncertainty.
//!
//! Values are in micro-units (µA or µV) throughout.

use quantity::{Quantity, Text, Textual};
use serde::{Deserialize, Serialize};

use super::{CalibrationError, POINTS_MIN, ReferenceMeter, Spread, micro, spread};
use crate::accumulate::{Moments, count};
use crate::correction::{Bend, Curve};
use crate::regression::{Fit, Form, Point, Weights, f_test, fit};
use crate::uncertainty::{
    Budget, Contribution, DegreesOfFreedom, Estimate, Evaluation, Shape, of_dithered_step,
    of_resolution,
};

/// The F-test's level below which a line is not straight enough.
const STRAIGHTNESS_LEVEL: f64 = 0.01;
/// A residual of more than this many standard uncertainties is named.
const OUTLIER_BEYOND: f64 = 3.5;
/// Where a departure from the line is looked for: this many places.
const PLACES: u16 = 64;

/// One fitted curve with all that its uncertainty needs.
#[derive(Debug, Clone, PartialEq)]
pub struct Channel {
    name: &'static str,
    fit: Fit,
    /// The points' own standard uncertainties.
    point_uncertainties: Vec<f64>,
    range: (f64, f64),
    second_order: SecondOrder,
    /// Stated accuracy of the meter: constant part, part of the reading, and its distribution.
    meter: (f64, f64, Shape),
    /// Standard uncertainty of what the converter's step leaves in a reading.
    resolution: f64,
    /// Standard deviation of one nominal reading and what it was told by.
    repeatability: (f64, DegreesOfFreedom),
    /// Degrees of freedom of the fit's covariance.
    freedom: DegreesOfFreedom,
    /// Relative change with the sense resistor's temperature, half-width.
    drift: f64,
}

/// Whether a second-order term is demanded by the residuals: the extra
/// sum-of-squares F-test against the straight line, at a level of 1 %.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SecondOrder {
    /// The F ratio.
    pub ratio: f64,
    /// How likely it is if the line is straight.
    pub probability: f64,
    /// Whether the level is fallen below.
    pub demanded: bool,
    /// Largest departure of the second-order curve from the line over the
    /// range, micro-units.
    pub departure_micro: f64,
}

/// What a certificate shows of a curve; micro-units.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ChannelSummary {
    /// True value at nominal zero.
    pub offset_micro: f64,
    /// Its standard uncertainty from the fit.
    pub offset_uncertainty_micro: f64,
    /// Slope of true against nominal values.
    pub slope: f64,
    /// Its standard uncertainty from the fit.
    pub slope_uncertainty: f64,
    /// Correlation coefficient of offset and slope.
    pub correlation: f64,
    /// The second-order term; absent for a straight line. Offset and slope are
    /// then those at nominal zero.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub curvature: Option<CurvatureSummary>,
    /// Degrees of freedom of the fit.
    pub degrees_of_freedom: DegreesOfFreedom,
    /// Observed minus fitted, in the points' order.
    pub residuals_micro: Vec<f64>,
    /// Points (from 1) whose residual is larger than their own uncertainty
    /// lets expect; none is dropped.
    pub outliers: Vec<usize>,
    /// Smallest and largest nominal value of the points: the line is not
    /// vouched for beyond.
    pub range_micro: [f64; 2],
    /// The test for straightness.
    pub second_order: SecondOrder,
}

/// What a certificate shows of a second-order term.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CurvatureSummary {
    /// Coefficient of the nominal value's square, per ampere or volt.
    pub per_unit: f64,
    /// Its standard uncertainty from the fit, likewise.
    pub uncertainty_per_unit: f64,
    /// Correlation coefficients with the offset and with the slope.
    pub correlations: [f64; 2],
}

/// What was read at one point.
#[derive(Debug)]
pub(super) struct Readings<'a, T> {
    pub(super) nominal: &'a [Text<T>],
    pub(super) reference: &'a [Text<T>],
    /// Of the samples behind the nominal readings.
    pub(super) spread: Option<&'a Spread<T>>,
}

/// What is stated beside a channel's points.
#[derive(Debug)]
pub(super) struct Stated<'a, T> {
    pub(super) meter: &'a ReferenceMeter<T>,
    /// The converter's.
    pub(super) step: T,
    pub(super) steps: Steps,
    /// Relative change with the sense resistor's temperature, half-width.
    pub(super) drift: f64,
}

/// How the steps of a converter count.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Steps {
    /// Whole.
    Whole,
    /// As far as the noise of the readings leaves them.
    Dithered,
}

impl Channel {
    pub(super) fn fit<T: Textual + Quantity + Ord>(
        name: &'static str,
        readings: &[Readings<'_, T>],
        stated: &Stated<'_, T>,
    ) -> Result<Self, CalibrationError> {
        let meter = stated.meter;
        if readings.len() < POINTS_MIN {
            return Err(CalibrationError::TooFewPoints {
                channel: name,
                points: readings.len(),
            });
        }
        if !meter.is_sound() {
            return Err(CalibrationError::Stated {
                what: "the reference meter's accuracy",
            });
        }
        let step = micro(stated.step);
        if step <= 0.0 || meter.resolution.base_units() <= 0 {
            return Err(CalibrationError::NoResolution { channel: name });
        }
        let nominal = pooled_deviation(readings.iter().map(|point| point.nominal));
        let reference = pooled_deviation(readings.iter().map(|point| point.reference));
        let resolution = match stated.steps {
            Steps::Whole => of_resolution(step),
            Steps::Dithered => {
                let spreads = readings.iter().filter_map(|point| point.spread);
                of_dithered_step(step, spread::noise(spreads, nominal, step))
            }
        };
        let repeatability = Repeatability {
            resolution: resolution.hypot(meter.resolution_uncertainty()),
            nominal: nominal.0,
            reference: reference.0,
        };
        let points = readings
            .iter()
            .enumerate()
            .map(|(index, readings)| point(name, index + 1, readings, meter, &repeatability))
            .collect::<Result<Vec<Point>, _>>()?;
        let failed = |cause| CalibrationError::Fit {
            channel: name,
            cause,
        };
        let line = fit(&points, Form::Polynomial(1), Weights::Known).map_err(failed)?;
        let range = points
            .iter()
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), point| {
                (low.min(point.x), high.max(point.x))
            });
        // Points at only two abscissas cannot show a bend.
        let curve = fit(&points, Form::Polynomial(2), Weights::Known).ok();
        let second_order = SecondOrder::of(&line, curve.as_ref(), range);
        let fit = curve.filter(|_| second_order.demanded).unwrap_or(line);
        // Where the points leave no residual, the fit is as well known as their own spread is.
        let freedom = if fit.degrees_of_freedom().number() > 0.0 {
            fit.degrees_of_freedom()
        } else {
            DegreesOfFreedom::finite(nominal.1.number().min(reference.1.number()))
        };
        Ok(Self {
            name,
            fit,
            point_uncertainties: points.iter().map(|point| point.u).collect(),
            range,
            second_order,
            meter: (
                meter.accuracy(0.0),
                meter.accuracy(1e6) - meter.accuracy(0.0),
                meter.stated.shape(),
            ),
            resolution,
            repeatability: nominal,
            freedom,
            drift: stated.drift,
        })
    }

    /// The curve as the correction holds it.
    pub(super) fn curve(&self) -> Result<Curve, CalibrationError> {
        let (coefficients, _) = self.fit.coefficients_about(0.0);
        let curve = match coefficients[..] {
            [offset, slope] => Curve::line(rounded(offset), rounded((slope - 1.0) * 1e9)),
            [offset, slope, curvature] => Curve::bent(
                rounded(offset),
                rounded((slope - 1.0) * 1e9),
                Bend {
                    curvature_ppb_per_unit: rounded(curvature * 1e15),
                    from_micro: rounded(self.range.0),
                    to_micro: rounded(self.range.1),
                },
            ),
            _ => {
                return Err(CalibrationError::TooFewPoints {
                    channel: self.name,
                    points: 0,
                });
            }
        };
        curve.map_err(|cause| CalibrationError::Curve {
            channel: self.name,
            cause,
        })
    }

    /// What a certificate shows.
    pub fn summary(&self) -> ChannelSummary {
        let (coefficients, covariance) = self.fit.coefficients_about(0.0);
        let at = |row: usize, column: usize| covariance.get((row, column)).copied().unwrap_or(0.0);
        let (u_offset, u_slope) = (at(0, 0).max(0.0).sqrt(), at(1, 1).max(0.0).sqrt());
        let residuals = self.fit.residuals().to_vec();
        let outliers = residuals
            .iter()
            .zip(&self.point_uncertainties)
            .enumerate()
            .filter(|(_, (residual, u))| residual.abs() > OUTLIER_BEYOND * **u)
            .map(|(index, _)| index + 1)
            .collect();
        ChannelSummary {
            offset_micro: coefficients.first().copied().unwrap_or(0.0),
            offset_uncertainty_micro: u_offset,
            slope: coefficients.get(1).copied().unwrap_or(1.0),
            slope_uncertainty: u_slope,
            correlation: at(0, 1) / (u_offset * u_slope),
            curvature: coefficients.get(2).map(|curvature| {
                let u = at(2, 2).max(0.0).sqrt();
                CurvatureSummary {
                    per_unit: curvature * 1e6,
                    uncertainty_per_unit: u * 1e6,
                    correlations: [at(0, 2) / (u_offset * u), at(1, 2) / (u_slope * u)],
                }
            }),
            degrees_of_freedom: self.freedom,
            residuals_micro: residuals,
            outliers,
            range_micro: [self.range.0, self.range.1],
            second_order: self.second_order,
        }
    }

    /// The uncertainty budget of a true value got from one nominal value, in
    /// micro-units; [`Budget::expanded`] states its interval.
    pub fn budget(&self, nominal_micro: f64) -> Budget {
        let predicted = self.predict(nominal_micro);
        let (constant, per_million, shape) = self.meter;
        let infinite = DegreesOfFreedom::INFINITE;
        let stated = |name: &str, u: f64| Contribution::new(name, Evaluation::TypeB, u, infinite);
        let mut lines = vec![
            Contribution::new(
                if self.fit.form() == Form::Polynomial(2) {
                    "fit (offset, slope and curvature, correlated)"
                } else {
                    "fit (offset and slope, correlated)"
                },
                Evaluation::TypeA,
                predicted.standard_uncertainty,
                self.freedom,
            ),
            stated(
                "reference meter",
                constant + per_million * predicted.value.abs() / 1e6,
            )
            .shaped(shape),
            // What noise leaves of it is a wave, and bounded as well.
            stated("converter's resolution", self.resolution).rectangular(),
        ];
        if self.repeatability.0 > 0.0 {
            lines.push(Contribution::new(
                "repeatability of one reading",
                Evaluation::TypeA,
                self.repeatability.0,
                self.repeatability.1,
            ));
        }
        if self.drift > 0.0 {
            lines.push(
                stated(
                    "sense resistor's temperature",
                    self.drift * predicted.value.abs() / 3_f64.sqrt(),
                )
                .rectangular(),
            );
        }
        Budget::new(lines)
    }

    /// The true value of a nominal one with the standard uncertainty of the
    /// fit there, micro-units; beyond the calibrated range carried on by the
    /// tangent, as the correction does.
    pub fn predict(&self, nominal_micro: f64) -> Estimate {
        self.fit.predict_carried_on(nominal_micro, self.range)
    }

    /// The slope's standard uncertainty where it is largest: at one of the ends
    /// of the range.
    pub fn slope_uncertainty_max(&self) -> f64 {
        [self.range.0, self.range.1]
            .map(|end| self.fit.slope(end).standard_uncertainty)
            .into_iter()
            .fold(0.0, f64::max)
    }

    /// Smallest and largest nominal value of the points, micro-units.
    pub const fn range(&self) -> (f64, f64) {
        self.range
    }

    /// Whether a nominal value lies within the calibrated range.
    pub fn vouches_for(&self, nominal_micro: f64) -> bool {
        (self.range.0..=self.range.1).contains(&nominal_micro)
    }
}

/// A point of the fit: nominal mean, reference mean, and the standard
/// uncertainty of what differs from point to point.
fn point<T: Textual + Quantity + Ord>(
    channel: &'static str,
    index: usize,
    readings: &Readings<'_, T>,
    meter: &ReferenceMeter<T>,
    repeatability: &Repeatability,
) -> Result<Point, CalibrationError> {
    let (nominal, reference) = (readings.nominal, readings.reference);
    if let Some(beyond) = reference
        .iter()
        .find(|reading| reading.0.base_units().abs() > meter.range.base_units())
    {
        return Err(CalibrationError::BeyondRange {
            channel,
            index,
            reading: beyond.to_string(),
            range: meter.range.to_string(),
        });
    }
    let (x, y) = (moments(nominal), moments(reference));
    let (Some(x_mean), Some(y_mean)) = (x.mean(), y.mean()) else {
        return Err(CalibrationError::NoReading { channel, index });
    };
    let of_mean = |deviation: f64, moments: &Moments| deviation / count(moments.number()).sqrt();
    Ok(Point {
        x: x_mean,
        y: y_mean,
        u: repeatability
            .resolution
            .hypot(of_mean(repeatability.nominal, &x))
            .hypot(of_mean(repeatability.reference, &y)),
    })
}

/// What differs from point to point, micro-units.
struct Repeatability {
    /// Standard uncertainty of both resolutions together.
    resolution: f64,
    /// Standard deviation of one nominal reading.
    nominal: f64,
    /// Standard deviation of one reference reading.
    reference: f64,
}

/// The standard deviation of one reading, pooled over the points (JCGM 100
/// 4.2.4), and its degrees of freedom; 0 and exactly known if no point has two readings.
///
/// Pooled, because weights from the few readings of each point would be so
/// uncertain themselves that the fit's intervals covered too little.
fn pooled_deviation<'a, T: Textual + Quantity + 'a>(
    points: impl Iterator<Item = &'a [Text<T>]>,
) -> (f64, DegreesOfFreedom) {
    let (squares, freedom) = points
        .map(moments)
        .fold((0.0, 0.0), |(squares, freedom), point| {
            match point.standard_deviation() {
                Some(deviation) => {
                    let own = count(point.number() - 1);
                    (squares + deviation * deviation * own, freedom + own)
                }
                None => (squares, freedom),
            }
        });
    if freedom > 0.0 {
        let deviation = f64::sqrt(squares / freedom);
        (deviation, DegreesOfFreedom::finite(freedom))
    } else {
        (0.0, DegreesOfFreedom::INFINITE)
    }
}

fn moments<T: Textual + Quantity>(readings: &[Text<T>]) -> Moments {
    readings.iter().map(|reading| micro(reading.0)).collect()
}

impl SecondOrder {
    fn of(line: &Fit, curve: Option<&Fit>, (low, high): (f64, f64)) -> Self {
        let straight = Self {
            ratio: 0.0,
            probability: 1.0,
            demanded: false,
            departure_micro: 0.0,
        };
        let Some((curve, test)) = curve.and_then(|curve| Some((curve, f_test(line, curve)?)))
        else {
            return straight;
        };
        let departure = (0..=PLACES)
            .map(|place| low + (high - low) * f64::from(place) / f64::from(PLACES))
            .map(|x| (curve.value(x) - line.value(x)).abs())
            .fold(0.0, f64::max);
        Self {
            ratio: test.ratio,
            probability: test.probability,
            demanded: test.probability < STRAIGHTNESS_LEVEL,
            departure_micro: departure,
        }
    }
}

/// To the nearest whole number; a float cast holds at the ends, and a gain
/// there is refused by the line.
#[expect(
    clippy::cast_possible_truncation,
    reason = "the cast saturates, and the line refuses what is out of bounds"
)]
const fn rounded(value: f64) -> i64 {
    value.round() as i64
}
