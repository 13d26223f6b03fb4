//! How a budget is spent, and every constant of the loop.

use crate::adapt::TuneError;
use crate::adapt::settings::Settings;
use crate::problem::Family;
use crate::problem::Structure;
use crate::refit::Preference;

/// Share of the budget for the scouts, and their number at least (or a fifth of the budget) and at most.
const SCOUTS: f64 = 0.08;
const SCOUTS_LEAST: usize = 60;
const SCOUTS_MOST: usize = 1000;
/// Share of the budget that searches may spend, below and from ten dimensions on. With .05 in ten dimensions and more no
/// search of a quadratic margin in 100 dimensions completes (differences for gradients).
const SEARCHES: f64 = 0.08;
const SEARCHES_MANY: f64 = 0.12;
const MANY: usize = 10;
/// Up to this dimension covariances are full; above, a few directions are.
pub(crate) const FULL: usize = 12;
/// Round while the event is smoothed, as a share of the budget; at least 100 draws or a tenth.
const SMOOTH_ROUND: f64 = 0.04;
const ROUND_LEAST: usize = 100;
/// Rounds at the event itself, as shares of the budget; then all that is left, which a rest under `LAST_LEAST` joins.
const SCHEDULE: [f64; 4] = [0.06, 0.08, 0.14, 0.24];
const LAST_LEAST: f64 = 0.12;
/// A raised budget begins with the round of this number: the proposal has learnt enough for larger ones.
const RAISED_FIRST_ROUND: usize = 2;
/// Effective pooled draws that a smoothing must leave: a share of a round, and so many a coordinate.
const EFFECTIVE_SHARE: f64 = 0.15;
const EFFECTIVE_PER_COORDINATE: usize = 5;
/// Components at most.
const COMPONENTS: usize = 16;
/// The least budget that makes sense.
const LEAST_BUDGET: u64 = 200;
/// Share of the nominal density in every proposal.
const NOMINAL: f64 = 0.03;

/// The plan of one run.
#[derive(Debug, Clone)]
pub(crate) struct Plan {
    pub(crate) budget: u64,
    /// The budget before it was raised to this one, and 0 in the first part.
    pub(crate) from: u64,
    /// The round of [`SCHEDULE`] that the part begins with.
    first_round: usize,
    pub(crate) seed: u64,
    pub(crate) scouts: usize,
    /// Evaluations that searches may spend beyond the scouts.
    pub(crate) search_cap: u64,
    /// Draws of a round while the event is smoothed.
    pub(crate) smooth_round: usize,
    /// Whether a few directions are told from the rest.
    pub(crate) directions: bool,
    /// Whether covariances are kept diagonal.
    pub(crate) diagonal: bool,
    /// Kinds of refit that are asked for.
    pub(crate) method: Preference,
    pub(crate) most_components: usize,
    /// Share of the nominal density.
    pub(crate) nominal: f64,
    /// Rounds at most.
    pub(crate) rounds: u32,
}

impl Plan {
    pub(crate) fn new(settings: &Settings, dim: usize) -> Result<Self, TuneError> {
        let budget = settings.budget;
        let least = LEAST_BUDGET.max(4 * (dim as u64 + 1));
        if budget < least {
            return Err(TuneError::Budget { budget, dim, least });
        }
        let n = budget as f64;
        let searches = if dim < MANY { SEARCHES } else { SEARCHES_MANY };
        let round = settings.round_draws.map_or(SMOOTH_ROUND * n, |r| (r as f64).min(0.25 * n));
        Ok(Self {
            budget,
            from: 0,
            first_round: 0,
            seed: settings.seed,
            scouts: ((SCOUTS * n) as usize).clamp(SCOUTS_LEAST.min(budget as usize / 5), SCOUTS_MOST),
            search_cap: (searches * n) as u64,
            smooth_round: (round as usize).max(ROUND_LEAST.min(budget as usize / 10)),
            directions: match settings.structure {
                Some(Structure::Directions) => dim > 1,
                Some(Structure::Full | Structure::Diagonal) => false,
                None => dim > FULL,
            },
            diagonal: settings.structure == Some(Structure::Diagonal),
            method: settings.method,
            most_components: settings.components.unwrap_or(COMPONENTS).max(1),
            nominal: settings.defensive.unwrap_or(NOMINAL).clamp(0.0, 0.5),
            rounds: settings.rounds.max(2),
        })
    }

    /// Settings that have no meaning for a probability or an expectation are refused with their reason, not passed over.
    pub(crate) fn refuse(settings: &Settings, aim: &'static str) -> Result<(), TuneError> {
        let refused = |key, reason| Err(TuneError::Setting { key, aim, reason });
        if settings.family == Some(Family::StudentT) {
            return refused(
                "family",
                "its components are Gaussian, and copies of them with unit and with inflated covariance take the place of heavy tails",
            );
        }
        if settings.df.is_some_and(f64::is_finite) {
            return refused(
                "df",
                "its components are Gaussian, and copies of them with unit and with inflated covariance take the place of heavy tails",
            );
        }
        if settings.report_share.is_some() {
            return refused(
                "report_share",
                "every round drawn after the event was reached counts in the answer, and no share is set aside to report",
            );
        }
        if settings.method == Preference::Moments {
            return refused(
                "method",
                "moments matched to an event that ends at a surface give weights without a finite variance; \"cross-entropy\" and \"variance\" can be chosen",
            );
        }
        Ok(())
    }

    /// The plans of all parts: one for the first budget, and one for every raise, whose rounds are shares of what it adds.
    pub(crate) fn parts(settings: &Settings, dim: usize) -> Result<Vec<Self>, TuneError> {
        let mut plans: Vec<Self> = Vec::new();
        for part in settings.parts() {
            let Some(before) = plans.last() else {
                plans.push(Self::new(&part, dim)?);
                continue;
            };
            let least = LEAST_BUDGET.max(4 * (dim as u64 + 1));
            let added = part.budget.saturating_sub(before.budget);
            if added < least {
                return Err(TuneError::Raise {
                    budget: part.budget,
                    from: before.budget,
                    least: before.budget + least,
                });
            }
            let of_added = Self::new(&Settings { budget: added, ..part.clone() }, dim)?;
            plans.push(Self { budget: part.budget, from: before.budget, first_round: RAISED_FIRST_ROUND, ..of_added });
        }
        Ok(plans)
    }

    /// Draws of the next round: `at_event` rounds of this part were drawn at the event itself, none while it is smoothed (`None`);
    /// `drawn` rounds of this part were drawn in all.
    pub(crate) fn next_round(&self, at_event: Option<usize>, spent: u64, drawn: u32) -> usize {
        let left = self.budget.saturating_sub(spent) as usize;
        let added = (self.budget - self.from) as f64;
        let wanted = match at_event {
            None => self.smooth_round,
            Some(t) => SCHEDULE.get(self.first_round + t).map_or(left, |share| (share * added) as usize),
        };
        let last = drawn + 1 >= self.rounds || left < wanted + (LAST_LEAST * added) as usize;
        if last { left } else { wanted }
    }

    /// Effective pooled draws that a smoothed event must have, in `k` directions.
    pub(crate) fn effective(&self, k: usize) -> f64 {
        (EFFECTIVE_SHARE * self.smooth_round as f64).max((EFFECTIVE_PER_COORDINATE * (k + 1)) as f64)
    }
}

/// Standard deviation of the wide scouts in `d` dimensions: wide enough to meet events ten orders of magnitude rare in few dimensions,
/// narrow enough to stay near the shell where the nominal density lives in many.
pub(crate) fn wide_sd(d: usize) -> f64 {
    match d {
        2 => 3.0,
        3 => 2.6,
        4..=20 => (1.0 + 3.2 / (d as f64).sqrt()).max(1.15),
        0 | 1 => 4.2,
        _ => 1.3,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 14 % and 24 % of what is added, and the rest; a second raise likewise.
    #[test]
    fn a_raise_spends_what_it_adds() {
        let settings = Settings { extended_from: vec![10_000, 20_000], ..Settings::new(25_000, 1) };
        let plans = Plan::parts(&settings, 5).unwrap();
        assert_eq!(
            plans.iter().map(|p| (p.from, p.budget)).collect::<Vec<_>>(),
            [(0, 10_000), (10_000, 20_000), (20_000, 25_000)]
        );
        let sizes =
            [(0, 10_000), (1, 11_400), (2, 13_800)].map(|(t, spent)| plans[1].next_round(Some(t), spent, t as u32));
        assert_eq!(sizes, [1400, 2400, 6200]);
        assert_eq!(plans[2].next_round(Some(0), 20_000, 0), 700);
        let small = Settings { extended_from: vec![10_000], ..Settings::new(10_100, 1) };
        assert!(matches!(Plan::parts(&small, 5), Err(TuneError::Raise { least: 10_200, .. })));
    }

    #[test]
    fn what_has_no_meaning_here_is_refused() {
        let plain = Settings::new(2000, 1);
        let refused = |settings: &Settings| match Plan::refuse(settings, "probability") {
            Err(TuneError::Setting { key, .. }) => Some(key),
            _ => None,
        };
        assert_eq!(refused(&plain), None);
        assert_eq!(
            refused(&Settings { family: Some(Family::Gaussian), df: Some(f64::INFINITY), ..plain.clone() }),
            None
        );
        assert_eq!(refused(&Settings { family: Some(Family::StudentT), ..plain.clone() }), Some("family"));
        assert_eq!(refused(&Settings { df: Some(5.0), ..plain.clone() }), Some("df"));
        assert_eq!(refused(&Settings { report_share: Some(0.3), ..plain.clone() }), Some("report_share"));
        assert_eq!(refused(&Settings { method: Preference::Moments, ..plain.clone() }), Some("method"));
        assert_eq!(refused(&Settings { method: Preference::Variance, ..plain }), None);
    }

    #[test]
    fn the_rounds_spend_the_budget_and_no_more() {
        let plan = Plan::new(&Settings::new(10_000, 1), 5).unwrap();
        assert_eq!((plan.scouts, plan.smooth_round, plan.search_cap), (800, 400, 800));
        let mut spent = 1300;
        let mut sizes = Vec::new();
        for t in 0.. {
            let n = plan.next_round(Some(t), spent, t as u32);
            spent += n as u64;
            sizes.push(n);
            if spent >= plan.budget {
                break;
            }
        }
        assert_eq!(sizes, [600, 800, 1400, 2400, 3500]);
        assert_eq!(spent, plan.budget);
        assert!(matches!(Plan::new(&Settings::new(100, 1), 2), Err(TuneError::Budget { .. })));
        let small = Plan::new(&Settings::new(400, 1), 2).unwrap();
        assert_eq!((small.scouts, small.smooth_round), (60, 40));
    }
}
