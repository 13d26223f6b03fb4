//! Correlation of two variables joined by a Gaussian copula: of the variables themselves (linear), of their ranks
//! (Spearman's) and of their standard normal scores, and the way between the three.

use super::Distribution;
use crate::numeric::exp;
use crate::numeric::normal as standard;
use crate::numeric::quadrature::{composite, gauss_legendre};
use std::f64::consts::PI;
use thiserror::Error;

/// Terms of Mehler's series; where both variables are discrete, its coefficients fall off slowest and cost least.
const TERMS: usize = 400;
const TERMS_DISCRETE: usize = 4000;
/// Scores beyond which nothing is left of a variable with a standard deviation, and panels of the integrals up to there.
const REACH: f64 = 38.0;
const PANELS: u32 = 152;

/// A correlation that cannot be.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CorrelationError {
    /// Not between -1 and 1.
    #[error("a correlation of {0} cannot be; give a number from -1 to 1")]
    NotACorrelation(f64),
    /// A variable without a standard deviation has no linear correlation.
    #[error("a {0} variable has no standard deviation here, so no linear correlation; give `rank` or `score` instead")]
    NoSd(&'static str),
    /// The two distributions cannot be so correlated.
    #[error(
        "a linear correlation of {value} is out of reach of {first} and {second}; give a number from {low:.4} to {high:.4}"
    )]
    Unattainable {
        /// The correlation asked for.
        value: f64,
        /// The least that is attainable.
        low: f64,
        /// The greatest that is attainable.
        high: f64,
        /// The first family.
        first: &'static str,
        /// The second family.
        second: &'static str,
    },
}

/// Score correlation with Spearman's rank correlation `rank`: `2 sin(pi rank/6)`.
///
/// Exact for continuous variables; of discrete ones it is the rank correlation of the scores behind them.
///
/// # Source
/// Pearson, Drapers' Company Research Memoirs IV (1907).
///
/// # Errors
/// [`CorrelationError::NotACorrelation`].
pub fn score_of_rank(rank: f64) -> Result<f64, CorrelationError> {
    Ok(2.0 * libm::sin(PI * checked(rank)? / 6.0))
}

/// Spearman's rank correlation of a Gaussian copula with score correlation `score`: `6/pi asin(score/2)`.
///
/// # Errors
/// [`CorrelationError::NotACorrelation`].
pub fn rank_of_score(score: f64) -> Result<f64, CorrelationError> {
    Ok(6.0 / PI * libm::asin(0.5 * checked(score)?))
}

/// The linear correlations of two variables as a function of the correlation of their scores.
///
/// # Source
/// Liu & Der Kiureghian, Probabilistic Engineering Mechanics 1 (1986) 105-112 for the problem and the closed forms with
/// normal and lognormal variables; else Mehler's formula (J. Reine Angew. Math. 66 (1866) 161-176): with the coefficients
/// `c_k = E[z(U) h_k(U)]` of the standardised variables in orthonormal Hermite polynomials, the correlation is
/// `sum_k r^k c_k c'_k`. Coefficients of continuous variables by the Gauss-Legendre rule, of discrete ones by exact sums
/// over their jumps. The series has 400 terms, 4000 between two discrete variables: exact to 1e-10 for smooth densities,
/// to about 1e-6 with a kink (triangular) or between discrete variables with `|r|` above 0.99.
///
/// ```
/// use evenpoise::distribution::Distribution;
/// use evenpoise::distribution::correlation::LinearCorrelation;
/// let load = Distribution::new("gumbel", &[("mean", 10.0), ("cv", 0.2)])?;
/// let strength = Distribution::new("lognormal", &[("mean", 20.0), ("cv", 0.1)])?;
/// let link = LinearCorrelation::new(&load, &strength)?;
/// let score = link.score(0.5)?;
/// assert!((link.linear(score)? - 0.5).abs() < 1e-12 && score > 0.5);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Debug, Clone)]
pub struct LinearCorrelation {
    families: [&'static str; 2],
    relation: Relation,
    low: f64,
    high: f64,
}

#[derive(Debug, Clone)]
enum Relation {
    /// `slope r`: two normal variables, or one and a lognormal one.
    Proportional(f64),
    /// `expm1(product r)/scale`: two lognormal variables.
    Lognormal { product: f64, scale: f64 },
    /// `6/pi asin(r/2)`: two uniform variables, which are their own ranks.
    Uniform,
    /// `sum_k terms[k - 1] r^k`.
    Series(Vec<f64>),
}

impl LinearCorrelation {
    /// The relation for these two distributions.
    ///
    /// # Errors
    /// [`CorrelationError::NoSd`].
    pub fn new(first: &Distribution, second: &Distribution) -> Result<Self, CorrelationError> {
        let relation = match (log_sd(first), log_sd(second)) {
            (Some(a), Some(b)) if a == 0.0 && b == 0.0 => Relation::Proportional(1.0),
            (Some(a), Some(b)) if a == 0.0 || b == 0.0 => {
                let s = a.max(b);
                Relation::Proportional(s / libm::expm1(s * s).sqrt())
            }
            (Some(a), Some(b)) => {
                Relation::Lognormal { product: a * b, scale: (libm::expm1(a * a) * libm::expm1(b * b)).sqrt() }
            }
            _ if is_plain(first, "uniform") && is_plain(second, "uniform") => Relation::Uniform,
            _ => return Self::by_series(first, second),
        };
        let mut link = Self { families: [first.family(), second.family()], relation, low: 0.0, high: 0.0 };
        (link.low, link.high) = (link.value(-1.0), link.value(1.0));
        Ok(link)
    }

    fn by_series(first: &Distribution, second: &Distribution) -> Result<Self, CorrelationError> {
        let (a, b) = (Standardised::new(first)?, Standardised::new(second)?);
        let both_discrete = first.is_discrete() && second.is_discrete();
        let n = if both_discrete { TERMS_DISCRETE } else { TERMS };
        let terms = a.coefficients(n).iter().zip(b.coefficients(n)).map(|(c, d)| c * d).collect();
        let families = [first.family(), second.family()];
        Ok(Self { families, relation: Relation::Series(terms), low: a.product(&b, -1.0), high: a.product(&b, 1.0) })
    }

    /// Least and greatest attainable linear correlation: the scores equal up to sign (Frechet 1951; Whitt, Ann. Statist. 4
    /// (1976) 1280-1289).
    #[must_use]
    pub fn attainable(&self) -> (f64, f64) {
        (self.low, self.high)
    }

    /// The linear correlation when the scores have the correlation `score`.
    ///
    /// # Errors
    /// [`CorrelationError::NotACorrelation`].
    pub fn linear(&self, score: f64) -> Result<f64, CorrelationError> {
        Ok(self.value(checked(score)?))
    }

    /// The score correlation that gives the linear correlation `linear`.
    ///
    /// # Errors
    /// [`CorrelationError::NotACorrelation`], [`CorrelationError::Unattainable`] with the attainable interval.
    pub fn score(&self, linear: f64) -> Result<f64, CorrelationError> {
        let (low, high) = (self.low, self.high);
        if !(low..=high).contains(&checked(linear)?) {
            let [first, second] = self.families;
            return Err(CorrelationError::Unattainable { value: linear, low, high, first, second });
        }
        Ok(match &self.relation {
            Relation::Proportional(slope) => linear / slope,
            Relation::Lognormal { product, scale } => libm::log1p(linear * scale) / product,
            Relation::Uniform => score_of_rank(linear)?,
            Relation::Series(_) => self.root(linear),
        })
    }

    /// The linear correlation grows with that of the scores (its slope is `E[x'(U) y'(V)] >= 0`): halving the interval
    /// down to neighbouring doubles finds the one place.
    fn root(&self, linear: f64) -> f64 {
        if linear == 0.0 {
            return 0.0;
        }
        let (mut low, mut high) = (-1.0, 1.0);
        loop {
            let middle = 0.5 * (low + high);
            if middle <= low || middle >= high || high - low < 1e-16 {
                return middle;
            }
            if self.value(middle) < linear { low = middle } else { high = middle }
        }
    }

    fn value(&self, r: f64) -> f64 {
        match &self.relation {
            Relation::Proportional(slope) => slope * r,
            Relation::Lognormal { product, scale } => libm::expm1(product * r) / scale,
            Relation::Uniform => 6.0 / PI * libm::asin(0.5 * r),
            Relation::Series(_) if r == -1.0 => self.low,
            Relation::Series(_) if r == 1.0 => self.high,
            Relation::Series(terms) => r * terms.iter().rev().fold(0.0, |sum, term| sum * r + term),
        }
    }
}

fn checked(correlation: f64) -> Result<f64, CorrelationError> {
    if (-1.0..=1.0).contains(&correlation) {
        Ok(correlation)
    } else {
        Err(CorrelationError::NotACorrelation(correlation))
    }
}

fn is_plain(distribution: &Distribution, family: &str) -> bool {
    distribution.family() == family && !distribution.is_truncated()
}

/// `log_sd` of a lognormal variable, zero of a normal one, which is the limit of such.
fn log_sd(distribution: &Distribution) -> Option<f64> {
    if is_plain(distribution, "normal") {
        return Some(0.0);
    }
    if !is_plain(distribution, "lognormal") {
        return None;
    }
    distribution.parameters().into_iter().find(|(name, _)| *name == "log_sd").map(|(_, value)| value)
}

/// A variable less its mean, over its standard deviation, as a function of its score.
struct Standardised<'a> {
    distribution: &'a Distribution,
    mean: f64,
    sd: f64,
    /// Scores at which a discrete variable jumps by one.
    jumps: Vec<f64>,
}

impl<'a> Standardised<'a> {
    fn new(distribution: &'a Distribution) -> Result<Self, CorrelationError> {
        let (Some(mean), Some(sd)) = (distribution.mean(), distribution.sd()) else {
            return Err(CorrelationError::NoSd(distribution.family()));
        };
        let mut jumps = Vec::new();
        if distribution.is_discrete() {
            let (mut k, last) = (distribution.from_score(-REACH), distribution.from_score(REACH));
            while k < last {
                let (lower, upper) = (distribution.log_lower_tail(k), distribution.log_upper_tail(k));
                let is_lower = lower < upper;
                jumps.push(standard::quantile_of_log_tail(if is_lower { lower } else { upper }, !is_lower));
                k += 1.0;
            }
        }
        Ok(Self { distribution, mean, sd, jumps })
    }

    fn at(&self, u: f64) -> f64 {
        (self.distribution.from_score(u) - self.mean) / self.sd
    }

    /// `c_1 ... c_n`. A jump of size one at score `b` adds `phi(b) h_{k-1}(b)/sqrt k`, which is the integral of `h_k`
    /// times the normal density above `b`.
    fn coefficients(&self, n: usize) -> Vec<f64> {
        let mut sums = vec![0.0; n];
        if self.distribution.is_discrete() {
            for &b in &self.jumps {
                let weight = exp(standard::log_density(b)) / self.sd;
                for (k, (sum, polynomial)) in sums.iter_mut().zip(hermite(b)).enumerate() {
                    *sum += weight * polynomial / ((k + 1) as f64).sqrt();
                }
            }
            return sums;
        }
        for (u, weight) in composite(-REACH, REACH, PANELS) {
            let weight = weight * exp(standard::log_density(u)) * self.at(u);
            for (sum, polynomial) in sums.iter_mut().zip(hermite(u).skip(1)) {
                *sum += weight * polynomial;
            }
        }
        sums
    }

    /// `E[z(U) z'(sign U)]`: the correlation with equal or opposite scores. Panels end at the jumps of either.
    fn product(&self, other: &Self, sign: f64) -> f64 {
        let mut edges: Vec<f64> =
            (0..=PANELS).map(|k| REACH * (2.0 * f64::from(k) / f64::from(PANELS) - 1.0)).collect();
        edges.extend(self.jumps.iter().copied());
        edges.extend(other.jumps.iter().map(|jump| sign * jump));
        edges.sort_by(f64::total_cmp);
        let mut sum = 0.0;
        for pair in edges.windows(2) {
            for (u, weight) in gauss_legendre(pair[0], pair[1]) {
                sum += weight * exp(standard::log_density(u)) * self.at(u) * other.at(sign * u);
            }
        }
        sum.clamp(-1.0, 1.0)
    }
}

/// Orthonormal Hermite polynomials `h_0(u), h_1(u), ...`: `sqrt(k+1) h_{k+1} = u h_k - sqrt k h_{k-1}` (DLMF 18.9.1).
fn hermite(u: f64) -> impl Iterator<Item = f64> {
    let (mut before, mut now, mut k) = (0.0, 1.0, 0.0_f64);
    std::iter::from_fn(move || {
        let value = now;
        let next = (u * now - k.sqrt() * before) / (k + 1.0).sqrt();
        (before, now, k) = (now, next, k + 1.0);
        Some(value)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn make(name: &str, parameters: &[(&str, f64)]) -> Distribution {
        Distribution::new(name, parameters).unwrap()
    }

    /// The series knows nothing of the closed forms; it agrees with them to 1e-10.
    #[test]
    fn closed_forms_agree_with_the_series() {
        let normal = make("normal", &[("mean", 3.0), ("sd", 2.0)]);
        let mild = make("lognormal", &[("mean", 5.0), ("cv", 0.3)]);
        let wild = make("lognormal", &[("log_mean", 0.0), ("log_sd", 1.0)]).shifted(-2.0).unwrap();
        let flat = make("uniform", &[("low", 1.0), ("high", 4.0)]);
        for (a, b) in [(&normal, &normal), (&normal, &mild), (&wild, &normal), (&mild, &wild), (&flat, &flat)] {
            let closed = LinearCorrelation::new(a, b).unwrap();
            let series = LinearCorrelation::by_series(a, b).unwrap();
            assert!(!matches!(closed.relation, Relation::Series(_)));
            for r in [-0.95, -0.5, 0.1, 0.6, 0.9] {
                let (x, y) = (closed.linear(r).unwrap(), series.linear(r).unwrap());
                assert!((x - y).abs() <= 1e-10, "{} and {} at {r}: {x} or {y}", a.family(), b.family());
                assert!((series.score(y).unwrap() - r).abs() <= 1e-10);
                assert!((closed.score(x).unwrap() - r).abs() <= 1e-14);
            }
            let ((p, q), (s, t)) = (closed.attainable(), series.attainable());
            assert!((p - s).abs() <= 1e-10 && (q - t).abs() <= 1e-10, "{p} {q} or {s} {t}");
        }
    }

    /// Source: SciPy 1.17.1, double integrals over independent scores as written in
    /// `tests/reference/correlation.py`.
    #[test]
    fn other_pairs_match_a_double_integral() {
        let exponential = make("exponential", &[("rate", 1.0)]);
        let gumbel = make("gumbel", &[("location", 0.0), ("scale", 1.0)]);
        let poisson = make("poisson", &[("mean", 2.5)]);
        let coin = make("bernoulli", &[("p", 0.3)]);
        for (a, b, r, want) in [
            (&exponential, &exponential, -0.7, -0.48637677623752107),
            (&exponential, &gumbel, -0.7, -0.5652403119985543),
            (&exponential, &poisson, -0.7, -0.5771964837512498),
            (&poisson, &coin, -0.7, -0.49437726246194513),
            (&exponential, &exponential, 0.5, 0.4530750202061171),
            (&exponential, &gumbel, 0.5, 0.4635119961921067),
            (&exponential, &poisson, 0.5, 0.4546986539463612),
            (&poisson, &coin, 0.5, 0.379764967398084),
            (&exponential, &exponential, 0.9, 0.8828507985806304),
            (&exponential, &gumbel, 0.9, 0.8727815949870942),
            (&exponential, &poisson, 0.9, 0.842507572128881),
            (&poisson, &coin, 0.9, 0.7015614422827445),
        ] {
            let got = LinearCorrelation::new(a, b).unwrap().linear(r).unwrap();
            assert!((got - want).abs() < 1e-9, "{} and {} at {r}: {got}, not {want}", a.family(), b.family());
        }
    }

    /// In the limit of equal scores the series of two discrete variables meets the sum over their common jumps.
    #[test]
    fn discrete_bounds_are_the_limit_of_the_series() {
        let link = LinearCorrelation::new(
            &make("poisson", &[("mean", 2.5)]),
            &make("binomial", &[("n", 8.0), ("p", 0.4)]).truncated(1.0, 7.0).unwrap(),
        )
        .unwrap();
        let (low, high) = link.attainable();
        assert!((link.linear(0.999).unwrap() - high).abs() < 0.02 && link.linear(0.999).unwrap() < high);
        assert!((link.linear(-0.999).unwrap() - low).abs() < 0.02);
        let middle = link.score(0.5).unwrap();
        assert!((link.linear(middle).unwrap() - 0.5).abs() < 1e-12);
    }

    #[test]
    fn what_cannot_be_is_refused_with_the_interval() {
        let wild = make("lognormal", &[("log_mean", 0.0), ("log_sd", 1.0)]);
        let link = LinearCorrelation::new(&wild, &wild).unwrap();
        // -1/e is the closed form of the lower end for log_sd = 1: (e^-1 - 1)/(e - 1).
        let error = link.score(-0.5).unwrap_err();
        assert!(matches!(error, CorrelationError::Unattainable { low, .. } if (low + libm::exp(-1.0)).abs() < 1e-15));
        assert!(error.to_string().ends_with("give a number from -0.3679 to 1.0000"), "{error}");
        let cauchy = make("cauchy", &[("location", 0.0), ("scale", 1.0)]);
        assert_eq!(LinearCorrelation::new(&wild, &cauchy).unwrap_err(), CorrelationError::NoSd("cauchy"));
        assert!(matches!(link.score(f64::NAN), Err(CorrelationError::NotACorrelation(_))));
        assert!(matches!(score_of_rank(1.5), Err(CorrelationError::NotACorrelation(_))));
        assert!((score_of_rank(rank_of_score(0.7).unwrap()).unwrap() - 0.7).abs() < 1e-15);
        assert!((rank_of_score(1.0).unwrap() - 1.0).abs() < 1e-15);
    }
}
