//! The contestants before they are scored.

use super::Wanted;
use super::ledger::Ledger;
use crate::adapt::plan::least_raise;
use crate::adapt::rare::{RareDraws, tune_rare};
use crate::adapt::settings::Settings;
use crate::adapt::{TuneError, tune};
use crate::problem::{Family, Problem};
use crate::proposal::{Component, Mixture};
use crate::refit::{Anchor, Method, Preference, em, moments_fit};
use serde::Serialize;

/// What a contestant is.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Kind {
    /// Gaussian components.
    Gaussian,
    /// Student-t components whose degrees of freedom were fitted.
    StudentT,
    /// Student-t components with degrees of freedom that were asked for.
    FixedDf,
    /// Gaussian components that take the weighted mean and covariance of their draws, and nothing else.
    Moments,
    /// As the tuning chose it, its layers for caution included.
    Tuned,
    /// Made before.
    Given,
}

impl Kind {
    /// Whether its tails were made heavier than Gaussian ones by this comparison.
    #[must_use]
    pub fn is_heavy(self) -> bool {
        matches!(self, Self::StudentT | Self::FixedDf)
    }
}

/// A contestant with what it cost.
#[derive(Debug, Clone)]
pub(super) struct Made {
    pub(super) kind: Kind,
    pub(super) name: String,
    /// Degrees of freedom of the fitted components; infinite for Gaussian ones.
    pub(super) df: f64,
    pub(super) proposal: Mixture,
    /// Evaluations it had, those it shared included.
    pub(super) evaluations: u64,
}

/// Degrees of freedom that a fit begins with.
const FIRST_DF: f64 = 10.0;
/// Iterations of a fit.
const ITERATIONS: usize = 60;
/// Weight of the anchor in a fit, effective points a coordinate.
const STRENGTH: f64 = 2.0;
/// Share of the nominal density in every fit.
const NOMINAL: f64 = 0.03;

/// For a density: every contestant tuned by itself with an equal share of the budget.
pub(super) fn tuned(
    problem: &Problem,
    wanted: &Wanted,
    budget: u64,
    ledger: &mut Ledger,
) -> Result<Vec<Made>, TuneError> {
    let plain = Settings {
        family: None,
        df: None,
        method: Preference::Auto,
        extended_from: Vec::new(),
        ..wanted.settings.clone()
    };
    let heavy = |df| Settings { family: Some(Family::StudentT), df, ..plain.clone() };
    let light = Settings { family: Some(Family::Gaussian), ..plain.clone() };
    let mut entries = vec![(Kind::Gaussian, light.clone()), (Kind::StudentT, heavy(None))];
    entries.extend(wanted.df.iter().map(|&df| (Kind::FixedDf, heavy(Some(df)))));
    entries.push((Kind::Moments, Settings { method: Preference::Moments, ..light }));

    let share = budget / entries.len() as u64;
    let (dim, least) = (problem.dim(), least_raise(problem.dim()));
    if share < least {
        let least = (least * entries.len() as u64 * wanted.settings.budget).div_ceil(budget.max(1)) + 2;
        return Err(TuneError::Budget { budget: wanted.settings.budget, dim, least });
    }
    let mut made = Vec::with_capacity(entries.len());
    for (kind, settings) in entries {
        let asked = settings.df;
        ledger.begin(title(kind, asked.unwrap_or(f64::NAN)).as_str());
        let tuning = tune(problem, &Settings { budget: share, ..settings }, ledger)?;
        let df = asked.unwrap_or(tuning.df);
        made.push(Made { kind, name: title(kind, df), df, proposal: tuning.chosen, evaluations: tuning.evaluations });
    }
    made.extend(given(wanted));
    Ok(made)
}

/// For a probability or an expectation: one tuning, and fits of all tails to the draws that its answer rests on.
pub(super) fn refitted(
    problem: &Problem,
    wanted: &Wanted,
    budget: u64,
    ledger: &mut Ledger,
) -> Result<Vec<Made>, TuneError> {
    ledger.begin("the tuning that all fits share");
    let settings = Settings { budget, extended_from: Vec::new(), ..wanted.settings.clone() };
    let tuning = tune_rare(problem, &settings, ledger)?;
    let evaluations = tuning.evaluations;
    let weights = shares(&tuning.draws);
    let entry = |kind: Kind, df: f64, proposal: Mixture| {
        let name = title(kind, df);
        Made { kind, name, df, proposal, evaluations }
    };
    let mut made = Vec::new();
    if let Some(weights) = weights {
        let fit = |df: f64, fit_df: bool| -> Result<(f64, Mixture), TuneError> {
            let method = method(problem.dim(), fit_df);
            let fitted = em(&tuning.chosen.map(|c| c.with_df(df))?, &tuning.draws.points, &weights, None, method)?;
            Ok((fitted.components()[0].df(), with_nominal(&fitted)?))
        };
        let (df, light) = fit(f64::INFINITY, false)?;
        made.push(entry(Kind::Gaussian, df, light));
        let (df, heavy) = fit(FIRST_DF, true)?;
        made.push(entry(Kind::StudentT, df, heavy));
        for &df in &wanted.df {
            made.push(entry(Kind::FixedDf, df, fit(df, false)?.1));
        }
        let one = moments_fit(&nominal(problem.dim())?, &tuning.draws.points, &weights, method(problem.dim(), false))?;
        made.push(entry(Kind::Moments, f64::INFINITY, with_nominal(&one)?));
    }
    made.push(entry(Kind::Tuned, f64::INFINITY, tuning.chosen));
    made.extend(given(wanted));
    Ok(made)
}

fn method(dim: usize, fit_df: bool) -> Method {
    let strength = STRENGTH * dim as f64;
    Method { strength, anchor: Anchor::Own, iterations: ITERATIONS, fit_df, diagonal: false }
}

fn given(wanted: &Wanted) -> impl Iterator<Item = Made> {
    wanted.given.iter().map(|(name, proposal)| Made {
        kind: Kind::Given,
        name: name.clone(),
        df: proposal.components()[0].df(),
        proposal: proposal.clone(),
        evaluations: 0,
    })
}

/// Parts of the answer, by size; none where no draw met the event.
fn shares(draws: &RareDraws) -> Option<Vec<f64>> {
    let sum: f64 = draws.contributions.iter().map(|c| c.abs()).sum();
    (sum > 0.0).then(|| draws.contributions.iter().map(|c| c.abs() / sum).collect())
}

/// The density of independent standard normal scores.
fn nominal(dim: usize) -> Result<Mixture, TuneError> {
    let mut identity = vec![0.0; dim * dim];
    (0..dim).for_each(|j| identity[j * dim + j] = 1.0);
    Ok(Mixture::single(Component::new(vec![0.0; dim], &identity, f64::INFINITY)?))
}

fn with_nominal(fitted: &Mixture) -> Result<Mixture, TuneError> {
    Ok(Mixture::union(&[(1.0 - NOMINAL, fitted), (NOMINAL, &nominal(fitted.dim())?)])?)
}

/// What a contestant is called.
fn title(kind: Kind, df: f64) -> String {
    let shown = if df < 10.0 { format!("{df:.1}") } else { format!("{df:.0}") };
    let shown = shown.trim_end_matches(".0");
    match kind {
        Kind::Gaussian => "Gaussian".to_owned(),
        Kind::StudentT if df.is_finite() => format!("Student-t, fitted {shown}"),
        Kind::StudentT if df.is_nan() => "Student-t, fitted".to_owned(),
        Kind::StudentT => "Student-t, fitted ∞".to_owned(),
        Kind::FixedDf => format!("Student-t, df {shown}"),
        Kind::Moments => "Moment matching".to_owned(),
        Kind::Tuned | Kind::Given => "As tuned".to_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn titles_tell_contestants_apart() {
        assert_eq!(title(Kind::StudentT, 3.24), "Student-t, fitted 3.2");
        assert_eq!(title(Kind::FixedDf, 6.0), "Student-t, df 6");
        assert_eq!(title(Kind::FixedDf, 40.0), "Student-t, df 40");
        assert_eq!(title(Kind::StudentT, f64::NAN), "Student-t, fitted");
        assert_eq!(title(Kind::StudentT, f64::INFINITY), "Student-t, fitted ∞");
    }
}
