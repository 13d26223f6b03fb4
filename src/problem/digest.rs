//! A fingerprint of contents, to see that a problem is still the one that a run began with.
//!
//! 128 bits from two runs of the 64-bit FNV-1a hash (Fowler, Noll & Vo), the
//! second over the bytes turned about (`byte XOR 0xA5`) and from the first one's result. It guards against mistakes,
//! not against forgers.

/// Collects parts of contents; the order of the parts and their borders count.
#[derive(Debug, Clone)]
pub(crate) struct Digest {
    plain: u64,
    turned: u64,
}

const BASIS: u64 = 0xcbf2_9ce4_8422_2325;
const PRIME: u64 = 0x0000_0100_0000_01b3;

impl Digest {
    pub(crate) fn new() -> Self {
        Self { plain: BASIS, turned: fnv(BASIS, b"evenpoise") }
    }

    /// Adds a part: its length first, so that "ab" + "c" is not "a" + "bc".
    pub(crate) fn add(&mut self, part: &[u8]) {
        for bytes in [&(part.len() as u64).to_le_bytes()[..], part] {
            self.plain = fnv(self.plain, bytes);
            for &byte in bytes {
                self.turned = (self.turned ^ u64::from(byte ^ 0xA5)).wrapping_mul(PRIME);
            }
        }
    }

    /// 32 hexadecimal digits.
    pub(crate) fn finish(&self) -> String {
        format!("{:016x}{:016x}", self.plain, self.turned)
    }
}

fn fnv(start: u64, bytes: &[u8]) -> u64 {
    bytes.iter().fold(start, |hash, &byte| (hash ^ u64::from(byte)).wrapping_mul(PRIME))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: the test vectors that the authors of FNV publish for FNV-1a, 64 bits: "" and "foobar".
    #[test]
    fn fnv_matches_published_vectors() {
        assert_eq!(fnv(BASIS, b""), 0xcbf2_9ce4_8422_2325);
        assert_eq!(fnv(BASIS, b"foobar"), 0x8594_4171_f739_67e8);
    }

    #[test]
    fn borders_and_single_bits_count() {
        let of = |parts: &[&str]| {
            let mut digest = Digest::new();
            parts.iter().for_each(|part| digest.add(part.as_bytes()));
            digest.finish()
        };
        let all = [of(&["ab", "c"]), of(&["a", "bc"]), of(&["abc"]), of(&["abd"]), of(&[])];
        for (k, one) in all.iter().enumerate() {
            assert_eq!(one.len(), 32);
            assert!(all[k + 1..].iter().all(|other| other[..16] != one[..16] && other[16..] != one[16..]));
        }
    }
}
