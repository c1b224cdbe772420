//! What a converter's step leaves in the mean of noisy samples.
//!
//! A converter answers the nearest code. Of a steady value without noise every sample falls short
//! by the same, and so does their mean: anything within half a step is as likely. Noise ahead of
//! the converter spreads the samples over several codes, and the mean of many comes the nearer to
//! the value the more codes they reach over: noise dithers.
//!
//! For normal noise of standard deviation `s` ahead of steps of `q` the error that is left in the
//! mean of arbitrarily many samples of a value `v` is a sum of waves (B. Widrow and I. Kollar,
//! Quantization Noise, 2008, from memory; it is the Fourier series of the sawtooth of rounding,
//! each wave weakened by the characteristic function of the noise):
//!
//! ```text
//! e(v) = sum over k >= 1 of (-1)^k q/(pi k) exp(-2 (pi k s/q)^2) sin(2 pi k v/q)
//! ```
//!
//! What it deliberately does not do: it says nothing of a converter whose steps are unequal.

use statrs::distribution::{ContinuousCDF, Normal};

use super::of_resolution;

/// Waves that are summed; what is left out without any noise is 0.1 % of the whole.
const WAVES: u16 = 500;

/// The standard uncertainty of the mean of many samples from the steps of their converter, where
/// each sample has this much noise (standard deviation): the root mean square of `e(v)` over all
/// `v`. `step / sqrt 12` without noise, 1 % of that with noise of 0.47 of a step.
pub fn of_dithered_step(step: f64, noise: f64) -> f64 {
    let whole = of_resolution(step);
    let share = noise / step;
    if !share.is_finite() || share <= 0.0 {
        return whole;
    }
    let left: f64 = (1..=WAVES)
        .map(f64::from)
        .map(|k| {
            let wave = step / (std::f64::consts::PI * k);
            let weakened = (-2.0 * (std::f64::consts::PI * k * share).powi(2)).exp();
            0.5 * (wave * weakened).powi(2)
        })
        .sum();
    left.sqrt().min(whole)
}

/// The noise of single samples (standard deviation), from the standard deviation of samples that
/// were rounded to steps.
///
/// Of many values rounding and noise together err by `s^2 + q^2/12`; what is common to all samples
/// of one value is [`of_dithered_step`] and does not spread them. Of readings that are means of
/// several samples it gives too little noise, never too much.
pub fn noise_before_steps(step: f64, deviation: f64) -> f64 {
    let whole = of_resolution(step);
    let spread = |noise: f64| {
        let left = of_dithered_step(step, noise);
        (noise * noise + whole * whole - left * left).sqrt()
    };
    let (mut low, mut high) = (0.0, deviation.max(0.0));
    for _ in 0..40 {
        let middle = f64::midpoint(low, high);
        if spread(middle) < deviation {
            low = middle;
        } else {
            high = middle;
        }
    }
    low
}

/// The mean range of so many normal samples, in standard deviations: twice the expected extreme,
/// by Blom's approximation (G. Blom, Statistical Estimates and Transformed Beta-Variables, 1958).
/// 0 for fewer than two.
pub fn expected_range(samples: f64) -> f64 {
    if !samples.is_finite() || samples < 2.0 {
        return 0.0;
    }
    let quantile = (samples - 0.375) / (samples + 0.25);
    2.0 * Normal::standard().inverse_cdf(quantile)
}

/// The noise of single samples (standard deviation), from the mean range of readings of several
/// samples each that were rounded to steps; `expected` is their [`expected_range`], and `values`
/// how many values anywhere between two codes they were taken at.
///
/// A range is a whole number of steps. Of one value it may be off by most of a step either way, over
/// many values it is right in the mean; each value adds a standard deviation of half a step at most
/// (that of a number which is one of two neighbours). One standard deviation is taken off: what is
/// not seen to dither, counts.
pub fn noise_of_range(range: f64, expected: f64, step: f64, values: f64) -> f64 {
    let doubt = 0.5 * step / values.max(1.0).sqrt();
    let noise = (range - doubt) / expected;
    if noise.is_finite() {
        noise.max(0.0)
    } else {
        0.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::accumulate::Moments;
    use crate::montecarlo::Random;

    /// Rounded noise by trial: many values, of each the mean of many samples.
    #[test]
    fn the_mean_of_noisy_samples_errs_as_the_series_says() {
        let mut random = Random::from_seed(7);
        for noise in [0.05, 0.15, 0.25, 0.35] {
            let (mut error, mut within) = (Moments::new(), Moments::new());
            for _ in 0..400 {
                let value = random.unit();
                let samples: Moments = (0..4_000)
                    .map(|_| (value + noise * random.normal()).round())
                    .collect();
                error.add((samples.mean().unwrap() - value).powi(2));
                within.add(samples.standard_deviation().unwrap().powi(2));
            }
            let deviation = within.mean().unwrap().sqrt();
            // What so few samples scatter by is taken off.
            let scatter = deviation * deviation / 4_000.0;
            let rms = (error.mean().unwrap() - scatter).max(0.0).sqrt();
            let said = of_dithered_step(1.0, noise);
            assert!(
                (rms - said).abs() < 0.05 * said + 0.003,
                "{noise}: {rms}, {said}"
            );
            let found = noise_before_steps(1.0, deviation);
            assert!((found / noise - 1.0).abs() < 0.1, "{noise}: {found}");
        }
    }

    #[test]
    fn without_noise_the_whole_step_counts_and_with_much_none_of_it() {
        let whole = 1.0 / 12_f64.sqrt();
        assert!((of_dithered_step(1.0, 0.0) - whole).abs() < 1e-12);
        assert!((of_dithered_step(1.0, 1e-9) - whole).abs() < 1e-3 * whole);
        assert!((of_dithered_step(1.0, 0.47) / whole - 0.01).abs() < 0.001);
        assert!(of_dithered_step(1.0, 1.0) < 1e-8);
        assert!(of_dithered_step(1.0, f64::NAN) >= whole);
        assert!(noise_before_steps(1.0, 0.0) <= 0.0);
        assert!((noise_before_steps(1.0, 3.0) - 3.0).abs() < 0.02);
    }

    /// Tippett's mean ranges, d2 (L. H. C. Tippett, Biometrika 17 (1925) 364; from memory):
    /// 3.078 for ten samples, 5.015 for a hundred.
    #[test]
    fn the_range_of_a_sample_is_the_tabled_one() {
        assert!((expected_range(10.0) - 3.078).abs() < 0.02);
        assert!((expected_range(100.0) - 5.015).abs() < 0.02);
        assert!(expected_range(1.0) <= 0.0);
    }
}
