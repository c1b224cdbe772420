//! The checksum against its published check value.

use crate::checksum;

/// Source: catalogue of parametrised CRC algorithms (Greg Cook), entry CRC-16/IBM-3740, whose
/// check value is the checksum of the nine ASCII digits.
const CHECK: u16 = 0x29B1;

/// The definition, one bit at a time, from the parameters in PROTOCOL.md.
fn bit_by_bit(bytes: &[u8]) -> u16 {
    bytes.iter().fold(0xFFFF, |sum, byte| {
        (0..8).fold(sum ^ (u16::from(*byte) << 8), |sum, _| {
            if sum & 0x8000 == 0 {
                sum << 1
            } else {
                (sum << 1) ^ 0x1021
            }
        })
    })
}

#[test]
fn the_catalogue_check_value_holds() {
    assert_eq!(checksum(b"123456789"), CHECK);
    assert_eq!(bit_by_bit(b"123456789"), CHECK);
}

#[test]
fn no_bytes_give_the_initial_value() {
    assert_eq!(checksum(b""), 0xFFFF);
}

proptest::proptest! {
    #[test]
    fn the_table_agrees_with_the_definition(bytes: std::vec::Vec<u8>) {
        proptest::prop_assert_eq!(checksum(&bytes), bit_by_bit(&bytes));
    }
}
