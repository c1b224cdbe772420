use proptest::prelude::*;

use super::*;

fn nanoamperes(text: &str) -> Result<i64, BadNumber> {
    Scale::new(1_000_000_000).read(text.as_bytes())
}

#[test]
fn decimals_are_exact_and_rounded_once() {
    for (text, wanted) in [
        ("0", 0),
        ("0.004", 4_000_000),
        (".5", 500_000_000),
        ("5.", 5_000_000_000),
        ("-0.000000001", -1),
        ("+1", 1_000_000_000),
        ("0.0000000005", 1),
        ("0.00000000049999999999999999999999999", 0),
        ("3.5e-2", 35_000_000),
        ("35E3", 35_000_000_000_000),
        ("000000000000000000000000000000000000.1", 100_000_000),
        ("0e999", 0),
        ("1e-999", 0),
    ] {
        assert_eq!(nanoamperes(text), Ok(wanted), "{text}");
    }
}

#[test]
fn what_is_no_number_is_told_from_what_is_too_large() {
    for text in [
        "", "-", ".", "1.2.3", "1,5", "abc", "1e", "e5", "--1", "1 2", "1e1.5",
    ] {
        assert_eq!(nanoamperes(text), Err(BadNumber::NotANumber), "{text}");
    }
    for text in [
        "nan",
        "inf",
        "-Infinity",
        "1e10",
        "1e999",
        "99999999999999999999999999999999",
    ] {
        assert_eq!(nanoamperes(text), Err(BadNumber::OutOfRange), "{text}");
    }
}

proptest! {
    #[test]
    fn a_printed_number_is_read_back(value in -1_000_000_000_000_i64..1_000_000_000_000) {
        let sign = if value < 0 { "-" } else { "" };
        let magnitude = value.unsigned_abs();
        let text = format!("{sign}{}.{:09}", magnitude / 1_000_000_000, magnitude % 1_000_000_000);
        prop_assert_eq!(nanoamperes(&text), Ok(value));
        prop_assert_eq!(nanoamperes(&format!("{value}e-9")), Ok(value));
    }

    #[test]
    fn no_text_makes_it_panic(text in "[-+0-9.eEinfa]{0,60}") {
        let _ = nanoamperes(&text);
        let _ = Scale::new(3_600_000_000).read(text.as_bytes());
    }
}
