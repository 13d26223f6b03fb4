//! Reference values of the incomplete gamma functions and their relatives.

use super::*;
use crate::numeric::exp;

/// `a, x, ln P(a, x), ln Q(a, x)`. Source: mpmath 1.3.0 at 400 digits, `gammainc(a, 0, x, regularized=True)` and
/// `gammainc(a, x, inf, regularized=True)`.
#[rustfmt::skip]
const TAILS: [(f64, f64, f64, f64); 30] = [
    (0.001, 1e-300, -0.6901991342999303, -0.6961039435002198),
    (0.001, 0.3, -0.0009062486075557979, -7.00664997837023),
    (0.001, 0.99, -0.000223351313746557, -8.40687630175343),
    (0.001, 1.01, -0.00021598725244084867, -8.440399160181652),
    (0.3, 1e-10, -6.799580469497354, -0.001114863738215383),
    (0.3, 0.9, -0.10286070054565231, -2.325369170301189),
    (0.3, 1.5, -0.04302176985274885, -3.1674827821783045),
    (0.3, 700.0, -3.357078968190645e-307, -705.68255230801),
    (0.99, 0.5, -0.9203388201011237, -0.5081359736116294),
    (1.0, 1e-20, -46.051701859880914, -1e-20),
    (1.0, 690.0, -2.171738281389827e-300, -690.0),
    (2.5, 0.001, -18.47107606283979, -9.508534643814064e-09),
    (2.5, 2.5, -0.5376491579419246, -0.8773580722343328),
    (2.5, 4.2, -0.14563315112369166, -1.9985975055985434),
    (2.5, 30.0, -1.2154569777256906e-11, -25.13331590350649),
    (2.5, 700.0, -1.3765875143943704e-300, -690.4559202771591),
    (40.0, 1e-05, -570.837668069664, -1.2256054819434438e-248),
    (40.0, 10.0, -27.940044460002596, -7.341636314563167e-13),
    (40.0, 40.0, -0.6519498432523823, -0.736114936123558),
    (40.0, 47.0, -0.14576469219135532, -1.997758851508725),
    (40.0, 200.0, -4.626465961509817e-44, -99.78195080634553),
    (40.0, 950.0, -0.0, -789.18787065824),
    (5000.0, 2000.0, -1586.1206075675875, 0.0),
    (5000.0, 4990.0, -0.8083468561894115, -0.5898581688069752),
    (5000.0, 5100.0, -0.08265239778859543, -2.534153016423956),
    (5000.0, 8000.0, -4.890450098507124e-285, -654.6494671593676),
    (500000.0, 475000.0, -651.1323404214785, -1.6474701944275873e-283),
    (500000.0, 500000.0, -0.6927711248845342, -0.6935233777064301),
    (500000.0, 501000.0, -0.08198981856586131, -2.541875031132091),
    (500000.0, 530000.0, -0.0, -870.2132357278743),
];

/// A tail is `exp` of what is compared, so an error of `e` in the log is one of `e` relative in the tail.
#[test]
fn incomplete_gamma_matches_mpmath() {
    for (a, x, lower, upper) in TAILS {
        let got = gamma_log_tails(a, x);
        check(got.lower, lower, &format!("ln P({a}, {x})"));
        check(got.upper, upper, &format!("ln Q({a}, {x})"));
    }
}

/// Absolute 1e-14 for a log of order one (relative in the tail), relative 1e-14 for far tails; near one the log is minus
/// the other tail, whose relative error is 2e-15 times its logarithm.
fn check(got: f64, want: f64, what: &str) {
    let bound = if want.abs() < 0.1 {
        2e-15 * (8.0 - libm::log(want.abs().max(1e-320))) * want.abs()
    } else {
        1e-14 * want.abs().max(1.0)
    };
    assert!((got - want).abs() <= bound, "{what} = {got:e}, not {want:e}");
}

#[test]
fn gamma_quantile_inverts_both_tails() {
    for a in [0.02, 0.3, 0.7, 1.0, 2.5, 40.0, 5e3, 5e5] {
        for log_tail in [-690.775, -300.0, -30.0, -5.0, -1.0, -0.3, -1e-3, -1e-12] {
            for upper in [false, true] {
                let x = gamma_quantile(a, log_tail, upper);
                if x <= f64::MIN_POSITIVE {
                    continue; // below the smallest normal double
                }
                let tails = gamma_log_tails(a, x);
                let got = if upper { tails.upper } else { tails.lower };
                // The condition of the tail in x times a rounding of x, beside the accuracy of the tail.
                let condition = exp(log_gamma_front(a, x) - got);
                let bound = 1e-13 * log_tail.abs() + 3e-16 * condition;
                assert!((got - log_tail).abs() <= bound, "a {a}, log tail {log_tail}, upper {upper}: {got}");
            }
        }
    }
    assert_eq!(gamma_quantile(0.01, -690.0, false), f64::MIN_POSITIVE);
    assert_eq!(gamma_quantile(2.0, f64::NEG_INFINITY, true), f64::INFINITY);
    assert_eq!(gamma_quantile(2.0, 0.0, true), 0.0);
}

/// Source: mpmath 1.3.0 at 50 digits: `digamma`, `loggamma` and the definitions in the documentation of each.
#[test]
fn relatives_of_the_gamma_function_match_mpmath() {
    let near = |got: f64, want: f64, x: f64| {
        assert!((got - want).abs() <= 3e-15 * want.abs(), "at {x}: {got:e}, not {want:e}");
    };
    for (x, want) in [
        (1e-05, -100000.57719921567),
        (0.3, -3.502524222200133),
        (1.0, -0.5772156649015329),
        (2.0, 0.42278433509846713),
        (7.0, 1.8727843350984672),
        (123.0, 4.808113806573255),
        (1000000000.0, 20.723265836446412),
    ] {
        near(digamma(x), want, x);
    }
    for (x, want) in [
        (-0.9, 2.252712651734206),
        (-0.15, 0.10659511647811763),
        (1e-12, -5.772156649007103e-13),
        (0.1, -0.04987244125983973),
        (0.19, -0.08242007447712087),
        (0.21, -0.08820136510469108),
        (5.0, 4.787491742782046),
    ] {
        near(ln_gamma_1p(x), want, x);
    }
    for (x, want) in [
        (-0.2, 0.09411450126955974),
        (-0.05, 0.0044386492587971775),
        (1e-08, 1.6449340428070888e-16),
        (0.01, 0.00016212656236920455),
        (0.099, 0.014102465236004627),
        (0.11, 0.01717390631940449),
        (1.0, std::f64::consts::LN_2),
        (20.0, 25.649406793250424),
    ] {
        near(ln_gamma_spread(x), want, x);
    }
    for (x, want) in [
        (-0.9, -1.402585092994046),
        (-0.39, -0.10429632181478013),
        (-1e-06, -5.000003333335833e-13),
        (1e-09, -4.999999996666667e-19),
        (0.3, -0.03763573553250894),
        (0.59, -0.12626598376785983),
        (5.0, -3.208240530771945),
    ] {
        near(log1p_minus(x), want, x);
    }
    for (x, want) in [
        (0.01, 1.4340079537031842),
        (1.0, 0.08106146679532726),
        (14.0, 0.0059513701127588475),
        (16.0, 0.0052076559196096404),
        (1000.0, 8.333333055555635e-05),
        (100000000.0, 8.333333333333334e-10),
    ] {
        assert!((stirling_rest(x) - want).abs() <= 1e-15 * want.abs() + 4e-15, "stirling_rest({x})");
    }
}
