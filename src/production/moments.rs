//! Stratified means and variances out of sums.

use super::exact::ExactSum;
use super::job::Job;
use super::sums::EstimateSums;
use super::sums::Sums;
use crate::numeric::exp;
use crate::numeric::ln;
use crate::weights::StratifiedMean;

/// Normal quantile of a one-sided 90 % bound.
const ONE_SIDED_90: f64 = 1.281_551_565_544_600_5;
/// Within so many standard errors of zero a signed value is no measure of its own error.
const SIGNED: f64 = 5.0;

/// Draws, `sum x` and `sum x^2` of a stratum, and draws and `sum x` of its halves.
#[derive(Debug, Clone, Copy)]
pub(super) struct Part {
    pub(super) draws: f64,
    pub(super) sum: f64,
    pub(super) square: f64,
    pub(super) halves: [(f64, f64); 2],
}

/// Terms, or terms with failures counted the other way.
pub(super) fn of_terms(sums: &Sums) -> Vec<Part> {
    parts(sums, |k| (sums.cells[k].terms.value(), 0.0), |s| sums.strata[s].squares.value())
}

/// Weights of failed draws.
pub(super) fn of_failed(sums: &Sums) -> Vec<Part> {
    // Halves of them are never compared.
    let half = |k: usize| (if k.is_multiple_of(2) { sums.strata[k / 2].failed.value() } else { 0.0 }, 0.0);
    parts(sums, half, |s| sums.strata[s].failed_squares.value())
}

/// `u (g - m)` of an estimate whose value is `centre + m`.
pub(super) fn of_residuals(sums: &Sums, estimate: &EstimateSums, m: f64) -> Vec<Part> {
    let first = |k: usize| (estimate.cells[k].value(), -m * sums.cells[k].sizes().value());
    let square = |s: usize| {
        estimate.squares[s].value() - 2.0 * m * estimate.crossed[s].value() + m * m * sums.strata[s].squares.value()
    };
    parts(sums, first, square)
}

fn parts(sums: &Sums, first: impl Fn(usize) -> (f64, f64), square: impl Fn(usize) -> f64) -> Vec<Part> {
    let half = |k: usize| {
        let (a, b) = first(k);
        (sums.cells[k].draws as f64, a + b)
    };
    let part = |s: usize| {
        let halves = [half(2 * s), half(2 * s + 1)];
        Part { draws: halves[0].0 + halves[1].0, sum: halves[0].1 + halves[1].1, square: square(s), halves }
    };
    let parts: Vec<Part> = (0..sums.strata.len()).map(part).collect();
    // Early in a run a stratum may have too few draws for a variance: then all are one.
    if parts.iter().all(|part| part.draws >= 2.0) { parts } else { vec![joined(&parts)] }
}

fn joined(parts: &[Part]) -> Part {
    let zero = Part { draws: 0.0, sum: 0.0, square: 0.0, halves: [(0.0, 0.0); 2] };
    parts.iter().fold(zero, |a, b| Part {
        draws: a.draws + b.draws,
        sum: a.sum + b.sum,
        square: a.square + b.square,
        halves: [0, 1].map(|h| (a.halves[h].0 + b.halves[h].0, a.halves[h].1 + b.halves[h].1)),
    })
}

impl Part {
    /// Variance of a draw, denominator `n - 1`.
    fn variance(&self) -> f64 {
        ((self.square - self.sum * self.sum / self.draws) / (self.draws - 1.0)).max(0.0)
    }
}

/// Mean over all draws and its error: see [`Strata::mean`](crate::weights::Strata::mean).
pub(super) fn mean(parts: &[Part]) -> StratifiedMean {
    let n: f64 = parts.iter().map(|p| p.draws).sum();
    let sum: f64 = parts.iter().map(|p| p.sum).sum();
    // One draw: 0/0 is NaN, and nothing is known (`max` would hide it).
    let variance: f64 = if n < 2.0 { f64::NAN } else { parts.iter().map(|p| p.draws * p.variance()).sum() };
    StratifiedMean { mean: sum / n, se: variance.sqrt() / n }
}

/// Difference of two halves in standard errors: see [`Strata::halves_z`](crate::weights::Strata::halves_z).
pub(super) fn halves_z(parts: &[Part]) -> f64 {
    let whole = |parts: &[Part]| parts.iter().all(|p| p.halves.iter().all(|half| half.0 >= 1.0));
    let parts = if whole(parts) { parts.to_vec() } else { vec![joined(parts)] };
    if !whole(&parts) {
        return f64::NAN;
    }
    let (mut difference, mut variance) = (0.0, 0.0);
    for part in &parts {
        let [(n, a), (m, b)] = part.halves;
        difference += part.draws * (a / n - b / m);
        variance += part.draws * part.draws * part.variance() * (1.0 / n + 1.0 / m);
    }
    if difference == 0.0 { 0.0 } else { difference / variance.sqrt() }
}

/// The sum over all cells, rounded once.
pub(super) fn total<'a>(sums: impl IntoIterator<Item = &'a ExactSum>) -> f64 {
    let mut total = ExactSum::default();
    sums.into_iter().for_each(|sum| total.merge(sum));
    total.value()
}

/// `n` times the squared relative error of a mean of `n` draws.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RelativeVariance {
    /// As the draws have it.
    pub value: f64,
    /// Upper 90 % bound.
    pub upper: f64,
}

/// The relative variance of a draw, stratified, with its upper 90 % bound; of a signed answer near zero, relative to the mean
/// size of its terms.
///
/// With `M_j` the mean of `z^j` over `(mean z)^j` and `R = M_2`, the error of `R` is `sqrt((M_4 - 4 R M_3 + 4 R^3 - R^2)/n)`
/// (delta method); the bound is normal on the log scale of `R - 1`.
#[must_use]
pub fn relative_variance(job: &Job, sums: &Sums) -> RelativeVariance {
    let n = sums.draws as f64;
    let answer = mean(&of_terms(sums));
    let near_zero = job.signed() && answer.mean.abs() <= SIGNED * answer.se;
    let size = if near_zero { total(sums.cells.iter().map(|c| c.sizes())) / n } else { answer.mean.abs() };
    let value = n * (answer.se / size) * (answer.se / size);
    let moment = |sum: f64, power: i32| sum / n / (0..power).map(|_| answer.mean).product::<f64>();
    let second = moment(total(sums.strata.iter().map(|s| &s.squares)), 2);
    let (third, fourth) = (moment(sums.cubes.value(), 3), moment(sums.fourths.value(), 4));
    let of_second = fourth - 4.0 * second * third + 4.0 * second * second * second - second * second;
    let log_error = (of_second.max(0.0) / n).sqrt() / (second - 1.0);
    let upper = if second > 1.0 { value * exp(ONE_SIDED_90 * log_error.min(20.0)) } else { value };
    RelativeVariance { value, upper }
}

/// `ln` of a mean of scaled terms, in the target's own units.
pub(super) fn log_unscaled(job: &Job, mean: f64) -> f64 {
    job.log_scale + ln(mean)
}
