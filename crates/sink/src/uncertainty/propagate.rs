//! Propagation of uncertainty through a model given as a function.

use nalgebra::DMatrix;

/// Values computed from uncertain inputs, with their covariance.
#[derive(Debug, Clone, PartialEq)]
pub struct Propagated {
    /// The outputs at the inputs' values.
    pub values: Vec<f64>,
    /// The sensitivity of each output (row) to each input (column).
    pub sensitivities: DMatrix<f64>,
    /// The covariance of the outputs.
    pub covariance: DMatrix<f64>,
}

/// Why a propagation is not possible.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum PropagateError {
    /// The covariance of the inputs is not a square of their number.
    #[error(
        "{inputs} inputs need a covariance of {inputs} rows and columns, not {rows} by {columns}"
    )]
    Shape {
        /// Number of inputs.
        inputs: usize,
        /// Rows given.
        rows: usize,
        /// Columns given.
        columns: usize,
    },
    /// The model's value at or near the inputs is not finite.
    #[error("the model is not finite near its inputs; check them")]
    NotFinite,
}

impl Propagated {
    /// The standard uncertainty of an output; `None` for an index beyond them.
    pub fn standard_uncertainty(&self, output: usize) -> Option<f64> {
        self.covariance
            .get((output, output))
            .map(|variance| variance.max(0.0).sqrt())
    }

    /// The correlation coefficient of two outputs; `None` for an index beyond
    /// them or an output without uncertainty.
    pub fn correlation(&self, one: usize, other: usize) -> Option<f64> {
        let covariance = self.covariance.get((one, other))?;
        let scale = self.standard_uncertainty(one)? * self.standard_uncertainty(other)?;
        (scale > 0.0).then(|| covariance / scale)
    }
}

/// The law of propagation of uncertainty for correlated inputs (JCGM 100
/// equation 13; JCGM 102 for several outputs), with sensitivities from central
/// differences inside the inputs' own uncertainty (JCGM 100 5.1.3, note 2),
/// extrapolated to a vanishing step.
///
/// # Errors
/// [`PropagateError`] for a covariance of the wrong shape or a model that is not
/// finite near the inputs.
pub fn propagate(
    model: impl Fn(&[f64]) -> Vec<f64>,
    inputs: &[f64],
    covariance: &DMatrix<f64>,
) -> Result<Propagated, PropagateError> {
    if covariance.nrows() != inputs.len() || covariance.ncols() != inputs.len() {
        return Err(PropagateError::Shape {
            inputs: inputs.len(),
            rows: covariance.nrows(),
            columns: covariance.ncols(),
        });
    }
    let values = model(inputs);
    let mut sensitivities = DMatrix::zeros(values.len(), inputs.len());
    for (column, (&input, variance)) in inputs.iter().zip(covariance.diagonal().iter()).enumerate()
    {
        let step = step(input, variance.sqrt());
        let slopes = slopes(&model, inputs, column, step);
        for (row, slope) in slopes.into_iter().enumerate() {
            if let Some(place) = sensitivities.get_mut((row, column)) {
                *place = slope;
            }
        }
    }
    let result = &sensitivities * covariance * sensitivities.transpose();
    let finite = values
        .iter()
        .chain(result.iter())
        .all(|value| value.is_finite());
    if !finite {
        return Err(PropagateError::NotFinite);
    }
    Ok(Propagated {
        values,
        sensitivities,
        covariance: result,
    })
}

/// A step small against the uncertainty and large against the rounding of the
/// input.
fn step(input: f64, uncertainty: f64) -> f64 {
    let rounding = input.abs().max(f64::MIN_POSITIVE) * 1e-5;
    if uncertainty > 0.0 {
        (uncertainty / 4.0).max(rounding.min(uncertainty))
    } else {
        rounding.max(1e-9)
    }
}

/// Central differences at a step and at half of it, extrapolated (Richardson).
fn slopes(
    model: &impl Fn(&[f64]) -> Vec<f64>,
    inputs: &[f64],
    column: usize,
    step: f64,
) -> Vec<f64> {
    let difference = |step: f64| {
        let upper = model(&moved(inputs, &[(column, step)]));
        let lower = model(&moved(inputs, &[(column, -step)]));
        upper
            .into_iter()
            .zip(lower)
            .map(move |(upper, lower)| (upper - lower) / (2.0 * step))
            .collect::<Vec<f64>>()
    };
    difference(step)
        .into_iter()
        .zip(difference(step / 2.0))
        .map(|(wide, narrow)| (4.0 * narrow - wide) / 3.0)
        .collect()
}

/// The inputs with some of them moved.
fn moved(inputs: &[f64], moves: &[(usize, f64)]) -> Vec<f64> {
    let mut inputs = inputs.to_vec();
    for &(index, step) in moves {
        if let Some(input) = inputs.get_mut(index) {
            *input += step;
        }
    }
    inputs
}

/// What the second-order terms add to the variance of a nonlinear model of
/// uncorrelated, symmetrically distributed inputs (JCGM 100 5.1.2, note):
/// the sum over i, j of (f_ij^2 / 2 + f_i f_ijj) u_i^2 u_j^2, by differences
/// as wide as the uncertainties.
///
/// Where this is not small against the first-order variance, the Monte Carlo
/// method of JCGM 101 belongs beside the budget.
pub fn second_order_variance(
    model: impl Fn(&[f64]) -> f64,
    inputs: &[f64],
    uncertainties: &[f64],
) -> f64 {
    let at = |moves: &[(usize, f64)]| model(&moved(inputs, moves));
    let centre = at(&[]);
    let mut total = 0.0;
    for (i, &a) in uncertainties.iter().enumerate() {
        let first = (at(&[(i, a)]) - at(&[(i, -a)])) / 2.0;
        for (j, &b) in uncertainties.iter().enumerate() {
            let (second, third) = if i == j {
                (
                    at(&[(i, a)]) - 2.0 * centre + at(&[(i, -a)]),
                    (at(&[(i, 2.0 * a)]) - 2.0 * at(&[(i, a)]) + 2.0 * at(&[(i, -a)])
                        - at(&[(i, -2.0 * a)]))
                        / 2.0,
                )
            } else {
                let curve =
                    |a: f64| at(&[(i, a), (j, b)]) - 2.0 * at(&[(i, a)]) + at(&[(i, a), (j, -b)]);
                let mixed = at(&[(i, a), (j, b)]) - at(&[(i, a), (j, -b)]) - at(&[(i, -a), (j, b)])
                    + at(&[(i, -a), (j, -b)]);
                (mixed / 4.0, (curve(a) - curve(-a)) / 2.0)
            };
            total += second.powi(2) / 2.0 + first * third;
        }
    }
    total
}
