//! What a user may set about a tuning.

use crate::problem::{Family, Method, Structure, TuningKeys};
use crate::refit::Preference;

/// Settings of a tuning. `None` is "auto": chosen by the loop.
#[derive(Debug, Clone, PartialEq)]
pub struct Settings {
    /// Evaluations in all: survey, rounds, confirm and report draws.
    pub budget: u64,
    /// Earlier budgets, ascending, which the tuning was planned with before it was raised to this one; empty for most.
    pub extended_from: Vec<u64>,
    /// Draws in a round.
    pub round_draws: Option<u64>,
    /// Rounds at most.
    pub rounds: u32,
    /// Share of the budget for the report draws.
    pub report_share: Option<f64>,
    /// Tails of the components.
    pub family: Option<Family>,
    /// Degrees of freedom of the components.
    pub df: Option<f64>,
    /// Number of components.
    pub components: Option<usize>,
    /// Scale matrices of the components.
    pub structure: Option<Structure>,
    /// Kinds of refit.
    pub method: Preference,
    /// Share of the wide start kept in the chosen proposal.
    pub defensive: Option<f64>,
    /// Seed of every draw.
    pub seed: u64,
}

impl Settings {
    /// The defaults, with a budget of evaluations and a seed.
    #[must_use]
    pub fn new(budget: u64, seed: u64) -> Self {
        Self {
            budget,
            extended_from: Vec::new(),
            round_draws: None,
            rounds: 20,
            report_share: None,
            family: None,
            df: None,
            components: None,
            structure: None,
            method: Preference::Auto,
            defensive: None,
            seed,
        }
    }

    /// What a problem file's `[tuning]` says, the defaults elsewhere.
    #[must_use]
    pub fn from_keys(keys: &TuningKeys) -> Self {
        let plain = Self::new(keys.budget.unwrap_or(BUDGET), keys.seed.unwrap_or(1));
        Self {
            extended_from: keys.extended_from.clone(),
            round_draws: keys.round_draws,
            rounds: keys.rounds.map_or(plain.rounds, |r| r.min(u64::from(u32::MAX)) as u32),
            report_share: keys.report_share,
            family: keys.family,
            df: keys.df,
            components: keys.components.map(|k| k as usize),
            structure: keys.structure,
            method: match keys.method {
                None => Preference::Auto,
                Some(Method::CrossEntropy) => Preference::CrossEntropy,
                Some(Method::Moments) => Preference::Moments,
                Some(Method::Variance) => Preference::Variance,
            },
            defensive: keys.defensive,
            ..plain
        }
    }

    /// The same settings under every budget in turn, the first planned first.
    pub(crate) fn parts(&self) -> Vec<Self> {
        let budgets = self.extended_from.iter().copied().chain([self.budget]);
        budgets.map(|budget| Self { budget, extended_from: Vec::new(), ..self.clone() }).collect()
    }

    /// Whether scales are kept diagonal.
    pub(crate) fn diagonal(&self) -> bool {
        self.structure == Some(Structure::Diagonal)
    }

    /// Whether components may be Gaussian.
    pub(crate) fn gaussian(&self) -> bool {
        self.family != Some(Family::StudentT) && self.df.is_none_or(|df| df == f64::INFINITY)
    }

    /// Whether degrees of freedom are fitted.
    pub(crate) fn fit_df(&self) -> bool {
        self.family != Some(Family::Gaussian) && self.df.is_none()
    }

    /// Degrees of freedom to begin with.
    pub(crate) fn first_df(&self) -> f64 {
        match (self.df, self.family) {
            (Some(df), _) => df,
            (None, Some(Family::Gaussian)) => f64::INFINITY,
            (None, _) => FIRST_DF,
        }
    }

    /// Whether the heavy-tailed layers (halo, wide start) are used.
    pub(crate) fn layered(&self) -> bool {
        self.family != Some(Family::Gaussian) || self.defensive.is_some_and(|s| s > 0.0)
    }
}

/// Evaluations when nobody says how many.
const BUDGET: u64 = 20_000;
/// Degrees of freedom of the first proposal: light enough to fit, heavy enough to look around.
const FIRST_DF: f64 = 20.0;
