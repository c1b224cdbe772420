//! Compensated sums for ledgers that add up tens of millions of small amounts.
//!
//! Neumaier's variant of Kahan's summation (A. Neumaier, "Rundungsfehleranalyse einiger
//! Verfahren zur Summation endlicher Summen", ZAMM 54 (1974) 39-51): the error of the sum is
//! of the order of one rounding, whatever the number of terms.

/// A running sum that carries its own rounding error along.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Compensated {
    sum: f64,
    lost: f64,
}

impl Compensated {
    /// Adds an amount.
    pub fn add(&mut self, amount: f64) {
        let sum = self.sum + amount;
        self.lost += if self.sum.abs() >= amount.abs() {
            (self.sum - sum) + amount
        } else {
            (amount - sum) + self.sum
        };
        self.sum = sum;
    }

    /// The sum so far.
    pub fn value(self) -> f64 {
        self.sum + self.lost
    }
}

#[cfg(test)]
mod tests {
    use super::Compensated;

    #[test]
    fn a_small_amount_between_two_large_ones_is_kept() {
        let mut sum = Compensated::default();
        for amount in [1.0, 1e100, 1.0, -1e100] {
            sum.add(amount);
        }
        assert!((sum.value() - 2.0).abs() < f64::EPSILON);
    }

    #[test]
    fn ten_million_tenths_add_up_to_a_million() {
        let mut sum = Compensated::default();
        for _ in 0..10_000_000 {
            sum.add(0.1);
        }
        assert!((sum.value() - 1e6).abs() < 1e-9, "{}", sum.value());
    }
}
