//! Numbers with as many digits as their uncertainty allows.

/// The value with its standard uncertainty in brackets, in units of its last digits, such as
/// `3.187(14)`: two digits of uncertainty, as JCGM 100:2008, 7.2.2 and 7.2.6 have it.
///
/// Without an uncertainty (or with none that can be printed so) the value stands alone, with
/// four significant digits.
pub fn with_uncertainty(value: f64, standard: Option<f64>) -> String {
    match standard {
        Some(standard) if standard.is_finite() && standard > 0.0 => bracketed(value, standard),
        Some(_) | None => plain(value),
    }
}

fn bracketed(value: f64, standard: f64) -> String {
    let mut places = 1 - exponent(standard);
    // 0.0996 has two digits as 10 in the next place up.
    if (standard * 10_f64.powi(places)).round() >= 100.0 {
        places -= 1;
    }
    if places <= 0 {
        let scale = 10_f64.powi(-places);
        let rounded = (value / scale).round() * scale;
        let uncertain = (standard / scale).round() * scale;
        return format!("{rounded:.0}({uncertain:.0})");
    }
    let digits = usize::try_from(places).unwrap_or(0);
    let uncertain = (standard * 10_f64.powi(places)).round();
    format!("{value:.digits$}({uncertain:.0})")
}

fn plain(value: f64) -> String {
    if !value.is_finite() {
        return value.to_string();
    }
    let digits = usize::try_from(3 - exponent(value)).unwrap_or(0).min(9);
    format!("{value:.digits$}")
}

/// The power of ten of the first significant digit; 0 for zero.
fn exponent(value: f64) -> i32 {
    let magnitude = value.abs();
    if magnitude == 0.0 {
        return 0;
    }
    #[expect(
        clippy::cast_possible_truncation,
        reason = "the exponent of a finite f64 is small"
    )]
    let exponent = magnitude.log10().floor() as i32;
    exponent
}
