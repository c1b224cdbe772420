//! What is drawn as one line: samples with their extremes, in runs that a lost link parts.

/// An interval's least, mean and largest value at a place on the horizontal axis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Place on the horizontal axis, in its unit.
    pub x: f64,
    /// Least value.
    pub low: f64,
    /// Mean value.
    pub mean: f64,
    /// Largest value.
    pub high: f64,
    /// How many values it stands for.
    pub weight: f64,
}

/// A limit that a trace is held to.
#[derive(Debug, Clone)]
pub struct Limit {
    /// The value.
    pub value: f64,
    /// What is written at it.
    pub name: String,
}

/// One line of a plot.
#[derive(Debug, Clone)]
pub struct Trace {
    /// What is written at the line.
    pub name: &'static str,
    /// The unit of its values, without prefix.
    pub unit: &'static str,
    /// Its samples; between two runs there is no line.
    pub runs: Vec<Vec<Sample>>,
    /// Limits, drawn where they lie near.
    pub limits: Vec<Limit>,
    /// Zero belongs to the axis.
    pub from_zero: bool,
}

impl Sample {
    /// One value at a place.
    pub const fn at(x: f64, value: f64) -> Self {
        Self {
            x,
            low: value,
            mean: value,
            high: value,
            weight: 1.0,
        }
    }

    /// In another unit.
    #[must_use]
    pub fn times(&self, factor: f64) -> Self {
        Self {
            low: self.low * factor,
            mean: self.mean * factor,
            high: self.high * factor,
            ..*self
        }
    }

    /// Several in one; `None` for none.
    pub fn joined(samples: &[Self]) -> Option<Self> {
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
    pub fn range(&self) -> Option<(f64, f64)> {
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

/// Samples drawn together in twos or more, extremes kept.
pub fn thinned(run: &[Sample], together: usize) -> Vec<Sample> {
    run.chunks(together.max(1))
        .filter_map(Sample::joined)
        .collect()
}
