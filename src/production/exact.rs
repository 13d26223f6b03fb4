//! Sums without any error: the order of adding, and who added what, cannot be seen in them.

use serde::Deserialize;
use serde::Deserializer;
use serde::Serialize;
use serde::Serializer;
use serde::de::Error;
use std::fmt;
use std::str::FromStr;

/// Bits of a limb.
const LIMB: usize = 32;
/// A limb takes numbers below `2^53`, so that many of them fit before carries must move on: `2^(63 - 53) - 1`, halved for safety.
const ADDS: u32 = 511;

/// A sum of doubles, exact: a whole number times `2^-1075`, held in overlapping limbs of 32 bits.
///
/// Adding and merging are associative and commutative to the last bit; [`value`](Self::value) rounds once, to the nearest
/// double, ties to even. Infinite and NaN terms are remembered and win, as they do in plain sums.
///
/// # Source
/// R. M. Neal, "Fast exact summation using small and large superaccumulators", arXiv 1505.05571 (2015): the small one. Ours
/// keeps only the limbs that were met.
///
/// ```
/// use evenpoise::production::ExactSum;
/// let sum: ExactSum = [1e300, 1.0, -1e300, 1e-300].into_iter().collect();
/// assert_eq!(sum.value(), 1.0);
/// assert_eq!(sum.to_string().parse::<ExactSum>().unwrap().value(), 1.0);
/// ```
#[derive(Debug, Clone, Default)]
pub struct ExactSum {
    /// Index of the first limb held.
    first: usize,
    limbs: Vec<i64>,
    /// Terms added since the carries were last moved on.
    added: u32,
    /// Sum of the terms that are not finite; zero while there is none.
    broken: f64,
}

impl ExactSum {
    /// Adds a term.
    #[inline]
    pub fn add(&mut self, x: f64) {
        let bits = x.to_bits();
        let exponent = (bits >> 52) as usize & 0x7FF;
        let fraction = bits & 0x000F_FFFF_FFFF_FFFF;
        if exponent == 0x7FF {
            self.broken += x;
            return;
        }
        if exponent == 0 && fraction == 0 {
            return;
        }
        let (shift, mantissa) = if exponent == 0 { (1, fraction) } else { (exponent, fraction | 1 << 52) };
        let (limb, low) = (shift / LIMB, shift % LIMB);
        if limb < self.first || limb + 2 > self.first + self.limbs.len() {
            self.reach(limb, limb + 1);
        }
        if self.added == ADDS {
            self.carry();
        }
        self.added += 1;
        let at = limb - self.first;
        let lower = ((mantissa << low) & 0xFFFF_FFFF) as i64;
        let upper = (mantissa >> (LIMB - low)) as i64;
        if (bits as i64) < 0 {
            self.limbs[at] -= lower;
            self.limbs[at + 1] -= upper;
        } else {
            self.limbs[at] += lower;
            self.limbs[at + 1] += upper;
        }
    }

    /// Adds all that another sum holds.
    pub fn merge(&mut self, other: &Self) {
        self.broken += other.broken;
        if other.limbs.is_empty() {
            return;
        }
        self.reach(other.first, other.first + other.limbs.len() - 1);
        self.carry();
        let mut other = other.clone();
        other.carry();
        self.reach(other.first, other.first + other.limbs.len() - 1);
        for (i, limb) in other.limbs.iter().enumerate() {
            self.limbs[other.first + i - self.first] += limb;
        }
        self.carry();
    }

    /// The sum as the nearest double, ties to even; infinite beyond the range of doubles.
    #[must_use]
    pub fn value(&self) -> f64 {
        if self.broken != 0.0 {
            return self.broken;
        }
        let (negative, first, limbs) = self.magnitude();
        let size = rounded(first, &limbs);
        if negative { -size } else { size }
    }

    /// Makes room for the limbs from `low` to `high`.
    #[cold]
    fn reach(&mut self, low: usize, high: usize) {
        if self.limbs.is_empty() {
            self.first = low;
        }
        if low < self.first {
            self.limbs.splice(0..0, std::iter::repeat_n(0, self.first - low));
            self.first = low;
        }
        let needed = high + 1 - self.first;
        if needed > self.limbs.len() {
            self.limbs.resize(needed, 0);
        }
    }

    /// Moves carries on: every limb but the last holds 32 bits and no sign.
    fn carry(&mut self) {
        self.added = 0;
        let Some(last) = self.limbs.len().checked_sub(1) else { return };
        for i in 0..last {
            let carry = self.limbs[i] >> LIMB;
            self.limbs[i] &= 0xFFFF_FFFF;
            self.limbs[i + 1] += carry;
        }
        if self.limbs[last].abs() > 0xFFFF_FFFF {
            let carry = self.limbs[last] >> LIMB;
            self.limbs[last] &= 0xFFFF_FFFF;
            self.limbs.push(carry);
        }
    }

    /// Sign, index of the first limb and the limbs of the size, without zeros at either end: one form for one number.
    fn magnitude(&self) -> (bool, usize, Vec<u32>) {
        let mut sum = self.clone();
        sum.carry();
        sum.carry();
        let negative = sum.limbs.last().is_some_and(|&last| last < 0);
        if negative {
            sum.limbs.iter_mut().for_each(|limb| *limb = -*limb);
            sum.carry();
        }
        let mut limbs: Vec<u32> = sum.limbs.iter().map(|&limb| limb as u32).collect();
        while limbs.last() == Some(&0) {
            limbs.pop();
        }
        let zeros = limbs.iter().take_while(|&&limb| limb == 0).count();
        limbs.drain(..zeros);
        (negative, sum.first + zeros, limbs)
    }
}

/// The double nearest to a whole number times `2^-1075`.
fn rounded(first: usize, limbs: &[u32]) -> f64 {
    let Some(&top) = limbs.last() else { return 0.0 };
    let highest = LIMB * (first + limbs.len() - 1) + (31 - top.leading_zeros() as usize);
    let bit = |position: usize| -> u64 {
        let within = position.checked_sub(LIMB * first).map_or(0, |p| limbs[p / LIMB] >> (p % LIMB) & 1);
        u64::from(within)
    };
    if highest <= 52 {
        // Subnormal, and exact: no term has a bit below the last one of the smallest double.
        let mantissa: u64 = (1..=highest).map(|position| bit(position) << (position - 1)).sum();
        return f64::from_bits(mantissa);
    }
    let mantissa: u64 = (0..=52).map(|k| bit(highest - 52 + k) << k).sum();
    let half = highest.checked_sub(53).is_some_and(|position| bit(position) == 1);
    let below = highest.saturating_sub(53);
    let sticky = (LIMB * first..below).any(|position| bit(position) == 1);
    let up = half && (sticky || mantissa & 1 == 1);
    let exponent = (highest - 52) as u64;
    if exponent >= 0x7FF {
        return f64::INFINITY;
    }
    // A mantissa that overflows by rounding carries into the exponent by itself, up to infinity.
    f64::from_bits(((exponent << 52) | (mantissa & 0x000F_FFFF_FFFF_FFFF)) + u64::from(up))
}

impl PartialEq for ExactSum {
    fn eq(&self, other: &Self) -> bool {
        self.to_string() == other.to_string()
    }
}

impl FromIterator<f64> for ExactSum {
    fn from_iter<I: IntoIterator<Item = f64>>(terms: I) -> Self {
        let mut sum = Self::default();
        terms.into_iter().for_each(|x| sum.add(x));
        sum
    }
}

impl fmt::Display for ExactSum {
    /// `-1f3a@28`: minus `0x1f3a` times `2^(32 · 28 - 1075)`; one text for one number. `inf`, `-inf` and `nan` where a term was.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.broken.is_nan() {
            return f.write_str("nan");
        }
        if self.broken != 0.0 {
            return f.write_str(if self.broken > 0.0 { "inf" } else { "-inf" });
        }
        let (negative, first, limbs) = self.magnitude();
        let Some((top, rest)) = limbs.split_last() else { return f.write_str("0") };
        if negative {
            f.write_str("-")?;
        }
        write!(f, "{top:x}")?;
        rest.iter().rev().try_for_each(|limb| write!(f, "{limb:08x}"))?;
        write!(f, "@{first}")
    }
}

/// A text that is no exact sum.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{0:?} is no exact sum; expected a form like -1f3a@28")]
pub struct ExactSumError(String);

impl FromStr for ExactSum {
    type Err = ExactSumError;

    fn from_str(text: &str) -> Result<Self, ExactSumError> {
        let wrong = || ExactSumError(text.chars().take(40).collect());
        match text {
            "0" => return Ok(Self::default()),
            "nan" => return Ok(Self { broken: f64::NAN, ..Self::default() }),
            "inf" => return Ok(Self { broken: f64::INFINITY, ..Self::default() }),
            "-inf" => return Ok(Self { broken: f64::NEG_INFINITY, ..Self::default() }),
            _ => {}
        }
        let (negative, size) = text.strip_prefix('-').map_or((false, text), |size| (true, size));
        let (digits, first) = size.split_once('@').ok_or_else(wrong)?;
        let first: usize = first.parse().ok().filter(|&first| first < 80).ok_or_else(wrong)?;
        if digits.is_empty() || digits.len() > 8 * 80 || !digits.bytes().all(|b| b.is_ascii_hexdigit()) {
            return Err(wrong());
        }
        let mut limbs = Vec::new();
        for chunk in digits.as_bytes().rchunks(8) {
            let limb = std::str::from_utf8(chunk).ok().and_then(|hex| i64::from_str_radix(hex, 16).ok());
            let limb = limb.ok_or_else(wrong)?;
            limbs.push(if negative { -limb } else { limb });
        }
        Ok(Self { first, limbs, added: 0, broken: 0.0 })
    }
}

impl Serialize for ExactSum {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for ExactSum {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        String::deserialize(deserializer)?.parse().map_err(D::Error::custom)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// The lowest bit is worth `2^-1075`: half of the smallest double.
    const LOWEST: i32 = -1075;

    /// The exact sum in plain big-integer arithmetic: bits of `sum * 2^1075` in two's complement, 2,400 of them, one a byte.
    /// Nothing of the method under test is used: terms are added bit by bit, and rounded from the definition.
    fn by_bits(terms: &[f64]) -> f64 {
        const WIDTH: usize = 2400;
        let mut total = vec![0_u8; WIDTH];
        for &x in terms {
            let bits = x.to_bits();
            let exponent = (bits >> 52 & 0x7FF) as usize;
            let fraction = bits & ((1 << 52) - 1);
            let (shift, mantissa) = if exponent == 0 { (1, fraction) } else { (exponent, fraction | 1 << 52) };
            let mut term = vec![0_u8; WIDTH];
            (0..53).for_each(|k| term[shift + k] = (mantissa >> k & 1) as u8);
            if x < 0.0 {
                negate(&mut term);
            }
            let mut carry = 0;
            for (a, b) in total.iter_mut().zip(term) {
                let sum = *a + b + carry;
                (*a, carry) = (sum & 1, sum >> 1);
            }
        }
        let negative = total[WIDTH - 1] == 1;
        if negative {
            negate(&mut total);
        }
        let Some(top) = total.iter().rposition(|&bit| bit == 1) else { return 0.0 };
        let lowest = top.saturating_sub(52).max(1);
        let mut mantissa = (lowest..=top).fold(0_u64, |m, p| m | u64::from(total[p]) << (p - lowest));
        let half = total[lowest - 1] == 1;
        let rest = total[..lowest - 1].contains(&1);
        mantissa += u64::from(half && (rest || mantissa & 1 == 1));
        let scale = lowest as i32 + LOWEST;
        // mantissa * 2^scale in two exact steps: 2^-1074 itself is the smallest double.
        let power = |k: i32| f64::from_bits(if k >= -1022 { ((k + 1023) as u64) << 52 } else { 1 << (k + 1074) });
        let value = if scale > 971 { f64::INFINITY } else { mantissa as f64 * power(scale) };
        if negative { -value } else { value }
    }

    fn negate(bits: &mut [u8]) {
        let mut carry = 1;
        for bit in bits {
            let sum = (1 - *bit) + carry;
            (*bit, carry) = (sum & 1, sum >> 1);
        }
    }

    fn finite() -> impl Strategy<Value = f64> {
        any::<u64>().prop_map(f64::from_bits).prop_filter("finite", |x| x.is_finite())
    }

    proptest! {
        #![proptest_config(ProptestConfig { cases: 200, failure_persistence: None, ..ProptestConfig::default() })]

        /// Against bit-by-bit arithmetic, over the whole range of doubles; the order does not matter, nor who adds what; texts
        /// read back.
        #[test]
        fn sums_are_exact_in_any_order(mut terms in prop::collection::vec(finite(), 0..30), turn in 0_usize..30) {
            let want = by_bits(&terms);
            let sum: ExactSum = terms.iter().copied().collect();
            prop_assert_eq!(sum.value().to_bits(), (want + 0.0).to_bits(), "{} {}", sum.value(), want);
            let text = sum.to_string();
            prop_assert_eq!(text.parse::<ExactSum>().unwrap().to_string(), text.clone());
            let by = turn % terms.len().max(1);
            terms.rotate_left(by);
            terms.reverse();
            let (left, right) = terms.split_at(by);
            let mut merged: ExactSum = left.iter().copied().collect();
            merged.merge(&right.iter().copied().collect());
            prop_assert_eq!(merged.to_string(), text);
        }

        /// Terms that nearly cancel, many of them: carries move both ways.
        #[test]
        fn cancelling_terms_leave_the_rest(terms in prop::collection::vec(-1e3_f64..1e3, 1..40), last in -1e-12_f64..1e-12) {
            let mut sum = ExactSum::default();
            for _ in 0..40 {
                terms.iter().for_each(|&x| sum.add(x));
            }
            for _ in 0..40 {
                terms.iter().for_each(|&x| sum.add(-x));
            }
            sum.add(last);
            prop_assert_eq!(sum.value(), last);
        }
    }

    /// Source: Python 3, float(sum(Fraction(1, i) as double, exactly)): `float(sum(Fraction(1/i) for i in range(1, 100001)))`
    /// and the same with alternating signs. Plain sums are off by some units in the last place.
    #[test]
    fn long_sums_match_exact_rationals() {
        let harmonic: ExactSum = (1..=100_000).map(|i| 1.0 / f64::from(i)).collect();
        assert_eq!(harmonic.value(), HARMONIC);
        let alternating: ExactSum =
            (1..=100_000).map(|i| if i % 2 == 1 { 1.0 / f64::from(i) } else { -1.0 / f64::from(i) }).collect();
        assert_eq!(alternating.value(), ALTERNATING);
    }
    const HARMONIC: f64 = 12.090_146_129_863_427;
    const ALTERNATING: f64 = 0.693_142_180_584_945_3;

    #[test]
    fn halves_go_to_even_and_the_ends_hold() {
        let ulp = f64::EPSILON;
        for (terms, want) in [
            (vec![1.0, ulp / 2.0], 1.0),
            (vec![1.0 + ulp, ulp / 2.0], 1.0 + 2.0 * ulp),
            (vec![1.0, ulp / 2.0, 5e-324], 1.0 + ulp),
            (vec![f64::MAX, f64::MAX], f64::INFINITY),
            (vec![f64::MAX, f64::MAX, -f64::MAX], f64::MAX),
            (vec![5e-324, 5e-324, -1e-323], 0.0),
            (vec![5e-324, f64::MIN_POSITIVE], f64::MIN_POSITIVE + 5e-324),
            (vec![-0.0], 0.0),
        ] {
            assert_eq!(terms.iter().copied().collect::<ExactSum>().value(), want, "{terms:?}");
        }
        let broken: ExactSum = [1.0, f64::INFINITY].into_iter().collect();
        assert_eq!((broken.value(), broken.to_string()), (f64::INFINITY, "inf".to_owned()));
        let nan: ExactSum = [f64::NEG_INFINITY, f64::INFINITY].into_iter().collect();
        assert!(nan.value().is_nan() && nan.to_string().parse::<ExactSum>().unwrap().value().is_nan());
    }

    #[test]
    fn other_texts_are_refused() {
        for text in ["", "1", "@3", "g@1", "1@", "1@99", "--1@2", "1@-1"] {
            assert!(text.parse::<ExactSum>().is_err(), "{text:?}");
        }
    }
}
