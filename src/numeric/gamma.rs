//! The gamma function, its logarithmic derivative and its incomplete integrals in both tails.

use super::normal;
use super::tails::LogTails;
use super::tails::Search;
use super::{exp, ln};

/// `ln |Gamma(x)|`, to a few units in the last place for `x > 0` (its zeros at 1 and 2 included).
#[must_use]
pub fn ln_gamma(x: f64) -> f64 {
    libm::lgamma(x)
}

/// `ln Gamma(1 + x)` for `x > -1`, with full relative accuracy near `x = 0`.
///
/// # Source
/// DLMF 5.7.3: `-gamma x + sum_k zeta(k) (-x)^k / k` for `|x| <= 0.2`.
#[must_use]
pub fn ln_gamma_1p(x: f64) -> f64 {
    if x.abs() > 0.2 {
        return libm::lgamma(1.0 + x);
    }
    let (mut sum, mut power) = (-EULER_GAMMA * x, -x);
    for (k, zeta) in (2..).zip(ZETA) {
        power *= -x;
        sum += zeta * power / f64::from(k);
    }
    sum
}

/// `ln Gamma(1 + 2x) - 2 ln Gamma(1 + x)`: the logarithm of `1 + cv^2` of a power `x` of an exponential variable.
/// Full relative accuracy near `x = 0`, where the two terms cancel to second order; `x > -1/2`.
#[must_use]
pub fn ln_gamma_spread(x: f64) -> f64 {
    if x.abs() > 0.1 {
        return ln_gamma_1p(2.0 * x) - 2.0 * ln_gamma_1p(x);
    }
    let (mut sum, mut power, mut two) = (0.0, -x, 2.0);
    for (k, zeta) in (2..).zip(ZETA) {
        power *= -x;
        two *= 2.0;
        sum += zeta * power * (two - 2.0) / f64::from(k);
    }
    sum
}

/// Digamma `d ln Gamma(x) / dx` for `x > 0`; absolute error below 1e-15 times `1 + |digamma(x)|`.
///
/// # Source
/// DLMF 5.5.2 (recurrence up to 10) and 5.11.2 (asymptotic series).
#[must_use]
pub fn digamma(x: f64) -> f64 {
    let (mut x, mut sum) = (x, 0.0);
    while x < 10.0 {
        sum -= 1.0 / x;
        x += 1.0;
    }
    let square = 1.0 / (x * x);
    let series = square
        * (1.0 / 12.0
            - square
                * (1.0 / 120.0
                    - square
                        * (1.0 / 252.0
                            - square
                                * (1.0 / 240.0
                                    - square * (1.0 / 132.0 - square * (691.0 / 32760.0 - square / 12.0))))));
    sum + ln(x) - 0.5 / x - series
}

/// What Stirling's formula leaves over: `ln Gamma(a) - (a - 1/2) ln a + a - ln(2 pi)/2`, for `a > 0`.
///
/// # Source
/// DLMF 5.11.1 from 15 on, the definition below. Its use for densities: Loader, "Fast and accurate computation of
/// binomial probabilities" (2000).
#[must_use]
pub fn stirling_rest(a: f64) -> f64 {
    if a < 15.0 {
        return libm::lgamma(a) - ((a - 0.5) * ln(a) - a + HALF_LN_TWO_PI);
    }
    let square = 1.0 / (a * a);
    let mut sum = 0.0;
    for coefficient in [691.0 / 360_360.0, 1.0 / 1188.0, 1.0 / 1680.0, 1.0 / 1260.0, 1.0 / 360.0, 1.0 / 12.0] {
        sum = coefficient - square * sum;
    }
    sum / a
}

/// `ln(1 + x) - x`, with full relative accuracy near zero.
///
/// # Source
/// `ln(1 + x) = 2 artanh r` with `r = x/(2 + x)` (DLMF 4.6.6): `-r x + 2 r^3 (1/3 + r^2/5 + r^4/7 + ...)`.
#[must_use]
pub fn log1p_minus(x: f64) -> f64 {
    if !(-0.4..=0.6).contains(&x) {
        return libm::log1p(x) - x;
    }
    let r = x / (2.0 + x);
    let square = r * r;
    let mut sum = 0.0;
    for odd in (3..28).step_by(2).rev() {
        sum = sum * square + 1.0 / f64::from(odd);
    }
    2.0 * r * square * sum - r * x
}

/// `ln(x^a e^-x / Gamma(a))`: the log density of `ln X` when `X` is gamma with shape `a` and rate one.
///
/// For large shapes by the deviance `a (ln(x/a) - x/a + 1)`, so that nothing cancels near `x = a` (Loader 2000).
#[must_use]
pub fn log_gamma_front(a: f64, x: f64) -> f64 {
    if a < 1.0 {
        return a * ln(x) - x - libm::lgamma(a);
    }
    gamma_deviance(a, x) + 0.5 * ln(a) - HALF_LN_TWO_PI - stirling_rest(a)
}

/// `a (ln(x/a) - x/a + 1)`: zero at `x = a`, negative elsewhere; nothing cancels.
#[must_use]
pub fn gamma_deviance(a: f64, x: f64) -> f64 {
    let excess = (x - a) / a;
    if excess < -0.4 { a * (ln(x / a) - excess) } else { a * log1p_minus(excess) }
}

/// Both tails of the gamma distribution with shape `a > 0` and rate one: the regularised incomplete gamma functions
/// `P(a, x)` and `Q(a, x)` in logs. Each is accurate where it is small and where it is near one; relative error of
/// the tails about `1e-15 (1 + |ln tail|)`. The work grows as `sqrt(a)` near the median.
///
/// # Source
/// DLMF 8.7.1 and 8.7.3 (series), 8.9.2 (continued fraction, evaluated after Lentz, Appl. Opt. 15 (1976) 668-671).
///
/// ```
/// use evenpoise::numeric::special::gamma_log_tails;
/// let tails = gamma_log_tails(1.0, 800.0);
/// assert_eq!(tails.upper, -800.0);
/// ```
#[must_use]
pub fn gamma_log_tails(a: f64, x: f64) -> LogTails {
    if x <= 0.0 {
        LogTails { lower: f64::NEG_INFINITY, upper: 0.0 }
    } else if x == f64::INFINITY {
        LogTails { lower: 0.0, upper: f64::NEG_INFINITY }
    } else if a < 1.0 && x < 1.0 {
        small_shape(a, x)
    } else if a >= 1.0 && x < a + a.sqrt() {
        LogTails::from_lower(log_gamma_front(a, x) + ln(rising_series(a, x)))
    } else {
        LogTails::from_upper(log_gamma_front(a, x) - ln(upper_fraction(a, x)))
    }
}

/// `P = x^a/Gamma(1+a) (1 + s)`, `s = a sum_n (-x)^n/((a+n) n!)`; `Q` from `x^a/Gamma(1+a)` by `expm1`, for a small
/// shape leaves almost nothing in `Q` that `1 - P` could keep. `a < 1`, `x < 1`.
fn small_shape(a: f64, x: f64) -> LogTails {
    let log_power = a * ln(x) - ln_gamma_1p(a);
    let (mut term, mut sum, mut n) = (1.0, 0.0, 0.0);
    loop {
        n += 1.0;
        term *= -x / n;
        let part = a * term / (a + n);
        sum += part;
        if part.abs() <= 1e-17 * sum.abs() || n > 60.0 {
            break;
        }
    }
    let lower = log_power + libm::log1p(sum);
    if lower < -1.0 {
        return LogTails::from_lower(lower);
    }
    let upper = ln((-libm::expm1(log_power) - exp(log_power) * sum).max(f64::MIN_POSITIVE));
    if upper < -1.0 { LogTails::from_upper(upper) } else { LogTails { lower, upper } }
}

/// `1/a + x/(a(a+1)) + x^2/(a(a+1)(a+2)) + ...`
fn rising_series(a: f64, x: f64) -> f64 {
    let (mut term, mut sum, mut top) = (1.0, 1.0, a);
    while term > 1e-17 * sum {
        top += 1.0;
        term *= x / top;
        sum += term;
    }
    sum / a
}

/// Denominator of `x^a e^-x / Gamma(a)` in `Q(a, x)`: `x + 1 - a - 1(1-a)/(x + 3 - a - 2(2-a)/(x + 5 - a - ...))`.
fn upper_fraction(a: f64, x: f64) -> f64 {
    let mut bottom = x + 1.0 - a;
    let mut value = bottom;
    let (mut ahead, mut behind) = (value, 0.0);
    let mut n = 0.0;
    // Fifty million steps are the shapes of 1e14; the loop ends long before for those in use.
    while n < 5e7 {
        n += 1.0;
        let part = -n * (n - a);
        bottom += 2.0;
        behind = 1.0 / nonzero(bottom + part * behind);
        ahead = nonzero(bottom + part / ahead);
        let change = ahead * behind;
        value *= change;
        if (change - 1.0).abs() < 2e-16 {
            break;
        }
    }
    value
}

/// Lentz: a zero denominator is moved by the least amount that can be divided by.
pub(super) fn nonzero(x: f64) -> f64 {
    if x.abs() < 1e-290 { 1e-290 } else { x }
}

/// Quantile of the gamma distribution with shape `a` and rate one, given the logarithm of either tail.
///
/// `x` with `ln P(a, x) = log_tail` (or `ln Q` when `upper`); relative error about 1e-14. A quantile below the
/// smallest normal double is given as that.
///
/// # Source
/// Halley steps in `ln x` on the log tail, which is concave there, so they cannot go astray; start after Wilson &
/// Hilferty, PNAS 17 (1931) 684-688.
#[must_use]
pub fn gamma_quantile(a: f64, log_tail: f64, upper: bool) -> f64 {
    if log_tail >= 0.0 {
        return if upper { 0.0 } else { f64::INFINITY };
    }
    if log_tail == f64::NEG_INFINITY {
        return if upper { f64::INFINITY } else { 0.0 };
    }
    if log_tail > -0.5 {
        // The other tail is the smaller one, and says more.
        return gamma_quantile(a, ln(-libm::expm1(log_tail)), !upper);
    }
    let log_power_law = (log_tail + ln_gamma_1p(a)) / a;
    if !upper && log_power_law < -40.0 {
        return exp(log_power_law).max(f64::MIN_POSITIVE);
    }
    let mut x = start_of_quantile(a, log_tail, upper, log_power_law);
    let mut search = Search::new(log_tail, upper);
    for _ in 0..200 {
        let tails = gamma_log_tails(a, x);
        let have = if upper { tails.upper } else { tails.lower };
        let (change, is_last) = search.step(have, log_gamma_front(a, x), a - x);
        x = (x * exp(change)).max(f64::MIN_POSITIVE);
        if is_last {
            break;
        }
    }
    x
}

fn start_of_quantile(a: f64, log_tail: f64, upper: bool, log_power_law: f64) -> f64 {
    let z = normal::quantile_of_log_tail(log_tail, upper);
    let root = 1.0 - 1.0 / (9.0 * a) + z / (3.0 * a.sqrt());
    if a >= 0.6 && root > 0.2 {
        a * root * root * root
    } else if upper {
        let first = -log_tail - libm::lgamma(a);
        (first + (a - 1.0) * ln(first.max(1.0))).max(0.05)
    } else {
        exp(log_power_law).min(a)
    }
}

/// Quantile of the chi-squared distribution with `df` degrees of freedom, given the logarithm of either tail.
///
/// ```
/// use evenpoise::numeric::special::chi_squared_quantile;
/// assert!((chi_squared_quantile(2.0, 0.05_f64.ln(), true) - 5.991_464_547_107_98).abs() < 1e-13);
/// ```
#[must_use]
pub fn chi_squared_quantile(df: f64, log_tail: f64, upper: bool) -> f64 {
    2.0 * gamma_quantile(0.5 * df, log_tail, upper)
}

/// Euler's constant.
pub(crate) const EULER_GAMMA: f64 = 0.577_215_664_901_532_860_61;
/// `ln(2 pi)/2`.
pub(crate) const HALF_LN_TWO_PI: f64 = 0.918_938_533_204_672_741_78;
/// Riemann's zeta at 2, 3, ...: mpmath 1.3.0, `zeta(k)`.
const ZETA: [f64; 24] = [
    1.6449340668482264061,
    1.2020569031595942366,
    1.082323233711138144,
    1.0369277551433699891,
    1.0173430619844492373,
    1.008349277381922926,
    1.0040773561979443596,
    1.0020083928260821171,
    1.000994575127817976,
    1.0004941886041194277,
    1.0002460865533080447,
    1.000122713347578518,
    1.0000612481350588112,
    1.000030588236306972,
    1.0000152822594086111,
    1.0000076371976378553,
    1.0000038172932650404,
    1.000001908212716506,
    1.0000009539620338117,
    1.0000004769329868815,
    1.0000002384505026765,
    1.0000001192199259314,
    1.0000000596081890514,
    1.0000000298035034429,
];

#[cfg(test)]
mod tests;
