//! What a user may set about a tuning.

use crate::refit::Preference;
use serde::{Deserialize, Serialize};

/// Which tails components may have.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Family {
    /// Chosen on evidence.
    Auto,
    /// Gaussian components only, and no heavy-tailed layers unless a defensive share is asked for.
    Gaussian,
    /// Student-t components only.
    StudentT,
}

/// Which scale matrices components may have.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Structure {
    /// Chosen on evidence.
    Auto,
    /// Full matrices.
    Full,
    /// Diagonal matrices.
    Diagonal,
}

/// Settings of a tuning. `None` is "auto": chosen by the loop.
#[derive(Debug, Clone, PartialEq)]
pub struct Settings {
    /// Evaluations in all: survey, rounds, confirm and report draws.
    pub budget: u64,
    /// Draws in a round.
    pub round_draws: Option<u64>,
    /// Rounds at most.
    pub rounds: u32,
    /// Share of the budget for the report draws.
    pub report_share: Option<f64>,
    /// Tails of the components.
    pub family: Family,
    /// Degrees of freedom of the components.
    pub df: Option<f64>,
    /// Number of components.
    pub components: Option<usize>,
    /// Scale matrices of the components.
    pub structure: Structure,
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
            round_draws: None,
            rounds: 20,
            report_share: None,
            family: Family::Auto,
            df: None,
            components: None,
            structure: Structure::Auto,
            method: Preference::Auto,
            defensive: None,
            seed,
        }
    }

    /// Whether components may be Gaussian.
    pub(crate) fn gaussian(&self) -> bool {
        self.family != Family::StudentT && self.df.is_none_or(|df| df == f64::INFINITY)
    }

    /// Whether degrees of freedom are fitted.
    pub(crate) fn fit_df(&self) -> bool {
        self.family != Family::Gaussian && self.df.is_none()
    }

    /// Degrees of freedom to begin with.
    pub(crate) fn first_df(&self) -> f64 {
        match (self.df, self.family) {
            (Some(df), _) => df,
            (None, Family::Gaussian) => f64::INFINITY,
            (None, _) => FIRST_DF,
        }
    }

    /// Whether the heavy-tailed layers (halo, wide start) are used.
    pub(crate) fn layered(&self) -> bool {
        self.family != Family::Gaussian || self.defensive.is_some_and(|s| s > 0.0)
    }
}

/// Degrees of freedom of the first proposal: light enough to fit, heavy enough to look around.
const FIRST_DF: f64 = 20.0;
