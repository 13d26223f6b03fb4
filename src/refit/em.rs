//! Weighted EM of a Gaussian or Student-t mixture, anchored to the scales it began with; and moment matching.

use super::degrees::best_df;
use super::slopes::assisted_moments;
use super::{Moments, RefitError, weighted_moments};
use crate::numeric::Points;
use crate::proposal::{Component, Mixture};

/// What pulls the scales of a fit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// Every component's own scale at the start of the fit.
    Own,
    /// The average scale of all components.
    Pooled,
}

/// How a mixture is fitted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Method {
    /// Weight of the anchor, in effective points: `S = (n S_fit + strength T) / (n + strength)`, the mean of an inverse-Wishart
    /// posterior whose prior is centred on the anchor `T`.
    pub strength: f64,
    /// What `T` is.
    pub anchor: Anchor,
    /// Iterations at most.
    pub iterations: usize,
    /// Whether the degrees of freedom are fitted (one number for all components).
    pub fit_df: bool,
    /// Whether scales are kept diagonal.
    pub diagonal: bool,
}

/// A component with fewer effective points than this has no scale to estimate.
const MIN_EFFECTIVE: f64 = 4.0;
/// A component with a smaller share than this is dropped.
const MIN_SHARE: f64 = 2e-4;

/// Weighted EM: a mixture with a larger `sum w ln q`, the cross-entropy fit to the weighted points.
///
/// # Shapes
/// `weights` has one entry a point and sums to one.
///
/// # Errors
/// [`RefitError::Proposal`] where a scale is not positive definite (raise the anchor).
///
/// # Source
/// Update of a Student-t mixture: Peel & McLachlan, Stat. Comput. 10 (2000) 339-348; weighted: Cappe, Douc, Guillin, Marin & Robert,
/// Stat. Comput. 18 (2008) 447-459. Retention by effective points and the anchor are ours.
pub fn em(
    start: &Mixture,
    points: &Points,
    weights: &[f64],
    gradients: Option<&Points>,
    method: Method,
) -> Result<Mixture, RefitError> {
    let n_effective = super::effective(weights);
    let tolerance = (0.02 / n_effective).max(1e-4);
    let mut anchors: Vec<Vec<f64>> = start.components().iter().map(Component::scale).collect();
    let mut mixture = start.clone();
    let mut before = f64::NEG_INFINITY;
    for iteration in 0..method.iterations {
        let (objective, moments) = match gradients {
            Some(g) => assisted_moments(&mixture, points, weights, g, true),
            None => weighted_moments(&mixture, points, weights, true),
        };
        if objective - before < tolerance && iteration > 1 {
            break;
        }
        before = objective;
        let kept = retained(&moments);
        let pooled = (method.anchor == Anchor::Pooled).then(|| pooled_scale(&mixture));
        let mut masses = Vec::with_capacity(kept.len());
        let mut components = Vec::with_capacity(kept.len());
        for &k in &kept {
            let anchor = pooled.as_ref().unwrap_or(&anchors[k]);
            components.push(updated(&mixture.components()[k], &moments[k], anchor, method)?);
            masses.push(moments[k].mass);
        }
        anchors = kept.iter().map(|&k| anchors[k].clone()).collect();
        mixture = Mixture::new(&masses, components)?;
        if method.fit_df && iteration % 3 == 0 {
            let df = best_df(&mixture, points, weights);
            mixture = mixture.map(|c| c.with_df(df))?;
        }
    }
    Ok(mixture)
}

/// Moment matching: every component takes the weighted mean and covariance of its responsibilities, and the degrees of freedom
/// that give the fourth moment, `v = (4 r - 2)/(r - 1)` with `r = E q^2 / (d (d + 2))` (from the moments of the t density,
/// Kotz & Nadarajah 2004, chapter 1). Where they are not fitted, those of the start stay, with the scale that has the covariance
/// (for two and fewer, which have none, the covariance itself). The responsibilities' own scale takes the place of `Method::anchor`.
///
/// # Errors
/// As [`em`].
pub fn moments_fit(start: &Mixture, points: &Points, weights: &[f64], method: Method) -> Result<Mixture, RefitError> {
    let (_, moments) = weighted_moments(start, points, weights, false);
    let mut masses = Vec::new();
    let mut components = Vec::new();
    for k in retained(&moments) {
        let component = &start.components()[k];
        let covariance_before = scaled(&component.scale(), covariance_factor(component.df()));
        let gaussian = component.with_df(f64::INFINITY);
        components.push(updated(&gaussian, &moments[k], &covariance_before, method)?);
        masses.push(moments[k].mass);
    }
    let matched = Mixture::new(&masses, components)?;
    if !method.fit_df {
        let df = start.components()[0].df();
        let narrowed = if df > 2.0 && df.is_finite() { (df - 2.0) / df } else { 1.0 };
        return Ok(matched.map(|c| c.widened(narrowed).with_df(df))?);
    }
    let d = matched.dim() as f64;
    let (_, fourths) = weighted_moments(&matched, points, weights, false);
    let mass: f64 = fourths.iter().map(|m| m.mass).sum();
    let ratio = fourths.iter().map(|m| m.fourth).sum::<f64>() / (mass * d * (d + 2.0));
    let df = if ratio > 1.01 { ((4.0 * ratio - 2.0) / (ratio - 1.0)).max(4.5) } else { f64::INFINITY };
    if df > super::GAUSSIAN_DF {
        return Ok(matched);
    }
    Ok(matched.map(|c| c.widened((df - 2.0) / df).with_df(df))?)
}

fn covariance_factor(df: f64) -> f64 {
    if df > 2.0 && df.is_finite() { df / (df - 2.0) } else { 1.0 }
}

fn scaled(matrix: &[f64], factor: f64) -> Vec<f64> {
    matrix.iter().map(|v| v * factor).collect()
}

/// Which components have enough effective points and share; the heaviest one at least.
fn retained(moments: &[Moments]) -> Vec<usize> {
    let kept: Vec<usize> = (0..moments.len())
        .filter(|&k| {
            let m = &moments[k];
            m.effective() > MIN_EFFECTIVE && m.mass > MIN_SHARE && m.pull > 0.0
        })
        .collect();
    if !kept.is_empty() {
        return kept;
    }
    let mut heaviest = 0;
    for k in 1..moments.len() {
        if moments[k].mass > moments[heaviest].mass {
            heaviest = k;
        }
    }
    vec![heaviest]
}

fn pooled_scale(mixture: &Mixture) -> Vec<f64> {
    let d = mixture.dim();
    let mut pooled = vec![0.0; d * d];
    for (share, component) in mixture.shares().iter().zip(mixture.components()) {
        for (sum, v) in pooled.iter_mut().zip(component.scale()) {
            *sum += share * v;
        }
    }
    pooled
}

/// The M step of one component.
fn updated(component: &Component, m: &Moments, anchor: &[f64], method: Method) -> Result<Component, RefitError> {
    let d = component.dim();
    let pull = m.pull.max(1e-300);
    let mass = m.mass.max(1e-300);
    let shift: Vec<f64> = m.first.iter().map(|v| v / pull).collect();
    let location = component.location().iter().zip(&shift).map(|(a, b)| a + b).collect();
    let n = m.effective();
    let mut scale = vec![0.0; d * d];
    let mut at = 0;
    for i in 0..d {
        for j in 0..=i {
            let sum = m.second[at] - m.pull * shift[i] * shift[j];
            at += 1;
            let mut fitted = (sum * (n / mass) + method.strength * anchor[i * d + j]) / (n + method.strength);
            if method.diagonal && i != j {
                fitted = 0.0;
            }
            scale[i * d + j] = fitted;
            scale[j * d + i] = fitted;
        }
    }
    Ok(Component::new(location, &scale, component.df())?)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::{Purpose, stream, uniform};

    fn truth() -> Mixture {
        let a = Component::new(vec![-2.0, 0.0], &[1.0, 0.3, 0.3, 0.5], 6.0).unwrap();
        let b = Component::new(vec![2.0, 1.0], &[0.5, 0.0, 0.0, 2.0], 6.0).unwrap();
        Mixture::new(&[0.3, 0.7], vec![a, b]).unwrap()
    }

    fn plain(iterations: usize) -> Method {
        Method { strength: 0.0, anchor: Anchor::Own, iterations, fit_df: false, diagonal: false }
    }

    /// Dempster, Laird & Rubin 1977, theorem 1: an EM step never lowers the (weighted) log likelihood.
    #[test]
    fn em_never_lowers_the_weighted_log_density() {
        for seed in 0..20 {
            let points = truth().draw(400, seed, Purpose::Trial, 0).points;
            let mut rng = stream(seed, Purpose::Trial, 9, 0);
            let raw: Vec<f64> = (0..400).map(|_| uniform(&mut rng)).collect();
            let sum: f64 = raw.iter().sum();
            let weights: Vec<f64> = raw.iter().map(|w| w / sum).collect();
            let a = Component::new(vec![-1.0, -1.0], &[2.0, 0.0, 0.0, 2.0], 6.0).unwrap();
            let b = Component::new(vec![1.0, 1.0], &[2.0, 0.0, 0.0, 2.0], 6.0).unwrap();
            let mut mixture = Mixture::new(&[0.5, 0.5], vec![a, b]).unwrap();
            let mut before = f64::NEG_INFINITY;
            for _ in 0..10 {
                let (objective, _) = weighted_moments(&mixture, &points, &weights, true);
                assert!(objective >= before - 1e-12, "seed {seed}: {before} then {objective}");
                before = objective;
                mixture = em(&mixture, &points, &weights, None, plain(1)).unwrap();
            }
        }
    }

    /// 20,000 draws of the mixture itself: location within 5 standard errors (about 0.02), df within 1.5 of 6.
    #[test]
    fn em_finds_the_mixture_it_was_drawn_from() {
        let n = 20_000;
        let points = truth().draw(n, 3, Purpose::Trial, 0).points;
        let weights = vec![1.0 / n as f64; n];
        let start = truth().map(|c| c.widened(2.0).with_df(30.0)).unwrap();
        let fit = em(&start, &points, &weights, None, Method { fit_df: true, ..plain(60) }).unwrap();
        assert!((fit.shares()[0] - 0.3).abs() < 0.02, "{:?}", fit.shares());
        assert!((fit.components()[1].location()[0] - 2.0).abs() < 0.04);
        assert!((fit.components()[1].scale()[3] - 2.0).abs() < 0.2, "{:?}", fit.components()[1].scale());
        assert!((fit.components()[0].df() - 6.0).abs() < 1.5, "{}", fit.components()[0].df());
    }

    #[test]
    fn moment_matching_gives_the_weighted_mean_and_covariance() {
        let points = Points::from_rows(1, &[0.0, 1.0, 2.0, 3.0, 4.0, 10.0]);
        let weights = [0.1, 0.2, 0.3, 0.2, 0.1, 0.1];
        let start = Mixture::single(Component::new(vec![0.0], &[1.0], f64::INFINITY).unwrap());
        let fit = moments_fit(&start, &points, &weights, plain(1)).unwrap();
        let mean = 0.2 + 0.6 + 0.6 + 0.4 + 1.0;
        let square = 0.2 + 1.2 + 1.8 + 1.6 + 10.0;
        assert!((fit.components()[0].location()[0] - mean).abs() < 1e-14);
        assert!((fit.components()[0].scale()[0] - (square - mean * mean)).abs() < 1e-13);
    }
}
