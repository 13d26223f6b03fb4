//! The standard normal distribution: quantile and draws.

use super::{Stream, ln, uniform};

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
        let r = 0.180_625 - q * q;
        q * ratio(r, &CENTRE_TOP, &CENTRE_BOTTOM)
    } else {
        let r = (-ln(tail)).sqrt();
        -if r <= 5.0 { ratio(r - 1.6, &MIDDLE_TOP, &MIDDLE_BOTTOM) } else { ratio(r - 5.0, &FAR_TOP, &FAR_BOTTOM) }
    };
    if upper { -z } else { z }
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
}
