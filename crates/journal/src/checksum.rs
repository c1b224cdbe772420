//! The checksum that ends every line, and the hash over whole segments.
//!
//! CRC-32C finds every single damaged byte and all but one in four thousand million larger
//! damages; SHA-256 is what the seal rests on.

use sha2::{Digest, Sha256};

/// CRC-32C (Castagnoli): the algorithm of RFC 3720, section 12.1 and appendix B.4.
pub(crate) fn crc32c(bytes: &[u8]) -> u32 {
    ::crc32c::crc32c(bytes)
}

/// A checksum as the eight lower-case hexadecimal digits that stand in a line.
pub(crate) fn hex8(value: u32) -> [u8; 8] {
    let mut digits = [0; 8];
    let mut rest = value;
    for digit in digits.iter_mut().rev() {
        *digit = hex_digit(rest & 15);
        rest >>= 4;
    }
    digits
}

fn hex_digit(nibble: u32) -> u8 {
    let nibble = (nibble & 15) as u8;
    if nibble < 10 {
        b'0' + nibble
    } else {
        b'a' + (nibble - 10)
    }
}

/// A SHA-256 hash (FIPS 180-4) as 64 lower-case hexadecimal digits.
pub(crate) fn sha256(bytes: &[u8]) -> String {
    hex(&Sha256::digest(bytes))
}

/// Bytes as lower-case hexadecimal digits.
pub(crate) fn hex(bytes: &[u8]) -> String {
    bytes
        .iter()
        .flat_map(|byte| {
            [
                hex_digit(u32::from(byte >> 4)),
                hex_digit(u32::from(byte & 15)),
            ]
        })
        .map(char::from)
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_checksum_is_that_of_the_standard() {
        // The check value of CRC-32C over the nine digits, as catalogued for RFC 3720 CRCs.
        assert_eq!(crc32c(b"123456789"), 0xE306_9283);
        // RFC 3720, appendix B.4: 32 bytes of zeroes, 32 bytes of ones, and 0 to 31 ascending.
        // The RFC prints the bytes as they go on the wire, least significant first.
        assert_eq!(crc32c(&[0; 32]), 0x8A91_36AA);
        assert_eq!(crc32c(&[0xFF; 32]), 0x62A8_AB43);
        let ascending: Vec<u8> = (0..32).collect();
        assert_eq!(crc32c(&ascending), 0x46DD_794E);
    }

    #[test]
    fn a_checksum_is_written_with_all_its_digits() {
        assert_eq!(&hex8(0xE306_9283), b"e3069283");
        assert_eq!(&hex8(0x0000_000A), b"0000000a");
    }

    #[test]
    fn the_hash_is_that_of_the_standard() {
        // FIPS 180-4's example message "abc", from NIST's published example values.
        assert_eq!(
            sha256(b"abc"),
            "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        );
    }
}
