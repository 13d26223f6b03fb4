//! Where the search starts, and what correlations mean. `st` is `scipy.stats` of SciPy 1.17.1, `np` NumPy 2.4.6.

use evenpoise::numeric::Points;
use evenpoise::numeric::Purpose;
use evenpoise::numeric::normal;
use evenpoise::numeric::stream;

use crate::right::close;
use crate::right::log_target;
use crate::right::read;

/// Worked from the rules of the documentation; medians and 95 % ranges of the normal are exact.
#[test]
fn starts_follow_the_rules() {
    let start = |variable: &str| {
        let problem = read(&format!(
            "title = \"Start\"\n[variables]\nx = {{ {variable} }}\n[target]\naim = \"density\"\nlog_factor = \"0*x\"\n"
        ));
        (problem.start().near[0], problem.start().spread[0])
    };
    let check = |got: (f64, f64), want: (f64, f64)| {
        close(got.0, want.0, 1e-13);
        close(got.1, want.1, 1e-13);
    };
    check(start("range = [-inf, inf], near = 3.0, spread = 2.0"), (3.0, 2.0));
    check(start("range = [1.0, inf], near = 3.0, spread = 4.0"), (2.0_f64.ln(), 3.0_f64.ln()));
    check(start("range = [-inf, 1.0], near = -1.0, spread = 4.0"), (2.0_f64.ln(), 3.0_f64.ln()));
    check(start("range = [0.0, 4.0], near = 1.0, spread = 0.3"), ((1.0_f64 / 3.0).ln(), 0.4));
    check(start("range = [0.0, 4.0], near = 1.0, spread = 9.0"), ((1.0_f64 / 3.0).ln(), 2.5));
    check(start("distribution = \"normal\", mean = 3.0, sd = 0.5"), (3.0, 0.5));
    check(start("distribution = \"lognormal\", log_mean = 1.5, log_sd = 0.5"), (1.5, 0.5));
    check(start("distribution = \"normal\", mean = 3.0, sd = 0.5, near = 4.0"), (4.0, 0.5));
    check(start("distribution = \"normal\", mean = 3.0, sd = 0.5, near = 4.0, spread = 2.0"), (4.0, 2.0));
}

/// In scores: normal mean 3, sd 0.5, so near = 4 has the score 2 and spread = 0.25 is half a score.
#[test]
fn starts_in_scores() {
    let problem = read(
        r#"
title = "Start in scores"
[variables]
x = { distribution = "normal", mean = 3.0, sd = 0.5, near = 4.0, spread = 0.25 }
n = { distribution = "integers", low = 1, high = 6, near = 5 }
w = { distribution = "uniform", low = 0.0, high = 1.0, spread = 7.0 }
[target]
aim = "probability"
event = "x + n + w > 9"
"#,
    );
    close(problem.start().near[0], 2.0, 1e-13);
    close(problem.start().spread[0], 0.5, 1e-13);
    assert_eq!(problem.to_natural(&Points::from_rows(3, &problem.start().near)).get(0, 1), 5.0);
    assert_eq!(problem.start().spread[1..], [1.0, 2.5]);
}

/// 40,000 draws of the nominal density. The sample correlation of two such variables has the standard error 0.0043 (200
/// samples of 40,000 drawn with NumPy); four of them are a false alarm of 6e-5.
#[test]
fn a_linear_correlation_is_that_of_the_variables() {
    let problem = read(
        r#"
title = "Linear correlation"
[variables]
a = { distribution = "gumbel", mean = 30.0, cv = 0.4 }
b = { distribution = "lognormal", mean = 2.0, cv = 0.8 }
[[correlation]]
among = ["b", "a"]
linear = 0.6
[target]
aim = "probability"
event = "a > 10*b"
"#,
    );
    let mut rng = stream(8, Purpose::Trial, 0, 0);
    let rows: Vec<f64> = (0..80_000).map(|_| normal::draw(&mut rng)).collect();
    let x = problem.to_natural(&Points::from_rows(2, &rows));
    let (a, b) = (x.coordinate(0), x.coordinate(1));
    let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
    let (ma, mb) = (mean(&a), mean(&b));
    let product =
        |p: &[f64], mp: f64, q: &[f64], mq: f64| -> f64 { p.iter().zip(q).map(|(p, q)| (p - mp) * (q - mq)).sum() };
    let got = product(&a, ma, &b, mb) / (product(&a, ma, &a, ma) * product(&b, mb, &b, mb)).sqrt();
    assert!((got - 0.6).abs() < 4.0 * 0.0043, "{got}");
}

/// Sources: lognormal pair `np.log1p(r*c1*c2) / np.sqrt(np.log1p(c1*c1) * np.log1p(c2*c2))`; a normal pair keeps its
/// linear correlation; Spearman's `2 sin(pi r / 6)` (Pearson 1907).
#[test]
fn correlations_of_every_kind_become_scores() {
    let problem = |text: &str| {
        read(&format!(
            "title = \"Pairs\"\n[variables]\n\
             a = {{ distribution = \"lognormal\", mean = 2.0, cv = 0.3 }}\n\
             b = {{ distribution = \"lognormal\", mean = 5.0, cv = 0.5 }}\n\
             c = {{ distribution = \"normal\", mean = 0.0, sd = 1.0 }}\n\
             d = {{ distribution = \"normal\", mean = 0.0, sd = 3.0 }}\n{text}\n\
             [target]\naim = \"probability\"\nevent = \"a + b + c + d > 30\"\n"
        ))
    };
    let linear = problem("[[correlation]]\namong = [\"a\", \"b\"]\nlinear = 0.4");
    let group = &linear.correlations()[0];
    assert_eq!(group.members, [0, 1]);
    close(group.score[1], 0.420_191_506_699_709_45, 1e-12);
    close(group.linear(linear.variables())[1], 0.4, 1e-12);
    let rank = problem("[[correlation]]\namong = [\"c\", \"d\"]\nrank = 0.5");
    close(rank.correlations()[0].score[1], 0.517_638_090_205_041_5, 1e-14);
    close(rank.correlations()[0].rank()[2], 0.5, 1e-14);
    let several = problem(
        "[[correlation]]\namong = [\"c\", \"d\"]\nlinear = 0.4\n[[correlation]]\namong = [\"d\", \"a\"]\nscore = -0.2",
    );
    let group = &several.correlations()[0];
    assert_eq!((several.correlations().len(), group.members.as_slice()), (1, &[0_usize, 2, 3][..]));
    close(group.score[7], 0.4, 1e-8);
    close(group.score[2], -0.2, 1e-14);
    assert_eq!(group.score[1], 0.0);
}

/// Source: `st.multivariate_normal.logpdf([ua, ub], [0, 0], R) - st.norm.logpdf(ua) - st.norm.logpdf(ub) +
/// st.norm.logpdf(1.4, 1, .5) + st.gamma.logpdf(2.2, 2)`, `R = [[1, .6], [.6, 1]]`, `ua = .8`,
/// `ub = st.norm.ppf(st.gamma.cdf(2.2, 2))`.
#[test]
fn a_copula_enters_a_density() {
    let text = r#"
title = "Two correlated variables"
[variables]
a = { distribution = "normal", mean = 1.0, sd = 0.5 }
b = { distribution = "gamma", shape = 2.0, rate = 1.0 }
[[correlation]]
among = ["a", "b"]
score = 0.6
[target]
aim = "density"
log_factor = "0*a*b"
"#;
    let want = -1.673_564_498_598_199_2;
    close(log_target(&read(text), &[1.4, 2.2]), want, 1e-13);
    let in_scores = read(&format!("{text}[tuning]\ncoordinates = \"standard-normal\"\n"));
    close(log_target(&in_scores, &[1.4, 2.2]), want, 1e-12);
    // There the coordinates are independent: the density of a pair of them is standard normal.
    let z = Points::from_rows(2, &[0.3, -1.1]);
    let normal = -0.5 * (0.09 + 1.21) - 2.0 * 0.918_938_533_204_672_8;
    close(in_scores.evaluate(&z).unwrap().log_density[0], normal, 1e-14);
}
