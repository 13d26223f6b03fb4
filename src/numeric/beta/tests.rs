//! Reference values of the incomplete beta functions and of Student's t.

use super::*;

/// `a, b, x, ln I_x(a, b), ln(1 - I_x(a, b))`. Source: mpmath 1.3.0 at 700 digits, the hypergeometric series of positive
/// terms `x^a y^b/(a B(a, b)) 2F1(a + b, 1; a + 1; x)` (DLMF 8.17.8) summed to 60 digits.
#[rustfmt::skip]
const TAILS: [(f64, f64, f64, f64, f64); 25] = [
    (0.001, 0.001, 0.4, -0.6935521610975501, -0.692742363965185),
    (0.001, 1.0, 1e-300, -0.6907755278982137, -0.6955244713323139),
    (0.001, 300.0, 0.001, -0.0009071124787223014, -7.005697625670064),
    (0.5, 0.5, 1e-300, -345.8393466543963, -6.366197723675813e-151),
    (0.5, 0.5, 0.3, -0.9969312110207781, -0.4604654539158712),
    (0.5, 20.0, 0.03, -0.3183727192235745, -1.2994990479410644),
    (0.5, 20.0, 0.9, -1.3180531602803738e-21, -48.07813118355616),
    (2.0, 3.0, 1e-100, -458.7252591295811, -6e-200),
    (2.0, 3.0, 0.35, -0.827779178628501, -0.5745089551270459),
    (2.0, 3.0, 0.5, -0.3746934494414107, -1.1631508098056809),
    (2.0, 3.0, 0.9999999999990905, -3.0092655381030033e-36, -81.79136730607424),
    (30.0, 0.2, 0.99, -1.689931819672027, -0.20399322621048258),
    (30.0, 70.0, 0.01, -80.54044244516929, -1.0513087426709775e-35),
    (30.0, 70.0, 0.3, -0.6701631398038755, -0.7166719397018506),
    (30.0, 70.0, 0.31, -0.5159421018236202, -0.9086647668336837),
    (30.0, 70.0, 0.9, -4.3472725393243886e-47, -106.75195072472196),
    (500000.0, 0.5, 0.9999990463256836, -1.1123488118677443, -0.39866696410025626),
    (500000.0, 0.5, 0.999, -503.93083254912756, -1.3983637688333289e-219),
    (500000.0, 0.5, 0.99, -5029.998987514669, -0.0),
    (500000.0, 500000.0, 0.49, -203.95716529833655, -2.645626708652242e-89),
    (500000.0, 500000.0, 0.5, -std::f64::consts::LN_2, -std::f64::consts::LN_2),
    (500000.0, 500000.0, 0.5005, -0.1727537790234456, -1.8410216450092862),
    (500000.0, 500000.0, 0.52, -0.0, -805.2491247525383),
    (1000.0, 500000.0, 0.0021, -0.05271425480257786, -2.969110717452895),
    (1000.0, 500000.0, 0.001, -196.07875876209212, -6.983562933016531e-86),
];

/// `df, t, ln P(T > t)`. Source: mpmath 1.3.0 at 400 digits, the same series by `hyp2f1` in `df/(df + t^2)` or its
/// complement, whichever is below one half.
#[rustfmt::skip]
const STUDENT: [(f64, f64, f64); 11] = [
    (0.5, 1e-05, -0.693152574100502),
    (0.5, 1e+20, -24.16309706071198),
    (1.0, 1e+200, -461.6617484846585),
    (2.0, 0.5, -1.0986122886681098),
    (3.0, 1e+50, -345.2900405100622),
    (4.5, 2.0, -2.9163860497740615),
    (30.0, 20.0, -42.532857204996745),
    (1000.0, 1.0, -1.8402595585065586),
    (1000000.0, 0.1, -0.7761545709491852),
    (1000000.0, 5.0, -15.064829835370245),
    (1000000.0, 37.0, -688.5617887260397),
];

/// Absolute 2e-14 for a log of order one (relative in the tail), relative 2e-14 for far tails; near one the log is minus
/// the other tail, whose relative error is 2e-15 times its logarithm.
fn check(got: f64, want: f64, what: &str) {
    let bound = if want.abs() < 0.1 {
        2e-15 * (8.0 - libm::log(want.abs().max(1e-320))) * want.abs()
    } else {
        2e-14 * want.abs().max(1.0)
    };
    assert!((got - want).abs() <= bound, "{what} = {got:e}, not {want:e}");
}

#[test]
fn incomplete_beta_matches_mpmath() {
    for (a, b, x, lower, upper) in TAILS {
        let got = beta_log_tails(a, b, x, 1.0 - x);
        check(got.lower, lower, &format!("ln I_{x}({a}, {b})"));
        check(got.upper, upper, &format!("ln (1 - I_{x}({a}, {b}))"));
        let mirror = beta_log_tails(b, a, 1.0 - x, x);
        check(mirror.lower, upper, "the mirror image's lower tail");
        check(mirror.upper, lower, "the mirror image's upper tail");
    }
}

#[test]
fn student_t_matches_mpmath() {
    for (df, t, want) in STUDENT {
        check(student_t_log_upper_tail(df, t), want, &format!("ln P(T_{df} > {t})"));
    }
}

#[test]
fn quantiles_invert_the_tails() {
    let targets = [-690.775, -300.0, -30.0, -5.0, -1.0, -0.3, -1e-3, -1e-12];
    let ordinary = [(0.5, 0.5), (0.5, 30.0), (1.0, 1.0), (2.0, 3.0), (40.0, 3.0), (5e5, 0.5), (5e3, 5e5)];
    // Where the start is far off, and the logarithm of the tail flat on one side and steep on the other.
    let lopsided = [(0.05, 0.4), (1e6, 1e-3), (0.05, 1e6), (1e-3, 1e6), (5e8, 0.5)];
    for (a, b) in ordinary.into_iter().chain(lopsided) {
        for (log_tail, upper) in targets.iter().flat_map(|&t| [(t, false), (t, true)]) {
            let (x, y) = beta_quantile(a, b, log_tail, upper);
            if x.min(y) <= f64::MIN_POSITIVE {
                continue; // nearer to an end than the smallest normal double
            }
            let tails = beta_log_tails(a, b, x, y);
            let got = if upper { tails.upper } else { tails.lower };
            let condition = exp(log_beta_front(a, b, x, y) - got);
            let bound = 1e-13 * log_tail.abs() + 6e-16 * condition;
            assert!((got - log_tail).abs() <= bound, "a {a}, b {b}, log tail {log_tail}, upper {upper}: {got}");
        }
    }
    for df in [1.0, 2.5, 8.0, 100.0, 1e6] {
        for (log_tail, upper) in targets.iter().flat_map(|&t| [(t, false), (t, true)]) {
            let t = student_t_quantile(df, log_tail, upper);
            let got = student_t_log_upper_tail(df, if upper { t } else { -t });
            assert!((got - log_tail).abs() <= 1e-13 * (log_tail.abs() + 0.01), "df {df}, log tail {log_tail}: {got}");
        }
    }
}

/// Source: mpmath 1.3.0 at 50 digits, `loggamma(a) + loggamma(b) - loggamma(a + b)`.
#[test]
fn ln_beta_matches_mpmath() {
    for (a, b, want) in [
        (0.01, 0.2, 4.651097317312829),
        (0.5, 14.0, -0.7382370456409619),
        (0.5, 500000.0, -5.988816495777464),
        (20.0, 30.0, -33.968820791977386),
        (0.001, 1000000.0, 6.893363375325389),
        (1000000.0, 1000000.0, -1386300.003362921),
    ] {
        assert!((ln_beta(a, b) - want).abs() <= 4e-15 * (1.0 + want.abs()), "ln B({a}, {b})");
    }
}
