//! Values of the operations over a stretch of points: loops down columns, which the compiler turns into vector
//! instructions. The loops exist three times (AVX-512, AVX2, plain), chosen when the program runs; without fused
//! multiply-add they give the same bits.

use multiversion::multiversion;

use super::operations::{Binary, Reduction, Unary};
use super::special::{
    ln_gamma, ln_gamma_half_step, ln_gamma_positive, ln_rising, log_add_exp, log_normal_tail, log1p, logistic, logit,
    maximum, minimum, normal_cdf, normal_quantile, softplus, whole_power, x_log_y, x_log1p_y,
};
use crate::numeric::{exp, ln};

/// An argument: a number for every point, or one for all of them.
#[derive(Debug, Clone, Copy)]
pub(super) enum Operand<'a> {
    Block(&'a [f64]),
    Scalar(f64),
}

impl Operand<'_> {
    /// The number of point `j`.
    pub(super) fn at(self, j: usize) -> f64 {
        match self {
            Operand::Block(values) => values[j],
            Operand::Scalar(value) => value,
        }
    }

    /// Writes all numbers to `out`.
    pub(super) fn copy_to(self, out: &mut [f64]) {
        match self {
            Operand::Block(values) => out.copy_from_slice(&values[..out.len()]),
            Operand::Scalar(value) => out.fill(value),
        }
    }
}

/// A condition as a number.
#[inline(always)]
fn truth(holds: bool) -> f64 {
    if holds { 1.0 } else { 0.0 }
}

#[inline(always)]
fn map(x: Operand<'_>, out: &mut [f64], f: impl Fn(f64) -> f64) {
    match x {
        Operand::Block(x) => {
            for (y, &x) in out.iter_mut().zip(x) {
                *y = f(x);
            }
        }
        Operand::Scalar(x) => out.fill(f(x)),
    }
}

#[inline(always)]
fn zip(a: Operand<'_>, b: Operand<'_>, out: &mut [f64], f: impl Fn(f64, f64) -> f64) {
    match (a, b) {
        (Operand::Block(a), Operand::Block(b)) => {
            for ((y, &a), &b) in out.iter_mut().zip(a).zip(b) {
                *y = f(a, b);
            }
        }
        (Operand::Block(a), Operand::Scalar(b)) => {
            for (y, &a) in out.iter_mut().zip(a) {
                *y = f(a, b);
            }
        }
        (Operand::Scalar(a), Operand::Block(b)) => {
            for (y, &b) in out.iter_mut().zip(b) {
                *y = f(a, b);
            }
        }
        (Operand::Scalar(a), Operand::Scalar(b)) => out.fill(f(a, b)),
    }
}

/// `out = function(x)`, point by point.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn unary(function: Unary, x: Operand<'_>, out: &mut [f64]) {
    unary_body(function, x, out);
}

#[inline(always)]
fn unary_body(function: Unary, x: Operand<'_>, out: &mut [f64]) {
    match function {
        Unary::Negate => map(x, out, |x| -x),
        Unary::Not => map(x, out, |x| truth(x == 0.0)),
        Unary::Square => map(x, out, |x| x * x),
        Unary::WholePower(3) => map(x, out, |x| x * x * x),
        Unary::WholePower(-1) => map(x, out, |x| 1.0 / x),
        Unary::WholePower(n) => map(x, out, |x| whole_power(x, n)),
        Unary::Exp => map(x, out, exp),
        Unary::Ln => map(x, out, ln),
        Unary::Log10 => map(x, out, libm::log10),
        Unary::Log1p => map(x, out, log1p),
        Unary::Expm1 => map(x, out, libm::expm1),
        Unary::Sqrt => map(x, out, f64::sqrt),
        Unary::Abs => map(x, out, f64::abs),
        Unary::Floor => map(x, out, libm::floor),
        Unary::Ceil => map(x, out, libm::ceil),
        Unary::Round => map(x, out, libm::round),
        Unary::Sin => map(x, out, libm::sin),
        Unary::Cos => map(x, out, libm::cos),
        Unary::Tan => map(x, out, libm::tan),
        Unary::Asin => map(x, out, libm::asin),
        Unary::Acos => map(x, out, libm::acos),
        Unary::Atan => map(x, out, libm::atan),
        Unary::Sinh => map(x, out, libm::sinh),
        Unary::Cosh => map(x, out, libm::cosh),
        Unary::Tanh => map(x, out, libm::tanh),
        Unary::LnGamma => map(x, out, ln_gamma),
        Unary::LnGammaPositive => map(x, out, ln_gamma_positive),
        Unary::LnGammaHalfStep => map(x, out, ln_gamma_half_step),
        Unary::Erf => map(x, out, libm::erf),
        Unary::Erfc => map(x, out, libm::erfc),
        Unary::NormalCdf => map(x, out, normal_cdf),
        Unary::NormalQuantile => map(x, out, normal_quantile),
        Unary::LogNormalTail => map(x, out, log_normal_tail),
        Unary::Logistic => map(x, out, logistic),
        Unary::Logit => map(x, out, logit),
        Unary::Softplus => map(x, out, softplus),
        Unary::Present => map(x, out, |x| truth(!x.is_nan())),
        Unary::IsFraction => map(x, out, |x| truth(x > libm::floor(x))),
    }
}

/// `out = function(a, b)`, point by point.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn binary(function: Binary, a: Operand<'_>, b: Operand<'_>, out: &mut [f64]) {
    binary_body(function, a, b, out);
}

#[inline(always)]
fn binary_body(function: Binary, a: Operand<'_>, b: Operand<'_>, out: &mut [f64]) {
    match function {
        Binary::Add => zip(a, b, out, |a, b| a + b),
        Binary::Subtract => zip(a, b, out, |a, b| a - b),
        Binary::Multiply => zip(a, b, out, |a, b| a * b),
        Binary::Divide => zip(a, b, out, |a, b| a / b),
        Binary::Power => zip(a, b, out, libm::pow),
        Binary::Atan2 => zip(a, b, out, libm::atan2),
        Binary::Hypot => zip(a, b, out, libm::hypot),
        Binary::Minimum => zip(a, b, out, minimum),
        Binary::Maximum => zip(a, b, out, maximum),
        Binary::MinimumDefined => zip(a, b, out, |a, b| if a <= b || b.is_nan() { a } else { b }),
        Binary::LogAddExp => zip(a, b, out, log_add_exp),
        Binary::XLogY => zip(a, b, out, x_log_y),
        Binary::XLog1pY => zip(a, b, out, x_log1p_y),
        Binary::LnRising => zip(a, b, out, ln_rising),
        Binary::Less => zip(a, b, out, |a, b| truth(a < b)),
        Binary::LessEqual => zip(a, b, out, |a, b| truth(a <= b)),
        Binary::Equal => zip(a, b, out, |a, b| truth(a == b)),
        // Unlike `!=` false when a side is NaN.
        Binary::Differ => zip(a, b, out, |a, b| truth(a < b) + truth(a > b)),
        Binary::And => zip(a, b, out, |a, b| truth(a != 0.0 && b != 0.0)),
        Binary::Or => zip(a, b, out, |a, b| truth(a != 0.0 || b != 0.0)),
    }
}

/// `out = yes` where `condition` is not zero, else `no`: the other branch is not looked at, whatever it holds.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn select(condition: Operand<'_>, yes: Operand<'_>, no: Operand<'_>, out: &mut [f64]) {
    match condition {
        Operand::Scalar(condition) => {
            (if condition != 0.0 { yes } else { no }).copy_to(out);
        }
        Operand::Block(condition) => {
            no.copy_to(out);
            match yes {
                Operand::Block(yes) => {
                    for ((y, &condition), &yes) in out.iter_mut().zip(condition).zip(yes) {
                        *y = if condition != 0.0 { yes } else { *y };
                    }
                }
                Operand::Scalar(yes) => {
                    for (y, &condition) in out.iter_mut().zip(condition) {
                        *y = if condition != 0.0 { yes } else { *y };
                    }
                }
            }
        }
    }
}

/// Takes row `r` of a column, `body`, into the reduction so far; row 0 begins it.
///
/// `extra` is the row of the extreme so far, or the sum of exponentials relative to the largest so far, `total`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn reduce_row(reduction: Reduction, r: usize, body: Operand<'_>, total: &mut [f64], extra: &mut [f64]) {
    match reduction {
        Reduction::Sum => match body {
            _ if r == 0 => body.copy_to(total),
            Operand::Block(body) => {
                for (sum, &x) in total.iter_mut().zip(body) {
                    *sum += x;
                }
            }
            Operand::Scalar(x) => {
                for sum in total.iter_mut() {
                    *sum += x;
                }
            }
        },
        Reduction::Minimum => extreme(body, r, total, extra, |x, least| x < least),
        Reduction::Maximum => extreme(body, r, total, extra, |x, most| x > most),
        Reduction::LogSumExp => match body {
            _ if r == 0 => {
                body.copy_to(total);
                extra.fill(1.0);
            }
            Operand::Block(body) => {
                for ((high, sum), &x) in total.iter_mut().zip(extra).zip(body) {
                    (*high, *sum) = log_sum_exp_step(*high, *sum, x);
                }
            }
            Operand::Scalar(x) => {
                for (high, sum) in total.iter_mut().zip(extra) {
                    (*high, *sum) = log_sum_exp_step(*high, *sum, x);
                }
            }
        },
    }
}

/// One term more: `e^high * sum` grows by `e^x`, with one exponential whichever is larger.
#[inline(always)]
fn log_sum_exp_step(high: f64, sum: f64, x: f64) -> (f64, f64) {
    // Equal infinities would give NaN.
    let gap = if x == high { 0.0 } else { x - high };
    let e = exp(-gap.abs());
    let below = gap <= 0.0;
    (if below { high } else { x }, if below { sum + e } else { sum * e + 1.0 })
}

#[inline(always)]
fn extreme(body: Operand<'_>, r: usize, total: &mut [f64], row: &mut [f64], beats: impl Fn(f64, f64) -> bool) {
    if r == 0 {
        body.copy_to(total);
        row.fill(0.0);
        return;
    }
    let r = r as f64;
    for (j, (best, row)) in total.iter_mut().zip(row).enumerate() {
        let x = body.at(j);
        // NaN takes over and stays.
        let taken = beats(x, *best) || (x.is_nan() && !best.is_nan());
        *best = if taken { x } else { *best };
        *row = if taken { r } else { *row };
    }
}

/// Ends a `logsumexp`: `total + ln(extra)`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn finish_log_sum_exp(total: &mut [f64], extra: &[f64]) {
    for (high, &sum) in total.iter_mut().zip(extra) {
        *high += ln(sum);
    }
}
