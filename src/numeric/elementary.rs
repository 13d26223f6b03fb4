//! Exponential, logarithm and their sums in plain `a*b + c`: the same bits under every instruction set.

use std::f64::consts::LOG2_E;

/// Adding and taking away `1.5 * 2^52` rounds a double of modest size to a whole number.
const TO_WHOLE: f64 = 6_755_399_441_055_744.0;
/// `ln 2` in two parts: the first has trailing zeros, so `k * LN2_HIGH` is exact for the whole numbers met here.
const LN2_HIGH: f64 = 6.931_471_803_691_238_164_90e-1;
const LN2_LOW: f64 = 1.908_214_929_270_587_700_02e-10;

/// `e^x` to 2 units in the last place, over the whole range of a double, subnormal results included.
///
/// Argument reduction by `ln 2` in two parts (Cody & Waite 1980, "Software Manual for the Elementary Functions") and the Taylor
/// polynomial of degree 13, whose remainder on `|r| <= ln(2)/2` is below 5e-18. No branch, so that a loop over a
/// column becomes vector instructions. NaN stays NaN.
#[inline(always)]
#[must_use]
pub fn exp(x: f64) -> f64 {
    let clamped = x.clamp(-746.0, 710.0);
    let k = (clamped * LOG2_E + TO_WHOLE) - TO_WHOLE;
    let r = (clamped - k * LN2_HIGH) - k * LN2_LOW;
    let mut p = 1.605_904_383_682_161_3e-10;
    p = p * r + 2.087_675_698_786_81e-9;
    p = p * r + 2.505_210_838_544_172e-8;
    p = p * r + 2.755_731_922_398_589e-7;
    p = p * r + 2.755_731_922_398_589_3e-6;
    p = p * r + 2.480_158_730_158_730_2e-5;
    p = p * r + 1.984_126_984_126_984e-4;
    p = p * r + 1.388_888_888_888_889e-3;
    p = p * r + 8.333_333_333_333_333e-3;
    p = p * r + 4.166_666_666_666_666_4e-2;
    p = p * r + 1.666_666_666_666_666_6e-1;
    p = p * r + 0.5;
    p = p * r * r + r;
    // 2^k in two factors: one alone would leave the range before the product does.
    let half = (0.5 * k + TO_WHOLE) - TO_WHOLE;
    let rest = k - half;
    (1.0 + p) * power_of_two(half) * power_of_two(rest)
}

/// `2^k` for a whole `k` between -1022 and 1023.
#[inline(always)]
fn power_of_two(k: f64) -> f64 {
    f64::from_bits(((k + TO_WHOLE).to_bits() << 52).wrapping_add(1023_u64 << 52))
}

/// Natural logarithm to 1 unit in the last place; `ln 0 = -inf`, NaN below zero.
///
/// Reduction to `[sqrt(1/2), sqrt 2]` and the rational-free minimax polynomial of the freely distributable mathematics
/// library of Sun Microsystems (`e_log.c`, 1993), in plain arithmetic and without a branch.
#[inline(always)]
#[must_use]
pub fn ln(x: f64) -> f64 {
    let small = x < f64::MIN_POSITIVE;
    let scaled = if small { x * 18_014_398_509_481_984.0 } else { x }; // 2^54
    let bits = scaled.to_bits();
    let exponent = (bits.wrapping_sub(0x3FE6_A09E_0000_0000) as i64) >> 52;
    let mantissa = f64::from_bits(bits.wrapping_sub((exponent as u64) << 52));
    // A whole number of modest size to a double without a conversion instruction, which not every vector unit has.
    let e = f64::from_bits(((exponent + 0x0008_0000_0000_0000) as u64) ^ 0x4330_0000_0000_0000)
        - (4_503_599_627_370_496.0 + 2_251_799_813_685_248.0)
        - if small { 54.0 } else { 0.0 };
    let f = mantissa - 1.0;
    let s = f / (2.0 + f);
    let z = s * s;
    let w = z * z;
    let t1 = w * (w * (w * 1.531_383_769_920_937_332e-1 + 2.222_219_843_214_978_396e-1) + 3.999_999_999_940_941_908e-1);
    let t2 = z
        * (w * (w * (w * 1.479_819_860_511_658_591e-1 + 1.818_357_216_161_805_012e-1) + 2.857_142_874_366_239_149e-1)
            + 6.666_666_666_666_735_130e-1);
    let h = 0.5 * f * f;
    let y = e * LN2_HIGH - ((h - (s * (h + (t1 + t2)) + e * LN2_LOW)) - f);
    let y = if x == 0.0 { f64::NEG_INFINITY } else { y };
    let y = if x < 0.0 { f64::NAN } else { y };
    if x < f64::INFINITY { y } else { x }
}

/// `ln(e^a + e^b)` without overflow; `-inf` is "no mass" and stays so.
#[inline(always)]
#[must_use]
pub fn log_add_exp(a: f64, b: f64) -> f64 {
    let (high, low) = if a > b { (a, b) } else { (b, a) };
    if high == f64::NEG_INFINITY { high } else { high + ln(1.0 + exp(low - high)) }
}

/// `ln sum_i exp(x_i)` without overflow. Source: Blanchard, Higham & Higham, IMA J. Numer. Anal. 41 (2021) 2311-2330.
///
/// No mass (an empty slice, or all `-inf`) gives `-inf`. The caller rules out NaN and `+inf`.
///
/// ```
/// use evenpoise::numeric::log_sum_exp;
/// assert!((log_sum_exp(&[-1000.0, -1000.0]) - (-1000.0 + 2.0_f64.ln())).abs() < 1e-12);
/// assert_eq!(log_sum_exp(&[]), f64::NEG_INFINITY);
/// ```
#[must_use]
pub fn log_sum_exp(xs: &[f64]) -> f64 {
    debug_assert!(xs.iter().all(|&x| x < f64::INFINITY), "NaN or +inf");
    let max = xs.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if max == f64::NEG_INFINITY {
        return max; // -inf - -inf is NaN: "no mass" must not become NaN.
    }
    let mut sum = 0.0;
    for &x in xs {
        sum += exp(x - max);
    }
    max + ln(sum)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Units in the last place between `got` and `want`, both finite.
    fn ulps(got: f64, want: f64) -> f64 {
        (got - want).abs() / (f64::from_bits(want.abs().to_bits() + 1) - want.abs())
    }

    /// The `libm` crate (a port of musl's correctly documented, < 1 ulp functions) is the outside reference;
    /// the bounds are its own ulp plus ours.
    #[test]
    fn exp_and_ln_agree_with_libm() {
        let mut x = -745.0;
        while x < 709.7 {
            assert!(ulps(exp(x), libm::exp(x)) <= 3.0, "exp({x}) = {:e}", exp(x));
            x += 0.037_13;
        }
        let mut x = 1e-320_f64;
        while x < 1e308 {
            assert!(ulps(ln(x), libm::log(x)) <= 2.0, "ln({x:e})");
            x *= 1.037;
        }
    }

    #[test]
    fn edges_are_told_apart() {
        assert_eq!(exp(f64::NEG_INFINITY), 0.0);
        assert_eq!(exp(f64::INFINITY), f64::INFINITY);
        assert_eq!(exp(800.0), f64::INFINITY);
        assert_eq!(exp(0.0), 1.0);
        assert!(exp(f64::NAN).is_nan());
        assert_eq!(ln(0.0), f64::NEG_INFINITY);
        assert!(ln(-1.0).is_nan() && ln(f64::NAN).is_nan());
        assert_eq!(ln(f64::INFINITY), f64::INFINITY);
        assert_eq!(log_add_exp(f64::NEG_INFINITY, f64::NEG_INFINITY), f64::NEG_INFINITY);
        assert_eq!(log_sum_exp(&[f64::NEG_INFINITY; 3]), f64::NEG_INFINITY);
    }
}
