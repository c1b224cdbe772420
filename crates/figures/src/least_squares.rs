//! Nonlinear least squares with the covariance of what was fitted.
//!
//! Levenberg and Marquardt's method (library `levenberg-marquardt`, after MINPACK), then the
//! covariance `s^2 (J'J)^-1` of the linearised model, by QR on columns scaled to unit length.
//! It holds where the residuals are independent and the model nearly linear within the
//! uncertainty; who knows better adds to it.
//!
//! What it deliberately does not do: choose a start. A sum of exponentials has more than one
//! minimum, and the caller knows its own data.

use levenberg_marquardt::{LeastSquaresProblem, LevenbergMarquardt};
use nalgebra::{DMatrix, DVector, Dyn, Owned};
use sink::uncertainty::DegreesOfFreedom;

/// Columns of the Jacobian nearer to dependent than this cannot be told apart.
const DEPENDENT: f64 = 1e-10;

/// How far a first step may go, in lengths of the scaled start: where a long one does not
/// converge, a short one may.
const STEP_BOUNDS: [f64; 3] = [100.0, 1.0, 0.1];

/// Evaluations, in numbers of parameters.
const PATIENCE: usize = 400;

/// What stands for a residual that is not finite: so large that the step is taken back.
const FAR: f64 = 1e120;

/// A residual, model less observation, and its slopes by every parameter.
///
/// Called with the parameters, the index of the observation, and where the slopes go.
pub(crate) type Residual<'a> = &'a dyn Fn(&[f64], usize, &mut [f64]) -> f64;

/// What a fit gave.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Fitted {
    pub(crate) parameters: Vec<f64>,
    covariance: DMatrix<f64>,
    /// Sum of the squared residuals.
    pub(crate) sum_of_squares: f64,
    /// Observations less parameters.
    freedom: usize,
    observations: usize,
}

/// Why there is no fit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub(crate) enum FitError {
    #[error("{observations} readings are too few for {parameters} parameters")]
    TooFew {
        observations: usize,
        parameters: usize,
    },
    #[error("the fit does not converge")]
    NoConvergence,
    #[error("the data cannot tell the parameters apart")]
    Dependent,
}

/// Fits the parameters from a start.
pub(crate) fn least_squares(
    residual: Residual<'_>,
    observations: usize,
    start: &[f64],
) -> Result<Fitted, FitError> {
    let freedom = observations
        .checked_sub(start.len())
        .filter(|freedom| *freedom > 0)
        .ok_or(FitError::TooFew {
            observations,
            parameters: start.len(),
        })?;
    let problem = STEP_BOUNDS
        .into_iter()
        .find_map(|bound| solve(residual, observations, start, bound))
        .ok_or(FitError::NoConvergence)?;
    let jacobian = problem.jacobian().ok_or(FitError::NoConvergence)?;
    let residuals = problem.residuals().ok_or(FitError::NoConvergence)?;
    let sum_of_squares = residuals.norm_squared();
    let inverse = inverse_of_normal(&jacobian).ok_or(FitError::Dependent)?;
    Ok(Fitted {
        parameters: problem.parameters.iter().copied().collect(),
        covariance: inverse * (sum_of_squares / number(freedom)),
        sum_of_squares,
        freedom,
        observations,
    })
}

/// One run of the method; `None` if it does not converge.
fn solve<'a>(
    residual: Residual<'a>,
    observations: usize,
    start: &[f64],
    step_bound: f64,
) -> Option<Problem<'a>> {
    let problem = Problem {
        residual,
        observations,
        parameters: DVector::from_column_slice(start),
    };
    let (problem, report) = LevenbergMarquardt::new()
        .with_patience(PATIENCE)
        .with_stepbound(step_bound)
        .minimize(problem);
    // A bound at the limit of the arithmetic is a success here: nothing better can be had.
    let done = report.termination.was_successful() || report.termination.was_usage_issue();
    let finite = problem.parameters.iter().all(|value| value.is_finite());
    (done && finite).then_some(problem)
}

impl Fitted {
    /// A parameter; NaN beyond them.
    pub(crate) fn parameter(&self, index: usize) -> f64 {
        self.parameters.get(index).copied().unwrap_or(f64::NAN)
    }

    /// The covariance of two parameters.
    pub(crate) fn covariance(&self, one: usize, other: usize) -> f64 {
        self.covariance
            .get((one, other))
            .copied()
            .unwrap_or(f64::NAN)
    }

    /// The standard uncertainty of a parameter.
    pub(crate) fn standard(&self, index: usize) -> f64 {
        self.covariance(index, index).max(0.0).sqrt()
    }

    /// The same with the parameters in another order.
    pub(crate) fn permuted(&self, order: &[usize]) -> Self {
        let size = order.len();
        let at = |place: usize| order.get(place).copied().unwrap_or(usize::MAX);
        Self {
            parameters: order.iter().map(|&index| self.parameter(index)).collect(),
            covariance: DMatrix::from_fn(size, size, |row, column| {
                self.covariance(at(row), at(column))
            }),
            ..self.clone()
        }
    }

    /// Observations less parameters.
    pub(crate) fn degrees_of_freedom(&self) -> DegreesOfFreedom {
        DegreesOfFreedom::finite(number(self.freedom))
    }

    /// Root of the mean of the squared residuals.
    pub(crate) fn residual_rms(&self) -> f64 {
        (self.sum_of_squares / number(self.observations)).sqrt()
    }

    /// How probable so large an improvement over a smaller model is if the smaller one is right:
    /// the extra-sum-of-squares F-test. `None` where it cannot be said.
    pub(crate) fn chance_against(&self, smaller: &Self) -> Option<f64> {
        use statrs::distribution::{ContinuousCDF, FisherSnedecor};
        let extra = number(smaller.freedom.checked_sub(self.freedom)?);
        let left = self.sum_of_squares / number(self.freedom);
        let removed = (smaller.sum_of_squares - self.sum_of_squares).max(0.0) / extra;
        let distribution = FisherSnedecor::new(extra, number(self.freedom)).ok()?;
        Some(distribution.sf(removed / left.max(f64::MIN_POSITIVE)))
    }
}

struct Problem<'a> {
    residual: Residual<'a>,
    observations: usize,
    parameters: DVector<f64>,
}

impl LeastSquaresProblem<f64, Dyn, Dyn> for Problem<'_> {
    type ResidualStorage = Owned<f64, Dyn>;
    type JacobianStorage = Owned<f64, Dyn, Dyn>;
    type ParameterStorage = Owned<f64, Dyn>;

    fn set_params(&mut self, parameters: &DVector<f64>) {
        self.parameters.copy_from(parameters);
    }

    fn params(&self) -> DVector<f64> {
        self.parameters.clone()
    }

    fn residuals(&self) -> Option<DVector<f64>> {
        let mut slopes = vec![0.0; self.parameters.len()];
        let residuals = DVector::from_iterator(
            self.observations,
            (0..self.observations)
                .map(|index| (self.residual)(self.parameters.as_slice(), index, &mut slopes))
                .map(|value| if value.is_finite() { value } else { FAR }),
        );
        Some(residuals)
    }

    fn jacobian(&self) -> Option<DMatrix<f64>> {
        let count = self.parameters.len();
        let mut rows = vec![0.0; self.observations * count];
        for (index, row) in rows.chunks_exact_mut(count).enumerate() {
            (self.residual)(self.parameters.as_slice(), index, row);
        }
        rows.iter()
            .all(|value| value.is_finite())
            .then(|| DMatrix::from_row_slice(self.observations, count, &rows))
    }
}

/// The inverse of `J'J`, by QR on columns of unit length; `None` if they depend on each other.
fn inverse_of_normal(jacobian: &DMatrix<f64>) -> Option<DMatrix<f64>> {
    let lengths: Vec<f64> = jacobian.column_iter().map(|column| column.norm()).collect();
    if lengths.iter().any(|length| *length <= 0.0) {
        return None;
    }
    let mut scaled = jacobian.clone();
    for (mut column, length) in scaled.column_iter_mut().zip(&lengths) {
        column /= *length;
    }
    let r = scaled.qr().r();
    if r.diagonal().iter().any(|value| value.abs() <= DEPENDENT) {
        return None;
    }
    let mut inverse = r.solve_upper_triangular(&DMatrix::identity(r.nrows(), r.ncols()))?;
    for (mut row, length) in inverse.row_iter_mut().zip(&lengths) {
        row /= *length;
    }
    Some(&inverse * inverse.transpose())
}

/// A number of things, exact below 2^53.
#[expect(clippy::cast_precision_loss, reason = "no record holds 2^53 readings")]
pub(crate) const fn number(count: usize) -> f64 {
    count as f64
}
