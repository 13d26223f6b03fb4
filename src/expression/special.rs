//! Functions of one or two numbers that the language needs beyond the elementary ones. All of them give the same
//! bits on every machine: plain arithmetic, `crate::numeric` and the `libm` crate only.

use std::f64::consts::FRAC_1_SQRT_2;

use crate::numeric::normal::quantile;
use crate::numeric::{exp, ln};

/// `ln sqrt(2 pi)`.
pub(super) const LN_SQRT_2_PI: f64 = 0.918_938_533_204_672_741_78;
/// `1 / sqrt(2 pi)`.
const ONE_BY_SQRT_2_PI: f64 = 0.398_942_280_401_432_677_94;

/// `ln(1 + x)` without cancellation near zero; `-inf` at -1, NaN below.
///
/// `ln(u) + (x - (u - 1))/u` with `u` the rounded `1 + x`: the second term is what rounding lost (as in `s_log1p.c`
/// of Sun Microsystems' freely distributable library, 1993). No branch.
#[inline(always)]
pub(super) fn log1p(x: f64) -> f64 {
    let u = 1.0 + x;
    let lost = if x < 1.0 { x - (u - 1.0) } else { 1.0 - (u - x) };
    let y = ln(u) + lost / u;
    // At -1 and at infinity the correction is 0/0 or inf - inf.
    let y = if u == 0.0 { f64::NEG_INFINITY } else { y };
    if x == f64::INFINITY { x } else { y }
}

/// `ln(1 + e^x)`.
#[inline(always)]
pub(super) fn softplus(x: f64) -> f64 {
    let e = exp(-x.abs());
    let u = 1.0 + e;
    // ln(1 + e) as in `log1p`; on [1, 2] the correction is below 2^-53, so a straight line is enough for 1/u.
    let rest = ln(u) + (e - (u - 1.0)) * (1.5 - 0.5 * u);
    (if x < 0.0 { 0.0 } else { x }) + rest
}

/// `1 / (1 + e^-x)`, as good for very negative `x`.
#[inline(always)]
pub(super) fn logistic(x: f64) -> f64 {
    let e = exp(-x.abs());
    (if x < 0.0 { e } else { 1.0 }) / (1.0 + e)
}

/// Derivative of [`logistic`], without the cancellation of `y (1 - y)`.
#[inline(always)]
pub(super) fn logistic_slope(x: f64) -> f64 {
    let e = exp(-x.abs());
    e / ((1.0 + e) * (1.0 + e))
}

/// `ln(p / (1 - p))`; near one half through `log1p`, where the quotient is near one.
#[inline(always)]
pub(super) fn logit(p: f64) -> f64 {
    let near = log1p((2.0 * p - 1.0) / (1.0 - p));
    let far = ln(p) - log1p(-p);
    if p > 0.25 && p < 0.75 { near } else { far }
}

/// `ln(e^a + e^b)`, NaN when either is.
#[inline(always)]
pub(super) fn log_add_exp(a: f64, b: f64) -> f64 {
    let high = maximum(a, b);
    // Equal infinities would give NaN.
    let gap = if a == b { 0.0 } else { -(a - b).abs() };
    let sum = high + ln(1.0 + exp(gap));
    if high == f64::NEG_INFINITY { high } else { sum }
}

/// The larger one, NaN when either is.
#[inline(always)]
pub(super) fn maximum(a: f64, b: f64) -> f64 {
    let larger = if a < b { b } else { a };
    if b.is_nan() { b } else { larger }
}

/// The smaller one, NaN when either is.
#[inline(always)]
pub(super) fn minimum(a: f64, b: f64) -> f64 {
    let smaller = if a > b { b } else { a };
    if b.is_nan() { b } else { smaller }
}

/// `x ln y`, zero for `x = 0` wherever `ln y` is not NaN.
#[inline(always)]
pub(super) fn x_log_y(x: f64, y: f64) -> f64 {
    let product = x * ln(y);
    if x == 0.0 && y >= 0.0 { 0.0 } else { product }
}

/// `x ln(1 + y)`, zero for `x = 0` wherever the logarithm is not NaN.
#[inline(always)]
pub(super) fn x_log1p_y(x: f64, y: f64) -> f64 {
    let product = x * log1p(y);
    if x == 0.0 && y >= -1.0 { 0.0 } else { product }
}

/// `x^n` by repeated squaring.
#[inline(always)]
pub(super) fn whole_power(x: f64, n: i32) -> f64 {
    let mut left = n.unsigned_abs();
    let mut square = x;
    let mut power = 1.0;
    while left > 0 {
        if left & 1 == 1 {
            power *= square;
        }
        square *= square;
        left >>= 1;
    }
    if n < 0 { 1.0 / power } else { power }
}

/// `P(N <= z)` of the standard normal distribution.
pub(super) fn normal_cdf(z: f64) -> f64 {
    0.5 * libm::erfc(-z * FRAC_1_SQRT_2)
}

/// Standard normal density.
#[inline(always)]
pub(super) fn normal_density(z: f64) -> f64 {
    ONE_BY_SQRT_2_PI * exp(-0.5 * z * z)
}

/// Inverse of [`normal_cdf`]; infinite at 0 and 1, NaN outside.
pub(super) fn normal_quantile(p: f64) -> f64 {
    if p > 0.0 && p < 1.0 {
        quantile(p)
    } else if p == 0.0 {
        f64::NEG_INFINITY
    } else if p == 1.0 {
        f64::INFINITY
    } else {
        f64::NAN
    }
}

/// From here on the upper tail goes through its continued fraction.
const FAR_OUT: f64 = 5.0;

/// `ln P(N > z)`, exact far out: `ln(phi(z) M(z))` with Mills' ratio `M` beyond 5.
pub(super) fn log_normal_tail(z: f64) -> f64 {
    if z > FAR_OUT {
        if z == f64::INFINITY {
            return f64::NEG_INFINITY;
        }
        return -0.5 * z * z - LN_SQRT_2_PI + ln(mills(z));
    }
    if z < -1.0 { log1p(-0.5 * libm::erfc(-z * FRAC_1_SQRT_2)) } else { ln(0.5 * libm::erfc(z * FRAC_1_SQRT_2)) }
}

/// Derivative of [`log_normal_tail`]: minus the hazard `phi(z) / P(N > z)`.
pub(super) fn log_normal_tail_slope(z: f64) -> f64 {
    if z > FAR_OUT { -1.0 / mills(z) } else { -normal_density(z) / (0.5 * libm::erfc(z * FRAC_1_SQRT_2)) }
}

/// Mills' ratio `P(N > z)/phi(z)` for `z > 5` by Laplace's continued fraction `1/(z + 1/(z + 2/(z + ...)))`
/// (Abramowitz & Stegun 26.2.14); 60 levels leave an error below 1e-17 at 5.
fn mills(z: f64) -> f64 {
    let mut tail = z;
    for level in (1..=60_u32).rev() {
        tail = z + f64::from(level) / tail;
    }
    1.0 / tail
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Compares with `want` within `tolerance` roundings (2.2e-16) of its size.
    fn check(name: &str, got: f64, want: f64, tolerance: f64) {
        let error = ((got - want) / want).abs();
        assert!(error <= tolerance * f64::EPSILON, "{name}: {got:e}, wanted {want:e}, relative error {error:e}");
    }

    // Reference values: mpmath 1.3.0 at 50 digits, from the definitions in the comments.

    /// `log(erfc(z/sqrt 2)/2)` and minus `npdf(z)/(erfc(z/sqrt 2)/2)`; `-z^2/2` far out is rounded to its own size.
    #[test]
    fn normal_tails_match_mpmath() {
        for (z, want, slope) in [
            (-20.0, -2.753_624_118_606_233_7e-89, -5.520_948_362_159_763_189_6e-88),
            (-3.0, -0.001_350_809_964_748_193_798_8, -0.004_437_839_042_125_663_793_3),
            (0.5, -1.175_911_761_593_618_608_9, -1.141_077_770_368_064_480_9),
            (4.9, -14.551_182_689_355_310_834, -5.089_828_600_129_883_290_1),
            (5.1, -15.588_487_091_871_467_542, -5.283_287_616_909_157_364_1),
            (38.0, -726.557_216_018_820_130_1, -38.026_279_466_575_868_988),
            (1000.0, -500_007.826_694_812_184_31, -1_000.000_999_998_000_01),
        ] {
            // Below 5 the rounding of z/sqrt 2 counts z^2 times in erfc and exp, beyond that not at all.
            let argument = if z < FAR_OUT { z * z } else { 0.0 };
            check(&format!("tail {z}"), log_normal_tail(z), want, 4.0 + argument);
            check(&format!("slope of tail {z}"), log_normal_tail_slope(z), slope, 4.0 + argument);
        }
        assert_eq!(log_normal_tail(f64::INFINITY), f64::NEG_INFINITY);
        assert_eq!(log_normal_tail(f64::NEG_INFINITY), 0.0);
    }

    /// `log(1 + exp(x))`, `1/(1 + exp(-x))` and its derivative, `log(x/(1 - x))`, `log(1 + x)`.
    #[test]
    fn logistic_functions_match_mpmath() {
        for (x, want) in [
            (-40.0, 4.248_354_255_291_588_986_3e-18),
            (-1.5, 0.201_413_277_982_752_409_5),
            (0.0, std::f64::consts::LN_2),
            (2.25, 2.350_206_558_916_747_211_7),
            (40.0, 40.0),
        ] {
            check(&format!("softplus({x})"), softplus(x), want, 4.0);
        }
        for (x, want, slope) in [
            (-3.0, 0.047_425_873_177_566_780_879, 0.045_176_659_730_912_132_649),
            (0.5, 0.622_459_331_201_854_564_64, 0.235_003_712_201_594_489_07),
            (30.0, 0.999_999_999_999_906_423_77, 9.357_622_968_838_423_302_8e-14),
        ] {
            check(&format!("logistic({x})"), logistic(x), want, 4.0);
            check(&format!("slope of logistic({x})"), logistic_slope(x), slope, 6.0);
        }
        for (p, want) in [
            (1e-300, -690.775_527_898_213_705_21),
            (0.2, -1.386_294_361_119_890_618_8),
            // Of the double nearest to 0.5000000001, whose excess is 1.00000008274037e-10.
            (0.500_000_000_1, 4.000_000_330_961_484e-10),
            (0.7, 0.847_297_860_387_203_613_71),
            (0.99, 4.595_119_850_134_589_926_9),
        ] {
            check(&format!("logit({p})"), logit(p), want, 8.0);
        }
        for (x, want) in [
            (1e-300, 1e-300),
            (1e-17, 1e-17),
            (-1e-5, -0.000_010_000_050_000_333_335_833),
            (-0.75, -1.386_294_361_119_890_618_8),
            (0.3, 0.262_364_264_467_491_052_04),
            (12.5, 2.602_689_685_444_383_764_8),
            (1e300, 690.775_527_898_213_705_21),
        ] {
            check(&format!("log1p({x})"), log1p(x), want, 4.0);
        }
        assert_eq!(log1p(-1.0), f64::NEG_INFINITY);
        assert_eq!(log1p(f64::INFINITY), f64::INFINITY);
        assert!(log1p(-1.5).is_nan() && log1p(f64::NAN).is_nan());
        assert_eq!((logit(0.0), logit(1.0)), (f64::NEG_INFINITY, f64::INFINITY));
    }

    #[test]
    fn edges_of_products_and_extremes_are_told_apart() {
        assert_eq!(x_log_y(0.0, 0.0), 0.0);
        assert!(x_log_y(0.0, -1.0).is_nan() && x_log1p_y(0.0, -1.5).is_nan());
        assert_eq!(x_log1p_y(0.0, -1.0), 0.0);
        assert!(maximum(f64::NAN, 1.0).is_nan() && maximum(1.0, f64::NAN).is_nan());
        assert!(minimum(f64::NAN, 1.0).is_nan() && minimum(1.0, f64::NAN).is_nan());
        assert_eq!((maximum(2.0, 1.0), minimum(2.0, 1.0)), (2.0, 1.0));
        assert_eq!(log_add_exp(f64::NEG_INFINITY, f64::NEG_INFINITY), f64::NEG_INFINITY);
        assert_eq!(log_add_exp(f64::INFINITY, f64::INFINITY), f64::INFINITY);
        assert_eq!(log_add_exp(f64::NEG_INFINITY, 3.0), 3.0);
        assert!(log_add_exp(f64::NAN, 3.0).is_nan() && log_add_exp(3.0, f64::NAN).is_nan());
        assert_eq!((whole_power(2.0, 10), whole_power(2.0, -3), whole_power(5.0, 0)), (1024.0, 0.125, 1.0));
    }
}
