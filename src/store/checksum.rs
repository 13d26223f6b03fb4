//! A checksum that sees every small damage.

/// Reflected polynomial of CRC-64 in ECMA-182, as used by the XZ file format.
const POLYNOMIAL: u64 = 0xC96C_5795_D787_0F42;

/// What each byte does to the remainder.
const TABLE: [u64; 256] = table();

const fn table() -> [u64; 256] {
    let mut table = [0; 256];
    let mut byte = 0;
    while byte < 256 {
        let mut remainder = byte as u64;
        let mut bit = 0;
        while bit < 8 {
            remainder = (remainder >> 1) ^ if remainder & 1 == 1 { POLYNOMIAL } else { 0 };
            bit += 1;
        }
        table[byte] = remainder;
        byte += 1;
    }
    table
}

/// CRC-64 (XZ) of the bytes: any burst of damage up to 64 bits long is seen, longer ones but for one in 2^64.
pub(super) fn checksum(bytes: &[u8]) -> u64 {
    let mut remainder = u64::MAX;
    for &byte in bytes {
        remainder = TABLE[((remainder ^ u64::from(byte)) & 0xFF) as usize] ^ (remainder >> 8);
    }
    !remainder
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: the check value published with the parameters of CRC-64/XZ, for the text "123456789".
    #[test]
    fn check_value() {
        assert_eq!(checksum(b"123456789"), 0x995D_C9BB_DF19_39FA);
        assert_eq!(checksum(b""), 0);
    }
}
