//! Coverage factors from Student's t-distribution.

use statrs::distribution::{Continuous, ContinuousCDF, Normal, StudentsT};

use super::DegreesOfFreedom;

/// Above this many degrees of freedom t is normal to six digits.
const AS_GOOD_AS_INFINITE: f64 = 1e7;

/// The factor k with which ± k standard uncertainties cover a probability, such
/// as 0.95.
///
/// Effective degrees of freedom are rarely whole; they are cut to the next
/// lower whole number, as JCGM 100 G.4.1 has it. `None` for a probability
/// outside 0 to 1 or fewer than one degree of freedom: then there is nothing to
/// state a coverage from.
pub fn coverage_factor(probability: f64, freedom: DegreesOfFreedom) -> Option<f64> {
    if !(probability > 0.0 && probability < 1.0) {
        return None;
    }
    let quantile = f64::midpoint(1.0, probability);
    let freedom = freedom.number().floor();
    if freedom < 1.0 {
        return None;
    }
    if freedom > AS_GOOD_AS_INFINITE {
        return Some(Normal::standard().inverse_cdf(quantile));
    }
    let student = StudentsT::new(0.0, 1.0, freedom).ok()?;
    let mut factor = student.inverse_cdf(quantile);
    // The library's inverse is good to about six digits; Newton does the rest.
    for _ in 0..3 {
        let density = student.pdf(factor);
        if density > 0.0 {
            factor -= (student.cdf(factor) - quantile) / density;
        }
    }
    factor.is_finite().then_some(factor)
}
