//! The fit of one pulse and its relaxation: a series resistance and one or two
//! resistor-capacitor pairs.
//!
//! The current is taken as constant in the pulse and zero after it; the pairs as empty before.
//! A readback is a mean over its interval, and so is the model it is held against. The voltage
//! that the discharge itself takes off is a parameter, tied to the slope of the open-circuit
//! voltages beside it where there are any.

use crate::least_squares::{FitError, Fitted, least_squares, number};

/// Means that each of the two parts is put together to.
const MEANS: usize = 80;

/// Starting values of the time constants, seconds.
const FAST_S: [f64; 3] = [0.2, 1.0, 4.0];
const SLOW_S: [f64; 3] = [10.0, 40.0, 200.0];

/// Parameters before those of the pairs: level, voltage over charge, series resistance.
const HEAD: usize = 3;

/// A readback of the pulse or of the relaxation, true values.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Mean {
    /// Its interval, seconds since the edge.
    pub(crate) from_s: f64,
    pub(crate) until_s: f64,
    pub(crate) volts: f64,
    /// Readbacks that were put together.
    pub(crate) count: f64,
}

/// A pulse with its relaxation.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Pulse {
    pub(crate) amperes: f64,
    pub(crate) length_s: f64,
    pub(crate) means: Vec<Mean>,
    /// How much the open-circuit voltage falls, volt per ampere hour, and how far that is
    /// trusted, as a share of a readback's resolution.
    pub(crate) slope: Option<(f64, f64)>,
    /// Voltage at rest before.
    pub(crate) rest_v: f64,
    /// How much of the variance of a readback its neighbours share, 0 to 1: it is averaged out by
    /// no number of them.
    pub(crate) shared: f64,
}

/// Puts neighbouring readbacks together, the longer after `origin_s` the more, so that every
/// decade of time weighs alike in the work and no detail is lost where the voltage moves fast.
pub(crate) fn put_together(readbacks: &[Mean], origin_s: f64) -> Vec<Mean> {
    let Some(last) = readbacks.last() else {
        return Vec::new();
    };
    let first_s = readbacks
        .first()
        .map_or(0.0, |first| first.until_s - origin_s)
        .max(1e-3);
    let growth = ((last.until_s - origin_s) / first_s).max(1.0 + 1e-9).ln() / number(MEANS);
    let mut together: Vec<Mean> = Vec::with_capacity(MEANS + 1);
    let mut place = f64::NAN;
    for readback in readbacks {
        let here = (((readback.until_s - origin_s) / first_s).ln() / growth).floor();
        match together.last_mut() {
            Some(mean) if (here - place).abs() < 0.5 => {
                let count = mean.count + readback.count;
                mean.volts += (readback.volts - mean.volts) * readback.count / count;
                mean.until_s = readback.until_s;
                mean.count = count;
            }
            Some(_) | None => together.push(*readback),
        }
        place = here;
    }
    together
}

impl Pulse {
    /// Fits with one pair or with two; the best of several starts.
    pub(crate) fn fit(&self, pairs: usize) -> Result<Fitted, FitError> {
        let slow: &[f64] = if pairs > 1 { &SLOW_S } else { &[f64::NAN] };
        let mut best = Err(FitError::NoConvergence);
        for fast_s in FAST_S {
            for slow_s in slow {
                let fitted = self.fit_from(pairs, [fast_s, *slow_s]);
                best = match (best, fitted) {
                    (Ok(best), Ok(fitted)) => Ok(better(best, fitted)),
                    (Err(_), fitted) => fitted,
                    (best, Err(_)) => best,
                };
            }
        }
        best.map(|fitted| ordered(fitted, pairs))
    }

    fn fit_from(&self, pairs: usize, time_constants_s: [f64; 2]) -> Result<Fitted, FitError> {
        let swing = self.swing();
        let mut start = vec![
            self.rest_v,
            self.slope.map_or(0.0, |slope| slope.0),
            0.5 * swing,
        ];
        for tau in time_constants_s.iter().take(pairs) {
            start.extend([0.25 * swing, tau.ln()]);
        }
        let tied = usize::from(self.slope.is_some());
        let residual = |parameters: &[f64], index: usize, slopes: &mut [f64]| {
            self.residual(parameters, index, slopes)
        };
        least_squares(&residual, self.means.len() + tied, &start)
    }

    /// How much better a mean is known than a single readback: the root of its count, or less where
    /// its readbacks share what they err by.
    fn root(&self, mean: &Mean) -> f64 {
        ((1.0 - self.shared) / mean.count + self.shared)
            .recip()
            .sqrt()
    }

    /// The fall in the pulse over its current, ohm.
    fn swing(&self) -> f64 {
        let in_pulse = self.means.iter().filter(|mean| self.holds(mean));
        let least = in_pulse
            .map(|mean| mean.volts)
            .fold(f64::INFINITY, f64::min);
        ((self.rest_v - least) / self.amperes).max(1e-6)
    }

    /// Whether a mean is of the pulse; its last sample stands at the very end of it.
    fn holds(&self, mean: &Mean) -> bool {
        0.5 * (mean.from_s + mean.until_s) < self.length_s
    }

    fn residual(&self, parameters: &[f64], index: usize, slopes: &mut [f64]) -> f64 {
        slopes.fill(0.0);
        let (&[level, per_ah, series, ref pairs @ ..], [by_level, by_ah, by_series, by_pairs @ ..]) =
            (parameters, slopes)
        else {
            return f64::NAN;
        };
        let Some(mean) = self.means.get(index) else {
            let Some((slope, weight)) = self.slope else {
                return f64::NAN;
            };
            *by_ah = weight;
            return weight * (per_ah - slope);
        };
        let root = self.root(mean);
        let in_pulse = self.holds(mean);
        let seconds = if in_pulse {
            0.5 * (mean.from_s + mean.until_s)
        } else {
            self.length_s
        };
        let delivered_ah = self.amperes * seconds / 3600.0;
        let through = if in_pulse { self.amperes } else { 0.0 };
        *by_level = root;
        *by_ah = -root * delivered_ah;
        *by_series = -root * through;
        let mut volts = level - per_ah * delivered_ah - through * series;
        for (pair, by_pair) in pairs.chunks_exact(2).zip(by_pairs.chunks_exact_mut(2)) {
            let (&[resistance, log_tau], [by_resistance, by_log_tau]) = (pair, by_pair) else {
                return f64::NAN;
            };
            let (share, by_log) = self.share(mean, log_tau.exp(), in_pulse);
            volts -= self.amperes * resistance * share;
            *by_resistance = -root * self.amperes * share;
            *by_log_tau = -root * self.amperes * resistance * by_log;
        }
        root * (volts - mean.volts)
    }

    /// How full a pair of this time constant is on the mean of an interval, and the slope of that
    /// by the logarithm of the time constant.
    fn share(&self, mean: &Mean, tau: f64, in_pulse: bool) -> (f64, f64) {
        let origin = if in_pulse { 0.0 } else { self.length_s };
        let (a, b) = (mean.from_s - origin, mean.until_s - origin);
        let (at_a, at_b) = ((-a / tau).exp(), (-b / tau).exp());
        let left = tau * (at_a - at_b) / (b - a);
        let by_log = (tau * (at_a - at_b) + a * at_a - b * at_b) / (b - a);
        if in_pulse {
            return (1.0 - left, -by_log);
        }
        let at_end = (-self.length_s / tau).exp();
        let full = 1.0 - at_end;
        (
            full * left,
            full * by_log - self.length_s / tau * at_end * left,
        )
    }
}

fn better(one: Fitted, other: Fitted) -> Fitted {
    if other.sum_of_squares < one.sum_of_squares {
        other
    } else {
        one
    }
}

/// The pairs in the order of their time constants.
fn ordered(fitted: Fitted, pairs: usize) -> Fitted {
    if pairs < 2 || fitted.parameter(HEAD + 1) <= fitted.parameter(HEAD + 3) {
        return fitted;
    }
    let order: Vec<usize> = (0..HEAD)
        .chain([HEAD + 2, HEAD + 3, HEAD, HEAD + 1])
        .collect();
    fitted.permuted(&order)
}
