//! How far a current or a voltage goes to and fro within a stretch: what a bent curve's correction
//! of the counters needs, since a counter tells a mean and not what it is the mean of.

use sink::correction::Curve;

/// The spread of one quantity over time, in true or nominal ampere or volt.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(crate) struct Spread {
    /// About this value, so that squares do not swallow small differences.
    centre: Option<f64>,
    seconds: f64,
    first: f64,
    second: f64,
    within: f64,
}

impl Spread {
    /// Takes an interval's mean and extremes in.
    pub(crate) fn add(&mut self, seconds: f64, mean: f64, [least, largest]: [f64; 2]) {
        let away = mean - *self.centre.get_or_insert(mean);
        self.seconds += seconds;
        self.first += away * seconds;
        self.second += away * away * seconds;
        // Popoviciu: no variance within two extremes is larger.
        self.within += (largest - least).powi(2) / 4.0 * seconds;
    }

    /// The time integral of the squared deviation from the mean, at most.
    pub(crate) fn squares(&self) -> f64 {
        if self.seconds <= 0.0 {
            return 0.0;
        }
        let between = self.second - self.first * self.first / self.seconds;
        between.max(0.0) + self.within
    }

    /// By how much the mean of the curve, times time, may differ from the curve at the mean.
    pub(crate) fn hides(&self, curve: Curve) -> f64 {
        curve.bend().map_or(0.0, |bend| {
            per_unit(bend.curvature_ppb_per_unit).abs() * self.squares()
        })
    }
}

#[expect(
    clippy::cast_precision_loss,
    reason = "a curvature is far below 2^53 parts in 10^9"
)]
fn per_unit(curvature_ppb: i64) -> f64 {
    curvature_ppb as f64 * 1e-9
}

#[cfg(test)]
mod tests {
    use sink::correction::{Bend, Curve};

    use super::Spread;

    /// 0.002 / A of curvature; half of the time 0 A, half of it 3 A: 0.002 * 2.25 A^2 for 100 s.
    #[test]
    fn a_current_that_goes_to_and_fro_hides_its_variance_times_the_curvature() {
        let bend = Bend {
            curvature_ppb_per_unit: -2_000_000,
            from_micro: 0,
            to_micro: 3_000_000,
        };
        let curve = Curve::bent(0, 0, bend).unwrap();
        let mut spread = Spread::default();
        assert!(spread.hides(curve).abs() < 1e-15);
        spread.add(50.0, 0.0, [0.0, 0.0]);
        assert!(spread.hides(curve).abs() < 1e-15);
        spread.add(50.0, 3.0, [3.0, 3.0]);
        assert!((spread.hides(curve) - 0.45).abs() < 1e-12);
        assert!(spread.hides(Curve::IDENTITY).abs() < 1e-15);
        // The same seen as one interval: the extremes are the most there can be.
        let mut whole = Spread::default();
        whole.add(100.0, 1.5, [0.0, 3.0]);
        assert!((whole.hides(curve) - 0.45).abs() < 1e-12);
    }
}
