//! Weighted EM of a mixture that knows a few directions, anchored to the covariances it began with.

use super::directed::{Directed, Part, scaled_identity};
use crate::numeric::Points;
use crate::proposal::ProposalError;
use rayon::prelude::*;

/// How covariances are fitted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Covariances {
    /// The mean of an inverse-Wishart posterior whose prior is centred on the component's covariance at the start of the fit, with
    /// `strength * k` (rest: `strength`) effective points.
    /// `diagonal`: without covariances between coordinates.
    Anchored { strength: f64, diagonal: bool },
    /// The nominal ones: unit.
    Unit,
}

/// A component with fewer effective points, or a smaller share, is dropped; the heaviest one stays.
const MIN_EFFECTIVE: f64 = 1.0;
const MIN_SHARE: f64 = 2e-3;

/// Weighted sums over a component's responsibilities.
struct Sums {
    mass: f64,
    mean: Vec<f64>,
    /// Central second moments, row by row.
    spread: Vec<f64>,
    rest: f64,
}

/// Weighted EM, `iterations` steps; `weights` have any scale.
///
/// # Source
/// Cappe, Douc, Guillin, Marin & Robert, Stat. Comput. 18 (2008) 447-459; the anchor and when a component goes are ours.
pub(crate) fn em(
    start: &Directed,
    points: &Points,
    weights: &[f64],
    covariances: Covariances,
    iterations: usize,
) -> Result<Directed, ProposalError> {
    let (k, m) = (start.k(), start.rest_dim());
    let total: f64 = weights.iter().sum();
    let weights: Vec<f64> = weights.iter().map(|w| w / total).collect();
    let effective = 1.0 / weights.iter().map(|w| w * w).sum::<f64>();
    let mut anchors = start.parts();
    let mut mixture = start.clone();
    for _ in 0..iterations {
        let (mut columns, _) = mixture.responsibilities(points);
        let sums: Vec<Sums> = columns
            .par_iter_mut()
            .map(|column| {
                column.iter_mut().zip(&weights).for_each(|(r, w)| *r *= w);
                sums_of(column, points, k, m > 0)
            })
            .collect();
        let kept = kept(&sums, effective);
        anchors = kept.iter().map(|&i| anchors[i].clone()).collect();
        let parts: Vec<Part> = kept
            .iter()
            .zip(&anchors)
            .map(|(&i, anchor)| updated(&sums[i], anchor, effective, covariances, m))
            .collect();
        mixture = Directed::new(&parts, m)?;
    }
    Ok(mixture)
}

/// Mass, mean and spread of one component's weighted responsibilities.
fn sums_of(column: &[f64], points: &Points, k: usize, has_rest: bool) -> Sums {
    let mass: f64 = column.iter().sum();
    let live: Vec<usize> = (0..column.len()).filter(|&i| column[i] > 1e-12 * mass).collect();
    let mut mean = vec![0.0; k];
    let (mut rest, mut point) = (0.0, vec![0.0; k + usize::from(has_rest)]);
    for &i in &live {
        points.copy_point(i, &mut point);
        for (slot, x) in mean.iter_mut().zip(&point) {
            *slot += column[i] * x;
        }
        if has_rest {
            rest += column[i] * point[k];
        }
    }
    mean.iter_mut().for_each(|v| *v /= mass);
    let mut spread = vec![0.0; k * k];
    for &i in &live {
        points.copy_point(i, &mut point);
        for a in 0..k {
            let scaled = column[i] * (point[a] - mean[a]);
            for b in 0..=a {
                spread[a * k + b] += scaled * (point[b] - mean[b]);
            }
        }
    }
    for a in 0..k {
        for b in 0..a {
            spread[b * k + a] = spread[a * k + b];
        }
    }
    Sums { mass, mean, spread, rest }
}

fn kept(sums: &[Sums], effective: f64) -> Vec<usize> {
    let enough = |s: &Sums| s.mass * effective > MIN_EFFECTIVE && s.mass > MIN_SHARE;
    let kept: Vec<usize> = (0..sums.len()).filter(|&i| enough(&sums[i])).collect();
    if !kept.is_empty() {
        return kept;
    }
    let heaviest = (0..sums.len()).fold(0, |best, i| if sums[i].mass > sums[best].mass { i } else { best });
    vec![heaviest]
}

fn updated(sums: &Sums, anchor: &Part, effective: f64, covariances: Covariances, rest_dim: usize) -> Part {
    let k = sums.mean.len();
    let points = sums.mass * effective;
    let mass = points + 1.0;
    let Covariances::Anchored { strength, diagonal } = covariances else {
        return Part { mass, mean: sums.mean.clone(), covariance: scaled_identity(k, 1.0), rest: 1.0 };
    };
    let prior = strength * k as f64;
    let covariance = sums
        .spread
        .iter()
        .zip(&anchor.covariance)
        .enumerate()
        .map(
            |(at, (s, a))| {
                if diagonal && at % (k + 1) != 0 { 0.0 } else { (s * effective + prior * a) / (points + prior) }
            },
        )
        .collect();
    let rest = if rest_dim == 0 {
        1.0
    } else {
        (sums.rest * effective / rest_dim as f64 + strength * anchor.rest) / (points + strength)
    };
    Part { mass, mean: sums.mean.clone(), covariance, rest }
}

#[cfg(test)]
mod tests {
    use super::super::subspace::Subspace;
    use super::*;
    use crate::numeric::{Purpose, exp};

    /// Two components and a rest, found again from 20,000 draws weighted to them: means within 5 standard errors.
    #[test]
    fn a_mixture_is_found_again() {
        let part = |mass, x: f64, v, rest| Part { mass, mean: vec![x, 0.0], covariance: vec![v, 0.0, 0.0, 1.0], rest };
        let truth = Directed::new(&[part(0.3, -2.0, 0.25, 0.8), part(0.7, 2.0, 0.5, 1.2)], 3).unwrap();
        let rows = vec![vec![1.0, 0.0, 0.0, 0.0, 0.0], vec![0.0, 1.0, 0.0, 0.0, 0.0]];
        let space = Subspace::leading(&rows, 5).unwrap();
        let wide = Directed::central(2, 3, 5.0, 1.2).unwrap();
        let (points, _) = space.draw(&wide, 20_000, 1, Purpose::Trial, 3);
        let x = space.reduce(&points);
        let w: Vec<f64> = truth.log_density(&x).iter().zip(wide.log_density(&x)).map(|(t, q)| exp(t - q)).collect();
        let start = Directed::new(&[part(0.5, -1.0, 1.0, 1.0), part(0.5, 1.0, 1.0, 1.0)], 3).unwrap();
        let fitted = em(&start, &x, &w, Covariances::Anchored { strength: 2.0, diagonal: false }, 30).unwrap();
        // The directions are found up to order and sign: compare what does not depend on them.
        let parts = fitted.parts();
        let means: Vec<f64> = parts.iter().map(|p| p.mean.iter().map(|m| m * m).sum::<f64>().sqrt()).collect();
        assert!(means.iter().all(|m| (m - 2.0).abs() < 0.05), "{means:?}");
        let rests: Vec<f64> = parts.iter().map(|p| p.rest).collect();
        assert!((rests[0].min(rests[1]) - 0.8).abs() < 0.05 && (rests[0].max(rests[1]) - 1.2).abs() < 0.05);
        assert!((parts[0].mass.min(parts[1].mass) - 0.3).abs() < 0.02);
        let diagonal = em(&start, &x, &w, Covariances::Anchored { strength: 2.0, diagonal: true }, 5).unwrap();
        assert!(diagonal.parts().iter().all(|p| p.covariance[1] == 0.0 && p.covariance[0] > 0.0));
        let unit = em(&start, &x, &w, Covariances::Unit, 5).unwrap();
        assert!(unit.parts().iter().all(|p| p.covariance[0] == 1.0 && p.rest == 1.0));
    }
}
