//! From values to places on the paper, and where the ticks stand.

/// A straight scale.
#[derive(Debug, Clone, Copy)]
pub struct Scale {
    /// Least value.
    pub min: f64,
    /// Largest value.
    pub max: f64,
    /// Where `min` stands.
    pub from: f64,
    /// Where `max` stands.
    pub to: f64,
}

/// Places for ticks.
#[derive(Debug, Clone)]
pub struct Ticks {
    /// Ticks with a number.
    pub major: Vec<f64>,
    /// Shorter ones between.
    pub minor: Vec<f64>,
    /// Decimals that a label needs.
    pub decimals: usize,
}

/// No plot needs more ticks than this.
const TICKS_MAX: i32 = 400;

impl Scale {
    /// A scale that leaves some air around its values.
    pub fn around(low: f64, high: f64, (from, to): (f64, f64)) -> Self {
        let span = high - low;
        let air = if span > 0.0 {
            span * 0.07
        } else {
            (low.abs() * 0.05).max(1e-3)
        };
        Self {
            min: low - air,
            max: high + air,
            from,
            to,
        }
    }

    /// Where a value stands.
    pub fn place(&self, value: f64) -> f64 {
        let share = (value - self.min) / (self.max - self.min);
        self.from + share * (self.to - self.from)
    }

    /// Whether a value lies on the scale.
    pub fn contains(&self, value: f64) -> bool {
        (self.min..=self.max).contains(&value)
    }

    /// Ticks at 1, 2 or 5 times a power of ten, about as many as wanted.
    pub fn ticks(&self, wanted: f64) -> Ticks {
        let rough = (self.max - self.min) / wanted.max(1.0);
        if !(rough.is_finite() && rough > 0.0) {
            return Ticks {
                major: Vec::new(),
                minor: Vec::new(),
                decimals: 0,
            };
        }
        let exponent = rough.log10().floor();
        let power = 10_f64.powf(exponent);
        let (times, parts) = match rough / power {
            ratio if ratio <= 1.0 => (1.0, 5.0),
            ratio if ratio <= 2.0 => (2.0, 4.0),
            ratio if ratio <= 5.0 => (5.0, 5.0),
            _ => (10.0, 5.0),
        };
        let step = times * power;
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "the exponent of a finite f64 is small, and clamped"
        )]
        let decimals = (-step.log10().floor()).clamp(0.0, 9.0) as usize;
        Ticks {
            major: self.multiples(step),
            minor: self.multiples(step / parts),
            decimals,
        }
    }

    fn multiples(&self, step: f64) -> Vec<f64> {
        let first = (self.min / step).ceil();
        (0..TICKS_MAX)
            .map(|index| (first + f64::from(index)) * step)
            .take_while(|&value| value <= self.max)
            .collect()
    }
}

#[cfg(test)]
mod tests;
