//! Digits that fit the uncertainty.

use crate::with_uncertainty;

#[test]
fn a_value_is_printed_to_two_digits_of_its_uncertainty() {
    let cases: [(f64, Option<f64>, &str); 9] = [
        (3.187_21, Some(0.014), "3.187(14)"),
        // JCGM 100:2008, 7.2.2, example 2: m = 100,021 47(35) g.
        (100.021_47, Some(0.000_35), "100.02147(35)"),
        (0.099_61, Some(0.000_996), "0.0996(10)"),
        (0.068_453, Some(0.000_12), "0.06845(12)"),
        (18_000.4, Some(123.0), "18000(120)"),
        (-0.171_20, Some(0.002_878), "-0.1712(29)"),
        (3.2, None, "3.200"),
        (0.0, None, "0.000"),
        (3.2, Some(0.0), "3.200"),
    ];
    for (value, standard, expected) in cases {
        assert_eq!(with_uncertainty(value, standard), expected);
    }
}
