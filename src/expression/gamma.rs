//! The logarithm of the gamma function, its derivative, and differences of it that must not cancel.

use std::f64::consts::PI;

use super::special::log1p;
use crate::numeric::ln;

/// `ln |Gamma(x)|`.
pub(super) fn ln_gamma(x: f64) -> f64 {
    libm::lgamma(x)
}

/// `ln Gamma(x)` for positive `x`, NaN elsewhere: for parameters that must be positive.
pub(super) fn ln_gamma_positive(x: f64) -> f64 {
    if x > 0.0 { libm::lgamma(x) } else { f64::NAN }
}

/// The digamma function, derivative of `ln |Gamma(x)|`; NaN at its poles 0, -1, -2 ...
///
/// Upward recurrence to 10 and the asymptotic series there (Abramowitz & Stegun 6.3.18), whose first omitted term is
/// below 1e-17; reflection (6.3.7) for negative arguments.
pub(super) fn digamma(x: f64) -> f64 {
    if x <= 0.0 {
        if x == x.floor() {
            return f64::NAN;
        }
        // The cotangent has period one: the fraction keeps its digits for large arguments.
        return digamma(1.0 - x) - PI / libm::tan(PI * (x - x.floor()));
    }
    let mut shifted = x;
    let mut sum = 0.0;
    while shifted < 10.0 {
        sum -= 1.0 / shifted;
        shifted += 1.0;
    }
    let r = 1.0 / (shifted * shifted);
    let series = r
        * (1.0 / 12.0
            - r * (1.0 / 120.0
                - r * (1.0 / 252.0
                    - r * (1.0 / 240.0
                        - r * (1.0 / 132.0 - r * (691.0 / 32_760.0 - r * (1.0 / 12.0 - r * 3617.0 / 8160.0)))))));
    sum + ln(shifted) - 0.5 / shifted - series
}

/// `ln Gamma(x + 1/2) - ln Gamma(x)` for positive `x`, NaN elsewhere: no cancellation for large `x`, where a Student
/// density of many degrees of freedom needs it.
///
/// Far out the series of Tricomi & Erdelyi, Pacific J. Math. 1 (1951) 133-142, for the logarithm of the ratio; its
/// terms follow from Stirling's series for the two gamma functions.
pub(super) fn ln_gamma_half_step(x: f64) -> f64 {
    if x.is_nan() || x <= 0.0 {
        return f64::NAN;
    }
    if x < 30.0 {
        return libm::lgamma(x + 0.5) - libm::lgamma(x);
    }
    let (r, s) = (1.0 / x, 1.0 / (x * x));
    0.5 * ln(x) + r * (-1.0 / 8.0 + s * (1.0 / 192.0 + s * (-1.0 / 640.0 + s * (17.0 / 14_336.0))))
}

/// Derivative of [`ln_gamma_half_step`].
pub(super) fn ln_gamma_half_step_slope(x: f64) -> f64 {
    if x < 30.0 {
        return digamma(x + 0.5) - digamma(x);
    }
    let (r, s) = (1.0 / x, 1.0 / (x * x));
    0.5 * r + s * (1.0 / 8.0 + s * (-3.0 / 192.0 + s * (5.0 / 640.0 - s * (7.0 * 17.0 / 14_336.0))))
}

/// `sum_{j < k} ln(1 + j/r) = ln Gamma(k + r) - ln Gamma(r) - k ln r`, without the cancellation of those three.
///
/// Few terms are added up; large `r` go through Stirling's series (Abramowitz & Stegun 6.1.41), in which the large
/// parts cancel by algebra.
pub(super) fn ln_rising(k: f64, r: f64) -> f64 {
    if !(k >= 0.0 && r > 0.0) {
        return f64::NAN;
    }
    if k <= MOST_TERMS && k == k.floor() {
        return (1..k as u32).map(|j| log1p(f64::from(j) / r)).sum();
    }
    if r < 10.0 {
        return libm::lgamma(k + r) - libm::lgamma(r) - k * ln(r);
    }
    (k + r - 0.5) * log1p(k / r) - k + stirling(k + r) - stirling(r)
}

/// Derivatives of [`ln_rising`] with respect to `k` and `r`.
pub(super) fn ln_rising_slopes(k: f64, r: f64) -> (f64, f64) {
    let by_k = digamma(k + r) - ln(r);
    let by_r = if k <= MOST_TERMS && k == k.floor() {
        // d/dr ln(1 + j/r) = -j / (r (r + j))
        (1..k as u32).map(|j| -f64::from(j) / (r * (r + f64::from(j)))).sum()
    } else {
        digamma(k + r) - digamma(r) - k / r
    };
    (by_k, by_r)
}

/// Up to here the terms are added up: as fast as two gamma functions, and exact.
const MOST_TERMS: f64 = 8.0;

/// What Stirling's formula leaves out of `ln Gamma(x)`, for `x >= 10`.
fn stirling(x: f64) -> f64 {
    let (r, s) = (1.0 / x, 1.0 / (x * x));
    r * (1.0 / 12.0 + s * (-1.0 / 360.0 + s * (1.0 / 1260.0 + s * (-1.0 / 1680.0 + s * (1.0 / 1188.0)))))
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

    /// `digamma(x)`; near its root at 1.46 and its poles the cancellation is that of the series: 20 roundings.
    #[test]
    fn digamma_matches_mpmath() {
        for (x, want) in [
            (1e-3, -1_000.575_571_931_810_300_5),
            (0.25, -4.227_453_533_376_265_408_1),
            (1.0, -0.577_215_664_901_532_860_61),
            (3.5, 1.103_156_640_645_243_187_2),
            (12.0, 2.442_661_679_975_812_016_7),
            (1e6, 13.815_510_057_964_190_771),
            (-7.25, 5.189_977_214_956_287_887_5),
        ] {
            check(&format!("digamma({x})"), digamma(x), want, 20.0);
        }
        assert!(digamma(0.0).is_nan() && digamma(-3.0).is_nan());
    }

    /// `loggamma(x + 1/2) - loggamma(x)` and `digamma(x + 1/2) - digamma(x)`: below 30 they are differences, whose
    /// error is that of the larger part, about 100 here.
    #[test]
    fn half_steps_of_ln_gamma_match_mpmath() {
        for (x, want, slope) in [
            (0.01, -4.046_506_060_112_220_982_6, 98.645_897_933_705_098_799),
            (1.25, 0.013_870_715_401_327_605_506, 0.474_925_986_923_126_571_8),
            (29.5, 1.687_958_046_344_374_827_4, 0.017_092_768_808_609_554_839),
            (30.5, 1.704_765_164_660_756_061_6, 0.016_527_797_057_197_126_45),
            (1e3, 3.453_752_639_496_276_857_8, 0.000_500_124_999_984_375_007_81),
            (1e10, 11.512_925_464_957_728_42, 5.000_000_000_125e-11),
        ] {
            let tolerance = if x < 30.0 { 300.0 } else { 4.0 };
            check(&format!("half step {x}"), ln_gamma_half_step(x), want, tolerance);
            let tolerance = if x < 30.0 { 1000.0 } else { 8.0 };
            check(&format!("slope of half step {x}"), ln_gamma_half_step_slope(x), slope, tolerance);
        }
    }

    /// `loggamma(k + r) - loggamma(r) - k log(r)` and its derivatives by `k` and `r`. Errors are absolute: `k`
    /// roundings for the value; for the derivative by `r` those of two digammas.
    #[test]
    fn rising_factorials_match_mpmath() {
        for (k, r, want, by_k, by_r) in [
            (3.0, 2.5, 0.924_258_901_523_331_938_69, 0.694_802_416_707_596_058_55, -0.292_063_492_063_492_063_49),
            (
                50.0,
                1e9,
                1.224_999_979_787_500_500_2e-6,
                4.949_999_877_491_670_709_2e-8,
                -1.224_999_959_575_001_500_6e-15,
            ),
            (70.0, 0.3, 310.645_893_786_529_598_11, 5.449_615_365_988_375_588_6, -225.585_166_549_470_760_75),
            (200.0, 12.5, 400.634_955_849_458_366_84, 2.830_858_557_439_772_268_5, -13.128_608_449_526_884_34),
            (
                500.0,
                1e7,
                0.012_474_792_296_437_365_369,
                4.994_875_254_070_686_047_3e-5,
                -1.247_458_459_806_194_064_7e-9,
            ),
            (2.5, 4.0, 0.405_066_687_829_359_980_62, 0.406_616_969_280_040_242_323_08, -0.088_206_338_031_867_530_811),
        ] {
            let value = ln_rising(k, r);
            assert!((value - want).abs() <= f64::EPSILON * (2.0 * k + 4.0 * want), "k = {k}, r = {r}: {value}");
            let slopes = ln_rising_slopes(k, r);
            let size = 20.0 * f64::EPSILON;
            assert!((slopes.0 - by_k).abs() <= size * by_k.abs().max(20.0), "k = {k}, r = {r}: {slopes:?}");
            assert!((slopes.1 - by_r).abs() <= size * by_r.abs().max(20.0), "k = {k}, r = {r}: {slopes:?}");
        }
    }
}
