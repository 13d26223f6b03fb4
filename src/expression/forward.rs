//! Values of the operations over a stretch of points: loops down columns, which the compiler turns into vector
//! instructions. The loops exist three times (AVX-512, AVX2, plain), chosen when the program runs; without fused
//! multiply-add they give the same bits.

use multiversion::multiversion;

use super::gamma::{ln_gamma, ln_gamma_half_step, ln_gamma_positive, ln_rising};
use super::kinds::{Binary, Reduction, Unary};
use super::special::{
    log_add_exp, log_normal_tail, log1p, logistic, logit, maximum, minimum, normal_cdf, normal_quantile, softplus,
    whole_power, x_log_y, x_log1p_y,
};
use crate::numeric::{BLOCK, exp, ln};

/// An argument: a number for every point, or one for all of them.
#[derive(Debug, Clone, Copy)]
pub(super) enum Operand<'a> {
    Block(&'a [f64]),
    Scalar(f64),
}

impl<'a> Operand<'a> {
    /// The number of point `j`.
    pub(super) fn at(self, j: usize) -> f64 {
        match self {
            Operand::Block(values) => values[j],
            Operand::Scalar(value) => value,
        }
    }

    /// Writes all numbers to `out`.
    #[inline]
    pub(super) fn copy_to(self, out: &mut [f64]) {
        match self {
            Operand::Block(values) => out.copy_from_slice(&values[..out.len()]),
            Operand::Scalar(value) => out.fill(value),
        }
    }

    /// The numbers of a stretch of at most 128 points; one for all is repeated in `room`.
    #[inline(always)]
    pub(super) fn spread(self, len: usize, room: &'a mut Row) -> &'a [f64] {
        match self {
            Operand::Block(values) => &values[..len],
            Operand::Scalar(value) => {
                room.0[..len].fill(value);
                &room.0[..len]
            }
        }
    }

    /// From the point `from` on.
    fn from(self, from: usize) -> Self {
        match self {
            Operand::Block(values) => Operand::Block(&values[from..]),
            scalar @ Operand::Scalar(_) => scalar,
        }
    }
}

/// A number for each of 128 points, where a vector load finds it: one that crosses a cache line costs two.
#[derive(Debug, Clone, Copy)]
#[repr(align(64))]
pub(super) struct Row(pub(super) [f64; BLOCK]);

impl Row {
    pub(super) const ZERO: Self = Self([0.0; BLOCK]);
}

/// Room in which arguments that are one number for all points are repeated.
pub(super) type Spare = [Row; 2];

/// A condition as a number.
#[inline(always)]
fn truth(holds: bool) -> f64 {
    if holds { 1.0 } else { 0.0 }
}

// The loops are macros because functions that take a closure will not do: one that is called from several places is
// not always inlined, and then the loop makes one call a point instead of one instruction for eight.
macro_rules! map {
    ($x:expr, $out:expr, |$v:ident| $value:expr) => {
        for (y, &$v) in $out.iter_mut().zip($x) {
            *y = $value;
        }
    };
}
macro_rules! zip {
    ($a:expr, $b:expr, $out:expr, |$v:ident, $w:ident| $value:expr) => {
        for ((y, &$v), &$w) in $out.iter_mut().zip($a).zip($b) {
            *y = $value;
        }
    };
}

/// `out = function(x)`, point by point, for any number of points.
pub(super) fn unary_long(function: Unary, x: Operand<'_>, out: &mut [f64]) {
    let mut room = Row::ZERO;
    for (k, out) in out.chunks_mut(BLOCK).enumerate() {
        unary(function, x.from(k * BLOCK).spread(out.len(), &mut room), out);
    }
}

/// `out = function(a, b)`, point by point, for any number of points.
pub(super) fn binary_long(function: Binary, a: Operand<'_>, b: Operand<'_>, out: &mut [f64]) {
    let mut spare = [Row::ZERO; 2];
    for (k, out) in out.chunks_mut(BLOCK).enumerate() {
        binary(function, a.from(k * BLOCK), b.from(k * BLOCK), &mut spare, out);
    }
}

/// `out = function(x)`, point by point.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn unary(function: Unary, x: &[f64], out: &mut [f64]) {
    match function {
        Unary::Negate => map!(x, out, |x| -x),
        Unary::Not => map!(x, out, |x| truth(x == 0.0)),
        Unary::Square => map!(x, out, |x| x * x),
        Unary::WholePower(3) => map!(x, out, |x| x * x * x),
        Unary::WholePower(-1) => map!(x, out, |x| 1.0 / x),
        Unary::WholePower(n) => map!(x, out, |x| whole_power(x, n)),
        Unary::Exp => map!(x, out, |x| exp(x)),
        Unary::Ln => map!(x, out, |x| ln(x)),
        Unary::Log10 => map!(x, out, |x| libm::log10(x)),
        Unary::Log1p => map!(x, out, |x| log1p(x)),
        Unary::Expm1 => map!(x, out, |x| libm::expm1(x)),
        Unary::Sqrt => map!(x, out, |x| x.sqrt()),
        Unary::Abs => map!(x, out, |x| x.abs()),
        Unary::Floor => map!(x, out, |x| libm::floor(x)),
        Unary::Ceil => map!(x, out, |x| libm::ceil(x)),
        Unary::Round => map!(x, out, |x| libm::round(x)),
        Unary::Sin => map!(x, out, |x| libm::sin(x)),
        Unary::Cos => map!(x, out, |x| libm::cos(x)),
        Unary::Tan => map!(x, out, |x| libm::tan(x)),
        Unary::Asin => map!(x, out, |x| libm::asin(x)),
        Unary::Acos => map!(x, out, |x| libm::acos(x)),
        Unary::Atan => map!(x, out, |x| libm::atan(x)),
        Unary::Sinh => map!(x, out, |x| libm::sinh(x)),
        Unary::Cosh => map!(x, out, |x| libm::cosh(x)),
        Unary::Tanh => map!(x, out, |x| libm::tanh(x)),
        Unary::LnGamma => map!(x, out, |x| ln_gamma(x)),
        Unary::LnGammaPositive => map!(x, out, |x| ln_gamma_positive(x)),
        Unary::LnGammaHalfStep => map!(x, out, |x| ln_gamma_half_step(x)),
        Unary::Erf => map!(x, out, |x| libm::erf(x)),
        Unary::Erfc => map!(x, out, |x| libm::erfc(x)),
        Unary::NormalCdf => map!(x, out, |x| normal_cdf(x)),
        Unary::NormalQuantile => map!(x, out, |x| normal_quantile(x)),
        Unary::LogNormalTail => map!(x, out, |x| log_normal_tail(x)),
        Unary::Logistic => map!(x, out, |x| logistic(x)),
        Unary::Logit => map!(x, out, |x| logit(x)),
        Unary::Softplus => map!(x, out, |x| softplus(x)),
        Unary::Present => map!(x, out, |x| truth(!x.is_nan())),
        Unary::IsFraction => map!(x, out, |x| truth(x > libm::floor(x))),
    }
}

/// `out = function(a, b)`, point by point, for at most 128 points.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn binary(function: Binary, a: Operand<'_>, b: Operand<'_>, spare: &mut Spare, out: &mut [f64]) {
    // Algebra with one number for all points is frequent enough to save the repetition.
    match (function, a, b) {
        (Binary::Add, Operand::Scalar(a), Operand::Block(b)) | (Binary::Add, Operand::Block(b), Operand::Scalar(a)) => {
            return map!(b, out, |b| a + b);
        }
        (Binary::Multiply, Operand::Scalar(a), Operand::Block(b))
        | (Binary::Multiply, Operand::Block(b), Operand::Scalar(a)) => return map!(b, out, |b| a * b),
        (Binary::Subtract, Operand::Block(a), Operand::Scalar(b)) => return map!(a, out, |a| a - b),
        (Binary::Subtract, Operand::Scalar(a), Operand::Block(b)) => return map!(b, out, |b| a - b),
        (Binary::Divide, Operand::Block(a), Operand::Scalar(b)) => return map!(a, out, |a| a / b),
        (Binary::Divide, Operand::Scalar(a), Operand::Block(b)) => return map!(b, out, |b| a / b),
        _ => {}
    }
    let [room_a, room_b] = spare;
    let (a, b) = (a.spread(out.len(), room_a), b.spread(out.len(), room_b));
    match function {
        Binary::Add => zip!(a, b, out, |a, b| a + b),
        Binary::Subtract => zip!(a, b, out, |a, b| a - b),
        Binary::Multiply => zip!(a, b, out, |a, b| a * b),
        Binary::Divide => zip!(a, b, out, |a, b| a / b),
        Binary::Power => zip!(a, b, out, |a, b| libm::pow(a, b)),
        Binary::Atan2 => zip!(a, b, out, |a, b| libm::atan2(a, b)),
        Binary::Hypot => zip!(a, b, out, |a, b| libm::hypot(a, b)),
        Binary::Minimum => zip!(a, b, out, |a, b| minimum(a, b)),
        Binary::Maximum => zip!(a, b, out, |a, b| maximum(a, b)),
        Binary::MinimumDefined => zip!(a, b, out, |a, b| if a <= b || b.is_nan() { a } else { b }),
        Binary::LogAddExp => zip!(a, b, out, |a, b| log_add_exp(a, b)),
        Binary::XLogY => zip!(a, b, out, |a, b| x_log_y(a, b)),
        Binary::XLog1pY => zip!(a, b, out, |a, b| x_log1p_y(a, b)),
        Binary::LnRising => zip!(a, b, out, |a, b| ln_rising(a, b)),
        Binary::Less => zip!(a, b, out, |a, b| truth(a < b)),
        Binary::LessEqual => zip!(a, b, out, |a, b| truth(a <= b)),
        Binary::Equal => zip!(a, b, out, |a, b| truth(a == b)),
        // Unlike `!=` false when a side is NaN.
        Binary::Differ => zip!(a, b, out, |a, b| truth(a < b) + truth(a > b)),
        Binary::And => zip!(a, b, out, |a, b| truth(a != 0.0 && b != 0.0)),
        Binary::Or => zip!(a, b, out, |a, b| truth(a != 0.0 || b != 0.0)),
    }
}

/// `out = yes` where `condition` is not zero, else `no`: the other branch is not looked at, whatever it holds.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn select(condition: Operand<'_>, yes: Operand<'_>, no: Operand<'_>, out: &mut [f64]) {
    match condition {
        Operand::Scalar(condition) => (if condition != 0.0 { yes } else { no }).copy_to(out),
        Operand::Block(condition) => {
            no.copy_to(out);
            match yes {
                Operand::Scalar(yes) => {
                    for (y, &condition) in out.iter_mut().zip(condition) {
                        *y = if condition != 0.0 { yes } else { *y };
                    }
                }
                Operand::Block(yes) => {
                    for ((y, &condition), &yes) in out.iter_mut().zip(condition).zip(yes) {
                        *y = if condition != 0.0 { yes } else { *y };
                    }
                }
            }
        }
    }
}

/// Takes row `r` of a column, `body`, into the reduction so far; row 0 begins it. At most 128 points.
///
/// `extra` is the row of the extreme so far, or the sum of exponentials relative to the largest so far, `total`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn reduce_row(
    reduction: Reduction,
    r: usize,
    body: Operand<'_>,
    spare: &mut Spare,
    total: &mut [f64],
    extra: &mut [f64],
) {
    if r == 0 {
        body.copy_to(total);
        extra.fill(if reduction == Reduction::LogSumExp { 1.0 } else { 0.0 });
        return;
    }
    let body = body.spread(total.len(), &mut spare[0]);
    let r = r as f64;
    match reduction {
        Reduction::Sum => {
            for (sum, &x) in total.iter_mut().zip(body) {
                *sum += x;
            }
        }
        Reduction::Minimum => {
            for ((best, row), &x) in total.iter_mut().zip(extra).zip(body) {
                // NaN takes over and stays.
                let taken = x < *best || (x.is_nan() && !best.is_nan());
                *best = if taken { x } else { *best };
                *row = if taken { r } else { *row };
            }
        }
        Reduction::Maximum => {
            for ((best, row), &x) in total.iter_mut().zip(extra).zip(body) {
                let taken = x > *best || (x.is_nan() && !best.is_nan());
                *best = if taken { x } else { *best };
                *row = if taken { r } else { *row };
            }
        }
        Reduction::LogSumExp => {
            for ((high, sum), &x) in total.iter_mut().zip(extra).zip(body) {
                (*high, *sum) = log_sum_exp_step(*high, *sum, x);
            }
        }
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

/// Ends a `logsumexp`: `total + ln(extra)`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn finish_log_sum_exp(total: &mut [f64], extra: &[f64]) {
    for (high, &sum) in total.iter_mut().zip(extra) {
        *high += ln(sum);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::{Purpose, stream, uniform};

    const UNARY: [Unary; 38] = [
        Unary::Negate,
        Unary::Not,
        Unary::Square,
        Unary::WholePower(3),
        Unary::WholePower(-1),
        Unary::WholePower(-7),
        Unary::Exp,
        Unary::Ln,
        Unary::Log10,
        Unary::Log1p,
        Unary::Expm1,
        Unary::Sqrt,
        Unary::Abs,
        Unary::Floor,
        Unary::Ceil,
        Unary::Round,
        Unary::Sin,
        Unary::Cos,
        Unary::Tan,
        Unary::Asin,
        Unary::Acos,
        Unary::Atan,
        Unary::Sinh,
        Unary::Cosh,
        Unary::Tanh,
        Unary::LnGamma,
        Unary::LnGammaPositive,
        Unary::LnGammaHalfStep,
        Unary::Erf,
        Unary::Erfc,
        Unary::NormalCdf,
        Unary::NormalQuantile,
        Unary::LogNormalTail,
        Unary::Logistic,
        Unary::Logit,
        Unary::Softplus,
        Unary::Present,
        Unary::IsFraction,
    ];

    const BINARY: [Binary; 20] = [
        Binary::Add,
        Binary::Subtract,
        Binary::Multiply,
        Binary::Divide,
        Binary::Power,
        Binary::Atan2,
        Binary::Hypot,
        Binary::Minimum,
        Binary::Maximum,
        Binary::MinimumDefined,
        Binary::LogAddExp,
        Binary::XLogY,
        Binary::XLog1pY,
        Binary::LnRising,
        Binary::Less,
        Binary::LessEqual,
        Binary::Equal,
        Binary::Differ,
        Binary::And,
        Binary::Or,
    ];

    /// Numbers of all sizes, both signs, with zeros, infinities and NaN among them.
    fn numbers(seed: u64) -> Vec<f64> {
        let mut rng = stream(seed, Purpose::Trial, 0, 0);
        let edges =
            [0.0, -0.0, 1.0, -1.0, 0.5, f64::INFINITY, f64::NEG_INFINITY, f64::NAN, 1e-310, 1e300, 710.0, -746.0];
        let mut column: Vec<f64> = edges.to_vec();
        while column.len() < 1000 {
            let size = exp(40.0 * uniform(&mut rng) - 30.0);
            column.push(if uniform(&mut rng) < 0.5 { size } else { -size });
        }
        column
    }

    fn bits(value: f64) -> u64 {
        if value.is_nan() { u64::MAX } else { value.to_bits() }
    }

    /// A loop of one turn takes no vector instruction: what it gives must be what eight lanes give.
    #[test]
    fn vector_lanes_give_the_bits_of_single_numbers() {
        let (a, mut b) = (numbers(1), numbers(2));
        b.rotate_right(5);
        let mut spare = [Row::ZERO; 2];
        for function in UNARY {
            let mut together = vec![0.0; a.len()];
            unary_long(function, Operand::Block(&a), &mut together);
            for (&x, &want) in a.iter().zip(&together) {
                let mut alone = [0.0];
                unary(function, &[x], &mut alone);
                assert_eq!(bits(alone[0]), bits(want), "{function:?}({x:e})");
            }
        }
        for function in BINARY {
            let mut together = vec![0.0; a.len()];
            binary_long(function, Operand::Block(&a), Operand::Block(&b), &mut together);
            for ((&x, &y), &want) in a.iter().zip(&b).zip(&together) {
                for (left, right) in [
                    (Operand::Block(&[x]), Operand::Block(&[y])),
                    (Operand::Scalar(x), Operand::Block(&[y])),
                    (Operand::Block(&[x]), Operand::Scalar(y)),
                ] {
                    let mut alone = [0.0];
                    binary(function, left, right, &mut spare, &mut alone);
                    assert_eq!(bits(alone[0]), bits(want), "{function:?}({x:e}, {y:e})");
                }
            }
        }
    }
}
