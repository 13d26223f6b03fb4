//! From the pool to the next proposal: temper, refit candidates, rank, polish, set the layers, give birth at heavy points.

use super::TuneError;
use super::curvature::{Probing, by_curvature, probe};
use super::layers::{LayerShares, halo, layered};
use super::pool::{Pool, temper, tempered};
use super::rank::{predicted_ess_fraction, rank};
use super::settings::Settings;
use super::standard::Standard;
use super::tuning::CandidateScore;
use crate::numeric::{Points, Purpose, exp, ln, log_add_exp, log_sum_exp, stream, uniform};
use crate::proposal::{Component, Mixture};
use crate::refit::{Incumbent, Preference, Step, candidates, effective, minimise_variance, most_components, polish};

/// A fitted proposal in its two copies and with its layers.
#[derive(Debug, Clone)]
pub(crate) struct Fit {
    /// Fitted to all points: drawn from.
    pub(crate) full: Mixture,
    /// Fitted without the held-out points: ranked.
    pub(crate) trained: Mixture,
    /// Shares of halo and wide start; none for a purely Gaussian family.
    pub(crate) layers: Option<LayerShares>,
}

/// What a refit did.
#[derive(Debug, Clone)]
pub(crate) struct Refined {
    pub(crate) fit: Fit,
    pub(crate) exponent: f64,
    pub(crate) step: Step,
    pub(crate) candidates: Vec<CandidateScore>,
    /// Held-out prediction for the ranked copy; none while the target is tempered.
    pub(crate) predicted: Option<f64>,
}

/// Points trained on and polished on, at most.
const TRAINING: usize = 10_000;
const POLISHING: usize = 40_000;
/// The same where gradients take the noise away.
const POLISHING_WITH_SLOPES: usize = 20_000;
/// A component's share of the fitted mixture is at least this.
const SHARE_FLOOR: f64 = 0.004;
/// Layers that candidates are ranked with.
const RANKED_LAYERS: LayerShares = LayerShares { halo: 0.03, wide: 0.02 };
/// Least shares of the layers in the chosen proposal: each costs that much ESS and no more.
const FINAL_FLOORS: LayerShares = LayerShares { halo: 0.02, wide: 0.01 };
/// Floors of the layers' shares while tuning: the fitted mixture, the halo, the wide start.
pub(crate) const LAYER_FLOORS: [f64; 3] = [0.3, 0.03, 0.02];
/// Rounds in which all components may be seeded afresh.
const RESEED_ROUNDS: u32 = 4;

/// The pool's weights at the exponent that its effective number allows.
pub(crate) struct Weighted {
    pub(crate) exponent: f64,
    /// Tempered weights relative to the largest.
    pub(crate) weights: Vec<f64>,
    pub(crate) log_unit: f64,
    /// Log of the tempered target `mixture (target/mixture)^g`, made to integrate to one by the pool's own estimate.
    pub(crate) log_target: Vec<f64>,
}

pub(crate) fn weigh(pool: &Pool, round_draws: usize) -> Weighted {
    let (n, d) = (pool.len() as f64, pool.points.dim() as f64);
    let log_weights = pool.log_weights();
    let wanted = (0.1 * round_draws as f64).max(5.0 * (d + 1.0)).min(0.5 * n);
    let exponent = temper(&log_weights, wanted);
    weigh_at(pool, &log_weights, exponent)
}

fn weigh_at(pool: &Pool, log_weights: &[f64], exponent: f64) -> Weighted {
    let top = log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let weights = tempered(log_weights, exponent);
    let log_normaliser = exponent * top + ln(weights.iter().sum::<f64>() / pool.len() as f64);
    let log_target = pool
        .log_mixture()
        .iter()
        .zip(log_weights)
        .map(|(m, &l)| if l == f64::NEG_INFINITY { l } else { m + exponent * l - log_normaliser })
        .collect();
    Weighted { exponent, weights, log_unit: exponent * top - log_normaliser, log_target }
}

/// Turns the pool into the next proposal.
pub(crate) fn refine(
    pool: &Pool,
    fit: &Fit,
    wide: &Mixture,
    settings: &Settings,
    round: u32,
    round_draws: usize,
) -> Result<Refined, TuneError> {
    let weighted = weigh(pool, round_draws);
    let mut rng = stream(settings.seed, Purpose::Refit, round, 1);
    let live: Vec<usize> = (0..pool.len()).filter(|&i| weighted.weights[i] > 1e-9 / pool.len() as f64).collect();
    let training = thinned(live.iter().copied().filter(|&i| !pool.held_out[i]).collect(), TRAINING, &mut rng);
    let held: Vec<usize> = (0..pool.len()).filter(|&i| pool.held_out[i]).collect();
    let points = pool.points.select(&training);
    let slopes = pool.gradients.as_ref().filter(|_| weighted.exponent == 1.0).map(|g| g.select(&training));
    let weights = shares_of(&weighted.weights, &training);
    let log_ratios: Vec<f64> = layered(&fit.trained, wide, fit.layers)?
        .log_density(&points)
        .iter()
        .zip(&training)
        .map(|(q, &i)| weighted.log_target[i] - q)
        .collect();
    let made = candidates(
        &Incumbent {
            mixture: &fit.trained,
            points: &points,
            weights: &weights,
            gradients: slopes.as_ref(),
            log_ratios: &log_ratios,
            most_components: settings.components.unwrap_or_else(|| most_components(&weights, points.dim())),
            fit_df: settings.fit_df(),
            reseed: round <= RESEED_ROUNDS,
            preference: settings.method,
            gaussian: settings.gaussian(),
            diagonal: settings.diagonal(),
        },
        settings.seed,
        round,
    );
    let made = permitted(made, settings);
    let held_points = pool.points.select(&held);
    // Ranked with the layers of the final proposal: with the present ones, a halo grown large around too narrow a fit would speak
    // for the narrow fit, and every better one would lose (lowest ESS .82 against .96 on a two-parameter logit).
    let ranked = fit.layers.map(|_| RANKED_LAYERS);
    let log_densities = made
        .iter()
        .map(|c| Ok(layered(&c.mixture, wide, ranked)?.log_density(&held_points)))
        .collect::<Result<Vec<_>, TuneError>>()?;
    let held_weights: Vec<f64> = held.iter().map(|&i| weighted.weights[i]).collect();
    let held_target: Vec<f64> = held.iter().map(|&i| weighted.log_target[i]).collect();
    let sizes: Vec<usize> = made.iter().map(|c| c.mixture.len()).collect();
    let ranking = rank(&log_densities, &sizes, &held_weights, &held_target);
    // The plain moment-matching loop takes its fit as it comes.
    let best = if settings.method == Preference::Moments { made.len() - 1 } else { ranking.best };
    let winner = &made[best];
    let predicted = (weighted.exponent == 1.0)
        .then(|| predicted_ess_fraction(&held_weights, weighted.log_unit, &held_target, &log_densities[best]));
    let full = match winner.step {
        Step::Kept => fit.full.clone(),
        Step::Tails(df) => fit.full.map(|c| c.with_df(df))?,
        _ => {
            let exact = weighted.exponent == 1.0 && pool.gradients.is_some();
            let most = if exact { POLISHING_WITH_SLOPES } else { POLISHING };
            let all = thinned(live, most, &mut rng);
            let weights = shares_of(&weighted.weights, &all);
            let slopes = pool.gradients.as_ref().filter(|_| weighted.exponent == 1.0).map(|g| g.select(&all));
            polish(winner, &pool.points.select(&all), &weights, slopes.as_ref(), settings.fit_df(), settings.diagonal())
        }
    };
    let floored = floored(&full)?;
    let layers = fit.layers.map(|now| layer_shares(pool, &weighted, &floored, wide, now)).transpose()?;
    let standing = made
        .iter()
        .zip(&ranking.scores)
        .map(|(c, s)| CandidateScore { step: c.step, components: c.mixture.len(), gain: s - ranking.scores[0] })
        .collect();
    Ok(Refined {
        fit: Fit { full: floored, trained: winner.mixture.clone(), layers },
        exponent: weighted.exponent,
        step: winner.step,
        candidates: standing,
        predicted,
    })
}

/// Where the number of components is set, only candidates that have it (if there are any besides the present proposal).
fn permitted(made: Vec<crate::refit::Candidate>, settings: &Settings) -> Vec<crate::refit::Candidate> {
    let Some(wanted) = settings.components else { return made };
    if made.iter().skip(1).any(|c| c.mixture.len() == wanted) {
        made.into_iter().filter(|c| c.mixture.len() == wanted).collect()
    } else {
        made
    }
}

fn floored(mixture: &Mixture) -> Result<Mixture, TuneError> {
    if mixture.len() == 1 {
        return Ok(mixture.clone());
    }
    let masses: Vec<f64> = mixture.shares().iter().map(|a| a.max(SHARE_FLOOR)).collect();
    Ok(Mixture::new(&masses, mixture.components().to_vec())?)
}

fn layer_shares(
    pool: &Pool,
    weighted: &Weighted,
    fitted: &Mixture,
    wide: &Mixture,
    now: LayerShares,
) -> Result<LayerShares, TuneError> {
    let columns =
        [fitted.log_density(&pool.points), halo(fitted)?.log_density(&pool.points), wide.log_density(&pool.points)];
    let start = [1.0 - now.halo - now.wide, now.halo, now.wide];
    let shares = minimise_variance(&columns, &weighted.weights, &weighted.log_target, &start, &LAYER_FLOORS, 60);
    Ok(LayerShares { halo: shares[1], wide: shares[2] })
}

/// At most `most` of the rows, drawn without replacement and kept in order.
pub(crate) fn thinned(mut rows: Vec<usize>, most: usize, rng: &mut crate::numeric::Stream) -> Vec<usize> {
    let n = rows.len();
    if n <= most {
        return rows;
    }
    for i in 0..most {
        let j = i + ((uniform(rng) * (n - i) as f64) as usize).min(n - i - 1);
        rows.swap(i, j);
    }
    rows.truncate(most);
    rows.sort_unstable();
    rows
}

fn shares_of(weights: &[f64], rows: &[usize]) -> Vec<f64> {
    let sum: f64 = rows.iter().map(|&i| weights[i]).sum();
    rows.iter().map(|&i| weights[i] / sum).collect()
}

/// Births: a point is heavy when it carries this share of the predicted variance and the target is above the proposal by this factor.
const HEAVY_SHARE: f64 = 0.001;
const HEAVY_RATIO: f64 = 8.0;
const MOST_BIRTHS: usize = 4;
/// Effective points asked of the tempered variance shares.
const BIRTH_ESS: f64 = 10.0;
/// Share of the next round for each newborn, and for all.
const NEWBORN_SHARE: f64 = 0.04;
const NEWBORN_SHARES: f64 = 0.2;

/// Components from the curvature at the heaviest points of the pool, where neither reweighting nor refitting helps because there
/// are too few points, and probes from them. Spends evaluations up to `cap`.
pub(crate) fn births(
    target: &Standard,
    pool: &Pool,
    proposal: &Mixture,
    df: f64,
    cap: u64,
) -> Result<Option<Mixture>, TuneError> {
    let log_weights = pool.log_weights();
    let log_normaliser = log_sum_exp(&log_weights) - ln(pool.len() as f64);
    let exponent = temper(&log_weights, BIRTH_ESS);
    let log_proposal = proposal.log_density(&pool.points);
    let log_ratio: Vec<f64> = pool
        .log_target
        .iter()
        .zip(&log_proposal)
        .map(|(&l, q)| if l == f64::NEG_INFINITY { l } else { l - q })
        .collect();
    let burden: Vec<f64> = log_weights
        .iter()
        .zip(&log_ratio)
        .map(|(&w, r)| if w == f64::NEG_INFINITY { w } else { exponent * (w + r) })
        .collect();
    let total = log_sum_exp(&burden);
    let d = pool.points.dim();
    let mut open: Vec<bool> = log_ratio
        .iter()
        .zip(&burden)
        .map(|(r, b)| exp(b - total) >= HEAVY_SHARE && r - log_normaliser >= ln(HEAVY_RATIO))
        .collect();
    let mut born: Vec<Component> = Vec::new();
    while born.len() < MOST_BIRTHS {
        let Some(i) = heaviest(&burden, &open) else { break };
        open[i] = false;
        let Some(local) = by_curvature(target, &pool.points.point(i), cap)? else { continue };
        let near = 2.0 * d as f64 + 4.0;
        for (k, flag) in open.iter_mut().enumerate() {
            *flag = *flag && local.component.distance(&pool.points.point(k)) > near;
        }
        born.push(local.component);
    }
    if born.is_empty() {
        return Ok(None);
    }
    let fresh = Mixture::new(&vec![1.0; born.len()], born.clone())?;
    let highest = pool.log_target.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let log_proposal = |x: &[f64]| log_add_exp(proposal.log_density_at(x), ln(0.3) + fresh.log_density_at(x));
    let probed = probe(target, &born, &Probing { log_proposal: &log_proposal, log_normaliser, highest, cap })?;
    born.extend(probed.into_iter().map(|l| l.component));
    let count = born.len();
    let components = born.into_iter().map(|c| c.with_df(df)).collect();
    Ok(Some(Mixture::new(&vec![1.0; count], components)?))
}

fn heaviest(burden: &[f64], open: &[bool]) -> Option<usize> {
    let mut best: Option<usize> = None;
    for i in 0..burden.len() {
        if open[i] && best.is_none_or(|b| burden[i] > burden[b]) {
            best = Some(i);
        }
    }
    best
}

/// Both copies of a fit joined by newborn components.
pub(crate) fn join(fit: &Fit, born: &Mixture) -> Result<Fit, TuneError> {
    let share = NEWBORN_SHARES.min(NEWBORN_SHARE * born.len() as f64);
    let joined = |m: &Mixture| Mixture::union(&[(1.0 - share, m), (share, born)]);
    Ok(Fit { full: joined(&fit.full)?, trained: joined(&fit.trained)?, layers: fit.layers })
}

/// Points of the ensemble's share problem, at most, and its steps.
const ENSEMBLE_POINTS: usize = 12_000;
const ENSEMBLE_STEPS: usize = 100;
/// Floor of a component's share in the ensemble.
const ENSEMBLE_FLOOR: f64 = 0.001;
/// Share that each component born in any round begins with; it has no floor, and is left out where its share ends below the least.
const NEWBORN_START: f64 = 0.002;
const NEWBORN_LEAST: f64 = 1e-6;

/// The final proposal: the last few fits, whatever was born at heavy points, halo and wide start, every component with its own share, by
/// convex minimisation of the predicted weight variance. With the ESS fraction that the pool predicts for it.
///
/// The newborn join as they were born: a refit ranked by log density merges away what carries a ten-thousandth of the mass, be it half
/// of the weight variance (banana in 20 dimensions: ESS fraction .85 without them, .976 with).
pub(crate) fn ensemble(
    pool: &Pool,
    fits: &[Fit],
    born: &[(u32, Mixture)],
    wide: &Mixture,
    settings: &Settings,
    round_draws: usize,
) -> Result<(Mixture, Option<f64>), TuneError> {
    let weighted = weigh(pool, round_draws);
    let mut distinct: Vec<&Mixture> = Vec::new();
    for fit in fits {
        if distinct.last() != Some(&&fit.full) {
            distinct.push(&fit.full);
        }
    }
    let each = 1.0 / distinct.len() as f64;
    let mut parts: Vec<(f64, &Mixture)> = distinct.iter().map(|m| (each, *m)).collect();
    parts.extend(born.iter().map(|(_, b)| (NEWBORN_START * b.len() as f64, b)));
    let members = Mixture::union(&parts)?;
    let newborn: usize = parts[distinct.len()..].iter().map(|(_, m)| m.len()).sum();
    let last = distinct[distinct.len() - 1];
    let mut rng = stream(settings.seed, Purpose::Refit, 0, 2);
    let rows = thinned((0..pool.len()).collect(), ENSEMBLE_POINTS, &mut rng);
    let points = pool.points.select(&rows);
    let weights: Vec<f64> = rows.iter().map(|&i| weighted.weights[i]).collect();
    let log_target: Vec<f64> = rows.iter().map(|&i| weighted.log_target[i]).collect();
    let mut columns = members.component_log_densities(&points);
    let mut start: Vec<f64> = members.shares().iter().map(|a| 0.94 * a).collect();
    let mut floors: Vec<f64> = members.shares().iter().map(|a| ENSEMBLE_FLOOR.min(0.5 * a)).collect();
    let first_newborn = floors.len() - newborn;
    floors[first_newborn..].fill(0.0);
    let layers = fits[fits.len() - 1].layers.is_some();
    if layers {
        columns.push(halo(last)?.log_density(&points));
        columns.push(wide.log_density(&points));
        start.extend([0.03, 0.03]);
        floors.extend([FINAL_FLOORS.halo, settings.defensive.unwrap_or(FINAL_FLOORS.wide)]);
    }
    let shares = minimise_variance(&columns, &weights, &log_target, &start, &floors, ENSEMBLE_STEPS);
    let k = members.len();
    let mut masses = shares[..k].to_vec();
    for mass in &mut masses[first_newborn..] {
        *mass = if *mass < NEWBORN_LEAST { 0.0 } else { *mass };
    }
    let fitted = Mixture::new(&masses, members.components().to_vec())?;
    let chosen = if layers {
        let mass: f64 = masses.iter().sum();
        Mixture::union(&[(mass, &fitted), (shares[k], &halo(last)?), (shares[k + 1], wide)])?
    } else {
        fitted
    };
    let predicted = (weighted.exponent == 1.0).then(|| predict(&points, &weights, &weighted, &log_target, &chosen));
    Ok((chosen, predicted))
}

fn predict(points: &Points, weights: &[f64], weighted: &Weighted, log_target: &[f64], chosen: &Mixture) -> f64 {
    predicted_ess_fraction(weights, weighted.log_unit, log_target, &chosen.log_density(points))
}

/// Whether a pool has any weight at all.
pub(crate) fn has_mass(pool: &Pool) -> bool {
    pool.log_target.iter().any(|&l| l > f64::NEG_INFINITY) && effective(&tempered(&pool.log_weights(), 1.0)) > 0.0
}
