//! The standard normal distribution: quantile and draws.

use super::{Stream, exp, ln, uniform};
use std::f64::consts::FRAC_1_SQRT_2;

/// `p`-quantile of the standard normal distribution, given the smaller tail.
///
/// `tail` is the probability in the tail, at most one half; `upper` says which tail: the result is
/// `Phi^-1(tail)` or, for the upper one, its negative. Relative error below 1e-15 down to `tail = 1e-316`.
///
/// # Source
/// Wichura, Applied Statistics 37 (1988) 477-484, algorithm AS 241, routine PPND16.
#[inline]
#[must_use]
pub fn quantile_of_tail(tail: f64, upper: bool) -> f64 {
    let q = tail - 0.5;
    let z = if q.abs() <= 0.425 {
        quantile_about_half(q)
    } else {
        let r = (-ln(tail)).sqrt();
        -if r <= 5.0 { ratio(r - 1.6, &MIDDLE_TOP, &MIDDLE_BOTTOM) } else { ratio(r - 5.0, &FAR_TOP, &FAR_BOTTOM) }
    };
    if upper { -z } else { z }
}

/// `Phi^-1(1/2 + q)` for `|q| <= 0.425`, with full relative accuracy near zero. Source: AS 241, as above.
#[inline]
#[must_use]
pub fn quantile_about_half(q: f64) -> f64 {
    q * ratio(0.180_625 - q * q, &CENTRE_TOP, &CENTRE_BOTTOM)
}

/// `p`-quantile of the standard normal distribution for `0 < p < 1`.
///
/// ```
/// use evenpoise::numeric::normal::quantile;
/// assert!((quantile(0.975) - 1.959_963_984_540_054).abs() < 1e-15);
/// ```
#[inline]
#[must_use]
pub fn quantile(p: f64) -> f64 {
    if p <= 0.5 { quantile_of_tail(p, false) } else { quantile_of_tail(1.0 - p, true) }
}

/// One standard normal draw, by inversion: one uniform number a draw, the same bits on every machine.
#[inline]
pub fn draw(rng: &mut Stream) -> f64 {
    quantile(uniform(rng))
}

/// A draw of the gamma distribution with `shape > 0` and rate one.
///
/// # Source
/// Marsaglia & Tsang, ACM Trans. Math. Softw. 26 (2000) 363-372; shapes below one by their boost `u^(1/shape)`.
pub fn draw_gamma(shape: f64, rng: &mut Stream) -> f64 {
    if shape < 1.0 {
        let boost = libm::pow(uniform(rng), 1.0 / shape);
        return boost * draw_gamma(shape + 1.0, rng);
    }
    let d = shape - 1.0 / 3.0;
    let c = 1.0 / (9.0 * d).sqrt();
    loop {
        let x = draw(rng);
        let v = 1.0 + c * x;
        if v <= 0.0 {
            continue;
        }
        let v = v * v * v;
        if ln(uniform(rng)) < 0.5 * x * x + d - d * v + d * ln(v) {
            return d * v;
        }
    }
}

/// Quantile given the logarithm of the smaller tail, which may lie far below the smallest double: at
/// `log_tail = -5e7` the result is 1e4. Relative error below 1e-15.
///
/// # Source
/// AS 241 down to a tail of 1e-304; beyond, Newton steps on the logarithm of the tail from
/// `z^2 = -2 log_tail - ln(2 pi) - ln(z^2)` (Abramowitz & Stegun 26.2.12).
#[must_use]
pub fn quantile_of_log_tail(log_tail: f64, upper: bool) -> f64 {
    if log_tail > -0.078 {
        // The other tail is the smaller one by far.
        return quantile_of_log_tail(ln(-libm::expm1(log_tail)), !upper);
    }
    let z = if log_tail > -2.58 {
        quantile_about_half(exp(log_tail) - 0.5)
    } else if log_tail > -700.0 {
        let r = (-log_tail).sqrt();
        -if r <= 5.0 { ratio(r - 1.6, &MIDDLE_TOP, &MIDDLE_BOTTOM) } else { ratio(r - 5.0, &FAR_TOP, &FAR_BOTTOM) }
    } else if log_tail == f64::NEG_INFINITY {
        f64::NEG_INFINITY
    } else {
        let square = -2.0 * log_tail - LN_TWO_PI;
        let mut z = (square - ln(square)).sqrt();
        for _ in 0..3 {
            z -= (log_tail - log_upper_tail(z)) * mills_ratio(z);
        }
        -z
    };
    if upper { -z } else { z }
}

/// `ln` of the standard normal density: `-z^2/2 - ln(2 pi)/2`.
#[inline(always)]
#[must_use]
pub fn log_density(z: f64) -> f64 {
    -0.5 * z * z - 0.5 * LN_TWO_PI
}

/// `P(N > z)`, relative error below 5e-15 (from `z` = 6 on 1e-15) down to the smallest double.
///
/// ```
/// use evenpoise::numeric::normal::upper_tail;
/// assert!((upper_tail(37.0) / 5.725_571_222_524_576e-300 - 1.0).abs() < 1e-14);
/// ```
#[must_use]
pub fn upper_tail(z: f64) -> f64 {
    if z <= FAR {
        return 0.5 * libm::erfc(z * FRAC_1_SQRT_2);
    }
    if z > 39.0 {
        return 0.0;
    }
    // `z^2` in two parts: rounding the square would cost `z^2` units in the last place.
    let head = f64::from_bits(z.to_bits() & 0xFFFF_FFFF_F800_0000);
    exp(-0.5 * head * head) * exp(-0.5 * (z - head) * (z + head)) * mills_ratio(z) * FRAC_1_SQRT_TWO_PI
}

/// `P(N <= z)`: [`upper_tail`] of `-z`.
#[must_use]
pub fn lower_tail(z: f64) -> f64 {
    upper_tail(-z)
}

/// `ln P(N > z)` for every `z`; relative error below 1e-15 (at `z = 1e4` the value is about -5e7).
#[must_use]
pub fn log_upper_tail(z: f64) -> f64 {
    if z < -1.0 {
        libm::log1p(-upper_tail(-z))
    } else if z <= FAR {
        ln(0.5 * libm::erfc(z * FRAC_1_SQRT_2))
    } else if z == f64::INFINITY {
        f64::NEG_INFINITY
    } else {
        log_density(z) + ln(mills_ratio(z))
    }
}

/// `ln P(N <= z)`: [`log_upper_tail`] of `-z`.
///
/// ```
/// use evenpoise::numeric::normal::log_lower_tail;
/// assert!((log_lower_tail(-10.0) - -53.231_285_150_512_47).abs() < 1e-13);
/// ```
#[must_use]
pub fn log_lower_tail(z: f64) -> f64 {
    log_upper_tail(-z)
}

/// `P(N > z) / density(z)` for `z > 6`: the continued fraction `1/(z + 1/(z + 2/(z + ...)))`.
///
/// Source: Laplace; DLMF 7.9.1. Forty levels reach the last bit from 6 on, twelve from 20 on.
fn mills_ratio(z: f64) -> f64 {
    let levels = if z > 20.0 { 12 } else { 40 };
    let mut bottom = z;
    for k in (1..levels).rev() {
        bottom = z + f64::from(k) / bottom;
    }
    1.0 / bottom
}

const LN_TWO_PI: f64 = 1.837_877_066_409_345_483_6;
const FRAC_1_SQRT_TWO_PI: f64 = 0.398_942_280_401_432_677_94;
/// Beyond this score tails come from the continued fraction.
const FAR: f64 = 6.0;

#[inline(always)]
fn ratio(r: f64, top: &[f64; 8], bottom: &[f64; 8]) -> f64 {
    let (mut t, mut b) = (0.0, 0.0);
    for i in (0..8).rev() {
        t = t * r + top[i];
        b = b * r + bottom[i];
    }
    t / b
}

const CENTRE_TOP: [f64; 8] = [
    3.387_132_872_796_366_608_0,
    1.331_416_678_917_843_774_5e2,
    1.971_590_950_306_551_442_7e3,
    1.373_169_376_550_946_112_5e4,
    4.592_195_393_154_987_145_7e4,
    6.726_577_092_700_870_085_3e4,
    3.343_057_558_358_812_810_5e4,
    2.509_080_928_730_122_672_7e3,
];
const CENTRE_BOTTOM: [f64; 8] = [
    1.0,
    4.231_333_070_160_091_125_2e1,
    6.871_870_074_920_579_083_0e2,
    5.394_196_021_424_751_107_7e3,
    2.121_379_430_158_659_586_7e4,
    3.930_789_580_009_271_061_0e4,
    2.872_908_573_572_194_267_4e4,
    5.226_495_278_852_854_561_0e3,
];
const MIDDLE_TOP: [f64; 8] = [
    1.423_437_110_749_683_577_34,
    4.630_337_846_156_545_295_90,
    5.769_497_221_460_691_405_50,
    3.647_848_324_763_204_605_04,
    1.270_458_252_452_368_382_58,
    2.417_807_251_774_506_117_70e-1,
    2.272_384_498_926_918_458_33e-2,
    7.745_450_142_783_414_076_40e-4,
];
const MIDDLE_BOTTOM: [f64; 8] = [
    1.0,
    2.053_191_626_637_758_821_87,
    1.676_384_830_183_803_849_40,
    6.897_673_349_851_000_045_50e-1,
    1.481_039_764_274_800_745_90e-1,
    1.519_866_656_361_645_719_66e-2,
    5.475_938_084_995_344_946_00e-4,
    1.050_750_071_644_416_843_24e-9,
];
const FAR_TOP: [f64; 8] = [
    6.657_904_643_501_103_777_20,
    5.463_784_911_164_114_369_90,
    1.784_826_539_917_291_335_80,
    2.965_605_718_285_048_912_30e-1,
    2.653_218_952_657_612_309_30e-2,
    1.242_660_947_388_078_438_60e-3,
    2.711_555_568_743_487_578_15e-5,
    2.010_334_399_292_288_132_65e-7,
];
const FAR_BOTTOM: [f64; 8] = [
    1.0,
    5.998_322_065_558_879_376_90e-1,
    1.369_298_809_227_358_053_10e-1,
    1.487_536_129_085_061_485_25e-2,
    7.868_691_311_456_132_591_00e-4,
    1.846_318_317_510_054_681_80e-5,
    1.421_511_758_316_445_888_70e-7,
    2.044_263_103_389_939_785_64e-15,
];

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::{Purpose, stream};

    /// Source: SciPy 1.17.1, `scipy.special.ndtri(p)`; 1e-300 by mpmath 1.3.0 at 40 digits (root of `ncdf`).
    #[test]
    fn quantile_matches_scipy() {
        for (p, want) in [
            (0.5, 0.0),
            (0.3, -0.524_400_512_708_040_9),
            (0.01, -2.326_347_874_040_840_8),
            (1e-10, -6.361_340_902_404_055),
            (1e-300, -37.047_096_299_361_2),
        ] {
            let got = quantile(p);
            assert!((got - want).abs() <= 4.0 * f64::EPSILON * want.abs(), "p = {p:e}: {got}");
        }
    }

    /// Mean of `n` gamma draws is within 4 standard errors of `shape` (false alarm 6e-5 each).
    #[test]
    fn gamma_draws_have_their_mean() {
        let mut rng = stream(11, Purpose::Trial, 0, 0);
        for shape in [0.4, 1.0, 2.5, 40.0] {
            let n = 20_000;
            let mean = (0..n).map(|_| draw_gamma(shape, &mut rng)).sum::<f64>() / f64::from(n);
            assert!((mean - shape).abs() < 4.0 * (shape / f64::from(n)).sqrt(), "shape {shape}: {mean}");
        }
    }

    /// Source: mpmath 1.3.0 at 800 digits, `log(erfc(z/sqrt(2))/2)`.
    #[test]
    fn tails_match_mpmath() {
        for (z, want) in [
            (-38.0, -2.88542835e-316),
            (-6.0, -9.865876455243758e-10),
            (-1.5, -0.06914345561223398),
            (-0.5, -0.3689464152886564),
            (0.25, -0.9130617648111351),
            (2.0, -3.783184333682032),
            (5.9, -20.125799580203175),
            (6.1, -21.357498419215556),
            (15.0, -116.1313848457117),
            (20.5, -214.0667289632638),
            (37.0, -689.0305855768906),
            (10000.0, -50000010.12927891),
        ] {
            let got = log_upper_tail(z);
            // Near one the log is minus the other tail, whose error is that of `z^2`.
            let bound = if z < -1.0 { 1e-15 + 2e-16 * z * z } else { 1e-15 };
            assert!((got - want).abs() <= bound * want.abs(), "ln Q({z}) = {got:e}, not {want:e}");
            assert_eq!(got, log_lower_tail(-z));
            let tail = upper_tail(z);
            assert!(tail == 0.0 || (tail / libm::exp(want) - 1.0).abs() <= 2e-16 * (4.0 - want), "Q({z}) = {tail:e}");
        }
        assert!((upper_tail(37.0) / 5.725571222524577e-300 - 1.0).abs() < 2e-15);
    }

    #[test]
    fn quantile_of_log_tail_inverts_the_tail() {
        for z in [0.001, 0.3, 1.3, 4.0, 8.0, 30.0, 37.4, 37.5, 60.0, 1e4, 1e8] {
            let got = quantile_of_log_tail(log_upper_tail(z), true);
            assert!((got / z - 1.0).abs() <= 4e-16 * (2.0 + 1.0 / z), "{got:e} instead of {z:e}");
            assert_eq!(quantile_of_log_tail(log_upper_tail(z), false), -got);
        }
        assert_eq!(quantile_of_log_tail(f64::NEG_INFINITY, true), f64::INFINITY);
        let tiny = quantile_about_half(1e-200) / 2.506_628_274_631_000_5e-200;
        assert!((tiny - 1.0).abs() < 1e-15, "slope sqrt(2 pi) at the median: {tiny}");
    }
}
