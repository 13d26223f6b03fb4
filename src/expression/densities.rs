//! Log densities and log masses, all normalised, put together from elementary operations.
//!
//! That way the derivatives with respect to every argument follow by themselves, parts that are the same in every
//! row leave a sum, and parts that only concern data are computed once. Outside its support a density is `-inf`;
//! with parameters that allow no distribution it is NaN.

use std::f64::consts::PI;

use super::kinds::Binary::{
    Add, And, Differ, Divide, Less, LessEqual, LnRising, Multiply, Or, Subtract, XLog1pY, XLogY,
};
use super::kinds::Id;
use super::kinds::Unary::{
    IsFraction, Ln, LnGammaHalfStep, LnGammaPositive, Log1p, Negate, Softplus, Square, WholePower,
};
use super::operations::Operations;
use super::special::LN_SQRT_2_PI;

/// `core - normaliser`, of which a sum may be taken side by side.
fn minus(list: &mut Operations, core: Id, normaliser: Id) -> Id {
    let whole = list.binary(Subtract, core, normaliser);
    list.separable(whole)
}

/// `core + normaliser`, of which a sum may be taken side by side.
fn plus(list: &mut Operations, core: Id, normaliser: Id) -> Id {
    let whole = list.binary(Add, core, normaliser);
    list.separable(whole)
}

/// `(x - location)/scale`; a scale that is one number is inverted once, not once a row.
fn standardised(list: &mut Operations, x: Id, location: Id, scale: Id) -> Id {
    let distance = list.binary(Subtract, x, location);
    if list.entry(scale).rows.is_some() {
        return list.binary(Divide, distance, scale);
    }
    let inverse = list.unary(WholePower(-1), scale);
    list.binary(Multiply, distance, inverse)
}

/// `ln(factor * of)`.
fn ln_of_times(list: &mut Operations, factor: f64, of: Id) -> Id {
    let factor = list.constant(factor);
    let product = list.binary(Multiply, factor, of);
    list.unary(Ln, product)
}

/// `density` with `-inf` where `outside` holds.
fn except(list: &mut Operations, outside: Id, density: Id) -> Id {
    let nothing = list.constant(f64::NEG_INFINITY);
    list.select(outside, nothing, density)
}

/// `mass` where `k` is a whole number from 0 on, else `-inf`.
fn on_whole_numbers(list: &mut Operations, k: Id, mass: Id) -> Id {
    let fraction = list.unary(IsFraction, k);
    let zero = list.constant(0.0);
    let negative = list.binary(Less, k, zero);
    let outside = list.binary(Or, fraction, negative);
    except(list, outside, mass)
}

/// `-z^2/2 - ln sd - ln sqrt(2 pi)` with `z = (x - mean)/sd`.
pub(super) fn normal(list: &mut Operations, of: &[Id]) -> Id {
    let z = standardised(list, of[0], of[1], of[2]);
    let square = list.unary(Square, z);
    let minus_half = list.constant(-0.5);
    let core = list.binary(Multiply, minus_half, square);
    let ln_sd = list.unary(Ln, of[2]);
    let constant = list.constant(LN_SQRT_2_PI);
    let without_constant = minus(list, core, ln_sd);
    minus(list, without_constant, constant)
}

/// `ln Gamma((df + 1)/2) - ln Gamma(df/2) - ln(pi df)/2 - ln scale - (df + 1)/2 ln(1 + z^2/df)`.
pub(super) fn student_t(list: &mut Operations, of: &[Id]) -> Id {
    let &[x, df, location, scale] = of else { unreachable!("the table of functions says four") };
    let z = standardised(list, x, location, scale);
    let square = list.unary(Square, z);
    let ratio = if list.entry(df).rows.is_some() {
        list.binary(Divide, square, df)
    } else {
        let inverse = list.unary(WholePower(-1), df);
        list.binary(Multiply, square, inverse)
    };
    let ln_ratio = list.unary(Log1p, ratio);
    let half = list.constant(0.5);
    let half_df = list.binary(Multiply, half, df);
    let exponent = list.binary(Add, half_df, half);
    let weighted = list.binary(Multiply, exponent, ln_ratio);
    let core = list.unary(Negate, weighted);

    let step = list.unary(LnGammaHalfStep, half_df);
    let ln_pi_df = ln_of_times(list, PI, df);
    let half_ln = list.binary(Multiply, half, ln_pi_df);
    let ln_scale = list.unary(Ln, scale);
    let both = list.binary(Add, half_ln, ln_scale);
    let normaliser = list.binary(Subtract, step, both);
    plus(list, core, normaliser)
}

/// The normal density of `ln x`, less `ln x`; nothing for `x <= 0`.
pub(super) fn lognormal(list: &mut Operations, of: &[Id]) -> Id {
    let ln_x = list.unary(Ln, of[0]);
    let of_ln = normal(list, &[ln_x, of[1], of[2]]);
    let density = minus(list, of_ln, ln_x);
    let zero = list.constant(0.0);
    let outside = list.binary(LessEqual, of[0], zero);
    except(list, outside, density)
}

/// `shape ln rate - ln Gamma(shape) + (shape - 1) ln x - rate x`; nothing for `x < 0`.
pub(super) fn gamma(list: &mut Operations, of: &[Id]) -> Id {
    let &[x, shape, rate] = of else { unreachable!("the table of functions says three") };
    let one = list.constant(1.0);
    let less_one = list.binary(Subtract, shape, one);
    let power = list.binary(XLogY, less_one, x);
    let decay = list.binary(Multiply, rate, x);
    let core = minus(list, power, decay);
    let ln_rate = list.unary(Ln, rate);
    let scaled = list.binary(Multiply, shape, ln_rate);
    let ln_gamma = list.unary(LnGammaPositive, shape);
    let normaliser = list.binary(Subtract, scaled, ln_gamma);
    let density = plus(list, core, normaliser);
    let zero = list.constant(0.0);
    let outside = list.binary(Less, x, zero);
    except(list, outside, density)
}

/// `(a - 1) ln x + (b - 1) ln(1 - x) - ln B(a, b)`; nothing outside `[0, 1]`.
pub(super) fn beta(list: &mut Operations, of: &[Id]) -> Id {
    let &[x, a, b] = of else { unreachable!("the table of functions says three") };
    let one = list.constant(1.0);
    let zero = list.constant(0.0);
    let a_less_one = list.binary(Subtract, a, one);
    let b_less_one = list.binary(Subtract, b, one);
    let minus_x = list.unary(Negate, x);
    let left = list.binary(XLogY, a_less_one, x);
    let right = list.binary(XLog1pY, b_less_one, minus_x);
    let core = plus(list, left, right);
    let a_and_b = list.binary(Add, a, b);
    let whole = list.unary(LnGammaPositive, a_and_b);
    let of_a = list.unary(LnGammaPositive, a);
    let of_b = list.unary(LnGammaPositive, b);
    let parts = list.binary(Add, of_a, of_b);
    let normaliser = list.binary(Subtract, whole, parts);
    let density = plus(list, core, normaliser);
    let below = list.binary(Less, x, zero);
    let above = list.binary(Less, one, x);
    let outside = list.binary(Or, below, above);
    except(list, outside, density)
}

/// `ln rate - rate x`; nothing for `x < 0`.
pub(super) fn exponential(list: &mut Operations, of: &[Id]) -> Id {
    let decay = list.binary(Multiply, of[1], of[0]);
    let core = list.unary(Negate, decay);
    let ln_rate = list.unary(Ln, of[1]);
    let density = plus(list, core, ln_rate);
    let zero = list.constant(0.0);
    let outside = list.binary(Less, of[0], zero);
    except(list, outside, density)
}

/// `-ln(1 + z^2) - ln(pi scale)`.
pub(super) fn cauchy(list: &mut Operations, of: &[Id]) -> Id {
    let z = standardised(list, of[0], of[1], of[2]);
    let square = list.unary(Square, z);
    let ln_ratio = list.unary(Log1p, square);
    let core = list.unary(Negate, ln_ratio);
    let normaliser = ln_of_times(list, PI, of[2]);
    minus(list, core, normaliser)
}

/// `ln k!`.
fn ln_factorial(list: &mut Operations, k: Id) -> Id {
    let one = list.constant(1.0);
    let next = list.binary(Add, k, one);
    list.unary(LnGammaPositive, next)
}

/// `k ln mean - mean - ln k!`.
pub(super) fn poisson(list: &mut Operations, of: &[Id]) -> Id {
    let &[k, mean] = of else { unreachable!("the table of functions says two") };
    let power = list.binary(XLogY, k, mean);
    let core = minus(list, power, mean);
    let normaliser = ln_factorial(list, k);
    let mass = minus(list, core, normaliser);
    on_whole_numbers(list, k, mass)
}

/// `ln n!/(k! (n - k)!) + k ln p + (n - k) ln(1 - p)`; nothing unless `k` is one of `0, 1, ..., n`.
pub(super) fn binomial(list: &mut Operations, of: &[Id]) -> Id {
    let &[k, n, p] = of else { unreachable!("the table of functions says three") };
    let rest = list.binary(Subtract, n, k);
    let core = successes(list, k, rest, p);
    let of_n = ln_factorial(list, n);
    let of_k = ln_factorial(list, k);
    let of_rest = ln_factorial(list, rest);
    let parts = list.binary(Add, of_k, of_rest);
    let choices = list.binary(Subtract, of_n, parts);
    let mass = plus(list, core, choices);
    let beyond = list.binary(Less, n, k);
    let mass = except(list, beyond, mass);
    on_whole_numbers(list, k, mass)
}

/// `k ln p + rest ln(1 - p)`.
fn successes(list: &mut Operations, k: Id, rest: Id, p: Id) -> Id {
    let hits = list.binary(XLogY, k, p);
    let minus_p = list.unary(Negate, p);
    let misses = list.binary(XLog1pY, rest, minus_p);
    plus(list, hits, misses)
}

/// `mass` where `k` is 0 or 1, else `-inf`.
fn on_zero_and_one(list: &mut Operations, k: Id, mass: Id) -> Id {
    let zero = list.constant(0.0);
    let one = list.constant(1.0);
    let no_zero = list.binary(Differ, k, zero);
    let no_one = list.binary(Differ, k, one);
    let outside = list.binary(And, no_zero, no_one);
    except(list, outside, mass)
}

/// `ln p` for `k = 1`, `ln(1 - p)` for `k = 0`.
pub(super) fn bernoulli(list: &mut Operations, of: &[Id]) -> Id {
    let &[k, p] = of else { unreachable!("the table of functions says two") };
    let one = list.constant(1.0);
    let rest = list.binary(Subtract, one, k);
    let mass = successes(list, k, rest, p);
    on_zero_and_one(list, k, mass)
}

/// [`bernoulli`] with `p = logistic(log_odds)`: `-ln(1 + e^-(2k - 1) log_odds)`, without cancellation at either end.
pub(super) fn bernoulli_odds(list: &mut Operations, of: &[Id]) -> Id {
    let &[k, log_odds] = of else { unreachable!("the table of functions says two") };
    let one = list.constant(1.0);
    let two = list.constant(2.0);
    let twice = list.binary(Multiply, two, k);
    let sign = list.binary(Subtract, one, twice);
    let against = list.binary(Multiply, sign, log_odds);
    let surprise = list.unary(Softplus, against);
    let mass = list.unary(Negate, surprise);
    on_zero_and_one(list, k, mass)
}

/// `ln Gamma(k + r)/(Gamma(r) k!) + k ln(mean/(r + mean)) + r ln(r/(r + mean))` with `r = 1/dispersion`, arranged so
/// that nothing cancels as the dispersion goes to zero:
/// `sum_{j < k} ln(1 + j/r) - ln k! + k ln mean - (k + r) ln(1 + dispersion mean)`.
pub(super) fn negative_binomial(list: &mut Operations, of: &[Id]) -> Id {
    let &[k, mean, dispersion] = of else { unreachable!("the table of functions says three") };
    let r = list.unary(WholePower(-1), dispersion);
    let rising = list.binary(LnRising, k, r);
    let power = list.binary(XLogY, k, mean);
    let spread = list.binary(Multiply, dispersion, mean);
    let ln_spread = list.unary(Log1p, spread);
    let count = list.binary(Add, k, r);
    let loss = list.binary(Multiply, count, ln_spread);
    let core = list.binary(Subtract, power, loss);
    let core = list.binary(Add, rising, core);
    let normaliser = ln_factorial(list, k);
    let mass = minus(list, core, normaliser);
    on_whole_numbers(list, k, mass)
}
