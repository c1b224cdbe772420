//! Numbers with their units, and words, as they are printed.

use serde::Serialize;

/// A span of time in the units that fit it.
pub(crate) fn duration(seconds: f64) -> String {
    if !seconds.is_finite() || seconds < 0.0 {
        return format!("{seconds} s");
    }
    if seconds < 1.0 {
        return format!("{} ms", significant(seconds * 1e3));
    }
    if seconds < 60.0 {
        return format!("{} s", significant(seconds));
    }
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a float cast saturates, and nobody reads that many seconds"
    )]
    let whole = seconds.round() as u64;
    let (days, hours, minutes, left) = (
        whole / 86_400,
        whole / 3_600 % 24,
        whole / 60 % 60,
        whole % 60,
    );
    if days > 0 {
        format!("{days} d {hours} h {minutes} min")
    } else if hours > 0 {
        format!("{hours} h {minutes} min {left} s")
    } else {
        format!("{minutes} min {left} s")
    }
}

/// A value and its unit with a prefix that gives it one to three digits before the point.
pub(crate) fn quantity(value: f64, unit: &str) -> String {
    if unit.is_empty() {
        return significant(value);
    }
    if unit == "s" && value >= 60.0 {
        return duration(value);
    }
    let prefixed = matches!(unit, "A" | "V" | "W" | "Ah" | "Wh" | "s" | "ohm");
    let magnitude = value.abs();
    if !prefixed || magnitude >= 1.0 || magnitude == 0.0 {
        return format!("{} {unit}", significant(value));
    }
    if magnitude >= 1e-3 {
        format!("{} m{unit}", significant(value * 1e3))
    } else {
        format!("{} u{unit}", significant(value * 1e6))
    }
}

/// Four significant digits; as many before the point as there are.
fn significant(value: f64) -> String {
    let magnitude = value.abs();
    let places = if magnitude >= 1000.0 || magnitude == 0.0 {
        0
    } else if magnitude >= 100.0 {
        1
    } else if magnitude >= 10.0 {
        2
    } else {
        3
    };
    format!("{value:.places$}")
}

/// A count with its thousands apart.
pub(crate) fn count(number: u64) -> String {
    let digits = number.to_string();
    let mut text = String::with_capacity(digits.len() + digits.len() / 3);
    for (index, digit) in digits.chars().enumerate() {
        if index > 0 && (digits.len() - index).is_multiple_of(3) {
            text.push(' ');
        }
        text.push(digit);
    }
    text
}

/// How near something is to its limit, in percent of the way.
pub(crate) fn percent(nearness: f64) -> String {
    format!("{:.0} %", nearness * 100.0)
}

/// The word of a value in JSON, in words.
pub(crate) fn words<T: Serialize>(value: &T) -> String {
    match serde_json::to_value(value) {
        Ok(serde_json::Value::String(word)) => word.replace('_', " "),
        Ok(other) => other.to_string(),
        Err(error) => error.to_string(),
    }
}

#[cfg(test)]
mod tests;
