//! What is drawn as one line: samples with their extremes, in runs that a lost link parts.

/// An interval's least, mean and largest value at a place on the horizontal axis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Sample {
    pub(super) x: f64,
    pub(super) low: f64,
    pub(super) mean: f64,
    pub(super) high: f64,
    /// Readbacks in it.
    pub(super) weight: f64,
}

/// A limit that an interlock holds the trace to.
#[derive(Debug, Clone)]
pub(super) struct Limit {
    pub(super) value: f64,
    pub(super) name: String,
}

/// One line of a plot.
#[derive(Debug, Clone)]
pub(super) struct Trace {
    pub(super) name: &'static str,
    /// The unit of its values, without prefix.
    pub(super) unit: &'static str,
    pub(super) runs: Vec<Vec<Sample>>,
    pub(super) limits: Vec<Limit>,
    /// Zero belongs to the axis.
    pub(super) from_zero: bool,
}

impl Sample {
    /// In another unit.
    pub(super) fn times(&self, factor: f64) -> Self {
        Self {
            low: self.low * factor,
            mean: self.mean * factor,
            high: self.high * factor,
            ..*self
        }
    }

    /// Several in one; `None` for none.
    pub(super) fn joined(samples: &[Self]) -> Option<Self> {
        let weight: f64 = samples.iter().map(|sample| sample.weight).sum();
        if weight <= 0.0 {
            return None;
        }
        let mean = |of: fn(&Self) -> f64| {
            samples
                .iter()
                .map(|sample| of(sample) * sample.weight / weight)
                .sum()
        };
        Some(Self {
            x: mean(|sample| sample.x),
            low: samples.iter().map(|one| one.low).fold(f64::MAX, f64::min),
            mean: mean(|sample| sample.mean),
            high: samples.iter().map(|one| one.high).fold(f64::MIN, f64::max),
            weight,
        })
    }
}

impl Trace {
    /// Least and largest of all, limits that lie near included; `None` without a sample.
    pub(super) fn range(&self) -> Option<(f64, f64)> {
        let samples = || self.runs.iter().flatten();
        samples().next()?;
        let mut low = samples().map(|sample| sample.low).fold(f64::MAX, f64::min);
        let mut high = samples().map(|sample| sample.high).fold(f64::MIN, f64::max);
        if self.from_zero {
            low = low.min(0.0);
        }
        let reach = (high - low) * 0.4;
        let (bottom, top) = (low - reach, high + reach);
        for limit in &self.limits {
            if (bottom..=top).contains(&limit.value) {
                low = low.min(limit.value);
                high = high.max(limit.value);
            }
        }
        Some((low, high))
    }
}
