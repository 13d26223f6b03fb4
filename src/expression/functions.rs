//! The functions of the language: their names, their arguments, and the operations they are made of.

use super::densities;
use super::kinds::{Binary, Id, Unary};
use super::operations::Operations;

/// How a function is made.
#[derive(Clone, Copy)]
pub(super) enum Body {
    Unary(Unary),
    Binary(Binary),
    /// Any number of arguments from two on, taken together two by two; of one argument a reduction of a column.
    Chain(Binary, Reduce),
    Build(fn(&mut Operations, &[Id]) -> Id),
    Reduce(Reduce),
    If,
    Lag,
    Present,
}

/// What makes a number of a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Reduce {
    Sum,
    Mean,
    Count,
    Minimum,
    Maximum,
    LogSumExp,
}

/// One function of the language.
pub(super) struct Function {
    pub(super) name: &'static str,
    /// Names of the arguments, as messages show them.
    pub(super) arguments: &'static [&'static str],
    pub(super) body: Body,
}

const fn of_one(name: &'static str, function: Unary) -> Function {
    Function { name, arguments: &["x"], body: Body::Unary(function) }
}

const fn of_two(name: &'static str, arguments: &'static [&'static str], function: Binary) -> Function {
    Function { name, arguments, body: Body::Binary(function) }
}

const fn built(
    name: &'static str,
    arguments: &'static [&'static str],
    build: fn(&mut Operations, &[Id]) -> Id,
) -> Function {
    Function { name, arguments, body: Body::Build(build) }
}

const fn of_column(name: &'static str, body: Body) -> Function {
    Function { name, arguments: &["column"], body }
}

/// All functions, in the order in which they are documented.
pub(super) const FUNCTIONS: &[Function] = &[
    of_one("exp", Unary::Exp),
    of_one("log", Unary::Ln),
    of_one("log10", Unary::Log10),
    of_one("log1p", Unary::Log1p),
    of_one("expm1", Unary::Expm1),
    of_one("sqrt", Unary::Sqrt),
    of_one("abs", Unary::Abs),
    of_column("min", Body::Chain(Binary::Minimum, Reduce::Minimum)),
    of_column("max", Body::Chain(Binary::Maximum, Reduce::Maximum)),
    of_one("floor", Unary::Floor),
    of_one("ceil", Unary::Ceil),
    of_one("round", Unary::Round),
    of_one("sin", Unary::Sin),
    of_one("cos", Unary::Cos),
    of_one("tan", Unary::Tan),
    of_one("asin", Unary::Asin),
    of_one("acos", Unary::Acos),
    of_one("atan", Unary::Atan),
    of_two("atan2", &["y", "x"], Binary::Atan2),
    of_one("sinh", Unary::Sinh),
    of_one("cosh", Unary::Cosh),
    of_one("tanh", Unary::Tanh),
    of_two("hypot", &["x", "y"], Binary::Hypot),
    of_one("lgamma", Unary::LnGamma),
    of_one("erf", Unary::Erf),
    of_one("erfc", Unary::Erfc),
    of_one("normal_cdf", Unary::NormalCdf),
    of_one("normal_quantile", Unary::NormalQuantile),
    of_one("logistic", Unary::Logistic),
    of_one("logit", Unary::Logit),
    of_one("log_normal_tail", Unary::LogNormalTail),
    built("log_normal_below", &["z"], |list, of| {
        let mirrored = list.unary(Unary::Negate, of[0]);
        list.unary(Unary::LogNormalTail, mirrored)
    }),
    built("log_density_normal", &["x", "mean", "sd"], densities::normal),
    built("log_density_student_t", &["x", "df", "location", "scale"], densities::student_t),
    built("log_density_lognormal", &["x", "log_mean", "log_sd"], densities::lognormal),
    built("log_density_gamma", &["x", "shape", "rate"], densities::gamma),
    built("log_density_beta", &["x", "a", "b"], densities::beta),
    built("log_density_exponential", &["x", "rate"], densities::exponential),
    built("log_density_cauchy", &["x", "location", "scale"], densities::cauchy),
    built("log_mass_poisson", &["k", "mean"], densities::poisson),
    built("log_mass_binomial", &["k", "n", "p"], densities::binomial),
    built("log_mass_bernoulli", &["k", "p"], densities::bernoulli),
    built("log_mass_bernoulli_odds", &["k", "log_odds"], densities::bernoulli_odds),
    built("log_mass_negative_binomial", &["k", "mean", "dispersion"], densities::negative_binomial),
    of_column("sum", Body::Reduce(Reduce::Sum)),
    of_column("mean", Body::Reduce(Reduce::Mean)),
    of_column("logsumexp", Body::Chain(Binary::LogAddExp, Reduce::LogSumExp)),
    of_column("count", Body::Reduce(Reduce::Count)),
    Function { name: "lag", arguments: &["column", "first"], body: Body::Lag },
    Function { name: "present", arguments: &["column"], body: Body::Present },
    Function { name: "if", arguments: &["condition", "a", "b"], body: Body::If },
];

/// What functions are called elsewhere, and what to write here.
pub(super) const FOREIGN_FUNCTIONS: [(&str, &str); 59] = [
    ("ln", "write log(...): it is the natural logarithm"),
    ("log2", "write log(...)/log(2)"),
    ("pow", "write a^b"),
    ("power", "write a^b"),
    ("square", "write (...)^2"),
    ("fabs", "write abs(...)"),
    ("sign", "write if(x < 0, -1, 1)"),
    ("where", "write if(condition, a, b)"),
    ("ifelse", "write if(condition, a, b)"),
    ("gammaln", "write lgamma(...)"),
    ("gamma", "write exp(lgamma(...)), or log_density_gamma(x, shape, rate)"),
    ("factorial", "write exp(lgamma(n + 1))"),
    ("average", "write mean(...)"),
    ("arctan", "write atan(...)"),
    ("arcsin", "write asin(...)"),
    ("arccos", "write acos(...)"),
    ("sigmoid", "write logistic(...)"),
    ("prod", "write exp(sum(log(...)))"),
    ("mod", "write x - floor(x/m)*m"),
    ("avg", "write mean(...)"),
    ("total", "write sum(...)"),
    ("length", "write count(...)"),
    ("len", "write count(...)"),
    ("minimum", "write min(...)"),
    ("maximum", "write max(...)"),
    ("std", "write sqrt(mean((x - mean(x))^2)) of a column x"),
    ("stdev", "write sqrt(mean((x - mean(x))^2)) of a column x"),
    ("var", "write mean((x - mean(x))^2) of a column x"),
    ("ceiling", "write ceil(...)"),
    ("loge", "write log(...): it is the natural logarithm"),
    ("sqr", "write (...)^2 for the square, sqrt(...) for its root"),
    ("cbrt", "write (...)^(1/3)"),
    ("lngamma", "write lgamma(...)"),
    ("phi", "write normal_cdf(...)"),
    ("normal_inv", "write normal_quantile(...)"),
    ("norm_inv", "write normal_quantile(...)"),
    ("normal_ppf", "write normal_quantile(...)"),
    ("normal_icdf", "write normal_quantile(...)"),
    ("qnorm", "write normal_quantile(...)"),
    ("pnorm", "write normal_cdf(...)"),
    ("norm_cdf", "write normal_cdf(...)"),
    ("log_normal_cdf", "write log_normal_below(z)"),
    ("normal_lcdf", "write log_normal_below((x - mean)/sd)"),
    ("normal_lccdf", "write log_normal_tail((x - mean)/sd)"),
    ("log_normal_sf", "write log_normal_tail(z)"),
    ("normal_sf", "write normal_cdf(-z)"),
    ("radians", "write x*pi/180"),
    ("degrees", "write x*180/pi"),
    ("variance", "write mean((x - mean(x))^2) of a column x; of an estimate the spread is reported as well"),
    ("median", "write a mean; there is no median of a column"),
    ("probit", "write normal_quantile(...)"),
    ("expit", "write logistic(...)"),
    ("inv_logit", "write logistic(...)"),
    ("dnorm", "write exp(log_density_normal(x, mean, sd)), or its logarithm without exp(...)"),
    ("normal", "write log_density_normal(x, mean, sd)"),
    ("norm", "write log_density_normal(x, mean, sd), or hypot(x, y) for a length"),
    ("poisson", "write log_mass_poisson(k, mean)"),
    ("heaviside", "write if(x > 0, 1, 0)"),
    ("iif", "write if(condition, a, b)"),
];

/// The function called `name`.
pub(super) fn function(name: &str) -> Option<&'static Function> {
    FUNCTIONS.iter().find(|function| function.name == name)
}

/// A function as one writes it: `atan2(y, x)`.
pub(super) fn written(function: &Function) -> String {
    match function.body {
        Body::Chain(..) => format!("{0}(column) or {0}(a, b, ...)", function.name),
        _ => format!("{}({})", function.name, function.arguments.join(", ")),
    }
}
