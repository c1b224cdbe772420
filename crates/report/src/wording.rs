//! Numbers with their units, times and words, as the page prints them.
//!
//! What it deliberately does not do: escape anything, or compute a figure.

use jiff::Timestamp;
use quantity::Span;
use sequence::plan::{Action, Condition, PlanStep};
use sequencer::event::{Crossing, Ending, Interlock, StepEnd};
use serde::Serialize;

/// Between a number and its unit: a narrow space that does not break.
const GAP: char = '\u{202f}';

/// The word of a value in JSON, in words.
pub(crate) fn words<T: Serialize>(value: &T) -> String {
    match serde_json::to_value(value) {
        Ok(serde_json::Value::String(word)) => spelt(&word.replace('_', " ")),
        Ok(other) => other.to_string(),
        Err(error) => error.to_string(),
    }
}

/// The trade's spelling of the words that JSON has without stops and hyphens.
fn spelt(words: &str) -> String {
    match words {
        "dc resistance" => "d.c. internal resistance".to_owned(),
        "over temperature" | "over power" | "over voltage" | "over current" => {
            words.replace(' ', "-")
        }
        _ => words.to_owned(),
    }
}

/// A unit as it is printed.
pub(crate) fn unit(symbol: &str) -> String {
    symbol
        .replace("ohm", "Ω")
        .replace("degC", "°C")
        .replace("uA", "µA")
        .replace("uV", "µV")
        .replace("us", "µs")
}

/// A number and its unit.
pub(crate) fn with_unit(number: &str, symbol: &str) -> String {
    format!("{number}{GAP}{}", unit(symbol))
}

/// A quantity printed exactly by its own type, such as `3.2 Ah`.
pub(crate) fn exact(quantity: &impl ToString) -> String {
    match quantity.to_string().split_once(' ') {
        Some((number, symbol)) => with_unit(number, symbol),
        None => quantity.to_string(),
    }
}

/// A value with so many significant digits and a prefix that leaves one to three before the
/// point.
pub(crate) fn prefixed(value: f64, symbol: &str, digits: usize) -> String {
    let prefixable = matches!(symbol, "A" | "V" | "W" | "Ah" | "Wh" | "ohm" | "s");
    let magnitude = value.abs();
    if !prefixable || magnitude >= 1.0 || magnitude == 0.0 {
        return with_unit(&significant(value, digits), symbol);
    }
    if magnitude >= 1e-3 {
        return with_unit(&significant(value * 1e3, digits), &format!("m{symbol}"));
    }
    with_unit(&significant(value * 1e6, digits), &format!("µ{symbol}"))
}

/// So many significant digits, and never fewer than stand before the point.
pub(crate) fn significant(value: f64, digits: usize) -> String {
    if value == 0.0 || !value.is_finite() {
        return format!("{value:.0}");
    }
    #[expect(
        clippy::cast_possible_truncation,
        reason = "the exponent of a finite f64 is small"
    )]
    let exponent = value.abs().log10().floor() as i32;
    let wanted = i32::try_from(digits).unwrap_or(i32::MAX);
    let places = usize::try_from(wanted.saturating_sub(1 + exponent)).unwrap_or(0);
    format!("{value:.places$}")
}

/// A count with its thousands apart.
pub(crate) fn count(number: u64) -> String {
    let digits = number.to_string();
    let mut text = String::with_capacity(digits.len() + digits.len() / 3);
    for (index, digit) in digits.chars().enumerate() {
        if index > 0 && (digits.len() - index).is_multiple_of(3) {
            text.push(GAP);
        }
        text.push(digit);
    }
    text
}

/// A span in its two largest units.
pub(crate) fn duration(span: Span) -> String {
    let micros = span.micros();
    let whole = micros / 1_000_000;
    let pair = |large: u64, one: &str, small: u64, other: &str| {
        if small == 0 {
            format!("{large}{GAP}{one}")
        } else {
            format!("{large}{GAP}{one} {small}{GAP}{other}")
        }
    };
    if whole >= 86_400 {
        pair(whole / 86_400, "d", whole / 3_600 % 24, "h")
    } else if whole >= 3_600 {
        pair(whole / 3_600, "h", whole / 60 % 60, "min")
    } else if whole >= 120 {
        pair(whole / 60, "min", whole % 60, "s")
    } else if micros == 0 || micros >= 1_000_000 {
        let tenths = micros / 100_000;
        if tenths.is_multiple_of(10) {
            format!("{whole}{GAP}s")
        } else {
            format!("{}.{}{GAP}s", whole, tenths % 10)
        }
    } else if micros >= 1_000 {
        format!("{}{GAP}ms", micros / 1_000)
    } else {
        format!("{micros}{GAP}µs")
    }
}

/// Time since the first readback, as hours, minutes and seconds.
pub(crate) fn elapsed(span: Span) -> String {
    let tenths = span.micros() / 100_000;
    let (hours, minutes) = (tenths / 36_000, tenths / 600 % 60);
    let (seconds, tenth) = (tenths / 10 % 60, tenths % 10);
    format!("{hours}:{minutes:02}:{seconds:02}.{tenth}")
}

/// Seconds since 1970-01-01T00:00:00Z as a calendar time (UTC).
pub(crate) fn calendar_s(unix_s: i64) -> String {
    match Timestamp::from_second(unix_s) {
        Ok(timestamp) => timestamp.strftime("%Y-%m-%d %H:%M:%S UTC").to_string(),
        Err(_) => format!("{unix_s} s since 1970-01-01T00:00:00Z"),
    }
}

/// A calendar time as it stands in a manifest (RFC 3339), for the eye; as it stands where it is
/// none.
pub(crate) fn rfc3339(text: &str) -> String {
    text.parse::<Timestamp>().map_or_else(
        |_| text.to_owned(),
        |timestamp| timestamp.strftime("%Y-%m-%d %H:%M:%S UTC").to_string(),
    )
}

/// How a run ended, in words.
pub(crate) fn ending(ending: &Ending) -> String {
    match ending {
        Ending::Finished => "finished".to_owned(),
        Ending::Stopped => "stopped by a person or a script".to_owned(),
        Ending::Tripped(interlock) => format!("tripped: {}", words(interlock)),
        Ending::Interrupted => "interrupted: the host or the link died".to_owned(),
    }
}

/// An interlock's value, given in the interlock's own micro-unit.
pub(crate) fn interlock_value(interlock: Interlock, value: i64) -> String {
    #[expect(
        clippy::cast_precision_loss,
        reason = "it is printed with four significant digits"
    )]
    let value = value as f64;
    match interlock {
        Interlock::OverTemperature => with_unit(&significant(value / 1e3, 4), "degC"),
        Interlock::OverPower => prefixed(value / 1e6, "W", 4),
        Interlock::Undervoltage | Interlock::OverVoltage | Interlock::ReversedPolarity => {
            prefixed(value / 1e6, "V", 4)
        }
        Interlock::OverCurrent | Interlock::NotFollowing | Interlock::NotReleasing => {
            prefixed(value / 1e6, "A", 4)
        }
        Interlock::Time if value >= 3.6e9 => with_unit(&significant(value / 3.6e9, 4), "h"),
        Interlock::Silence | Interlock::Clock | Interlock::Time => prefixed(value / 1e6, "s", 4),
        Interlock::Charge => prefixed(value / 3.6e9, "Ah", 4),
        Interlock::Energy => prefixed(value / 3.6e9, "Wh", 4),
        Interlock::SensorFault => match value {
            value if value < 0.5 => "no fault".to_owned(),
            value if value < 1.5 => "open".to_owned(),
            value if value < 2.5 => "shorted".to_owned(),
            _ => "impossible reading".to_owned(),
        },
        Interlock::Record | Interlock::Refusal => "it happened".to_owned(),
    }
}

/// What an interlock must not cross.
pub(crate) fn interlock_limit(interlock: Interlock, threshold: i64) -> String {
    match interlock {
        Interlock::SensorFault => "any fault".to_owned(),
        Interlock::Record | Interlock::Refusal => "none allowed".to_owned(),
        Interlock::OverTemperature
        | Interlock::OverPower
        | Interlock::Undervoltage
        | Interlock::OverVoltage
        | Interlock::ReversedPolarity
        | Interlock::OverCurrent
        | Interlock::NotFollowing
        | Interlock::NotReleasing
        | Interlock::Silence
        | Interlock::Charge
        | Interlock::Energy
        | Interlock::Time
        | Interlock::Clock => interlock_value(interlock, threshold),
    }
}

/// A crossing in a sentence.
pub(crate) fn crossing(crossing: &Crossing) -> String {
    let by = if crossing.by_sink {
        "the sink’s own copy"
    } else {
        "the host"
    };
    let (name, value) = (
        words(&crossing.interlock),
        interlock_value(crossing.interlock, crossing.value),
    );
    match crossing.interlock {
        Interlock::Record | Interlock::Refusal => format!("{name}, seen first by {by}"),
        Interlock::SensorFault => format!("{name}: {value}, seen first by {by}"),
        Interlock::OverTemperature
        | Interlock::OverPower
        | Interlock::Undervoltage
        | Interlock::OverVoltage
        | Interlock::ReversedPolarity
        | Interlock::OverCurrent
        | Interlock::NotFollowing
        | Interlock::NotReleasing
        | Interlock::Silence
        | Interlock::Charge
        | Interlock::Energy
        | Interlock::Time
        | Interlock::Clock => {
            let limit = interlock_limit(crossing.interlock, crossing.threshold);
            format!("{name}: {value} against a limit of {limit}, seen first by {by}")
        }
    }
}

/// What a step holds.
pub(crate) fn action(step: &PlanStep) -> String {
    match step.action {
        Action::Rest => "rest".to_owned(),
        Action::Current { target, ramp } if ramp == Span::ZERO => exact(&target),
        Action::Current { target, ramp } => format!("to {} over {}", exact(&target), exact(&ramp)),
        Action::Power { target } => exact(&target),
        Action::Resistance { target } => exact(&target),
    }
}

/// Why a step ended.
pub(crate) fn step_end(step: &PlanStep, by: StepEnd) -> String {
    match by {
        StepEnd::Duration => "its time was over".to_owned(),
        StepEnd::Until(index) => step.until.get(usize::from(index)).map_or_else(
            || "a condition held".to_owned(),
            |until| condition(&until.condition),
        ),
        StepEnd::GaveUp => "the source gave up, as allowed".to_owned(),
        StepEnd::Loop => "a loop around it ended".to_owned(),
        StepEnd::Run => "the run ended".to_owned(),
    }
}

fn condition(condition: &Condition) -> String {
    match condition {
        Condition::VoltageBelow(value) => format!("voltage below {}", exact(value)),
        Condition::VoltageAbove(value) => format!("voltage above {}", exact(value)),
        Condition::CurrentBelow(value) => format!("current below {}", exact(value)),
        Condition::CurrentAbove(value) => format!("current above {}", exact(value)),
        Condition::Charge(value) => format!("{} delivered", exact(value)),
        Condition::Energy(value) => format!("{} delivered", exact(value)),
        Condition::TemperatureAbove(value) => format!("heat sink above {}", exact(value)),
        Condition::TemperatureBelow(value) => format!("heat sink below {}", exact(value)),
        Condition::VoltageSettled { change, window } => {
            format!("voltage settled: {} in {}", exact(change), exact(window))
        }
        Condition::TemperatureSettled { change, window } => {
            format!(
                "temperature settled: {} in {}",
                exact(change),
                exact(window)
            )
        }
    }
}

/// A message of ours with what it sets in backticks in quotation marks: print has no backticks. A
/// message that quotes text with a backtick of its own stays as it is.
pub(crate) fn quoted(message: &str) -> String {
    let pieces: Vec<&str> = message.split('`').collect();
    if pieces.len().is_multiple_of(2) {
        return message.to_owned();
    }
    let mut quoted = String::with_capacity(message.len());
    for (place, piece) in pieces.iter().enumerate() {
        if place > 0 {
            quoted.push(if place.is_multiple_of(2) {
                '”'
            } else {
                '“'
            });
        }
        quoted.push_str(piece);
    }
    quoted
}

#[cfg(test)]
mod tests;
