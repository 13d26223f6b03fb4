//! The table of distributions: names, the sets of parameters that each takes, and how they are checked and built.

use super::DistributionError;
use super::bounded::{Beta, Triangular, Uniform};
use super::discrete::{Binomial, Geometric, Integers, Poisson};
use super::error::nearest_name;
use super::exponential::{Exponential, Extreme, Pareto, Weibull};
use super::family::Family;
use super::gamma::{Gamma, InverseGamma};
use super::given::{Given, ParameterSet};
use super::law::Affine;
use super::normal::{HalfNormal, Lognormal, StandardNormal};
use super::student_t::{Cauchy, HalfCauchy, Logistic, StudentT};
use crate::numeric::ln;

const fn set(required: &'static [&'static str]) -> ParameterSet {
    ParameterSet { required, optional: &[] }
}

/// What a builder makes of checked values: the law, and the parameters in their normal form.
type Built = Result<(Family, Vec<(&'static str, f64)>), DistributionError>;

/// One distribution of the table.
pub(super) struct Entry {
    pub(super) name: &'static str,
    pub(super) sets: &'static [ParameterSet],
    /// Whether `shift` may move it.
    pub(super) is_half_line: bool,
    build: fn(&Given<'_>) -> Built,
}

/// The entry of that name.
pub(super) fn find(name: &str) -> Result<&'static Entry, DistributionError> {
    TABLE.iter().find(|entry| entry.name == name).ok_or_else(|| DistributionError::UnknownName {
        name: name.to_owned(),
        nearest: nearest_name(name, TABLE.iter().map(|entry| entry.name)),
    })
}

/// The names of those that `shift` may move, for an error text.
pub(super) fn half_lines() -> String {
    let names: Vec<&str> = TABLE.iter().filter(|entry| entry.is_half_line).map(|entry| entry.name).collect();
    names.join(", ")
}

impl Entry {
    /// The set that these names make up.
    pub(super) fn choose(&'static self, given: &[&str]) -> Result<&'static ParameterSet, DistributionError> {
        let known = || self.sets.iter().flat_map(ParameterSet::names);
        for (i, &name) in given.iter().enumerate() {
            let Some(parameter) = known().find(|&parameter| parameter == name) else {
                return Err(DistributionError::UnknownParameter {
                    distribution: self.name,
                    parameter: name.to_owned(),
                    nearest: nearest_name(name, known()),
                    sets: self.sets,
                });
            };
            if given[..i].contains(&name) {
                return Err(DistributionError::Twice { distribution: self.name, parameter });
            }
        }
        self.sets.iter().find(|set| set.accepts(given)).ok_or_else(|| DistributionError::Incomplete {
            distribution: self.name,
            given: given.iter().map(|&name| name.to_owned()).collect(),
            sets: self.sets,
        })
    }

    /// The law with these values of parameters that [`choose`](Self::choose) has accepted.
    pub(super) fn build(&self, set: &'static ParameterSet, names: &[&str], values: &[f64]) -> Built {
        (self.build)(&Given { distribution: self.name, set, names, values })
    }
}

const MEAN_SD: ParameterSet = set(&["mean", "sd"]);
const MEAN_CV: ParameterSet = set(&["mean", "cv"]);
const LOCATION_SCALE: ParameterSet = set(&["location", "scale"]);
const SHAPE_SCALE: ParameterSet = set(&["shape", "scale"]);
const UNIT_INTERVAL: &[(&str, f64)] = &[("low", 0.0), ("high", 1.0)];

/// Every distribution, in the order of the documentation.
pub(super) const TABLE: &[Entry] = &[
    Entry { name: "normal", sets: &[MEAN_SD, MEAN_CV], is_half_line: false, build: normal },
    Entry {
        name: "lognormal",
        sets: &[set(&["log_mean", "log_sd"]), MEAN_SD, MEAN_CV],
        is_half_line: true,
        build: lognormal,
    },
    Entry { name: "uniform", sets: &[set(&["low", "high"])], is_half_line: false, build: uniform },
    Entry { name: "exponential", sets: &[set(&["rate"]), set(&["mean"])], is_half_line: true, build: exponential },
    Entry { name: "gamma", sets: &[set(&["shape", "rate"]), MEAN_SD, MEAN_CV], is_half_line: true, build: gamma },
    Entry { name: "inverse-gamma", sets: &[SHAPE_SCALE], is_half_line: true, build: inverse_gamma },
    Entry { name: "chi-squared", sets: &[set(&["df"])], is_half_line: true, build: chi_squared },
    Entry {
        name: "beta",
        sets: &[
            ParameterSet { required: &["a", "b"], optional: UNIT_INTERVAL },
            ParameterSet { required: &["mean", "sd"], optional: UNIT_INTERVAL },
            ParameterSet { required: &["mean", "cv"], optional: UNIT_INTERVAL },
        ],
        is_half_line: false,
        build: beta,
    },
    Entry { name: "weibull", sets: &[SHAPE_SCALE, MEAN_SD, MEAN_CV], is_half_line: true, build: weibull },
    Entry { name: "gumbel", sets: &[LOCATION_SCALE, MEAN_SD, MEAN_CV], is_half_line: false, build: gumbel },
    Entry { name: "gumbel-min", sets: &[LOCATION_SCALE, MEAN_SD, MEAN_CV], is_half_line: false, build: gumbel_min },
    Entry { name: "gev", sets: &[set(&["location", "scale", "shape"])], is_half_line: false, build: gev },
    Entry { name: "pareto", sets: &[set(&["minimum", "shape"])], is_half_line: true, build: pareto },
    Entry {
        name: "student-t",
        sets: &[ParameterSet { required: &["df"], optional: &[("location", 0.0), ("scale", 1.0)] }],
        is_half_line: false,
        build: student_t,
    },
    Entry { name: "cauchy", sets: &[LOCATION_SCALE], is_half_line: false, build: cauchy },
    Entry { name: "half-normal", sets: &[set(&["scale"])], is_half_line: true, build: half_normal },
    Entry { name: "half-cauchy", sets: &[set(&["scale"])], is_half_line: true, build: half_cauchy },
    Entry { name: "logistic", sets: &[LOCATION_SCALE, MEAN_SD, MEAN_CV], is_half_line: false, build: logistic },
    Entry { name: "triangular", sets: &[set(&["low", "mode", "high"])], is_half_line: false, build: triangular },
    Entry { name: "bernoulli", sets: &[set(&["p"])], is_half_line: false, build: bernoulli },
    Entry { name: "binomial", sets: &[set(&["n", "p"])], is_half_line: false, build: binomial },
    Entry { name: "poisson", sets: &[set(&["mean"])], is_half_line: false, build: poisson },
    Entry { name: "geometric", sets: &[set(&["p"])], is_half_line: false, build: geometric },
    Entry { name: "integers", sets: &[set(&["low", "high"])], is_half_line: false, build: integers },
];

fn normal(given: &Given<'_>) -> Built {
    let mean = given.finite("mean")?;
    let sd = given.sd(mean)?;
    Ok((Family::Normal(Affine::new(mean, sd, StandardNormal)), vec![("mean", mean), ("sd", sd)]))
}

/// By moments: `log_sd^2 = ln(1 + cv^2)`, `log_mean = ln mean - log_sd^2/2`.
fn lognormal(given: &Given<'_>) -> Built {
    let (log_mean, log_sd) = if given.has("log_mean") {
        (given.finite("log_mean")?, given.positive("log_sd")?)
    } else {
        let (mean, cv) = given.positive_moments()?;
        let log_variance = libm::log1p(cv * cv);
        (ln(mean) - 0.5 * log_variance, log_variance.sqrt())
    };
    Ok((Family::Lognormal(Lognormal::new(log_mean, log_sd)), vec![("log_mean", log_mean), ("log_sd", log_sd)]))
}

fn uniform(given: &Given<'_>) -> Built {
    let low = given.finite("low")?;
    let high = given.above("high", "low", low)?;
    Ok((Family::Uniform(Uniform::new(low, high)), vec![("low", low), ("high", high)]))
}

fn exponential(given: &Given<'_>) -> Built {
    let mean = if given.has("rate") { 1.0 / given.positive("rate")? } else { given.positive("mean")? };
    let rate = if given.has("rate") { given.value("rate") } else { 1.0 / mean };
    Ok((Family::Exponential(Affine::new(0.0, mean, Exponential)), vec![("rate", rate)]))
}

fn gamma(given: &Given<'_>) -> Built {
    let (shape, rate) = if given.has("shape") {
        (given.positive("shape")?, given.positive("rate")?)
    } else {
        let (mean, cv) = given.positive_moments()?;
        let shape = 1.0 / (cv * cv);
        (shape, shape / mean)
    };
    Ok((Family::Gamma(Affine::new(0.0, 1.0 / rate, Gamma::new(shape))), vec![("shape", shape), ("rate", rate)]))
}

fn inverse_gamma(given: &Given<'_>) -> Built {
    let (shape, scale) = (given.positive("shape")?, given.positive("scale")?);
    let law = Affine::new(0.0, scale, InverseGamma::new(shape));
    Ok((Family::InverseGamma(law), vec![("shape", shape), ("scale", scale)]))
}

/// Gamma with shape `df/2` and rate one half.
fn chi_squared(given: &Given<'_>) -> Built {
    let df = given.positive("df")?;
    Ok((Family::Gamma(Affine::new(0.0, 2.0, Gamma::new(0.5 * df))), vec![("df", df)]))
}

/// By moments, with mean `m` and variance `v` on the unit interval: `a + b = m (1 - m)/v - 1`.
fn beta(given: &Given<'_>) -> Built {
    let low = given.finite("low")?;
    let high = given.above("high", "low", low)?;
    let (a, b) = if given.has("a") {
        (given.positive("a")?, given.positive("b")?)
    } else {
        let mean = given.finite("mean")?;
        if mean <= low || mean >= high {
            return given.refuse("mean", format!("a mean between low = {low} and high = {high}"));
        }
        let sd = given.sd(mean)?;
        let (below, above) = ((mean - low) / (high - low), (high - mean) / (high - low));
        let share = sd / (high - low);
        let sum = below * above / (share * share) - 1.0;
        if sum <= 0.0 {
            let most = (high - low) * (below * above).sqrt();
            let (name, most) = if given.has("sd") { ("sd", most) } else { ("cv", most / mean.abs()) };
            return given.refuse(name, format!("less than {most}, the most that a mean of {mean} leaves room for"));
        }
        (below * sum, above * sum)
    };
    Ok((Family::Beta(Beta::new(a, b, low, high)), vec![("a", a), ("b", b), ("low", low), ("high", high)]))
}

fn weibull(given: &Given<'_>) -> Built {
    let (shape, scale) = if given.has("shape") {
        (given.positive("shape")?, given.positive("scale")?)
    } else {
        let (mean, cv) = given.positive_moments()?;
        let shape = Weibull::shape_of_cv(cv);
        (shape, mean / crate::numeric::exp(crate::numeric::special::ln_gamma_1p(1.0 / shape)))
    };
    Ok((Family::Weibull(Affine::new(0.0, scale, Weibull::new(shape))), vec![("shape", shape), ("scale", scale)]))
}

fn gumbel(given: &Given<'_>) -> Built {
    let (location, scale) = given.place(Extreme::GUMBEL_MEAN, Extreme::GUMBEL_SD)?;
    let law = Affine::new(location, scale, Extreme::gumbel());
    Ok((Family::Extreme(law), vec![("location", location), ("scale", scale)]))
}

/// The mirror image of Gumbel's law of largest values.
fn gumbel_min(given: &Given<'_>) -> Built {
    let (location, scale) = given.place(-Extreme::GUMBEL_MEAN, Extreme::GUMBEL_SD)?;
    let law = Affine::new(location, -scale, Extreme::gumbel());
    Ok((Family::Extreme(law), vec![("location", location), ("scale", scale)]))
}

fn gev(given: &Given<'_>) -> Built {
    let (location, scale) = given.place(0.0, 1.0)?;
    let shape = given.finite("shape")?;
    let law = Affine::new(location, scale, Extreme::new(shape));
    Ok((Family::Extreme(law), vec![("location", location), ("scale", scale), ("shape", shape)]))
}

fn pareto(given: &Given<'_>) -> Built {
    let (minimum, shape) = (given.positive("minimum")?, given.positive("shape")?);
    Ok((Family::Pareto(Affine::new(0.0, minimum, Pareto::new(shape))), vec![("minimum", minimum), ("shape", shape)]))
}

fn student_t(given: &Given<'_>) -> Built {
    let df = given.positive("df")?;
    let (location, scale) = (given.finite("location")?, given.positive("scale")?);
    let law = Affine::new(location, scale, StudentT::new(df));
    Ok((Family::StudentT(law), vec![("df", df), ("location", location), ("scale", scale)]))
}

fn cauchy(given: &Given<'_>) -> Built {
    let (location, scale) = given.place(0.0, 1.0)?;
    Ok((Family::Cauchy(Affine::new(location, scale, Cauchy)), vec![("location", location), ("scale", scale)]))
}

fn half_normal(given: &Given<'_>) -> Built {
    let scale = given.positive("scale")?;
    Ok((Family::HalfNormal(Affine::new(0.0, scale, HalfNormal)), vec![("scale", scale)]))
}

fn half_cauchy(given: &Given<'_>) -> Built {
    let scale = given.positive("scale")?;
    Ok((Family::HalfCauchy(Affine::new(0.0, scale, HalfCauchy)), vec![("scale", scale)]))
}

fn logistic(given: &Given<'_>) -> Built {
    let (location, scale) = given.place(0.0, Logistic::SD)?;
    Ok((Family::Logistic(Affine::new(location, scale, Logistic)), vec![("location", location), ("scale", scale)]))
}

fn triangular(given: &Given<'_>) -> Built {
    let (low, mode) = (given.finite("low")?, given.finite("mode")?);
    let high = given.above("high", "low", low)?;
    if mode < low || mode > high {
        return given.refuse("mode", format!("a number from low = {low} to high = {high}"));
    }
    let law = Triangular::new(low, mode, high);
    Ok((Family::Triangular(law), vec![("low", low), ("mode", mode), ("high", high)]))
}

/// Binomial with one trial.
fn bernoulli(given: &Given<'_>) -> Built {
    let p = given.probability("p")?;
    Ok((Family::Binomial(Binomial::new(1.0, p)), vec![("p", p)]))
}

fn binomial(given: &Given<'_>) -> Built {
    let (n, p) = (given.whole("n", 1.0)?, given.probability("p")?);
    Ok((Family::Binomial(Binomial::new(n, p)), vec![("n", n), ("p", p)]))
}

fn poisson(given: &Given<'_>) -> Built {
    let mean = given.positive("mean")?;
    Ok((Family::Poisson(Poisson::new(mean)), vec![("mean", mean)]))
}

fn geometric(given: &Given<'_>) -> Built {
    let p = given.value("p");
    if !(p > 0.0 && p <= 1.0) {
        return given.refuse("p", "a number above 0 and at most 1");
    }
    Ok((Family::Geometric(Geometric::new(p)), vec![("p", p)]))
}

fn integers(given: &Given<'_>) -> Built {
    let low = given.whole("low", f64::NEG_INFINITY)?;
    let high = given.whole("high", f64::NEG_INFINITY)?;
    if high < low {
        return given.refuse("high", format!("a whole number from low = {low} on"));
    }
    Ok((Family::Integers(Integers::new(low, high)), vec![("low", low), ("high", high)]))
}
