//! An uncertainty budget: what contributes, how much, and what dominates.

use std::fmt;

use serde::{Deserialize, Serialize};
use statrs::distribution::{Continuous, ContinuousCDF, Normal};

use super::{DegreesOfFreedom, coverage_factor};
use crate::accumulate::Sum;

/// How a standard uncertainty was evaluated (JCGM 100 3.3.4).
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Evaluation {
    /// By statistics of readings.
    #[serde(rename = "A")]
    TypeA,
    /// By other means: a data sheet, a certificate, experience.
    #[serde(rename = "B")]
    TypeB,
}

/// How likely the values of an input are over the reach of its uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Shape {
    /// A normal distribution, or one that is near enough.
    #[default]
    Normal,
    /// All values within a bound are as likely, and none beyond (JCGM 100 4.3.7).
    Rectangular,
}

impl Shape {
    // Serde asks for a reference.
    #[expect(
        clippy::trivially_copy_pass_by_ref,
        reason = "the signature serde calls"
    )]
    fn is_normal(&self) -> bool {
        *self == Self::Normal
    }
}

/// One line of a budget.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Contribution {
    /// What it is, such as "reference meter".
    pub name: String,
    /// How its standard uncertainty was evaluated.
    pub evaluation: Evaluation,
    /// Its standard uncertainty, in its own unit.
    pub standard_uncertainty: f64,
    /// Change of the result per change of this input.
    pub sensitivity: f64,
    /// The degrees of freedom of its standard uncertainty.
    pub degrees_of_freedom: DegreesOfFreedom,
    /// Its distribution.
    #[serde(default, skip_serializing_if = "Shape::is_normal")]
    pub shape: Shape,
}

impl Contribution {
    /// A contribution already in the result's unit.
    pub fn new(
        name: impl Into<String>,
        evaluation: Evaluation,
        standard_uncertainty: f64,
        degrees_of_freedom: DegreesOfFreedom,
    ) -> Self {
        Self {
            name: name.into(),
            evaluation,
            standard_uncertainty,
            sensitivity: 1.0,
            degrees_of_freedom,
            shape: Shape::Normal,
        }
    }

    /// The same line, of which only a bound is known.
    #[must_use]
    pub const fn rectangular(mut self) -> Self {
        self.shape = Shape::Rectangular;
        self
    }

    /// The same line with another distribution.
    #[must_use]
    pub const fn shaped(mut self, shape: Shape) -> Self {
        self.shape = shape;
        self
    }

    /// The same line, its effect on the result times a factor.
    #[must_use]
    pub fn scaled(mut self, factor: f64) -> Self {
        self.sensitivity *= factor;
        self
    }

    /// Its share of the result's standard uncertainty, |c| u.
    pub fn share(&self) -> f64 {
        (self.sensitivity * self.standard_uncertainty).abs()
    }
}

/// Everything that contributes to the uncertainty of one result.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Budget {
    /// The lines.
    pub contributions: Vec<Contribution>,
    /// Correlations between lines: two indices and the coefficient.
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub correlations: Vec<(usize, usize, f64)>,
}

/// A combined standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Combined {
    /// The combined standard uncertainty.
    pub standard_uncertainty: f64,
    /// Its effective degrees of freedom.
    pub degrees_of_freedom: DegreesOfFreedom,
}

/// An expanded uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Expanded {
    /// The interval's half-width, k times the standard uncertainty.
    pub half_width: f64,
    /// k.
    pub coverage_factor: f64,
    /// The probability covered, such as 0.95.
    pub probability: f64,
}

/// A budget that makes no sense.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
pub enum BudgetError {
    /// A correlation with a line that is not there, or with itself.
    #[error("the correlation of lines {first} and {second} names no two lines of the budget")]
    NoSuchPair {
        /// First index.
        first: usize,
        /// Second index.
        second: usize,
    },
    /// A correlation coefficient outside -1 to 1, or several that contradict
    /// each other.
    #[error("the correlation coefficients contradict each other; each lies within -1 to 1")]
    Contradiction,
}

impl Budget {
    /// A budget of uncorrelated lines.
    pub const fn new(contributions: Vec<Contribution>) -> Self {
        Self {
            contributions,
            correlations: Vec::new(),
        }
    }

    /// The law of propagation of uncertainty (JCGM 100 equation 16) and the
    /// Welch-Satterthwaite formula (G.2b).
    ///
    /// The formula holds for uncorrelated lines only. With correlations the
    /// smallest degrees of freedom of any line stand in, which is never too
    /// optimistic; correlated outcomes of one fit belong into one line with
    /// the fit's own degrees of freedom.
    ///
    /// # Errors
    /// [`BudgetError`] for correlations that name no lines or contradict each
    /// other.
    pub fn combined(&self) -> Result<Combined, BudgetError> {
        let mut variance: Sum = self
            .contributions
            .iter()
            .map(|line| line.share().powi(2))
            .collect();
        for &(first, second, coefficient) in &self.correlations {
            let pair = (
                self.contributions.get(first),
                self.contributions.get(second),
            );
            let ((Some(one), Some(other)), true) = (pair, first != second) else {
                return Err(BudgetError::NoSuchPair { first, second });
            };
            if !(-1.0..=1.0).contains(&coefficient) {
                return Err(BudgetError::Contradiction);
            }
            let signed = |line: &Contribution| line.sensitivity * line.standard_uncertainty;
            variance.add(2.0 * signed(one) * signed(other) * coefficient);
        }
        let variance = variance.value();
        if variance < 0.0 {
            return Err(BudgetError::Contradiction);
        }
        Ok(Combined {
            standard_uncertainty: variance.sqrt(),
            degrees_of_freedom: self.effective_freedom(variance),
        })
    }

    fn effective_freedom(&self, variance: f64) -> DegreesOfFreedom {
        let lines = self.contributions.iter().filter(|line| line.share() > 0.0);
        if !self.correlations.is_empty() {
            let least = lines
                .map(|line| line.degrees_of_freedom.number())
                .fold(f64::INFINITY, f64::min);
            return DegreesOfFreedom(least);
        }
        // A line of infinite degrees adds nothing, one of none adds infinity.
        let denominator: f64 = lines
            .map(|line| line.share().powi(4) / line.degrees_of_freedom.number())
            .sum();
        if denominator > 0.0 {
            DegreesOfFreedom::finite(variance.powi(2) / denominator)
        } else {
            DegreesOfFreedom::INFINITE
        }
    }

    /// The expanded uncertainty for a probability; `None` where no coverage factor can be stated.
    ///
    /// A normal distribution with the combined standard uncertainty reaches too far where one
    /// rectangular line dominates: nothing lies beyond its bound. The largest rectangular line is
    /// therefore convolved with all others, which are taken together as one normal distribution
    /// (with Student's factor where their degrees of freedom are few): the central limit that
    /// JCGM 100 G.2 leans on, without asking it of the one line it fails for. JCGM 101 by closed
    /// form; where all lines are normal it is [`Combined::expanded`].
    ///
    /// # Errors
    /// None; a budget that cannot be combined gives `None`.
    pub fn expanded(&self, probability: f64) -> Option<Expanded> {
        let combined = self.combined().ok()?;
        let place = self
            .contributions
            .iter()
            .enumerate()
            .filter(|(_, line)| line.shape == Shape::Rectangular)
            .max_by(|(_, one), (_, other)| one.share().total_cmp(&other.share()))
            .map(|(place, _)| place);
        let (Some(place), true) = (place, self.correlations.is_empty()) else {
            return combined.expanded(probability);
        };
        let mut others = self.clone();
        let line = others.contributions.remove(place);
        let bound = line.share() * 3_f64.sqrt();
        let rest = others.combined().ok()?;
        let student = coverage_factor(probability, rest.degrees_of_freedom)?;
        let normal = coverage_factor(probability, DegreesOfFreedom::INFINITE)?;
        let sigma = rest.standard_uncertainty * student / normal;
        let half_width = rectangle_and_normal(probability, bound, sigma);
        (combined.standard_uncertainty > 0.0).then(|| Expanded {
            half_width,
            coverage_factor: half_width / combined.standard_uncertainty,
            probability,
        })
    }

    /// The line with the largest share; `None` for an empty budget.
    pub fn dominant(&self) -> Option<&Contribution> {
        self.contributions
            .iter()
            .max_by(|one, other| one.share().total_cmp(&other.share()))
    }
}

impl Combined {
    /// The expanded uncertainty for a probability; `None` where no coverage
    /// factor can be stated (fewer than one degree of freedom).
    pub fn expanded(&self, probability: f64) -> Option<Expanded> {
        let coverage_factor = coverage_factor(probability, self.degrees_of_freedom)?;
        Some(Expanded {
            half_width: coverage_factor * self.standard_uncertainty,
            coverage_factor,
            probability,
        })
    }
}

/// The half-width that covers a probability of the sum of a rectangular distribution of this
/// half-width and a normal one.
fn rectangle_and_normal(probability: f64, bound: f64, sigma: f64) -> f64 {
    if sigma <= 0.0 {
        return probability * bound;
    }
    if bound <= 1e-6 * sigma {
        return sigma * Normal::standard().inverse_cdf(f64::midpoint(1.0, probability));
    }
    let normal = Normal::standard();
    // The integral of the normal distribution function.
    let integral = |z: f64| z * normal.cdf(z) + normal.pdf(z);
    let covered = |half: f64| {
        let (above, below) = ((half + bound) / sigma, (half - bound) / sigma);
        sigma / bound * (integral(above) - integral(below)) - 1.0
    };
    let (mut low, mut high) = (0.0, bound + 10.0 * sigma);
    for _ in 0..60 {
        let middle = f64::midpoint(low, high);
        if covered(middle) < probability {
            low = middle;
        } else {
            high = middle;
        }
    }
    f64::midpoint(low, high)
}

/// A table, one line a contribution, with the combination below.
impl fmt::Display for Budget {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let width = self
            .contributions
            .iter()
            .map(|line| line.name.chars().count())
            .fold("combined".len(), usize::max);
        let head = ["type", "u", "c", "|c|u", "dof"];
        let [kind, u, c, share, freedom] = head;
        writeln!(
            f,
            "{:width$}  {kind}  {u:>11}  {c:>11}  {share:>11}  {freedom:>8}",
            ""
        )?;
        for line in &self.contributions {
            let kind = match line.evaluation {
                Evaluation::TypeA => "A",
                Evaluation::TypeB => "B",
            };
            writeln!(
                f,
                "{:width$}  {kind:4}  {:>11.4e}  {:>11.4e}  {:>11.4e}  {:>8}",
                line.name,
                line.standard_uncertainty,
                line.sensitivity,
                line.share(),
                line.degrees_of_freedom
            )?;
        }
        for (first, second, coefficient) in &self.correlations {
            writeln!(
                f,
                "correlation of lines {} and {}: {coefficient}",
                first + 1,
                second + 1
            )?;
        }
        match self.combined() {
            Ok(combined) => write!(
                f,
                "{:width$}  {:4}  {:>11}  {:>11}  {:>11.4e}  {:>8}",
                "combined", "", "", "", combined.standard_uncertainty, combined.degrees_of_freedom
            ),
            Err(error) => write!(f, "combined: {error}"),
        }
    }
}
