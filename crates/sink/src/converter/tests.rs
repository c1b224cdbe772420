//! Codes and currents, with the trade's own example.

use expect_test::expect;
use proptest::prelude::*;
use quantity::{Current, Resistance, Voltage};

use super::{CodeError, Converter};
use crate::bench::{Codes, Dac};

fn converter(bits: u8, full_scale_mv: i64, codes: Codes, sense_mohm: i64) -> Converter {
    let dac = Dac {
        bits,
        full_scale: Voltage::from_millivolts(full_scale_mv),
        codes,
        minimum: Voltage::ZERO,
        offset: Voltage::ZERO,
    };
    Converter::new(dac, Resistance::from_milliohms(sense_mohm)).unwrap()
}

/// Common practice, no source: 10 bits, 3.3 V full scale, 5 ohm; code 310 is
/// 200.0 mA, code 16 is 10.3 mA, and 2 mA would be code 3.
#[test]
fn the_code_taken_for_a_current_is_an_arithmetic_slip() {
    let converter = converter(10, 3_300, Codes::PowerOfTwoLessOne, 5_000);
    assert_eq!(converter.current_of(310).microamperes(), 200_000);
    assert_eq!(converter.current_of(16).microamperes(), 10_323);
    assert_eq!(converter.code_for(Current::from_milliamperes(2)), Ok(3));
    assert_eq!(converter.code_for(Current::from_milliamperes(200)), Ok(310));
    let slip = converter.slip(16, Current::from_milliamperes(2)).unwrap();
    expect!["code 16 is 10.323 mA and not 2 mA; the code for 2 mA is 3: an arithmetic slip, not an error of the circuit"]
        .assert_eq(&slip.to_string());
    assert_eq!(converter.slip(310, Current::from_milliamperes(200)), None);
}

#[test]
fn the_last_code_depends_on_how_the_codes_span_the_full_scale() {
    let short = converter(10, 3_300, Codes::PowerOfTwo, 5_000);
    let full = converter(10, 3_300, Codes::PowerOfTwoLessOne, 5_000);
    assert_eq!(short.top().microamperes(), 659_355);
    assert_eq!(full.top().microamperes(), 660_000);
    assert_eq!(short.step().microamperes(), 645);
    assert_eq!(full.step().microamperes(), 646);
}

#[test]
fn a_current_beyond_the_ends_is_refused_with_the_end() {
    let dac = Dac {
        bits: 12,
        full_scale: Voltage::from_millivolts(330),
        codes: Codes::PowerOfTwo,
        minimum: Voltage::from_microvolts(200),
        offset: Voltage::from_microvolts(50),
    };
    let converter = Converter::new(dac, Resistance::from_milliohms(100)).unwrap();
    assert_eq!(converter.floor().microamperes(), 2_500);
    let low = converter
        .code_for(Current::from_milliamperes(2))
        .unwrap_err();
    expect!["2 mA is below the sink's floor of 2.5 mA; draw 2.5 mA or more, or rest"]
        .assert_eq(&low.to_string());
    let high = converter
        .code_for(Current::from_milliamperes(4_000))
        .unwrap_err();
    assert!(matches!(high, CodeError::AboveTop { .. }));
    expect!["4 A is above the converter's last code, 3.299194 A; draw 3.299194 A or less"]
        .assert_eq(&high.to_string());
    assert_eq!(converter.nearest_code(Current::MAX), 4_095);
    assert_eq!(converter.nearest_code(Current::MIN), 0);
    assert_eq!(Converter::new(dac, Resistance::ZERO), None);
}

proptest! {
    #[test]
    fn every_code_is_the_one_for_its_own_current(
        bits in 6_u8..=16, scale in 100_i64..5_000, sense in 10_i64..10_000, raw: u32, less_one: bool
    ) {
        let codes = if less_one { Codes::PowerOfTwoLessOne } else { Codes::PowerOfTwo };
        let converter = converter(bits, scale, codes, sense);
        // A step of a few microamperes could round to its neighbour's current.
        prop_assume!(converter.step().microamperes() > 2);
        let code = raw % (converter.last_code() + 1);
        prop_assert_eq!(converter.nearest_code(converter.current_of(code)), code);
    }

    #[test]
    fn no_code_is_nearer_than_the_one_chosen(wanted in 0_i64..3_300_000) {
        let converter = converter(12, 330, Codes::PowerOfTwo, 100);
        let wanted = Current::from_microamperes(wanted);
        let code = converter.nearest_code(wanted);
        let off = |code: u32| (converter.current_of(code) - wanted).abs().microamperes();
        prop_assert!(off(code) <= off(code.saturating_sub(1)) + 1);
        prop_assert!(code == converter.last_code() || off(code) <= off(code + 1) + 1);
    }
}
