//! The figures of a comparison, from its draws: nothing is evaluated for them.

use crate::adapt::compare::Comparison;
use crate::adapt::compare::Contestant;
use crate::adapt::compare::Kind;
use crate::figures::Drawing;
use crate::figures::Style;
use crate::figures::compare_df;
use crate::figures::compare_df::DfData;
use crate::figures::compare_df::DfScore;
use crate::figures::compare_errors;
use crate::figures::compare_errors::ErrorCourse;
use crate::figures::compare_errors::ErrorsData;
use crate::figures::compare_radial;
use crate::figures::compare_radial::RadialData;
use crate::figures::compare_radial::RadialTail;
use crate::figures::compare_tails;
use crate::figures::compare_tails::TailsData;
use crate::figures::compare_tails::WeightTail;
use crate::figures::evenness::TailFit;
use crate::numeric::Points;
use crate::numeric::Purpose;
use crate::numeric::exp;
use crate::numeric::linear::cholesky;
use crate::numeric::ln;
use crate::numeric::stream;
use crate::numeric::uniform;
use crate::problem::Aim;
use crate::weights::Score;
use crate::weights::Strata;
use crate::weights::TailReason;
use crate::weights::TailShape;
use crate::weights::verdict::checks::TAIL_SOUND;

/// Contestants that a figure has room and looks for.
const MOST: usize = 6;
/// Degrees of freedom that the best Student-t mixture is looked at with; then Gaussian.
const DF: [f64; 9] = [2.0, 3.0, 4.0, 6.0, 8.0, 12.0, 20.0, 40.0, 100.0];
/// Points of the running errors, and the first number of draws.
const STEPS: usize = 40;
const FIRST: f64 = 50.0;
/// Draws of every proposal whose distances are looked at: the last one and a half decades are noise.
const DISTANCES: usize = 20_000;
/// Points of a curve of distances.
const RADII: usize = 60;
/// A share further out rests on so many draws, and is no smaller than this.
const BEYOND: usize = 5;
const LEAST_SHARE: f64 = 1e-6;
/// Proposals are followed to so many times the distance at which the target ends.
const FURTHER: f64 = 1.5;

/// Draws all figures of a comparison.
#[must_use]
pub fn comparison_figures(aim: Aim, comparison: &Comparison, seed: u64, style: &Style) -> Vec<Drawing> {
    let shown: Vec<&Contestant> = comparison.contestants.iter().filter(|c| c.score.is_some()).take(MOST).collect();
    let mut drawings =
        vec![compare_tails::draw(&TailsData { contestants: shown.iter().map(|c| tail(c)).collect() }, style)];
    if let Some(heavy) = shown.iter().find(|c| c.kind == Kind::StudentT) {
        drawings.push(compare_df::draw(&degrees(heavy), style));
    }
    drawings.push(compare_errors::draw(&errors(aim, comparison, &shown, seed), style));
    drawings.extend(radial(&shown, seed).map(|data| compare_radial::draw(&data, style)));
    drawings
}

fn relative(contestant: &Contestant) -> Vec<f64> {
    let log = &contestant.draws.log_weights;
    let largest = log.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    log.iter().map(|l| exp(l - largest)).collect()
}

fn tail(contestant: &Contestant) -> WeightTail {
    let fit = |score: &Score| {
        let in_mean_weights = |log: f64| exp(log - score.log_normaliser);
        (score.tail.reason == TailReason::Fitted).then(|| TailFit {
            shape: score.tail.shape,
            shape_upper: score.tail.upper,
            limit: TAIL_SOUND,
            threshold: in_mean_weights(score.tail.log_threshold),
            scale: in_mean_weights(score.tail.log_scale),
            share_above: score.tail.points as f64 / score.draws as f64,
        })
    };
    let tail = contestant.score.as_ref().and_then(fit);
    WeightTail { name: contestant.name.clone(), weights: relative(contestant), tail }
}

/// ESS fraction of the mixture with other degrees of freedom: with weights `w` and draws from `q`, that of `q'` is
/// `(mean w)^2 / mean (w^2 q/q')`.
fn degrees(contestant: &Contestant) -> DfData {
    let draws = &contestant.draws;
    let (w, log_proposal) = (relative(contestant), contestant.proposal.log_density(&draws.points));
    let score = |df: f64| {
        let other = contestant.with_fitted_df(df).ok()?.log_density(&draws.points);
        let squares: Vec<f64> = (0..w.len()).map(|i| w[i] * w[i] * exp(log_proposal[i] - other[i])).collect();
        let n = w.len() as f64;
        let (a, b) = (w.iter().sum::<f64>() / n, squares.iter().sum::<f64>() / n);
        let ess_fraction = a * a / b;
        let influence = |(w, s): (&f64, &f64)| ess_fraction * (2.0 * (w / a - 1.0) - (s / b - 1.0));
        let se = w.iter().zip(&squares).map(influence).map(|t| t * t).sum::<f64>().sqrt() / n;
        // Of squares whose tail is too heavy for a variance nothing can be said.
        let known = TailShape::of(&squares, 0.0).shape <= TAIL_SOUND;
        Some(DfScore { df: finite(df), ess_fraction, ess_fraction_se: known.then_some(se) })
    };
    DfData { scores: DF.into_iter().chain([f64::INFINITY]).filter_map(score).collect(), fitted: finite(contestant.df) }
}

fn finite(df: f64) -> Option<f64> {
    df.is_finite().then_some(df)
}

/// Running relative errors over the draws in a random order, which is the same for all.
fn errors(aim: Aim, comparison: &Comparison, shown: &[&Contestant], seed: u64) -> ErrorsData {
    let n = shown.first().map_or(0, |c| c.draws.labels.len());
    let order = shuffled(n, seed);
    let ratio = ln((n as f64 / FIRST).max(1.0)) / (STEPS - 1) as f64;
    let mut counts: Vec<usize> = (0..STEPS).map(|i| (FIRST * exp(ratio * i as f64)).round() as usize).collect();
    counts.retain(|&m| m <= n);
    counts.dedup();
    let course = |contestant: &&Contestant| {
        let w = relative(contestant);
        let error = |&m: &usize| {
            let terms: Vec<f64> = order[..m].iter().map(|&i| w[i] * contestant.draws.signs[i]).collect();
            let labels: Vec<u32> = order[..m].iter().map(|&i| contestant.draws.labels[i]).collect();
            let mean = Strata::new(&labels).mean(&terms);
            mean.se / mean.mean.abs()
        };
        let draws = counts.iter().map(|&m| m as f64).collect();
        ErrorCourse { name: contestant.name.clone(), draws, standard_error: counts.iter().map(error).collect() }
    };
    let mut contestants: Vec<ErrorCourse> = shown.iter().map(course).collect();
    if let Some(yardstick) = comparison.yardstick.as_ref().filter(|_| contestants.len() < MOST) {
        let e = yardstick.ess_fraction.value;
        contestants.push(ErrorCourse {
            name: "Plain draws".to_owned(),
            draws: counts.iter().map(|&m| m as f64).collect(),
            standard_error: counts.iter().map(|&m| ((1.0 / e - 1.0) / m as f64).sqrt()).collect(),
        });
    }
    let quantity = match aim {
        Aim::Density => "the normalising constant (relative)",
        Aim::Expectation => "the mean (relative)",
        Aim::Probability => "the probability (relative)",
    };
    ErrorsData { quantity: quantity.to_owned(), unit: None, contestants }
}

/// A random order of `0..n`.
fn shuffled(n: usize, seed: u64) -> Vec<usize> {
    let mut rng = stream(seed, Purpose::Compare, 2, 0);
    let mut order: Vec<usize> = (0..n).collect();
    for i in (1..n).rev() {
        let j = ((uniform(&mut rng) * (i + 1) as f64) as usize).min(i);
        order.swap(i, j);
    }
    order
}

/// Distances from the target's mean in its standard deviations: of the target by the weighted draws of the contestant with the
/// largest ESS, of the proposals by draws of their own.
fn radial(shown: &[&Contestant], seed: u64) -> Option<RadialData> {
    let ess = |c: &&&Contestant| c.merits.ess_fraction.value;
    let best = shown.iter().max_by(|a, b| ess(a).total_cmp(&ess(b)))?;
    let w = relative(best);
    let centred = Centred::of(&best.draws.points, &w)?;
    let target = survival("the target", &centred.distances(&best.draws.points), &w);
    // What lies much further out than the target says nothing about it.
    let far = target.distance.last().map_or(f64::INFINITY, |r| FURTHER * r);
    let proposals = shown.iter().map(|c| {
        let drawn = c.proposal.draw(DISTANCES, seed, Purpose::Compare, 3);
        let mut tail = survival(&c.name, &centred.distances(&drawn.points), &vec![1.0; DISTANCES]);
        let kept = tail.distance.iter().filter(|&&r| r <= far).count();
        tail.distance.truncate(kept);
        tail.log_survival.truncate(kept);
        tail
    });
    Some(RadialData {
        distance: "distance from the centre (standard deviations)".to_owned(),
        target,
        proposals: proposals.collect(),
    })
}

/// Mean and Cholesky factor of the covariance of weighted points.
struct Centred {
    mean: Vec<f64>,
    factor: Vec<f64>,
}

impl Centred {
    fn of(points: &Points, weights: &[f64]) -> Option<Self> {
        let d = points.dim();
        let sum: f64 = weights.iter().sum();
        let mut mean = vec![0.0; d];
        for (i, w) in weights.iter().enumerate().filter(|(_, w)| **w > 0.0) {
            (0..d).for_each(|j| mean[j] += w / sum * points.get(i, j));
        }
        let mut covariance = vec![0.0; d * d];
        for (i, w) in weights.iter().enumerate().filter(|(_, w)| **w > 0.0) {
            for j in 0..d {
                for k in 0..d {
                    covariance[j * d + k] += w / sum * ((points.get(i, j) - mean[j]) * (points.get(i, k) - mean[k]));
                }
            }
        }
        Some(Self { factor: cholesky(&covariance, d)?, mean })
    }

    fn distances(&self, points: &Points) -> Vec<f64> {
        let d = self.mean.len();
        let mut z = vec![0.0; d];
        (0..points.len())
            .map(|i| {
                for j in 0..d {
                    let before: f64 = (0..j).map(|k| self.factor[j * d + k] * z[k]).sum();
                    z[j] = (points.get(i, j) - self.mean[j] - before) / self.factor[j * d + j];
                }
                z.iter().map(|v| v * v).sum::<f64>().sqrt()
            })
            .collect()
    }
}

/// Share of the weight further out than each of some distances, from the median to the last point.
fn survival(name: &str, distances: &[f64], weights: &[f64]) -> RadialTail {
    let mut pairs: Vec<(f64, f64)> =
        distances.iter().copied().zip(weights.iter().copied()).filter(|&(r, w)| w > 0.0 && r.is_finite()).collect();
    pairs.sort_by(|a, b| b.0.total_cmp(&a.0));
    let total: f64 = pairs.iter().map(|p| p.1).sum();
    let mut beyond = 0.0;
    let mut tail: Vec<(f64, f64)> = Vec::new();
    for (i, (r, w)) in pairs.iter().enumerate() {
        if i >= BEYOND && beyond / total > LEAST_SHARE {
            tail.push((*r, ln(beyond / total)));
        }
        beyond += w;
    }
    tail.reverse();
    let kept = thinned(&tail);
    RadialTail {
        name: name.to_owned(),
        distance: kept.iter().map(|p| p.0).collect(),
        log_survival: kept.iter().map(|p| p.1).collect(),
    }
}

/// Points evenly spaced in the logarithm of the share.
fn thinned(tail: &[(f64, f64)]) -> Vec<(f64, f64)> {
    let Some(least) = tail.last().map(|p| p.1) else { return Vec::new() };
    let step = -least / RADII as f64;
    let mut kept: Vec<(f64, f64)> = Vec::new();
    for &point in tail {
        if kept.last().is_none_or(|last| last.1 - point.1 >= step) {
            kept.push(point);
        }
    }
    kept
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Twenty points of even weight at 1 to 20: beyond 12 lie eight of twenty, and what is beyond 15 are five, the least.
    #[test]
    fn shares_further_out_are_counted() {
        let distances: Vec<f64> = (1..=20).map(f64::from).collect();
        let tail = survival("twenty", &distances, &[1.0; 20]);
        let at = tail.distance.iter().position(|&r| r == 12.0).unwrap();
        assert!((tail.log_survival[at] - libm::log(0.4)).abs() < 1e-14);
        assert_eq!(*tail.distance.last().unwrap(), 15.0);
    }

    #[test]
    fn an_order_is_a_permutation() {
        let mut order = shuffled(300, 4);
        assert_ne!(order, (0..300).collect::<Vec<_>>());
        order.sort_unstable();
        assert_eq!(order, (0..300).collect::<Vec<_>>());
    }
}
