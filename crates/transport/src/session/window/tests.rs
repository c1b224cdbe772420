use super::*;

#[test]
fn numbers_run_from_1_to_65535_and_begin_again() {
    assert_eq!(number_of(1), OrderNumber(1));
    assert_eq!(number_of(65_535), OrderNumber(65_535));
    assert_eq!(number_of(65_536), OrderNumber(1));
    assert_eq!(number_of(131_071), OrderNumber(1));
}

#[test]
fn a_number_means_the_latest_order_that_bore_it() {
    assert_eq!(place_of(OrderNumber(0), 10), None);
    assert_eq!(place_of(OrderNumber(1), 0), None);
    assert_eq!(place_of(OrderNumber(10), 10), Some(10));
    assert_eq!(place_of(OrderNumber(11), 10), None);
    assert_eq!(place_of(OrderNumber(65_535), 65_537), Some(65_535));
    assert_eq!(place_of(OrderNumber(2), 65_537), Some(65_537));
    assert_eq!(place_of(OrderNumber(3), 65_537), Some(3));
}
