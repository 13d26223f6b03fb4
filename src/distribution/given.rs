//! Sets of parameters, and the values given for one of them, with the checks that the builders of the catalogue ask for.

use super::DistributionError;
use std::fmt;

/// Parameters that describe a distribution together.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ParameterSet {
    /// All of these are given.
    pub required: &'static [&'static str],
    /// Any of these may be given; each with what it is otherwise.
    pub optional: &'static [(&'static str, f64)],
}

impl fmt::Display for ParameterSet {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.required.join(", "))?;
        self.optional.iter().try_for_each(|(name, default)| write!(f, ", {name} (otherwise {default})"))
    }
}

impl ParameterSet {
    pub(super) fn names(&self) -> impl Iterator<Item = &'static str> {
        self.required.iter().copied().chain(self.optional.iter().map(|&(name, _)| name))
    }

    pub(super) fn accepts(&self, given: &[&str]) -> bool {
        self.required.iter().all(|name| given.contains(name))
            && given.iter().all(|&name| self.names().any(|known| known == name))
    }
}

/// The values given for one of the parameter sets, with the checks that builders ask for.
pub(super) struct Given<'a> {
    pub(super) distribution: &'static str,
    pub(super) set: &'static ParameterSet,
    pub(super) names: &'a [&'a str],
    pub(super) values: &'a [f64],
}

impl Given<'_> {
    pub(super) fn has(&self, name: &str) -> bool {
        self.set.required.contains(&name)
    }

    /// The value given, or that of an optional parameter otherwise.
    pub(super) fn value(&self, name: &'static str) -> f64 {
        match self.names.iter().position(|&given| given == name) {
            Some(i) => self.values[i],
            None => self.set.optional.iter().find(|(known, _)| *known == name).map_or(f64::NAN, |&(_, value)| value),
        }
    }

    pub(super) fn refuse<T>(
        &self,
        parameter: &'static str,
        allowed: impl Into<String>,
    ) -> Result<T, DistributionError> {
        let value = self.value(parameter);
        Err(DistributionError::Value { distribution: self.distribution, parameter, value, allowed: allowed.into() })
    }

    pub(super) fn finite(&self, name: &'static str) -> Result<f64, DistributionError> {
        let value = self.value(name);
        if value.is_finite() { Ok(value) } else { self.refuse(name, "a finite number") }
    }

    pub(super) fn positive(&self, name: &'static str) -> Result<f64, DistributionError> {
        let value = self.value(name);
        if value.is_finite() && value > 0.0 { Ok(value) } else { self.refuse(name, "a number above 0") }
    }

    /// A finite number above the parameter `other`, whose value is `least`.
    pub(super) fn above(&self, name: &'static str, other: &str, least: f64) -> Result<f64, DistributionError> {
        let value = self.finite(name)?;
        if value > least { Ok(value) } else { self.refuse(name, format!("a number above {other} = {least}")) }
    }

    pub(super) fn probability(&self, name: &'static str) -> Result<f64, DistributionError> {
        let value = self.value(name);
        if value > 0.0 && value < 1.0 {
            Ok(value)
        } else {
            self.refuse(name, "a number between 0 and 1, ends excluded")
        }
    }

    pub(super) fn whole(&self, name: &'static str, least: f64) -> Result<f64, DistributionError> {
        const EXACT: f64 = 9_007_199_254_740_992.0;
        let value = self.value(name);
        let is_whole = value == value.floor() && value.abs() <= EXACT && value >= least;
        if is_whole {
            Ok(value)
        } else {
            self.refuse(name, if least > 0.0 { "a whole number from 1 on" } else { "a whole number" })
        }
    }

    /// The standard deviation, given as such or as a coefficient of variation of `mean`.
    pub(super) fn sd(&self, mean: f64) -> Result<f64, DistributionError> {
        if self.has("sd") {
            return self.positive("sd");
        }
        let cv = self.positive("cv")?;
        if mean == 0.0 {
            return self.refuse("mean", "a mean other than 0 with cv, or sd instead of cv");
        }
        Ok(cv * mean.abs())
    }

    /// `sd/mean` of a positive variable, with its mean.
    pub(super) fn positive_moments(&self) -> Result<(f64, f64), DistributionError> {
        let mean = self.positive("mean")?;
        let cv = self.sd(mean)? / mean;
        if (1e-8..=1e8).contains(&cv) {
            return Ok((mean, cv));
        }
        self.refuse(
            if self.has("sd") { "sd" } else { "cv" },
            "a standard deviation between 1e-8 and 1e8 times the mean",
        )
    }

    /// Location and scale, given as such or by a mean and standard deviation of the standard law.
    pub(super) fn place(&self, standard_mean: f64, standard_sd: f64) -> Result<(f64, f64), DistributionError> {
        if self.has("location") {
            return Ok((self.finite("location")?, self.positive("scale")?));
        }
        let mean = self.finite("mean")?;
        let scale = self.sd(mean)? / standard_sd;
        Ok((mean - standard_mean * scale, scale))
    }
}
