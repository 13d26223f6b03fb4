//! The incomplete beta integral in both tails, its inverse, and the tails of Student's t built on it.

use super::gamma::{HALF_LN_TWO_PI, ln_gamma_1p, log1p_minus};
use super::gamma::{nonzero, stirling_rest};
use super::normal;
use super::tails::LogTails;
use super::tails::Search;
use super::tails::log_one_minus_exp;
use super::{exp, ln};
use std::f64::consts::LN_2;

/// `ln B(a, b)`: the logarithm of the complete beta function, `a, b > 0`, without the cancellation of three `ln_gamma`.
#[must_use]
pub fn ln_beta(a: f64, b: f64) -> f64 {
    let (small, large) = if a < b { (a, b) } else { (b, a) };
    if large < 15.0 {
        return libm::lgamma(a) + libm::lgamma(b) - libm::lgamma(a + b);
    }
    libm::lgamma(small) + ln_gamma_drop(large, small)
}

/// `ln Gamma(b) - ln Gamma(b + a)` for `b >= 15`, by what Stirling's formula leaves over: its error is that of `a ln b`.
fn ln_gamma_drop(b: f64, a: f64) -> f64 {
    let ratio = libm::log1p(a / b);
    stirling_rest(b) - stirling_rest(b + a) - (b - 0.5) * ratio + a - a * (ln(b) + ratio)
}

/// `ln(a B(a, b))` for `a < 1`: of the order of `a`, with an error to match, so that a small `a` keeps its digits.
fn ln_scaled_beta(a: f64, b: f64) -> f64 {
    let (mut b, mut sum) = (b, ln_gamma_1p(a));
    while b < 15.0 {
        sum += libm::log1p(a / b); // B(a, b) = B(a, b + 1) (a + b)/b
        b += 1.0;
    }
    sum + ln_gamma_drop(b, a)
}

/// `ln(x^a y^b / B(a, b))` with `y = 1 - x`: the log density of `ln(X/Y)` when `X` is beta with `a` and `b`.
///
/// Both `x` and `y` are given so that neither end loses digits. For large parameters by the deviance from
/// `a/(a+b)` (Loader, "Fast and accurate computation of binomial probabilities", 2000).
#[must_use]
pub fn log_beta_front(a: f64, b: f64, x: f64, y: f64) -> f64 {
    if a.min(b) < 1.0 && a.max(b) < 15.0 {
        return a * ln(x) + b * ln(y) - ln_beta(a, b);
    }
    let sum = a + b;
    let distance = x * b - y * a;
    let rest = stirling_rest(a) + stirling_rest(b) - stirling_rest(sum);
    beta_deviance(a, distance / a, x * (sum / a))
        + beta_deviance(b, -distance / b, y * (sum / b))
        + 0.5 * (ln(a) - libm::log1p(a / b))
        - HALF_LN_TWO_PI
        - rest
}

/// `c (ln(1 + excess) - excess)`, with `ratio = 1 + excess` where that is far below one.
fn beta_deviance(c: f64, excess: f64, ratio: f64) -> f64 {
    if excess < -0.4 { c * (ln(ratio) - excess) } else { c * log1p_minus(excess) }
}

/// Both tails of the beta distribution: the regularised incomplete beta functions `I_x(a, b)` and `1 - I_x(a, b)` in logs.
///
/// `y = 1 - x` is given beside `x`, so that both ends are reached. Each tail is accurate where it is small and where
/// it is near one; relative error about `1e-15 (1 + |ln tail|)`. The work grows as `sqrt(a + b)` near the median.
///
/// # Source
/// DLMF 8.17.22 (continued fraction, after Lentz, Appl. Opt. 15 (1976) 668-671) and 8.17.7 with a small first
/// parameter.
///
/// ```
/// use evenpoise::numeric::special::beta_log_tails;
/// let tails = beta_log_tails(2.0, 1.0, 1e-200, 1.0);
/// assert!((tails.lower / (2.0 * 1e-200_f64.ln()) - 1.0).abs() < 1e-15);
/// ```
#[must_use]
pub fn beta_log_tails(a: f64, b: f64, x: f64, y: f64) -> LogTails {
    if x <= 0.0 {
        LogTails { lower: f64::NEG_INFINITY, upper: 0.0 }
    } else if y <= 0.0 {
        LogTails { lower: 0.0, upper: f64::NEG_INFINITY }
    } else if x * (a + b + 2.0) < a + 1.0 {
        beta_near_zero(a, b, x, y)
    } else {
        beta_near_zero(b, a, y, x).swapped()
    }
}

fn beta_near_zero(a: f64, b: f64, x: f64, y: f64) -> LogTails {
    if a < 1.0 && b * x < 2.5 && x < 0.7 {
        return small_first(a, b, x);
    }
    LogTails::from_lower(log_beta_front(a, b, x, y) - ln(beta_fraction(a, b, x, y)))
}

/// `I = x^a/(a B(a,b)) (1 + s)`, `s = a sum_n (1-b)_n x^n / ((a+n) n!)`, and the complement by `expm1` of the first
/// factor: for a small `a` next to nothing is left of it in `1 - I`.
fn small_first(a: f64, b: f64, x: f64) -> LogTails {
    let log_power = a * ln(x) - ln_scaled_beta(a, b);
    let (mut term, mut sum, mut n) = (1.0, 0.0, 0.0);
    loop {
        n += 1.0;
        term *= (n - b) * x / n;
        let part = a * term / (a + n);
        sum += part;
        if part.abs() <= 1e-17 * sum.abs() || n > 400.0 {
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

/// Denominator of `x^a y^b / B(a, b)` in `I_x(a, b)`: every second level of DLMF 8.17.22, whose terms are all positive
/// below the mean. Source: Didonato & Morris, ACM Trans. Math. Softw. 18 (1992) 360-373, equation 9.
fn beta_fraction(a: f64, b: f64, x: f64, y: f64) -> f64 {
    let from_mean = a * y - b * x + 1.0;
    let mut value = a * from_mean / (a + 1.0);
    let (mut ahead, mut behind) = (value, 0.0);
    let mut m = 0.0;
    while m < 2e7 {
        m += 1.0;
        let odd = a + 2.0 * m - 1.0;
        let share = m * (b - m) * x / odd;
        let part = share * ((a + m - 1.0) * (a + b + m - 1.0) * x / odd);
        let level = m + share + (a + m) * (from_mean + m * (1.0 + y)) / (a + 2.0 * m + 1.0);
        behind = 1.0 / nonzero(level + part * behind);
        ahead = nonzero(level + part / ahead);
        let change = ahead * behind;
        value *= change;
        if (change - 1.0).abs() < 2e-16 {
            break;
        }
    }
    value
}

/// Quantile of the beta distribution given the logarithm of either tail: `(x, 1 - x)`, each with its own accuracy.
///
/// Relative error about 1e-14. A quantile closer to an end than the smallest normal double is given as that.
///
/// # Source
/// Halley steps in the logit, in which the beta density is log-concave, on the log tail; the start is the normal
/// approximation of the logit.
#[must_use]
pub fn beta_quantile(a: f64, b: f64, log_tail: f64, upper: bool) -> (f64, f64) {
    if upper {
        let (y, x) = beta_quantile(b, a, log_tail, false);
        return (x, y);
    }
    if log_tail >= 0.0 {
        return (1.0, 0.0);
    }
    if log_tail == f64::NEG_INFINITY {
        return (0.0, 1.0);
    }
    if log_tail > -0.5 {
        // The other tail is the smaller one, and says more.
        return beta_quantile(a, b, log_one_minus_exp(log_tail), true);
    }
    let log_power_law = (log_tail + ln(a) + ln_beta(a, b)) / a;
    if log_power_law + ln(b.max(1.0)) < -40.0 {
        return (exp(log_power_law).max(f64::MIN_POSITIVE), 1.0);
    }
    let z = normal::quantile_of_log_tail(log_tail, false);
    let logit = (ln(a / b) + z * (1.0 / a + 1.0 / b).sqrt()).clamp(-600.0, 600.0);
    let (mut x, mut y) = (1.0 / (1.0 + exp(-logit)), 1.0 / (1.0 + exp(logit)));
    let mut search = Search::new(log_tail, false);
    for _ in 0..200 {
        let have = beta_log_tails(a, b, x, y).lower;
        let (change, is_last) = search.step(have, log_beta_front(a, b, x, y), a * y - b * x);
        let factor = exp(change.clamp(-300.0, 300.0));
        let whole = x * factor + y;
        (x, y) = ((x * factor / whole).max(f64::MIN_POSITIVE), (y / whole).max(f64::MIN_POSITIVE));
        if is_last {
            break;
        }
    }
    (x, y)
}

/// `ln P(T > t)` for Student's t with `df` degrees of freedom, any `t`.
///
/// # Source
/// DLMF 8.17 and Abramowitz & Stegun 26.7.1: twice the tail is `I_x(df/2, 1/2)` with `x = df/(df + t^2)`; far out, where
/// `x` is negligible beside one, the leading term of that.
///
/// ```
/// use evenpoise::numeric::special::student_t_log_upper_tail;
/// // df = 2 in closed form: P(T > t) = 1/(2 s (s + t)) * 2 with s = sqrt(2 + t^2), here about 1/(2 t^2).
/// assert!((student_t_log_upper_tail(2.0, 1e150) - -691.468_675_078_773_7).abs() < 1e-12);
/// ```
#[must_use]
pub fn student_t_log_upper_tail(df: f64, t: f64) -> f64 {
    if t < 0.0 {
        return log_one_minus_exp(student_t_log_upper_tail(df, -t));
    }
    let a = 0.5 * df;
    let scaled = t / df.sqrt();
    if scaled > 1e9 {
        return -2.0 * a * ln(scaled) - ln(a) - ln_beta(a, 0.5) - LN_2;
    }
    let square = scaled * scaled;
    beta_log_tails(a, 0.5, 1.0 / (1.0 + square), square / (1.0 + square)).lower - LN_2
}

/// Quantile of Student's t with `df` degrees of freedom, given the logarithm of either tail; relative error about 1e-14
/// in the tails, absolute about 1e-16 at the median.
#[must_use]
pub fn student_t_quantile(df: f64, log_tail: f64, upper: bool) -> f64 {
    let a = 0.5 * df;
    let two_sided = log_tail + LN_2;
    if two_sided > 0.0 {
        return student_t_quantile(df, log_one_minus_exp(log_tail), !upper);
    }
    let log_power_law = (two_sided + ln(a) + ln_beta(a, 0.5)) / a;
    let t = if log_power_law < -40.0 {
        df.sqrt() * exp(-0.5 * log_power_law)
    } else {
        let (x, y) = beta_quantile(a, 0.5, two_sided, false);
        (df * y / x).sqrt()
    };
    if upper { t } else { -t }
}

/// `ln(Gamma((df+1)/2) / (Gamma(df/2) sqrt(df pi)))`: the constant of Student's t density.
#[must_use]
pub fn student_t_log_constant(df: f64) -> f64 {
    -ln_beta(0.5 * df, 0.5) - 0.5 * ln(df)
}

#[cfg(test)]
mod tests;
