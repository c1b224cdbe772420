//! One source of error: how it depends on the value, and what makes it.

use quantity::{Quantity, Textual};
use sink::bench::ReadError;
use sink::calibration::{Channel as Fitted, ChannelSummary, ReferenceMeter};
use sink::uncertainty::{DegreesOfFreedom, Evaluation, Shape, Stated, of_resolution};

/// Micro-units in a unit.
pub(super) const MICRO: f64 = 1e6;

/// One source of error of a channel.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Source {
    pub(super) name: &'static str,
    pub(super) evaluation: Evaluation,
    pub(super) freedom: DegreesOfFreedom,
    pub(super) law: Law,
    /// Whether it differs from reading to reading instead of being common to all.
    pub(super) fresh: bool,
    /// Its distribution.
    pub(super) shape: Shape,
}

/// How a source's error depends on the value.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Law {
    /// An offset and a gain.
    Straight {
        /// Standard uncertainty of the offset, ampere or volt.
        offset: f64,
        /// Standard uncertainty of the gain, a fraction.
        gain: f64,
        /// Correlation coefficient of both; 1 where one cause makes both.
        correlation: f64,
    },
    /// As the fit of a bent curve predicts.
    Bent(Box<Fitted>),
}

impl Source {
    pub(super) fn share(&self, time: f64, amount: f64) -> f64 {
        match &self.law {
            Law::Straight {
                offset,
                gain,
                correlation,
            } => {
                let (offset, gain) = (offset * time, gain * amount);
                let both = 2.0 * correlation * offset * gain;
                (offset * offset + gain * gain + both).max(0.0).sqrt()
            }
            // A difference of two readings: the slope where it is known least.
            Law::Bent(fit) if time.abs() < f64::MIN_POSITIVE => {
                fit.slope_uncertainty_max() * amount.abs()
            }
            Law::Bent(fit) => {
                let nominal = nominal_of(fit, amount / time * MICRO);
                fit.predict(nominal).standard_uncertainty / MICRO * time.abs()
            }
        }
    }

    /// From bounds stated in a data sheet: any value within them is as likely (JCGM 100:2008,
    /// 4.3.7).
    const fn type_b(name: &'static str, offset: f64, gain: f64) -> Self {
        Self {
            name,
            evaluation: Evaluation::TypeB,
            freedom: DegreesOfFreedom::INFINITE,
            law: Law::Straight {
                offset,
                gain,
                correlation: 0.0,
            },
            fresh: false,
            shape: Shape::Rectangular,
        }
    }

    pub(super) fn stated_gain(name: &'static str, bound: f64) -> Self {
        Self::type_b(name, 0.0, Stated::Rectangular.standard_uncertainty(bound))
    }

    /// A share of the reading and a constant that one bound holds: they err together.
    pub(super) fn stated_error<T: Textual + Quantity>(
        name: &'static str,
        error: &ReadError<T>,
    ) -> Self {
        let standard = |bound| error.stated.standard_uncertainty(bound);
        #[expect(
            clippy::cast_precision_loss,
            reason = "a bound is below 2^53 micro-units"
        )]
        let constant = error.constant.base_units() as f64 / MICRO;
        Self {
            law: Law::Straight {
                offset: standard(constant),
                gain: standard(error.of_reading.0.fraction()),
                correlation: 1.0,
            },
            shape: error.stated.shape(),
            ..Self::type_b(name, 0.0, 0.0)
        }
    }

    pub(super) fn step(name: &'static str, step: f64) -> Self {
        Self {
            fresh: true,
            ..Self::type_b(name, of_resolution(step), 0.0)
        }
    }
}

/// The fit of a certificate's curve.
pub(super) fn fitted(
    [straight, bent]: [&'static str; 2],
    summary: &ChannelSummary,
    fit: Fitted,
) -> Source {
    if summary.curvature.is_some() {
        return Source {
            evaluation: Evaluation::TypeA,
            freedom: summary.degrees_of_freedom,
            law: Law::Bent(Box::new(fit)),
            shape: Shape::Normal,
            ..Source::type_b(bent, 0.0, 0.0)
        };
    }
    // The certificate's line stands on nominal values, `true = a + b nominal`. On true values
    // the error is that of `a - (a / b) b` and of `b / b`, with what both have in common.
    let (u_offset, u_slope) = (
        summary.offset_uncertainty_micro / MICRO,
        summary.slope_uncertainty,
    );
    let covariance = if summary.correlation.is_finite() {
        summary.correlation * u_offset * u_slope
    } else {
        0.0
    };
    let nominal_zero = summary.offset_micro / MICRO / summary.slope;
    let variance =
        u_offset * u_offset - 2.0 * nominal_zero * covariance + (nominal_zero * u_slope).powi(2);
    let offset = variance.max(0.0).sqrt();
    let gain = u_slope / summary.slope.abs();
    let shared = (covariance - nominal_zero * u_slope * u_slope) / summary.slope;
    let correlation = if offset * gain > 0.0 {
        (shared / (offset * gain)).clamp(-1.0, 1.0)
    } else {
        0.0
    };
    Source {
        evaluation: Evaluation::TypeA,
        freedom: summary.degrees_of_freedom,
        law: Law::Straight {
            offset,
            gain,
            correlation,
        },
        shape: Shape::Normal,
        ..Source::type_b(straight, 0.0, 0.0)
    }
}

/// The nominal value whose true value is the given one, micro-units: after Newton, from the value
/// itself; a correction is near enough to one that the fourth step changes nothing.
fn nominal_of(fit: &Fitted, value_micro: f64) -> f64 {
    (0..4).fold(value_micro, |nominal, _| {
        let found = fit.predict(nominal).value;
        let slope = fit.predict(nominal + 1.0).value - found;
        nominal - (found - value_micro) / slope
    })
}

/// One meter read all points, so its constant part and its part of the reading err together.
pub(super) fn of_meter<T: Textual + Quantity>(
    name: &'static str,
    meter: &ReferenceMeter<T>,
) -> Source {
    let constant = meter.accuracy(0.0) / MICRO;
    let of_reading = meter.accuracy(MICRO) / MICRO - constant;
    Source {
        law: Law::Straight {
            offset: constant,
            gain: of_reading,
            correlation: 1.0,
        },
        shape: meter.stated.shape(),
        ..Source::type_b(name, 0.0, 0.0)
    }
}
