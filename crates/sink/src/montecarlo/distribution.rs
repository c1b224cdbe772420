//! The distributions that inputs are drawn from (JCGM 101 6.4).

use nalgebra::{DMatrix, DVector};
use serde::{Deserialize, Serialize};

use super::Random;
use crate::uncertainty::Estimate;

/// The distribution of one input, independent of the others.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Distribution {
    /// Normal.
    Normal {
        /// Mean.
        mean: f64,
        /// Standard deviation.
        deviation: f64,
    },
    /// All values within the bounds equally likely.
    Rectangular {
        /// Lower bound.
        low: f64,
        /// Upper bound.
        high: f64,
    },
    /// Symmetric triangle over the bounds.
    Triangular {
        /// Lower bound.
        low: f64,
        /// Upper bound.
        high: f64,
    },
    /// Scaled and shifted Student's t: the mean of a few readings.
    Student {
        /// Mean of the readings.
        mean: f64,
        /// Standard deviation of that mean.
        deviation: f64,
        /// Degrees of freedom, above zero.
        freedom: f64,
    },
}

impl Distribution {
    /// The distribution that JCGM 101 6.4 assigns to an estimate: normal for a
    /// standard uncertainty that is exactly known, Student's t for one from
    /// readings.
    pub fn of(estimate: Estimate) -> Self {
        let freedom = estimate.degrees_of_freedom.number();
        if freedom.is_finite() && freedom > 0.0 {
            Self::Student {
                mean: estimate.value,
                deviation: estimate.standard_uncertainty,
                freedom,
            }
        } else {
            Self::Normal {
                mean: estimate.value,
                deviation: estimate.standard_uncertainty,
            }
        }
    }

    /// A value of it.
    pub fn draw(&self, random: &mut Random) -> f64 {
        match *self {
            Self::Normal { mean, deviation } => mean + deviation * random.normal(),
            Self::Rectangular { low, high } => low + (high - low) * random.unit(),
            Self::Triangular { low, high } => {
                low + (high - low) * f64::midpoint(random.unit(), random.unit())
            }
            Self::Student {
                mean,
                deviation,
                freedom,
            } => mean + deviation * random.normal() / (random.chi_square(freedom) / freedom).sqrt(),
        }
    }
}

/// Correlated inputs with a joint normal distribution.
#[derive(Debug, Clone, PartialEq)]
pub struct JointNormal {
    means: DVector<f64>,
    factor: DMatrix<f64>,
}

/// A covariance that no random values have.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
#[error(
    "the covariance is not square of the inputs' number or not positive; check its correlations"
)]
pub struct NotPositive;

impl JointNormal {
    /// From means and their covariance.
    ///
    /// # Errors
    /// [`NotPositive`] for a covariance of the wrong shape or that is not
    /// positive (semi)definite.
    pub fn new(means: &[f64], covariance: &DMatrix<f64>) -> Result<Self, NotPositive> {
        if covariance.nrows() != means.len() || covariance.ncols() != means.len() {
            return Err(NotPositive);
        }
        // Eigenvectors instead of Cholesky: a fit whose parameters are fully
        // correlated has a singular covariance, and that is no error.
        let symmetric = (covariance + covariance.transpose()) * 0.5;
        let largest = symmetric.amax();
        let eigen = symmetric.symmetric_eigen();
        let sound = eigen
            .eigenvalues
            .iter()
            .all(|value| value.is_finite() && *value >= -1e-9 * largest);
        if !sound {
            return Err(NotPositive);
        }
        let roots = eigen.eigenvalues.map(|value| value.max(0.0).sqrt());
        Ok(Self {
            means: DVector::from_column_slice(means),
            factor: eigen.eigenvectors * DMatrix::from_diagonal(&roots),
        })
    }

    /// Values of all inputs.
    pub fn draw(&self, random: &mut Random) -> Vec<f64> {
        let normals = DVector::from_fn(self.means.len(), |_, _| random.normal());
        (&self.means + &self.factor * normals)
            .iter()
            .copied()
            .collect()
    }
}
