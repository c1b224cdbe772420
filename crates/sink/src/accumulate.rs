//! Sums and moments that do not lose digits over millions of values.
//!
//! Compensated summation after Kahan in Neumaier's form (Z. angew. Math. Mech.
//! 54 (1974) 39), and running moments after Welford (Technometrics 4 (1962)
//! 419) on compensated sums.
//!
//! What it deliberately does not do: it filters nothing; a NaN put in comes out.

use serde::{Deserialize, Serialize};

/// A running sum whose error does not grow with the number of terms.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
pub struct Sum {
    sum: f64,
    compensation: f64,
}

impl Sum {
    /// An empty sum.
    pub const fn new() -> Self {
        Self {
            sum: 0.0,
            compensation: 0.0,
        }
    }

    /// Adds a term.
    pub fn add(&mut self, term: f64) {
        let total = self.sum + term;
        // What the addition dropped is recovered from the smaller operand.
        if self.sum.abs() >= term.abs() {
            self.compensation += (self.sum - total) + term;
        } else {
            self.compensation += (term - total) + self.sum;
        }
        self.sum = total;
    }

    /// The sum so far.
    pub fn value(&self) -> f64 {
        self.sum + self.compensation
    }
}

impl Extend<f64> for Sum {
    fn extend<I: IntoIterator<Item = f64>>(&mut self, terms: I) {
        for term in terms {
            self.add(term);
        }
    }
}

impl FromIterator<f64> for Sum {
    fn from_iter<I: IntoIterator<Item = f64>>(terms: I) -> Self {
        let mut sum = Self::new();
        sum.extend(terms);
        sum
    }
}

/// Number, mean and spread of values as they come, in one pass.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
pub struct Moments {
    number: usize,
    mean: Sum,
    squares: Sum,
}

impl Moments {
    /// No values yet.
    pub const fn new() -> Self {
        Self {
            number: 0,
            mean: Sum::new(),
            squares: Sum::new(),
        }
    }

    /// Adds a value.
    pub fn add(&mut self, value: f64) {
        self.number += 1;
        let before = value - self.mean.value();
        self.mean.add(before / count(self.number));
        let after = value - self.mean.value();
        self.squares.add(before * after);
    }

    /// How many values there were.
    pub const fn number(&self) -> usize {
        self.number
    }

    /// Their mean; `None` without a value.
    pub fn mean(&self) -> Option<f64> {
        (self.number > 0).then(|| self.mean.value())
    }

    /// Their experimental standard deviation (divisor n - 1, JCGM 100 4.2.2);
    /// `None` for fewer than two values.
    pub fn standard_deviation(&self) -> Option<f64> {
        (self.number > 1).then(|| (self.squares.value() / count(self.number - 1)).sqrt())
    }
}

impl Extend<f64> for Moments {
    fn extend<I: IntoIterator<Item = f64>>(&mut self, values: I) {
        for value in values {
            self.add(value);
        }
    }
}

impl FromIterator<f64> for Moments {
    fn from_iter<I: IntoIterator<Item = f64>>(values: I) -> Self {
        let mut moments = Self::new();
        moments.extend(values);
        moments
    }
}

/// The lag-1 autocorrelation coefficient of values in their order, about their
/// mean; `None` for fewer than two values or values that are all the same.
///
/// Neighbouring readings that agree more than chance would have it make the
/// standard deviation of their mean too small; this is how it shows.
pub fn lag_one_autocorrelation(values: &[f64]) -> Option<f64> {
    let mean = values.iter().copied().collect::<Moments>().mean()?;
    let products: Sum = values
        .iter()
        .zip(values.iter().skip(1))
        .map(|(value, next)| (value - mean) * (next - mean))
        .collect();
    let squares: Sum = values.iter().map(|value| (value - mean).powi(2)).collect();
    (squares.value() > 0.0).then(|| products.value() / squares.value())
}

/// A number of things as a float, exact below 2^53.
#[expect(clippy::cast_precision_loss, reason = "no record holds 2^53 readings")]
pub(crate) const fn count(number: usize) -> f64 {
    number as f64
}

#[cfg(test)]
mod tests;
