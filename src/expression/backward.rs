//! Derivatives of the operations: what an operation's own adjoint `g` adds to those of its arguments.
//!
//! A zero adjoint adds nothing, whatever the derivative: that is how the branch of an `if` that was not taken stays
//! out, even where its derivative is infinite or NaN.

use std::f64::consts::{FRAC_2_SQRT_PI, LN_10};

use multiversion::multiversion;

use super::forward::{Operand, Spare};
use super::gamma::{digamma, ln_gamma_half_step_slope, ln_rising_slopes};
use super::kinds::{Binary, Reduction, Unary};
use super::special::{log_normal_tail_slope, log1p, logistic, logistic_slope, normal_density, whole_power};
use crate::numeric::{exp, ln};

/// `g d`, with zero where `g` is zero.
#[inline(always)]
fn masked(g: f64, d: f64) -> f64 {
    let product = g * d;
    if g == 0.0 { 0.0 } else { product }
}

// Macros for the reason given in `forward`.
/// Adds `g * slope` of `x` and the value `y` to `gx`, point by point.
macro_rules! add_slope {
    (($g:expr, $x:expr, $y:expr) => $gx:expr, |$v:tt, $w:tt| $slope:expr) => {
        for (((gx, &g), &$v), &$w) in $gx.iter_mut().zip($g).zip($x).zip($y) {
            *gx += masked(g, $slope);
        }
    };
}
/// Adds `g * slope` of `a`, `b` and the value `y` to `to`, point by point.
macro_rules! add_slope_of_two {
    (($g:expr, $a:expr, $b:expr, $y:expr) => $to:expr, |$u:tt, $v:tt, $w:tt| $slope:expr) => {
        for ((((to, &g), &$u), &$v), &$w) in $to.iter_mut().zip($g).zip($a).zip($b).zip($y) {
            *to += masked(g, $slope);
        }
    };
}

/// Adds `g` to `to` where `picked` holds: where it does not, not even a NaN gets through.
macro_rules! add_picked {
    (($g:expr, $a:expr, $b:expr) => $to:expr, |$u:tt, $v:tt| $picked:expr) => {
        for (((to, &g), &$u), &$v) in $to.iter_mut().zip($g).zip($a).zip($b) {
            *to += if $picked { g } else { 0.0 };
        }
    };
}

/// Adjoint of the argument of `y = function(x)`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn unary_slope(function: Unary, g: &[f64], x: &[f64], y: &[f64], gx: &mut [f64]) {
    match function {
        Unary::Negate => {
            for (gx, &g) in gx.iter_mut().zip(g) {
                *gx -= g;
            }
        }
        Unary::Square => add_slope!((g, x, y) => gx, |x, _| 2.0 * x),
        Unary::WholePower(3) => add_slope!((g, x, y) => gx, |x, _| 3.0 * (x * x)),
        Unary::WholePower(-1) => add_slope!((g, x, y) => gx, |_, y| -(y * y)),
        Unary::WholePower(n) => add_slope!((g, x, y) => gx, |x, _| f64::from(n) * whole_power(x, n - 1)),
        Unary::Exp => add_slope!((g, x, y) => gx, |_, y| y),
        Unary::Ln => add_slope!((g, x, y) => gx, |x, _| 1.0 / x),
        Unary::Log10 => add_slope!((g, x, y) => gx, |x, _| 1.0 / (x * LN_10)),
        Unary::Log1p => add_slope!((g, x, y) => gx, |x, _| 1.0 / (1.0 + x)),
        Unary::Expm1 => add_slope!((g, x, y) => gx, |_, y| y + 1.0),
        Unary::Sqrt => add_slope!((g, x, y) => gx, |_, y| 0.5 / y),
        Unary::Abs => add_slope!((g, x, y) => gx, |x, _| {
            if x > 0.0 {
                1.0
            } else if x < 0.0 {
                -1.0
            } else {
                0.0
            }
        }),
        Unary::Sin => add_slope!((g, x, y) => gx, |x, _| libm::cos(x)),
        Unary::Cos => add_slope!((g, x, y) => gx, |x, _| -libm::sin(x)),
        Unary::Tan => add_slope!((g, x, y) => gx, |_, y| 1.0 + y * y),
        Unary::Asin => add_slope!((g, x, y) => gx, |x, _| 1.0 / ((1.0 - x) * (1.0 + x)).sqrt()),
        Unary::Acos => add_slope!((g, x, y) => gx, |x, _| -1.0 / ((1.0 - x) * (1.0 + x)).sqrt()),
        Unary::Atan => add_slope!((g, x, y) => gx, |x, _| 1.0 / (1.0 + x * x)),
        Unary::Sinh => add_slope!((g, x, y) => gx, |x, _| libm::cosh(x)),
        Unary::Cosh => add_slope!((g, x, y) => gx, |x, _| libm::sinh(x)),
        // 1 - tanh^2 cancels far out; 4 e^-2|x| / (1 + e^-2|x|)^2 does not.
        Unary::Tanh => add_slope!((g, x, y) => gx, |x, _| 4.0 * logistic_slope(2.0 * x)),
        Unary::LnGamma | Unary::LnGammaPositive => add_slope!((g, x, y) => gx, |x, _| digamma(x)),
        Unary::LnGammaHalfStep => add_slope!((g, x, y) => gx, |x, _| ln_gamma_half_step_slope(x)),
        Unary::Erf => add_slope!((g, x, y) => gx, |x, _| FRAC_2_SQRT_PI * exp(-x * x)),
        Unary::Erfc => add_slope!((g, x, y) => gx, |x, _| -FRAC_2_SQRT_PI * exp(-x * x)),
        Unary::NormalCdf => add_slope!((g, x, y) => gx, |x, _| normal_density(x)),
        Unary::NormalQuantile => add_slope!((g, x, y) => gx, |_, y| 1.0 / normal_density(y)),
        Unary::LogNormalTail => add_slope!((g, x, y) => gx, |x, _| log_normal_tail_slope(x)),
        Unary::Logistic => add_slope!((g, x, y) => gx, |x, _| logistic_slope(x)),
        Unary::Logit => add_slope!((g, x, y) => gx, |x, _| 1.0 / (x * (1.0 - x))),
        Unary::Softplus => add_slope!((g, x, y) => gx, |x, _| logistic(x)),
        Unary::Not | Unary::Floor | Unary::Ceil | Unary::Round | Unary::Present | Unary::IsFraction => {}
    }
}

/// Adjoint of the first argument of `y = function(a, b)`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn left_slope(
    function: Binary,
    g: &[f64],
    (a, b): (Operand<'_>, Operand<'_>),
    y: &[f64],
    spare: &mut Spare,
    ga: &mut [f64],
) {
    // The frequent ones need no repetition of a number for all points.
    match (function, b) {
        (Binary::Add | Binary::Subtract, _) => {
            for (ga, &g) in ga.iter_mut().zip(g) {
                *ga += g;
            }
            return;
        }
        (Binary::Multiply, Operand::Scalar(b)) => {
            for (ga, &g) in ga.iter_mut().zip(g) {
                *ga += masked(g, b);
            }
            return;
        }
        _ => {}
    }
    let [room_a, room_b] = spare;
    let (a, b) = (a.spread(g.len(), room_a), b.spread(g.len(), room_b));
    match function {
        Binary::Multiply => add_slope_of_two!((g, a, b, y) => ga, |_, b, _| b),
        Binary::Divide => add_slope_of_two!((g, a, b, y) => ga, |_, b, _| 1.0 / b),
        Binary::Power => add_slope_of_two!((g, a, b, y) => ga, |a, b, y| power_slope(a, b, y)),
        Binary::Atan2 => add_slope_of_two!((g, a, b, y) => ga, |a, b, _| b / (a * a + b * b)),
        Binary::Hypot => add_slope_of_two!((g, a, b, y) => ga, |a, _, y| if y == 0.0 { 0.0 } else { a / y }),
        Binary::Minimum => add_picked!((g, a, b) => ga, |a, b| a <= b),
        Binary::Maximum => add_picked!((g, a, b) => ga, |a, b| a >= b),
        Binary::MinimumDefined => add_picked!((g, a, b) => ga, |a, b| a <= b || b.is_nan()),
        Binary::LogAddExp => add_slope_of_two!((g, a, b, y) => ga, |a, _, y| share(a, y)),
        Binary::XLogY => add_slope_of_two!((g, a, b, y) => ga, |_, b, _| ln(b)),
        Binary::XLog1pY => add_slope_of_two!((g, a, b, y) => ga, |_, b, _| log1p(b)),
        Binary::LnRising => add_slope_of_two!((g, a, b, y) => ga, |a, b, _| ln_rising_slopes(a, b).0),
        Binary::Add | Binary::Subtract => unreachable!("done above"),
        Binary::Less | Binary::LessEqual | Binary::Equal | Binary::Differ | Binary::And | Binary::Or => {}
    }
}

/// Adjoint of the second argument of `y = function(a, b)`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn right_slope(
    function: Binary,
    g: &[f64],
    (a, b): (Operand<'_>, Operand<'_>),
    y: &[f64],
    spare: &mut Spare,
    gb: &mut [f64],
) {
    match (function, a) {
        (Binary::Add, _) => {
            for (gb, &g) in gb.iter_mut().zip(g) {
                *gb += g;
            }
            return;
        }
        (Binary::Subtract, _) => {
            for (gb, &g) in gb.iter_mut().zip(g) {
                *gb -= g;
            }
            return;
        }
        (Binary::Multiply, Operand::Scalar(a)) => {
            for (gb, &g) in gb.iter_mut().zip(g) {
                *gb += masked(g, a);
            }
            return;
        }
        _ => {}
    }
    let [room_a, room_b] = spare;
    let (a, b) = (a.spread(g.len(), room_a), b.spread(g.len(), room_b));
    match function {
        Binary::Multiply => add_slope_of_two!((g, a, b, y) => gb, |a, _, _| a),
        Binary::Divide => add_slope_of_two!((g, a, b, y) => gb, |_, b, y| -(y / b)),
        // 0^b is 0 for all b > 0: there ln 0 must not turn it into NaN.
        Binary::Power => add_slope_of_two!((g, a, b, y) => gb, |a, _, y| if y == 0.0 { 0.0 } else { y * ln(a) }),
        Binary::Atan2 => add_slope_of_two!((g, a, b, y) => gb, |a, b, _| -a / (a * a + b * b)),
        Binary::Hypot => add_slope_of_two!((g, a, b, y) => gb, |_, b, y| if y == 0.0 { 0.0 } else { b / y }),
        // Of equal ones the first is picked.
        Binary::Minimum => add_picked!((g, a, b) => gb, |a, b| b < a),
        Binary::Maximum => add_picked!((g, a, b) => gb, |a, b| b > a),
        Binary::MinimumDefined => add_picked!((g, a, b) => gb, |a, b| b < a || a.is_nan()),
        Binary::LogAddExp => add_slope_of_two!((g, a, b, y) => gb, |_, b, y| share(b, y)),
        Binary::XLogY => add_slope_of_two!((g, a, b, y) => gb, |a, b, _| if a == 0.0 { 0.0 } else { a / b }),
        Binary::XLog1pY => add_slope_of_two!((g, a, b, y) => gb, |a, b, _| if a == 0.0 { 0.0 } else { a / (1.0 + b) }),
        Binary::LnRising => add_slope_of_two!((g, a, b, y) => gb, |a, b, _| ln_rising_slopes(a, b).1),
        Binary::Add | Binary::Subtract => unreachable!("done above"),
        Binary::Less | Binary::LessEqual | Binary::Equal | Binary::Differ | Binary::And | Binary::Or => {}
    }
}

/// `to += g`.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn add_all(g: &[f64], to: &mut [f64]) {
    for (to, &g) in to.iter_mut().zip(g) {
        *to += g;
    }
}

/// `b a^(b - 1)`, by the value `y` itself where `a` is not zero.
#[inline(always)]
fn power_slope(a: f64, b: f64, y: f64) -> f64 {
    if b == 0.0 {
        0.0
    } else if a == 0.0 {
        b * libm::pow(a, b - 1.0)
    } else {
        b * (y / a)
    }
}

/// `e^(x - total)`, the share of a term in a `logsumexp`; no mass gives zero.
#[inline(always)]
fn share(x: f64, total: f64) -> f64 {
    let e = exp(x - total);
    if x == f64::NEG_INFINITY { 0.0 } else { e }
}

/// Adjoint of the branch of an `if` that is taken where `condition` is not zero (`taken`) or zero (`!taken`).
pub(super) fn branch_slope(taken: bool, g: &[f64], condition: Operand<'_>, to: &mut [f64]) {
    match condition {
        Operand::Scalar(condition) if (condition != 0.0) == taken => add_all(g, to),
        Operand::Scalar(_) => {}
        Operand::Block(condition) => branch_loop(taken, g, condition, to),
    }
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
fn branch_loop(taken: bool, g: &[f64], condition: &[f64], to: &mut [f64]) {
    for ((to, &g), &condition) in to.iter_mut().zip(g).zip(condition) {
        *to += if (condition != 0.0) == taken { g } else { 0.0 };
    }
}

/// Adjoint of row `r` of a reduced column. `total` is the result; `extra` the row of an extreme.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx2", "x86_64+avx2"))]
pub(super) fn row_slope(
    reduction: Reduction,
    r: usize,
    g: &[f64],
    body: Operand<'_>,
    (total, extra): (&[f64], &[f64]),
    to: &mut [f64],
) {
    match reduction {
        Reduction::Sum => {
            for (to, &g) in to.iter_mut().zip(g) {
                *to += g;
            }
        }
        Reduction::Minimum | Reduction::Maximum => {
            let r = r as f64;
            for ((to, &g), &row) in to.iter_mut().zip(g).zip(extra) {
                *to += if row == r { g } else { 0.0 };
            }
        }
        Reduction::LogSumExp => {
            // What is summed up varies with the inputs: it is a block.
            if let Operand::Block(body) = body {
                add_slope!((g, body, total) => to, |x, total| share(x, total));
            }
        }
    }
}
