//! Weighted least squares: straight lines and low polynomials, with their
//! covariance.
//!
//! The abscissa is centred and scaled before a QR decomposition, so that the
//! result does not depend on where zero lies; coefficients are then given about
//! any reference abscissa the caller wants. Covariances follow JCGM 100:2008,
//! H.3: offset and slope are correlated, and a prediction that forgets it is
//! wrong by a factor.
//!
//! What it deliberately does not do: no robust fitting and no dropping of
//! outliers (a point that does not fit is a finding, not noise), no errors in
//! the abscissa (the caller adds them by the slope).

use nalgebra::{DMatrix, DVector};
use statrs::distribution::{ContinuousCDF, FisherSnedecor};

use crate::accumulate::{Sum, count};
use crate::uncertainty::{DegreesOfFreedom, Estimate};

/// A measured point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Point {
    /// Abscissa, taken as exact.
    pub x: f64,
    /// Ordinate.
    pub y: f64,
    /// Standard uncertainty of the ordinate; what it means is said by
    /// [`Weights`].
    pub u: f64,
}

/// What is known about the spread of the points.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Weights {
    /// All points are equally good and nothing is known of how good: `u` is not
    /// looked at, the residuals tell the spread.
    Equal,
    /// The points' `u` are right relative to each other; the residuals tell
    /// their common factor.
    Relative,
    /// The points' `u` are known: the covariance follows from them, and is
    /// enlarged by the Birge ratio where the residuals are larger than they
    /// would allow.
    Known,
}

/// The form of the fitted function.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Form {
    /// y = b x.
    ThroughOrigin,
    /// A polynomial of this degree: 0 a constant, 1 a straight line.
    Polynomial(u8),
}

/// Why a fit is not possible.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum RegressionError {
    /// Fewer points than the form needs to leave a residual.
    #[error(
        "{points} points are too few for {parameters} parameters; take at least one more than parameters"
    )]
    TooFewPoints {
        /// Points given.
        points: usize,
        /// Parameters of the form.
        parameters: usize,
    },
    /// The abscissas do not tell the parameters apart.
    #[error("the points lie at too few different abscissas; spread them over the range")]
    Degenerate,
    /// A point that is not finite, or an uncertainty that is not above zero.
    #[error(
        "point {index} is not finite or has an uncertainty that is not above zero; correct or remove it"
    )]
    BadPoint {
        /// Its index, from 0.
        index: usize,
    },
}

/// A fitted function.
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    form: Form,
    centre: f64,
    scale: f64,
    coefficients: DVector<f64>,
    covariance: DMatrix<f64>,
    residuals: Vec<f64>,
    chi_square: f64,
    freedom: usize,
}

impl Form {
    fn parameters(self) -> usize {
        match self {
            Self::ThroughOrigin => 1,
            Self::Polynomial(degree) => usize::from(degree) + 1,
        }
    }

    /// The basis functions at a scaled abscissa.
    fn row(self, t: f64) -> Vec<f64> {
        match self {
            Self::ThroughOrigin => vec![t],
            Self::Polynomial(degree) => {
                (0..=i32::from(degree)).map(|power| t.powi(power)).collect()
            }
        }
    }

    /// The basis functions' derivatives at a scaled abscissa.
    fn derivative(self, t: f64) -> Vec<f64> {
        match self {
            Self::ThroughOrigin => vec![1.0],
            Self::Polynomial(degree) => (0..=i32::from(degree))
                .map(|power| match power {
                    0 => 0.0,
                    power => f64::from(power) * t.powi(power - 1),
                })
                .collect(),
        }
    }
}

/// Fits a form to points by weighted least squares.
///
/// # Errors
/// [`RegressionError`] for too few points, points at one abscissa, or points
/// that are no numbers.
pub fn fit(points: &[Point], form: Form, weights: Weights) -> Result<Fit, RegressionError> {
    let parameters = form.parameters();
    // Known uncertainties need no residual to tell them.
    let exact = points.len() == parameters && weights == Weights::Known;
    if points.len() <= parameters && !exact {
        return Err(RegressionError::TooFewPoints {
            points: points.len(),
            parameters,
        });
    }
    let weighed = !matches!(weights, Weights::Equal);
    if let Some(index) = points.iter().position(|point| {
        !(point.x.is_finite() && point.y.is_finite())
            || weighed && !(point.u > 0.0 && point.u.is_finite())
    }) {
        return Err(RegressionError::BadPoint { index });
    }
    let root = |point: &Point| if weighed { 1.0 / point.u } else { 1.0 };
    let (centre, scale) = frame(points, form)?;
    let rows: Vec<f64> = points
        .iter()
        .flat_map(|point| {
            let root = root(point);
            form.row((point.x - centre) / scale)
                .into_iter()
                .map(move |value| value * root)
        })
        .collect();
    let design = DMatrix::from_row_slice(points.len(), parameters, &rows);
    let ordinates = DVector::from_iterator(
        points.len(),
        points.iter().map(|point| point.y * root(point)),
    );
    let (coefficients, inverse) = solve(&design, &ordinates)?;
    let mut result = Fit {
        form,
        centre,
        scale,
        coefficients,
        covariance: inverse,
        residuals: Vec::new(),
        chi_square: 0.0,
        freedom: points.len() - parameters,
    };
    result.residuals = points
        .iter()
        .map(|point| point.y - result.value(point.x))
        .collect();
    result.chi_square = points
        .iter()
        .zip(&result.residuals)
        .map(|(point, residual)| (residual * root(point)).powi(2))
        .collect::<Sum>()
        .value();
    let spread = if exact {
        1.0
    } else {
        result.chi_square / count(result.freedom)
    };
    result.covariance *= match weights {
        Weights::Equal | Weights::Relative => spread,
        Weights::Known => spread.max(1.0),
    };
    Ok(result)
}

/// Where to put zero and one of the scaled abscissa.
fn frame(points: &[Point], form: Form) -> Result<(f64, f64), RegressionError> {
    let mean = points.iter().map(|point| point.x).collect::<Sum>().value() / count(points.len());
    let centre = match form {
        Form::ThroughOrigin => 0.0,
        Form::Polynomial(_) => mean,
    };
    let scale = points
        .iter()
        .map(|point| (point.x - centre).abs())
        .fold(0.0, f64::max);
    if scale > 0.0 {
        Ok((centre, scale))
    } else if form == Form::Polynomial(0) {
        Ok((centre, 1.0))
    } else {
        Err(RegressionError::Degenerate)
    }
}

/// The coefficients and the inverse of the normal matrix, by QR.
fn solve(
    design: &DMatrix<f64>,
    ordinates: &DVector<f64>,
) -> Result<(DVector<f64>, DMatrix<f64>), RegressionError> {
    let decomposition = design.clone().qr();
    let (q, r) = (decomposition.q(), decomposition.r());
    let diagonal = r.diagonal();
    let largest = diagonal.amax();
    if diagonal.iter().any(|value| value.abs() <= largest * 1e-12) {
        return Err(RegressionError::Degenerate);
    }
    let mut coefficients = r
        .solve_upper_triangular(&(q.transpose() * ordinates))
        .ok_or(RegressionError::Degenerate)?;
    // One step of refinement: the residual of the first solution is fitted too.
    let rest = ordinates - design * &coefficients;
    coefficients += r
        .solve_upper_triangular(&(q.transpose() * rest))
        .ok_or(RegressionError::Degenerate)?;
    let identity = DMatrix::identity(r.nrows(), r.ncols());
    let inverse = r
        .solve_upper_triangular(&identity)
        .ok_or(RegressionError::Degenerate)?;
    Ok((coefficients, &inverse * inverse.transpose()))
}

impl Fit {
    /// The function's value at an abscissa.
    pub fn value(&self, x: f64) -> f64 {
        let row = DVector::from_vec(self.form.row(self.scaled(x)));
        self.coefficients.dot(&row)
    }

    /// The function's value at an abscissa with the standard uncertainty of the
    /// fit there (all covariances taken in; not the spread of a single new
    /// observation).
    pub fn predict(&self, x: f64) -> Estimate {
        self.estimate(&DVector::from_vec(self.form.row(self.scaled(x))))
    }

    /// As [`Self::predict`] between two abscissas; beyond them the function is
    /// carried on by its tangent at the nearer one, and so is its uncertainty.
    pub fn predict_carried_on(&self, x: f64, (low, high): (f64, f64)) -> Estimate {
        let within = self.scaled(x.clamp(low, high));
        let row = DVector::from_vec(self.form.row(within))
            + DVector::from_vec(self.form.derivative(within)) * (self.scaled(x) - within);
        self.estimate(&row)
    }

    /// The function's slope at an abscissa with its standard uncertainty.
    pub fn slope(&self, x: f64) -> Estimate {
        let row = DVector::from_vec(self.form.derivative(self.scaled(x))) / self.scale;
        self.estimate(&row)
    }

    fn scaled(&self, x: f64) -> f64 {
        (x - self.centre) / self.scale
    }

    /// A linear combination of the coefficients.
    fn estimate(&self, row: &DVector<f64>) -> Estimate {
        let variance = row.dot(&(&self.covariance * row));
        Estimate {
            value: self.coefficients.dot(row),
            standard_uncertainty: variance.max(0.0).sqrt(),
            degrees_of_freedom: self.degrees_of_freedom(),
        }
    }

    /// The coefficients of powers of (x - reference), lowest first, and their
    /// covariance. For [`Form::ThroughOrigin`] the one coefficient is the slope
    /// and the reference is not looked at.
    pub fn coefficients_about(&self, reference: f64) -> (Vec<f64>, DMatrix<f64>) {
        let transform = match self.form {
            Form::ThroughOrigin => DMatrix::from_element(1, 1, 1.0 / self.scale),
            Form::Polynomial(_) => self.transform(reference),
        };
        let coefficients = &transform * &self.coefficients;
        let covariance = &transform * &self.covariance * transform.transpose();
        (coefficients.iter().copied().collect(), covariance)
    }

    /// From coefficients of t = (x - centre)/scale to those of x - reference,
    /// by the binomial theorem.
    fn transform(&self, reference: f64) -> DMatrix<f64> {
        let size = self.coefficients.len();
        let shift = (reference - self.centre) / self.scale;
        DMatrix::from_fn(size, size, |to, from| {
            if from < to {
                return 0.0;
            }
            binomial(from, to) * power(shift, from - to) / power(self.scale, to)
        })
    }

    /// Observed minus fitted, in the points' order.
    pub fn residuals(&self) -> &[f64] {
        &self.residuals
    }

    /// The weighted sum of squared residuals: with [`Weights::Equal`] the plain
    /// one.
    pub const fn chi_square(&self) -> f64 {
        self.chi_square
    }

    /// The residual standard deviation (in units of the weights).
    pub fn residual_deviation(&self) -> f64 {
        (self.chi_square / count(self.freedom)).sqrt()
    }

    /// Points less parameters; 0 where the points determine the function and nothing is left to
    /// tell their spread.
    pub fn degrees_of_freedom(&self) -> DegreesOfFreedom {
        DegreesOfFreedom::finite(count(self.freedom))
    }

    /// The form that was fitted.
    pub const fn form(&self) -> Form {
        self.form
    }
}

fn power(base: f64, exponent: usize) -> f64 {
    (0..exponent).fold(1.0, |product, _| product * base)
}

fn binomial(n: usize, k: usize) -> f64 {
    (0..k).fold(1.0, |product, step| {
        product * count(n - step) / count(step + 1)
    })
}

/// Whether a larger form earns its extra parameters.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FTest {
    /// The ratio of the residual variance removed per extra parameter to that
    /// left.
    pub ratio: f64,
    /// How likely so large a ratio is if the smaller form is right.
    pub probability: f64,
}

/// The extra-sum-of-squares F-test of two nested fits to the same points;
/// `None` if the second has no more parameters than the first.
pub fn f_test(smaller: &Fit, larger: &Fit) -> Option<FTest> {
    let extra = smaller.freedom.checked_sub(larger.freedom)?;
    let distribution = FisherSnedecor::new(count(extra), count(larger.freedom)).ok()?;
    let removed = (smaller.chi_square - larger.chi_square).max(0.0) / count(extra);
    let left = larger.chi_square / count(larger.freedom);
    if left <= 0.0 {
        // A perfect larger fit: everything it removed is significant, nothing
        // removed is nothing.
        let probability = if removed > 0.0 { 0.0 } else { 1.0 };
        return Some(FTest {
            ratio: if removed > 0.0 { f64::MAX } else { 0.0 },
            probability,
        });
    }
    let ratio = removed / left;
    Some(FTest {
        ratio,
        probability: distribution.sf(ratio),
    })
}

#[cfg(test)]
mod tests;
