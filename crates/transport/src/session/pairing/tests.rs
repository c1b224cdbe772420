use super::*;

#[test]
fn numbers_lost_are_counted_over_the_wrap() {
    assert_eq!(lost_between(1, 2), 0);
    assert_eq!(lost_between(65_535, 1), 0);
    assert_eq!(lost_between(65_535, 3), 2);
    assert_eq!(lost_between(7, 5), 65_532);
    assert_eq!(lost_between(7, 7), 65_534);
}
