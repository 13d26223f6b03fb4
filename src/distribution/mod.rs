//! Distributions of random variables by name, each with density, cumulative and quantile functions that are as good at
//! 1e-300 in either tail as at the median: rare events live there.
//!
//! [`Distribution`] is what the rest of the crate uses. The catalogue holds the table of names and parameters, one file
//! for each group of related laws holds the formulas, `window` truncates any of them; [`correlation`] ties two together
//! by a Gaussian copula.
//!
//! **Invariant:** a [`Distribution`] is valid by construction; nothing here reads a file or draws a random number.

mod bounded;
mod catalogue;
mod discrete;
mod error;
mod exponential;
mod family;
mod form;
mod gamma;
mod given;
mod law;
mod normal;
mod student_t;
mod window;

pub mod correlation;

pub use error::{DistributionError, nearest_name};
pub use form::{Form, central_slope, from_score_parameter_slopes};
pub use given::ParameterSet;

use crate::numeric::exp;
use crate::numeric::normal as standard;
use crate::numeric::quadrature::composite;
use crate::numeric::special::LogTails;
use family::Family;
use law::Law;
use window::Window;

/// A distribution on the line: a named family with its parameters, possibly shifted and truncated.
///
/// An immutable value. Densities are in nats, tails are probabilities or their natural logarithms.
///
/// ```
/// use evenpoise::distribution::Distribution;
/// let flow = Distribution::new("gumbel", &[("mean", 40.0), ("cv", 0.25)])?;
/// let rare = flow.quantile_of_tail(1e-300, true);
/// assert!((flow.log_upper_tail(rare) / 1e-300_f64.ln() - 1.0).abs() < 1e-13);
/// let error = Distribution::new("gumble", &[]).unwrap_err();
/// assert_eq!(error.to_string(), "there is no distribution `gumble`; did you mean `gumbel`?");
/// # Ok::<(), evenpoise::distribution::DistributionError>(())
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Distribution {
    name: &'static str,
    parameters: Vec<(&'static str, f64)>,
    family: Family,
    shift: f64,
    /// In the coordinate of the family, before the shift.
    window: Option<Window>,
}

impl Distribution {
    /// Every name that [`new`](Self::new) knows.
    pub const NAMES: &[&str] = &NAMES;

    /// The distribution of that name with these parameters, in any order.
    ///
    /// # Errors
    /// An unknown name or parameter (with the nearest known one), parameters that make up no set of
    /// [`parameters_of`](Self::parameters_of), a value that is not allowed.
    pub fn new(name: &str, parameters: &[(&str, f64)]) -> Result<Self, DistributionError> {
        let names: Vec<&str> = parameters.iter().map(|&(name, _)| name).collect();
        let values: Vec<f64> = parameters.iter().map(|&(_, value)| value).collect();
        Form::new(name, &names)?.build(&values)
    }

    /// The sets of parameters that the distribution of that name takes; `None` for an unknown name.
    #[must_use]
    pub fn parameters_of(name: &str) -> Option<&'static [ParameterSet]> {
        catalogue::find(name).ok().map(|entry| entry.sets)
    }

    /// The distribution given that its value is in `[low, high]`; ends may be infinite. Truncating again intersects.
    ///
    /// # Errors
    /// Ends out of order or NaN, or no probability between them.
    pub fn truncated(&self, low: f64, high: f64) -> Result<Self, DistributionError> {
        if low.is_nan() || high.is_nan() || low > high {
            return Err(DistributionError::Between { low, high });
        }
        let (least, greatest) = self.support();
        let ends = (low.max(least) - self.shift, high.min(greatest) - self.shift);
        let window = Window::new(self.law(), ends.0, ends.1).ok_or(DistributionError::NoMass {
            distribution: self.name,
            low,
            high,
            least,
            greatest,
        })?;
        Ok(Self { window: Some(window), ..self.clone() })
    }

    /// The distribution of `X + shift`. A truncation moves along: shift first, truncate then, to state `between` for the
    /// variable itself.
    ///
    /// # Errors
    /// A shift that is not finite, or a distribution that is not one of a half-line.
    pub fn shifted(&self, shift: f64) -> Result<Self, DistributionError> {
        let is_half_line = catalogue::find(self.name)?.is_half_line;
        if !is_half_line || !shift.is_finite() {
            return Err(DistributionError::Shift { distribution: self.name, shift });
        }
        Ok(Self { shift: self.shift + shift, ..self.clone() })
    }

    /// `ln f(x)`, of a discrete distribution `ln P(X = x)`; `-inf` outside the support.
    #[must_use]
    pub fn log_density(&self, x: f64) -> f64 {
        let t = x - self.shift;
        match &self.window {
            None => self.law().log_density(t),
            Some(window) if window.contains(self.law(), t) => self.law().log_density(t) - window.log_mass(),
            Some(_) => f64::NEG_INFINITY,
        }
    }

    /// `d ln f(x) / dx` inside the support; zero for discrete distributions.
    #[must_use]
    pub fn log_density_slope(&self, x: f64) -> f64 {
        self.law().log_density_slope(x - self.shift)
    }

    /// [`log_density`](Self::log_density) of a column of values.
    ///
    /// # Shapes
    /// `out` is as long as `xs`.
    pub fn log_density_column(&self, xs: &[f64], out: &mut [f64]) {
        if self.window.is_none() && self.shift == 0.0 {
            self.law().log_density_column(xs, out);
            return;
        }
        for (value, &x) in out.iter_mut().zip(xs) {
            *value = self.log_density(x);
        }
    }

    /// [`log_density_slope`](Self::log_density_slope) of a column of values; `out` is as long as `xs`.
    pub fn log_density_slope_column(&self, xs: &[f64], out: &mut [f64]) {
        for (slope, &x) in out.iter_mut().zip(xs) {
            *slope = self.log_density_slope(x);
        }
    }

    /// `ln P(X <= x)`, accurate where it is far below the smallest double and where it is near zero.
    #[must_use]
    pub fn log_lower_tail(&self, x: f64) -> f64 {
        self.log_tails(x).lower
    }

    /// `ln P(X > x)`, accurate likewise.
    #[must_use]
    pub fn log_upper_tail(&self, x: f64) -> f64 {
        self.log_tails(x).upper
    }

    /// `P(X <= x)`.
    #[must_use]
    pub fn lower_tail(&self, x: f64) -> f64 {
        exp(self.log_lower_tail(x))
    }

    /// `P(X > x)`.
    #[must_use]
    pub fn upper_tail(&self, x: f64) -> f64 {
        exp(self.log_upper_tail(x))
    }

    /// `x` with `P(X > x) = tail` (`upper`) or `P(X <= x) = tail`; the tail may be 1e-300. Of a discrete distribution the
    /// least `k` with `P(X > k) <= tail` or `P(X <= k) >= tail`. NaN unless `0 <= tail <= 1`.
    #[must_use]
    pub fn quantile_of_tail(&self, tail: f64, upper: bool) -> f64 {
        if !(0.0..=1.0).contains(&tail) {
            return f64::NAN;
        }
        if tail == 0.0 || tail == 1.0 {
            let (low, high) = self.support();
            return if upper == (tail == 1.0) { low } else { high };
        }
        if tail > 0.5 && !self.is_discrete() {
            return self.quantile_of_log_tail(libm::log1p(-tail), !upper);
        }
        self.quantile_of_log_tail(crate::numeric::ln(tail), upper)
    }

    /// [`quantile_of_tail`](Self::quantile_of_tail) of the logarithm of a tail, which may be below the smallest double.
    #[must_use]
    pub fn quantile_of_log_tail(&self, log_tail: f64, upper: bool) -> f64 {
        let t = match &self.window {
            None => self.law().quantile(log_tail, upper),
            Some(window) => window.quantile(self.law(), log_tail, upper),
        };
        t + self.shift
    }

    /// The `p`-quantile. For `p` near one [`quantile_of_tail`](Self::quantile_of_tail) says more.
    #[must_use]
    pub fn quantile(&self, p: f64) -> f64 {
        self.quantile_of_tail(p, false)
    }

    /// `F^-1(Phi(u))`, by way of the smaller tail: the value whose standard normal score is `u`. Of a discrete
    /// distribution the `k` with `F(k - 1) < Phi(u) <= F(k)`.
    #[must_use]
    pub fn from_score(&self, u: f64) -> f64 {
        match &self.window {
            None => self.law().value_at_score(u) + self.shift,
            Some(window) => window.quantile(self.law(), standard::log_upper_tail(u.abs()), u > 0.0) + self.shift,
        }
    }

    /// `Phi^-1(F(x))`, by way of the smaller tail. Of a discrete distribution a score in the middle of the mass of `x`.
    #[must_use]
    pub fn score(&self, x: f64) -> f64 {
        let t = x - self.shift;
        match &self.window {
            None => self.law().score(t),
            Some(window) if self.is_discrete() => {
                let (before, after) = (window.log_tails(self.law(), t - 1.0), window.log_tails(self.law(), t));
                let half = |a, b| crate::numeric::log_add_exp(a, b) - std::f64::consts::LN_2;
                law::score_of_tails(LogTails {
                    lower: half(before.lower, after.lower),
                    upper: half(before.upper, after.upper),
                })
            }
            Some(window) => law::score_of_tails(window.log_tails(self.law(), t)),
        }
    }

    /// `dx/du` at score `u`, where `x = from_score(u)`: `phi(u)/f(x)`. Continuous distributions only; zero for others.
    #[must_use]
    pub fn score_slope(&self, u: f64, x: f64) -> f64 {
        if self.is_discrete() {
            return 0.0;
        }
        exp(standard::log_density(u) - self.log_density(x))
    }

    /// Least and greatest value.
    #[must_use]
    pub fn support(&self) -> (f64, f64) {
        let (low, high) = match &self.window {
            None => self.law().support(),
            Some(window) => window.ends(self.law()),
        };
        (low + self.shift, high + self.shift)
    }

    /// Whether the values are whole numbers (after the shift) with a mass each.
    #[must_use]
    pub fn is_discrete(&self) -> bool {
        self.law().is_discrete()
    }

    /// Expectation, where it exists.
    #[must_use]
    pub fn mean(&self) -> Option<f64> {
        match &self.window {
            None => self.law().mean().map(|mean| mean + self.shift),
            Some(_) => self.truncated_moments().map(|(mean, _)| mean),
        }
    }

    /// Standard deviation, where it exists.
    #[must_use]
    pub fn sd(&self) -> Option<f64> {
        match &self.window {
            None => self.law().sd(),
            Some(_) => self.truncated_moments().map(|(_, sd)| sd),
        }
    }

    /// The value with probability one half on either side.
    #[must_use]
    pub fn median(&self) -> f64 {
        self.from_score(0.0)
    }

    /// The name of the family, as in [`NAMES`](Self::NAMES).
    #[must_use]
    pub fn family(&self) -> &'static str {
        self.name
    }

    /// The parameters in their normal form (never moments where the family has parameters of its own), before shift and
    /// truncation.
    #[must_use]
    pub fn parameters(&self) -> Vec<(&'static str, f64)> {
        self.parameters.clone()
    }

    /// What is added to the values of the family.
    #[must_use]
    pub fn shift(&self) -> f64 {
        self.shift
    }

    /// `ln` of the probability that lay between the ends before it was truncated; 0 where it is not.
    ///
    /// ```
    /// use evenpoise::distribution::Distribution;
    /// let half = Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap().truncated(0.0, f64::INFINITY).unwrap();
    /// assert!((half.log_kept() - 0.5_f64.ln()).abs() < 1e-15);
    /// ```
    #[must_use]
    pub fn log_kept(&self) -> f64 {
        self.window.as_ref().map_or(0.0, window::Window::log_mass)
    }

    /// Whether it is truncated; the ends are then those of [`support`](Self::support).
    #[must_use]
    pub fn is_truncated(&self) -> bool {
        self.window.is_some()
    }

    fn log_tails(&self, x: f64) -> LogTails {
        let t = x - self.shift;
        match &self.window {
            None => self.law().log_tails(t),
            Some(window) => window.log_tails(self.law(), t),
        }
    }

    fn law(&self) -> &dyn Law {
        self.family.law()
    }

    /// Mean and standard deviation under truncation, by the integral over the score from -38 to 38 (rule of 20 points in
    /// 76 panels). They exist where the family's do, or where both ends are finite.
    fn truncated_moments(&self) -> Option<(f64, f64)> {
        let (low, high) = self.support();
        if !(low.is_finite() && high.is_finite()) && self.law().sd().is_none() {
            return None;
        }
        let median = self.median();
        let (mut first, mut second) = (0.0, 0.0);
        for (u, weight) in composite(-38.0, 38.0, 76) {
            let distance = self.from_score(u) - median;
            let weight = weight * exp(standard::log_density(u));
            first += weight * distance;
            second += weight * distance * distance;
        }
        Some((median + first, (second - first * first).max(0.0).sqrt()))
    }
}

const NAMES: [&str; catalogue::TABLE.len()] = {
    let mut names = [""; catalogue::TABLE.len()];
    let mut i = 0;
    while i < names.len() {
        names[i] = catalogue::TABLE[i].name;
        i += 1;
    }
    names
};
