//! A distribution whose parameters are still to come: the names are settled once, the values for every point. With it go
//! the derivatives of a value at a fixed score with respect to the parameters.

use super::Distribution;
use super::DistributionError;
use super::catalogue::{self, Entry};
use super::given::ParameterSet;
use crate::numeric::ln;
use crate::numeric::special::{lower_tail, upper_tail};

/// Families in which `mean` and `sd` are a location and a scale.
const PLACED_BY_MOMENTS: [&str; 4] = ["normal", "gumbel", "gumbel-min", "logistic"];
/// Families of positive values with a scale of their own, so that `x/mean` depends on `cv` only.
const SCALED_BY_MEAN: [&str; 3] = ["lognormal", "gamma", "weibull"];

/// A name and an accepted set of parameter names.
///
/// ```
/// use evenpoise::distribution::Form;
/// let form = Form::new("normal", &["mean", "sd"])?;
/// assert_eq!(form.build(&[1.0, 2.0])?.from_score(1.5), 4.0);
/// assert_eq!(form.from_score_slopes(&[1.0, 2.0], 1.5)?, vec![1.0, 1.5]);
/// # Ok::<(), evenpoise::distribution::DistributionError>(())
/// ```
#[derive(Clone)]
pub struct Form {
    entry: &'static Entry,
    set: &'static ParameterSet,
    names: Vec<&'static str>,
}

impl std::fmt::Debug for Form {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "Form({}: {})", self.entry.name, self.names.join(", "))
    }
}

impl Form {
    /// The form of the distribution `name` with these parameters, in any order.
    ///
    /// # Errors
    /// An unknown name or parameter, or names that make up no accepted set.
    pub fn new(name: &str, parameters: &[&str]) -> Result<Self, DistributionError> {
        let entry = catalogue::find(name)?;
        let set = entry.choose(parameters)?;
        let known = |given: &&str| set.names().find(|name| name == given);
        Ok(Self { entry, set, names: parameters.iter().filter_map(known).collect() })
    }

    /// The names of the parameters, in the order in which values are given.
    #[must_use]
    pub fn names(&self) -> &[&'static str] {
        &self.names
    }

    /// The distribution with these values of the parameters.
    ///
    /// # Errors
    /// A value that is not allowed.
    ///
    /// # Panics
    /// Unless there is one value for each name.
    pub fn build(&self, values: &[f64]) -> Result<Distribution, DistributionError> {
        assert_eq!(values.len(), self.names.len(), "one value for each of {:?}", self.names);
        let (family, parameters) = self.entry.build(self.set, &self.names, values)?;
        Ok(Distribution { name: self.entry.name, parameters, family, shift: 0.0, window: None })
    }

    /// `d x / d parameter` at a fixed score `u`, where `x` is the value with that score: one for each parameter given,
    /// in that order. Zero for discrete distributions, whose values move in jumps.
    ///
    /// In closed form for locations, scales, rates, ends, `log_mean` and `log_sd`, the shapes of Weibull and Pareto, and
    /// all of normal, lognormal, uniform, exponential, Gumbel (both), logistic, Cauchy, half-normal, half-cauchy, pareto
    /// and triangular. The rest (shapes of gamma, inverse-gamma, gev and beta, degrees of freedom, moments of gamma,
    /// Weibull and beta) by [`central_slope`] with a step of 1e-3 of the parameter (of 0.003 sd for the moments and ends of
    /// beta, of at least 1e-4 for the shape of gev): relative error about 1e-10.
    ///
    /// # Errors
    /// A value that is not allowed.
    pub fn from_score_slopes(&self, values: &[f64], u: f64) -> Result<Vec<f64>, DistributionError> {
        let distribution = self.build(values)?;
        if distribution.is_discrete() {
            return Ok(vec![0.0; values.len()]);
        }
        let x = distribution.from_score(u);
        let slope = |i: usize| {
            let point = Point { form: self, values, x, u };
            point.closed(i).unwrap_or_else(|| {
                let step = self.step(self.names[i], values[i], &distribution);
                central_slope(values[i], step, |value| {
                    let mut moved = values.to_vec();
                    moved[i] = value;
                    self.build(&moved).ok().map(|moved| moved.from_score(u))
                })
            })
        };
        Ok((0..values.len()).map(slope).collect())
    }

    fn step(&self, name: &str, value: f64, distribution: &Distribution) -> f64 {
        match (self.entry.name, name) {
            ("beta", "a" | "b") => 1e-3 * value,
            ("beta", _) => 3e-3 * distribution.sd().unwrap_or(1.0),
            ("gev", _) => 1e-3 * value.abs().max(0.1),
            _ => 1e-3 * value.abs(),
        }
    }
}

/// `df/dv` by five points, `(8 (f(v+h) - f(v-h)) - (f(v+2h) - f(v-2h)))/(12 h)`; its error is `h^4/30` of the fifth
/// derivative. Where the function refuses a point (`None`), the step is cut to a tenth, five times at most, before the
/// answer is NaN.
#[must_use]
pub fn central_slope(value: f64, step: f64, f: impl Fn(f64) -> Option<f64>) -> f64 {
    let at = |h: f64| {
        Some((8.0 * (f(value + h)? - f(value - h)?) - (f(value + 2.0 * h)? - f(value - 2.0 * h)?)) / (12.0 * h))
    };
    let mut h = step;
    for _ in 0..5 {
        if let Some(slope) = at(h) {
            return slope;
        }
        h *= 0.1;
    }
    f64::NAN
}

/// [`Form::from_score_slopes`] with names and values together; all NaN when the distribution does not exist.
///
/// ```
/// use evenpoise::distribution::from_score_parameter_slopes;
/// assert_eq!(from_score_parameter_slopes("half-normal", &[("scale", 2.0)], 0.0).len(), 1);
/// ```
#[must_use]
pub fn from_score_parameter_slopes(name: &str, parameters: &[(&str, f64)], u: f64) -> Vec<f64> {
    let names: Vec<&str> = parameters.iter().map(|&(name, _)| name).collect();
    let values: Vec<f64> = parameters.iter().map(|&(_, value)| value).collect();
    Form::new(name, &names)
        .and_then(|form| form.from_score_slopes(&values, u))
        .unwrap_or_else(|_| vec![f64::NAN; parameters.len()])
}

/// A value `x` with score `u` of the distribution with these parameters.
struct Point<'a> {
    form: &'a Form,
    values: &'a [f64],
    x: f64,
    u: f64,
}

impl Point<'_> {
    fn value(&self, name: &str) -> f64 {
        match self.form.names.iter().position(|&given| given == name) {
            Some(i) => self.values[i],
            None => self.form.set.optional.iter().find(|(known, _)| *known == name).map_or(0.0, |&(_, value)| value),
        }
    }

    /// The slope in closed form, where there is one. Where `location` is no parameter, [`value`](Self::value) is zero.
    fn closed(&self, i: usize) -> Option<f64> {
        let (family, parameter, value, x) = (self.form.entry.name, self.form.names[i], self.values[i], self.x);
        let has = |name: &str| self.form.set.required.contains(&name);
        match (family, parameter) {
            (_, "location") => Some(1.0),
            (_, "scale") => Some((x - self.value("location")) / value),
            (_, "rate") => Some(-x / value),
            (_, "minimum") | ("exponential", "mean") => Some(x / value),
            (_, "log_mean") => Some(x),
            (_, "log_sd") => Some(self.u * x),
            ("weibull", "shape") => Some(-x * ln(x / self.value("scale")) / value),
            ("pareto", "shape") => Some(-x * ln(x / self.value("minimum")) / value),
            ("uniform", "low") => Some(upper_tail(self.u)),
            ("uniform", "high") => Some(lower_tail(self.u)),
            ("beta", "low") if has("a") => Some((self.value("high") - x) / (self.value("high") - self.value("low"))),
            ("beta", "high") if has("a") => Some((x - self.value("low")) / (self.value("high") - self.value("low"))),
            ("triangular", _) => Some(self.triangular(parameter)),
            ("lognormal", _) => Some(self.lognormal(parameter)),
            (_, "mean") if has("cv") && SCALED_BY_MEAN.contains(&family) => Some(x / value),
            (_, "mean") if has("cv") && PLACED_BY_MOMENTS.contains(&family) => Some(x / value),
            (_, "mean") if PLACED_BY_MOMENTS.contains(&family) => Some(1.0),
            (_, "sd" | "cv") if PLACED_BY_MOMENTS.contains(&family) => Some((x - self.value("mean")) / value),
            _ => None,
        }
    }

    /// By moments: `ln x = ln mean - v/2 + u sqrt v` with `v = ln(1 + cv^2)`.
    fn lognormal(&self, parameter: &str) -> f64 {
        let mean = self.value("mean");
        let by_sd = self.form.set.required.contains(&"sd");
        let cv = if by_sd { self.value("sd") / mean } else { self.value("cv") };
        let log_sd = libm::log1p(cv * cv).sqrt();
        let by_cv = self.x * (self.u / log_sd - 1.0) * cv / (1.0 + cv * cv);
        match parameter {
            "cv" => by_cv,
            "sd" => by_cv / mean,
            _ if by_sd => (self.x - by_cv * cv) / mean,
            _ => self.x / mean,
        }
    }

    /// Below the mode `(x - low)^2 = p (high - low)(mode - low)`, above it the mirror image, each differentiated.
    fn triangular(&self, parameter: &str) -> f64 {
        let (low, mode, high) = (self.value("low"), self.value("mode"), self.value("high"));
        let moves = |name: &str| if parameter == name { 1.0 } else { 0.0 };
        let (d_low, d_mode, d_high) = (moves("low"), moves("mode"), moves("high"));
        let widening = (d_high - d_low) / (high - low);
        if self.x <= mode {
            d_low + 0.5 * (self.x - low) * (widening + (d_mode - d_low) / (mode - low))
        } else {
            d_high - 0.5 * (high - self.x) * (widening + (d_high - d_mode) / (high - mode))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// One example of every parameter set; slopes in closed form agree with five-point differences of `from_score`, at
    /// 1e-9 of their size (the differences err by 1e-11 or so). Those that are differences themselves are compared with
    /// another step.
    #[test]
    fn slopes_agree_with_differences() {
        let examples: &[(&str, &[(&str, f64)])] = &[
            ("normal", &[("mean", 1.0), ("sd", 2.0)]),
            ("normal", &[("cv", 0.5), ("mean", -3.0)]),
            ("lognormal", &[("log_mean", 0.3), ("log_sd", 0.6)]),
            ("lognormal", &[("mean", 2.0), ("sd", 0.7)]),
            ("lognormal", &[("mean", 2.0), ("cv", 0.7)]),
            ("uniform", &[("low", -1.0), ("high", 3.0)]),
            ("exponential", &[("rate", 0.4)]),
            ("exponential", &[("mean", 4.0)]),
            ("gamma", &[("shape", 2.5), ("rate", 1.5)]),
            ("gamma", &[("mean", 2.0), ("cv", 0.4)]),
            ("gamma", &[("mean", 2.0), ("sd", 0.9)]),
            ("inverse-gamma", &[("shape", 3.0), ("scale", 2.0)]),
            ("chi-squared", &[("df", 5.0)]),
            ("beta", &[("a", 2.0), ("b", 3.0), ("low", 1.0), ("high", 4.0)]),
            ("beta", &[("a", 2.0), ("b", 0.7)]),
            ("beta", &[("mean", 0.3), ("sd", 0.1)]),
            ("weibull", &[("shape", 1.7), ("scale", 3.0)]),
            ("weibull", &[("mean", 3.0), ("cv", 0.3)]),
            ("gumbel", &[("location", 1.0), ("scale", 2.0)]),
            ("gumbel", &[("mean", 5.0), ("sd", 2.0)]),
            ("gumbel-min", &[("mean", 5.0), ("cv", 0.2)]),
            ("gev", &[("location", 1.0), ("scale", 2.0), ("shape", 0.2)]),
            ("gev", &[("location", 1.0), ("scale", 2.0), ("shape", 0.0)]),
            ("pareto", &[("minimum", 2.0), ("shape", 3.0)]),
            ("student-t", &[("df", 5.0), ("location", 1.0), ("scale", 2.0)]),
            ("cauchy", &[("location", 1.0), ("scale", 2.0)]),
            ("half-normal", &[("scale", 2.0)]),
            ("half-cauchy", &[("scale", 2.0)]),
            ("logistic", &[("mean", 1.0), ("sd", 2.0)]),
            ("triangular", &[("low", 1.0), ("mode", 2.0), ("high", 5.0)]),
        ];
        for &(name, parameters) in examples {
            for u in [-3.2, -0.4, 0.7, 2.9] {
                let slopes = from_score_parameter_slopes(name, parameters, u);
                for (i, &(parameter, value)) in parameters.iter().enumerate() {
                    let by_difference = central_slope(value, 0.7e-3 * value.abs().max(0.1), |moved| {
                        let mut parameters = parameters.to_vec();
                        parameters[i].1 = moved;
                        Some(Distribution::new(name, &parameters).ok()?.from_score(u))
                    });
                    let size = slopes[i].abs().max(1e-2);
                    assert!(
                        (slopes[i] - by_difference).abs() <= 1e-9 * size,
                        "{name} {parameters:?}, {parameter} at {u}: {} or {by_difference}",
                        slopes[i]
                    );
                }
            }
        }
    }

    #[test]
    fn discrete_values_do_not_move_and_wrong_parameters_give_nan() {
        assert_eq!(from_score_parameter_slopes("poisson", &[("mean", 3.0)], 0.4), vec![0.0]);
        assert!(from_score_parameter_slopes("normal", &[("mean", 3.0), ("sd", -1.0)], 0.4)[1].is_nan());
        assert!(matches!(Form::new("normal", &["mean"]), Err(DistributionError::Incomplete { .. })));
    }
}
