//! The error function, its complement and the logarithm of the complement.

use super::ln;
use std::f64::consts::{LN_2, PI};

/// Beyond this argument twelve terms of the asymptotic series of `erfc` reach the last bit.
const ASYMPTOTIC: f64 = 9.0;

/// `erf(x) = 2/sqrt(pi) int_0^x exp(-t^2) dt`, to 1 unit in the last place.
///
/// ```
/// use evenpoise::numeric::special::erf;
/// assert!((erf(0.5) - 0.520_499_877_813_046_5).abs() < 1e-15);
/// ```
#[must_use]
pub fn erf(x: f64) -> f64 {
    libm::erf(x)
}

/// `erfc(x) = 1 - erf(x)`, to 1 unit in the last place where it is no subnormal number (x below 26.5).
#[must_use]
pub fn erfc(x: f64) -> f64 {
    libm::erfc(x)
}

/// `ln erfc(x)` for every `x`; relative error below 1e-15 (absolute below 1e-16 where `erfc(x)` is near one).
///
/// # Source
/// DLMF 7.12.1 for `x > 9`: `sqrt(pi) x exp(x^2) erfc(x) = 1 - 1/(2x^2) + 3/(2x^2)^2 - ...`.
///
/// ```
/// use evenpoise::numeric::special::log_erfc;
/// assert!((log_erfc(1e4) - -100_000_009.782_705_32).abs() < 1e-6);
/// ```
#[must_use]
pub fn log_erfc(x: f64) -> f64 {
    if x <= -0.5 {
        LN_2 + libm::log1p(-0.5 * libm::erfc(-x))
    } else if x < 0.5 {
        libm::log1p(-libm::erf(x))
    } else if x <= ASYMPTOTIC {
        ln(libm::erfc(x))
    } else {
        let step = 0.5 / (x * x);
        let mut term = 1.0;
        let mut sum = 0.0;
        for k in 0..12 {
            term *= -f64::from(2 * k + 1) * step;
            sum += term;
        }
        -x * x - ln(x) - 0.5 * ln(PI) + libm::log1p(sum)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: mpmath 1.3.0 at 60 digits, `log(erfc(x))`.
    #[test]
    fn log_erfc_matches_mpmath() {
        for (x, want) in [
            (-30.0, std::f64::consts::LN_2),
            (-5.0, 0.6931471805591766),
            (-0.5, 0.41903914777555956),
            (-1e-05, 1.1283728009080662e-05),
            (0.0625, -0.07303529291935217),
            (0.3, -0.39843005144008525),
            (0.75, -1.241867260678887),
            (2.0, -5.364941264616638),
            (8.9, -81.9746319096455),
            (9.1, -85.59658873710798),
            (26.0, -679.8311997631943),
            (100.0, -10005.177585122665),
            (7071.0, -49999050.43612214),
        ] {
            let got = log_erfc(x);
            assert!((got - want).abs() <= 1e-15 * want.abs(), "x = {x}: {got:e}, not {want:e}");
        }
        assert_eq!(log_erfc(f64::INFINITY), f64::NEG_INFINITY);
        assert!(log_erfc(f64::NAN).is_nan());
    }
}
