//! Numbers read as one would say them.

use super::*;

#[test]
fn a_span_shows_its_largest_units() {
    assert_eq!(duration(0.25), "250.0 ms");
    assert_eq!(duration(59.0), "59.00 s");
    assert_eq!(duration(192.4), "3 min 12 s");
    assert_eq!(duration(20_412.0), "5 h 40 min 12 s");
    assert_eq!(duration(1_183_680.0), "13 d 16 h 48 min");
}

#[test]
fn a_span_that_is_none_is_not_dressed_up() {
    assert_eq!(duration(f64::NAN), "NaN s");
    assert_eq!(duration(-1.0), "-1 s");
}

#[test]
fn a_quantity_gets_the_prefix_that_fits() {
    assert_eq!(quantity(3.618, "V"), "3.618 V");
    assert_eq!(quantity(0.64, "A"), "640.0 mA");
    assert_eq!(quantity(-0.05, "V"), "-50.00 mV");
    assert_eq!(quantity(0.000_25, "A"), "250.0 uA");
    assert_eq!(quantity(0.0, "A"), "0 A");
    assert_eq!(quantity(31.24, "degC"), "31.24 degC");
    assert_eq!(quantity(0.5, "degC"), "0.500 degC");
    assert_eq!(quantity(144_000.0, "s"), "1 d 16 h 0 min");
}

#[test]
fn a_count_has_its_thousands_apart() {
    assert_eq!(count(7), "7");
    assert_eq!(count(1_234), "1 234");
    assert_eq!(count(4_000_000), "4 000 000");
}
