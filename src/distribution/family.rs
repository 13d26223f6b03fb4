//! The families behind the names, as one value.

use super::bounded::{Beta, Triangular, Uniform};
use super::discrete::{Binomial, Geometric, Integers, Poisson};
use super::exponential::{Exponential, Extreme, Pareto, Weibull};
use super::gamma::{Gamma, InverseGamma};
use super::law::{Affine, Law};
use super::normal::{HalfNormal, Lognormal, StandardNormal};
use super::student_t::{Cauchy, HalfCauchy, Logistic, StudentT};

/// One of the laws.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Family {
    Normal(Affine<StandardNormal>),
    Lognormal(Lognormal),
    Uniform(Uniform),
    Exponential(Affine<Exponential>),
    Gamma(Affine<Gamma>),
    InverseGamma(Affine<InverseGamma>),
    Beta(Beta),
    Weibull(Affine<Weibull>),
    Extreme(Affine<Extreme>),
    Pareto(Affine<Pareto>),
    StudentT(Affine<StudentT>),
    Cauchy(Affine<Cauchy>),
    HalfNormal(Affine<HalfNormal>),
    HalfCauchy(Affine<HalfCauchy>),
    Logistic(Affine<Logistic>),
    Triangular(Triangular),
    Binomial(Binomial),
    Poisson(Poisson),
    Geometric(Geometric),
    Integers(Integers),
}

impl Family {
    pub(super) fn law(&self) -> &dyn Law {
        match self {
            Self::Normal(law) => law,
            Self::Lognormal(law) => law,
            Self::Uniform(law) => law,
            Self::Exponential(law) => law,
            Self::Gamma(law) => law,
            Self::InverseGamma(law) => law,
            Self::Beta(law) => law,
            Self::Weibull(law) => law,
            Self::Extreme(law) => law,
            Self::Pareto(law) => law,
            Self::StudentT(law) => law,
            Self::Cauchy(law) => law,
            Self::HalfNormal(law) => law,
            Self::HalfCauchy(law) => law,
            Self::Logistic(law) => law,
            Self::Triangular(law) => law,
            Self::Binomial(law) => law,
            Self::Poisson(law) => law,
            Self::Geometric(law) => law,
            Self::Integers(law) => law,
        }
    }
}
