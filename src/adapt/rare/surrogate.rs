//! Quadratic stand-ins for the margin near the surface of the event: their events have known probabilities, and are much like it.

use super::layers::squared_distance;
use super::planes::Control;
use super::pool::Pool;
use super::quadric::{Term, probability_below};
use super::subspace::Subspace;
use super::survey::Found;
use crate::numeric::linear::{cholesky, dot, eigen};
use crate::numeric::{Points, exp, normal};

/// A quadratic in the reduced coordinates, its event looked at in several ways.
#[derive(Debug, Clone)]
pub(crate) struct Surrogate {
    constant: f64,
    slope: Vec<f64>,
    /// Second derivatives, row by row.
    bend: Vec<f64>,
    /// Second derivative in every coordinate of the rest.
    rest_bend: f64,
    views: Vec<View>,
}

/// The event `quadratic + shift + noise <= 0`, and its probability.
#[derive(Debug, Clone, Copy)]
struct View {
    shift: f64,
    noise: f64,
    probability: f64,
}

/// Stand-ins for single design points at most.
const MOST: usize = 4;
/// Effective points for every coefficient.
const POINTS_PER_COEFFICIENT: f64 = 2.0;
/// Widenings of the layer around the surface from which points are taken, until there are enough, and the factor of each.
const WIDENINGS: usize = 6;
const WIDER: f64 = 1.5;
/// Ridge on the second derivatives, as a share of a column's own sum of squares.
const RIDGE: f64 = 1e-6;
/// Shifts and noises, in units of the residual's standard deviation.
const VIEWS: [(f64, f64); 4] = [(0.0, 0.0), (0.0, 1.0), (1.0, 0.0), (-1.0, 0.0)];

/// Fits to the draws so far: one stand-in for every design point's own surroundings, one for all.
pub(crate) fn surrogates(pool: &Pool, found: &[Found], space: &Subspace) -> Vec<Surrogate> {
    let (k, rest) = (space.k(), space.rest_dim());
    let log_mixture = pool.log_mixture();
    let weights: Vec<f64> = pool.log_nominal.iter().zip(&log_mixture).map(|(p, q)| exp(p - q)).collect();
    let all: Vec<usize> = (0..pool.len()).filter(|&i| pool.margin[i].is_finite()).collect();
    let mut fits: Vec<Surrogate> = Vec::new();
    fits.extend(fit(pool, &weights, &all, k, rest));
    let mut centres: Vec<Vec<f64>> = Vec::new();
    let mut nearest: Vec<&Found> = found.iter().collect();
    nearest.sort_by(|a, b| dot(&a.at, &a.at).total_cmp(&dot(&b.at, &b.at)));
    for point in nearest.into_iter().take(MOST) {
        centres.push(space.reduce(&Points::from_rows(point.at.len(), &point.at)).point(0)[..k].to_vec());
    }
    if centres.len() > 1 {
        let mut own: Vec<Vec<usize>> = vec![Vec::new(); centres.len()];
        for &i in &all {
            let point = pool.points.point(i);
            let distance = |c: &usize| squared_distance(&point[..k], &centres[*c]);
            let near = (0..centres.len()).min_by(|a, b| distance(a).total_cmp(&distance(b)));
            if let Some(near) = near {
                own[near].push(i);
            }
        }
        fits.extend(own.iter().filter_map(|rows| fit(pool, &weights, rows, k, rest)));
    }
    fits
}

/// Weighted least squares of the margin on a quadratic, in a layer around the surface where the event has its weight.
fn fit(pool: &Pool, weights: &[f64], rows: &[usize], k: usize, rest: usize) -> Option<Surrogate> {
    let coefficients = 1 + k + k * (k + 1) / 2 + usize::from(rest > 0);
    let (used, width) = wide_enough(pool, weights, rows, POINTS_PER_COEFFICIENT * coefficients as f64)?;
    let frame = Frame::of(pool, &used, k, k + usize::from(rest > 0));
    let (solution, residual) = frame.least_squares(pool, &used, width)?;
    let mut surrogate = frame.unscaled(&solution, rest > 0);
    let terms = surrogate.terms(rest)?;
    surrogate.views = VIEWS
        .iter()
        .filter_map(|&(shift, noise)| {
            let (shift, noise) = (shift * residual, noise * residual);
            let mut terms = terms.clone();
            terms.push(Term { slope: noise, curvature: 0.0, times: 1.0 });
            let probability = probability_below(surrogate.constant + shift, &terms)?;
            Some(View { shift, noise, probability })
        })
        .collect();
    (!surrogate.views.is_empty()).then_some(surrogate)
}

/// The layer around the surface, as deep as the event's margins are large and widened until it has so many effective points; and its
/// width.
fn wide_enough(pool: &Pool, weights: &[f64], rows: &[usize], wanted: f64) -> Option<(Vec<(usize, f64)>, f64)> {
    let inside: Vec<usize> = rows.iter().copied().filter(|&i| pool.size[i] != 0.0).collect();
    let mass: f64 = inside.iter().map(|&i| weights[i]).sum();
    let mut width = inside.iter().map(|&i| weights[i] * pool.margin[i].abs()).sum::<f64>() / mass;
    if !(width > 0.0 && width.is_finite()) {
        return None;
    }
    for _ in 0..WIDENINGS {
        let used = layer(pool, weights, rows, width);
        let (sum, squares) = used.iter().fold((0.0, 0.0), |(s, q), (_, w)| (s + w, q + w * w));
        if squares > 0.0 && sum * sum >= wanted * squares {
            return Some((used, width));
        }
        width *= WIDER;
    }
    None
}

/// Coordinates in which the points of a fit have mean zero and variance one.
struct Frame {
    centre: Vec<f64>,
    spread: Vec<f64>,
    k: usize,
    sum: f64,
}

impl Frame {
    fn of(pool: &Pool, used: &[(usize, f64)], k: usize, dim: usize) -> Self {
        let sum: f64 = used.iter().map(|(_, w)| w).sum();
        let (mut centre, mut spread) = (vec![0.0; dim], vec![0.0; dim]);
        for &(i, w) in used {
            let point = pool.points.point(i);
            (0..dim).for_each(|j| centre[j] += w / sum * point[j]);
        }
        for &(i, w) in used {
            let point = pool.points.point(i);
            (0..dim).for_each(|j| spread[j] += w / sum * (point[j] - centre[j]) * (point[j] - centre[j]));
        }
        spread.iter_mut().for_each(|v| *v = v.sqrt().max(1e-9));
        Self { centre, spread, k, sum }
    }

    /// One, the coordinates (the rest's square among them), and the products of the first `k`.
    fn features(&self, point: &[f64]) -> Vec<f64> {
        let v: Vec<f64> = self.centre.iter().zip(&self.spread).zip(point).map(|((c, s), x)| (x - c) / s).collect();
        let mut row = vec![1.0];
        row.extend_from_slice(&v);
        for a in 0..self.k {
            for b in 0..=a {
                row.push(v[a] * v[b]);
            }
        }
        row
    }

    /// Coefficients of the margin in units of `width`, and the residual's standard deviation in those of the margin.
    fn least_squares(&self, pool: &Pool, used: &[(usize, f64)], width: f64) -> Option<(Vec<f64>, f64)> {
        let p = 1 + self.centre.len() + self.k * (self.k + 1) / 2;
        let (mut matrix, mut right) = (vec![0.0; p * p], vec![0.0; p]);
        for &(i, w) in used {
            let row = self.features(&pool.points.point(i));
            for a in 0..p {
                right[a] += w / self.sum * row[a] * pool.margin[i] / width;
                for b in 0..=a {
                    matrix[a * p + b] += w / self.sum * row[a] * row[b];
                }
            }
        }
        for a in 0..p {
            for b in 0..a {
                matrix[b * p + a] = matrix[a * p + b];
            }
            matrix[a * p + a] += RIDGE * matrix[a * p + a];
        }
        let mut solution = solved(&cholesky(&matrix, p)?, &right);
        let away = |i: usize| dot(&self.features(&pool.points.point(i)), &solution) - pool.margin[i] / width;
        let squares: f64 = used.iter().map(|&(i, w)| w / self.sum * (away(i) * away(i))).sum();
        solution.iter_mut().for_each(|c| *c *= width);
        Some((solution, squares.sqrt() * width))
    }

    /// The quadratic in the coordinates themselves.
    fn unscaled(&self, solution: &[f64], has_rest: bool) -> Surrogate {
        let (k, dim) = (self.k, self.centre.len());
        let mut bend = vec![0.0; k * k];
        let mut at = 1 + dim;
        for a in 0..k {
            for b in 0..=a {
                let second = solution[at] / (self.spread[a] * self.spread[b]);
                bend[a * k + b] += second;
                bend[b * k + a] += second;
                at += 1;
            }
        }
        let mut slope: Vec<f64> = (0..k).map(|j| solution[1 + j] / self.spread[j]).collect();
        let mut constant =
            solution[0] - (0..dim).map(|j| solution[1 + j] / self.spread[j] * self.centre[j]).sum::<f64>();
        for a in 0..k {
            let along = dot(&bend[a * k..(a + 1) * k], &self.centre[..k]);
            slope[a] -= along;
            constant += 0.5 * along * self.centre[a];
        }
        let rest_bend = if has_rest { 2.0 * solution[1 + k] / self.spread[k] } else { 0.0 };
        Surrogate { constant, slope, bend, rest_bend, views: Vec::new() }
    }
}

/// Points around the surface with their weights, truncated at `sqrt(n)` times the mean.
fn layer(pool: &Pool, weights: &[f64], rows: &[usize], width: f64) -> Vec<(usize, f64)> {
    let near = |i: usize| {
        let away = pool.margin[i] / width;
        weights[i] * exp(-0.5 * away * away)
    };
    let mut used: Vec<(usize, f64)> = rows.iter().map(|&i| (i, near(i))).filter(|(_, w)| *w > 0.0).collect();
    let cut = used.iter().map(|(_, w)| w).sum::<f64>() / (used.len() as f64).max(1.0).sqrt();
    used.iter_mut().for_each(|(_, w)| *w = w.min(cut));
    used
}

fn solved(l: &[f64], right: &[f64]) -> Vec<f64> {
    let p = right.len();
    let mut b = right.to_vec();
    for i in 0..p {
        let known: f64 = (0..i).map(|k| l[i * p + k] * b[k]).sum();
        b[i] = (b[i] - known) / l[i * p + i];
    }
    for i in (0..p).rev() {
        let known: f64 = (i + 1..p).map(|k| l[k * p + i] * b[k]).sum();
        b[i] = (b[i] - known) / l[i * p + i];
    }
    b
}

impl Surrogate {
    /// The quadratic along its principal axes, where its terms are independent.
    fn terms(&self, rest: usize) -> Option<Vec<Term>> {
        let found = eigen(&self.bend, self.slope.len())?;
        let mut terms: Vec<Term> = found
            .values
            .iter()
            .zip(&found.vectors)
            .map(|(&curvature, axis)| Term { slope: dot(axis, &self.slope), curvature, times: 1.0 })
            .collect();
        if rest > 0 {
            terms.push(Term { slope: 0.0, curvature: self.rest_bend, times: rest as f64 });
        }
        Some(terms)
    }

    fn value(&self, point: &[f64]) -> f64 {
        let k = self.slope.len();
        let mut sum = self.constant;
        for a in 0..k {
            sum += point[a] * (self.slope[a] + 0.5 * dot(&self.bend[a * k..(a + 1) * k], &point[..k]));
        }
        if point.len() > k { sum + 0.5 * self.rest_bend * point[k] } else { sum }
    }

    /// Controls at reduced draws whose `ln (phi/q)` are given.
    pub(crate) fn controls(&self, reduced: &Points, log_ratio: &[f64]) -> Vec<Control> {
        let values: Vec<f64> = (0..reduced.len()).map(|i| self.value(&reduced.point(i))).collect();
        let of = |view: &View| -> Vec<f64> {
            let inside = |value: f64| -> f64 {
                if view.noise > 0.0 {
                    normal::upper_tail((value + view.shift) / view.noise)
                } else {
                    f64::from(u8::from(value + view.shift <= 0.0))
                }
            };
            values
                .iter()
                .zip(log_ratio)
                .map(|(&value, &l)| match inside(value) {
                    0.0 => 0.0,
                    share => share * exp(l),
                })
                .collect()
        };
        self.views.iter().map(|view| Control { values: of(view), mean: view.probability }).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::super::directed::Directed;
    use super::super::scores::Answered;
    use super::*;
    use crate::numeric::Purpose;

    /// Draws from a wide Gaussian with the margin `.1 (a-b)^2 - (a+b)/sqrt(2) + 2.5`, and a rest of eight coordinates that adds `.05 r^2`
    /// where there is one.
    fn pool_of(rest: usize) -> Pool {
        let wide = Directed::central(2, rest, 4.0, 1.0).unwrap();
        let rows: Vec<Vec<f64>> =
            (0..2).map(|j| (0..2 + rest).map(|i| f64::from(u8::from(i == j))).collect()).collect();
        let space = if rest > 0 { Subspace::leading(&rows, 2 + rest).unwrap() } else { Subspace::whole(2) };
        let (points, _) = space.draw(&wide, 4000, 1, Purpose::Trial, 1);
        let reduced = space.reduce(&points);
        let margin = |u: &[f64]| {
            let (a, b) = (u[0], u[1]);
            0.1 * (a - b) * (a - b) - (a + b) / 2.0_f64.sqrt() + 2.5 + 0.05 * u.get(2).unwrap_or(&0.0)
        };
        let value: Vec<f64> = (0..4000).map(|i| margin(&reduced.point(i))).collect();
        let log_nominal: Vec<f64> =
            (0..4000).map(|i| points.point(i).iter().map(|&u| normal::log_density(u)).sum()).collect();
        let hit = value.iter().map(|&v| v <= 0.0).collect();
        let mut pool = Pool::new(reduced.dim(), true, 1);
        let log_q = wide.log_density(&reduced);
        pool.add(&reduced, &Answered { log_nominal, value, hit }, &log_q, wide);
        pool
    }

    /// A margin that is a quadratic is found again, and so is its probability. Source: quadrature over one variable, mpmath 1.3.0 (as
    /// in `quadric`); with the rest, `P(t >= 2.5 + .2 v^2 + .05 r^2)`, nested `scipy.integrate.quad`, SciPy 1.17.1.
    #[test]
    fn a_quadratic_margin_is_found_again() {
        for (rest, exact, dim) in [(0, 4.207_305_511_3e-3, 2), (8, 1.4387044004e-03, 10)] {
            let pool = pool_of(rest);
            let rows: Vec<Vec<f64>> = (0..2).map(|j| (0..dim).map(|i| f64::from(u8::from(i == j))).collect()).collect();
            let space = if rest > 0 { Subspace::leading(&rows, dim).unwrap() } else { Subspace::whole(2) };
            let fits = surrogates(&pool, &[], &space);
            assert_eq!(fits.len(), 1);
            let ratio: Vec<f64> = pool.log_nominal.iter().zip(pool.log_mixture()).map(|(p, q)| p - q).collect();
            let controls = fits[0].controls(&pool.points, &ratio);
            assert!((controls[0].mean / exact - 1.0).abs() < 1e-3, "{:e}", controls[0].mean);
            // The draws' own mean of every view is its probability: 4.5 standard errors.
            for control in controls {
                let n = control.values.len() as f64;
                let mean = control.values.iter().sum::<f64>() / n;
                let square = control.values.iter().map(|v| v * v).sum::<f64>() / n;
                assert!((mean - control.mean).abs() < 4.5 * (square / n).sqrt());
            }
        }
    }

    #[test]
    fn few_draws_give_no_stand_in() {
        let pool = pool_of(0);
        let weights = vec![1.0; pool.len()];
        assert!(fit(&pool, &weights, &[0, 1, 2, 3, 4, 5, 6, 7, 8, 9], 2, 0).is_none());
    }
}
