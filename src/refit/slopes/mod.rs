//! The E step with gradients of the log target: the moments of weighted EM with little of their noise.
//!
//! Component `k` of the mixture `q` answers for the part `p ~ target r_k` of the target, `r_k` its responsibility. The slope of that part,
//! `h = grad ln target - grad ln q + grad ln q_k`, is known at every point. For any `p` that vanishes at its ends, integration by parts
//! (Stein's identity) gives `E h = 0` and `E (h y' + I) = 0`, `y = x - m`: quantities of known mean, measured with the same noise as the sums
//! that an M step divides. Added to those sums with the coefficient of least squares they leave the expectation as it is and take noise away;
//! all of it where `p` has the form of the component, because there `S h = -u y` point by point.
//!
//! Where an identity fails (a target cut off at a wall) the sample mean of its control is too far from zero for its own spread, and that
//! statistic is left plain.
//!
//! Source of control variates from scores: Assaraf & Caffarel, Phys. Rev. Lett. 83 (1999) 4682-4685; Mira, Solgi & Imparato, Stat. Comput.
//! 23 (2013) 653-662. Their use in the M step of a mixture fit is ours; `docs/experiments.md` has what it brought.

mod kernels;

use super::Moments;
use crate::numeric::linear::cholesky;
use crate::numeric::{BLOCK, Points};
use crate::proposal::{BlockTerms, Component, Mixture};
use kernels::{Lanes, accumulate, add_back, own_slope, standardise};

/// Responsibilities below this, times the weight (some 1e-4), change no sum by more than its tenth digit.
const NEGLIGIBLE: f64 = 1e-11;
/// With fewer effective points the coefficients are noise themselves.
const LEAST_EFFECTIVE: f64 = 8.0;
/// Coefficients stay between nothing and a little over the exact one.
const HIGHEST_COEFFICIENT: f64 = 1.1;
/// A control whose mean is further than this from zero, in squared standard errors of its own, has no expectation of zero: its statistic stays
/// plain. Six standard errors: controls are skewed, and a false alarm costs no more than the noise it leaves.
const MOST_SURPRISING: f64 = 36.0;
/// An adjusted covariance whose smallest eigenvalue is below this share of its average one is not trusted.
const LEAST_EIGENVALUE: f64 = 0.02;

/// Sums over the points for one statistic `v` and its control `c`, `r` the responsibility times the weight.
#[derive(Debug, Clone, Copy, Default)]
struct Regression {
    /// `sum r v`, `sum r c`.
    value: f64,
    control: f64,
    /// `sum r^2 v c`, `sum r^2 c^2`, `sum r^2 c`.
    both: f64,
    squares: f64,
    weighted: f64,
}

impl Regression {
    /// `E v + b E c`: `b` by least squares about this very estimate, so that `v + c` constant gives `b = 1` and no error at all.
    fn adjusted(&self, mass: f64) -> f64 {
        let (mean, control) = (self.value / mass, self.control / mass);
        let spread = self.squares - control * self.weighted;
        let expected = self.control * self.control <= MOST_SURPRISING * self.squares;
        if !expected || !(spread > 0.0) {
            return mean;
        }
        let b = -(self.both - mean * self.weighted) / spread;
        mean + b.clamp(0.0, HIGHEST_COEFFICIENT) * control
    }
}

/// Sums for one component, in its own standardised coordinates `L^-1 (x - m)`.
#[derive(Debug, Clone)]
struct Sums {
    mass: f64,
    mass_squares: f64,
    pull: f64,
    fourth: f64,
    /// One for each coordinate: `v = u y_i`, `c = h_i`.
    first: Vec<Regression>,
    /// One for each pair, the lower triangle row by row: `v = u y_i y_j`, `c = (h_i y_j + h_j y_i)/2`, plus one on the diagonal.
    second: Vec<Regression>,
}

impl Sums {
    fn zero(d: usize) -> Self {
        let (first, second) = (vec![Regression::default(); d], vec![Regression::default(); d * (d + 1) / 2]);
        Self { mass: 0.0, mass_squares: 0.0, pull: 0.0, fourth: 0.0, first, second }
    }

    /// Whether there are points enough to regress on.
    fn assisted(&self) -> bool {
        self.mass * self.mass > LEAST_EFFECTIVE * self.mass_squares
    }
}

/// As [`super::weighted_moments`], with `gradients` of the log target at the points (NaN where there is none).
///
/// # Shapes
/// `gradients` has the shape of `points`. They belong to the same target as the weights: no tempering.
#[must_use]
pub(super) fn assisted_moments(
    mixture: &Mixture,
    points: &Points,
    weights: &[f64],
    gradients: &Points,
    heavy: bool,
) -> (f64, Vec<Moments>) {
    let d = mixture.dim();
    let mut work = Work::new(mixture);
    let mut sums = vec![Sums::zero(d); mixture.len()];
    let mut objective = 0.0;
    for b in 0..points.n_blocks() {
        let live = points.block_len(b);
        let mut w = [0.0; BLOCK];
        w[..live].copy_from_slice(&weights[b * BLOCK..b * BLOCK + live]);
        objective += work.look(mixture, points.block(b), gradients.block(b), &w, live);
        for (k, component) in mixture.components().iter().enumerate() {
            work.add(k, component, heavy, &mut sums[k]);
        }
    }
    (objective, sums.iter().zip(&work.factors).map(|(s, factor)| moments(s, factor, d)).collect())
}

/// What one block of points needs, reused from block to block.
struct Work {
    factors: Vec<Vec<f64>>,
    terms: BlockTerms,
    /// Responsibilities times weights, a column a component.
    responsibilities: Vec<f64>,
    /// Standardised coordinates: `d` columns a component.
    standard: Vec<f64>,
    /// Gradient of the target less that of the mixture; whether a point has one (1 or 0).
    slope: Vec<f64>,
    sound: [f64; BLOCK],
    lanes: Lanes,
}

impl Work {
    fn new(mixture: &Mixture) -> Self {
        let (k, d) = (mixture.len(), mixture.dim());
        Self {
            factors: mixture.components().iter().map(Component::factor).collect(),
            terms: BlockTerms::default(),
            responsibilities: Vec::new(),
            standard: vec![0.0; k * d * BLOCK],
            slope: vec![0.0; d * BLOCK],
            sound: [0.0; BLOCK],
            lanes: Lanes::new(d),
        }
    }

    /// Fills everything for a block of `live` points; their part of `sum w ln q`.
    fn look(&mut self, mixture: &Mixture, block: &[f64], gradients: &[f64], w: &[f64; BLOCK], live: usize) -> f64 {
        let d = mixture.dim();
        let mut log_sums = [0.0; BLOCK];
        self.terms.fill(mixture, block);
        self.terms.log_sum(mixture.log_shares(), &mut log_sums);
        self.terms.responsibilities(mixture.log_shares(), &log_sums, &mut self.responsibilities);
        self.slope.copy_from_slice(gradients);
        for (k, component) in mixture.components().iter().enumerate() {
            let r = &mut self.responsibilities[k * BLOCK..(k + 1) * BLOCK];
            if r.iter().all(|&v| v <= 0.0) {
                continue;
            }
            let y = &mut self.standard[k * d * BLOCK..(k + 1) * d * BLOCK];
            standardise(component, block, y);
            let mut pull = pulls(component, &self.terms.distances[k * BLOCK..(k + 1) * BLOCK]);
            for t in 0..BLOCK {
                pull[t] *= r[t];
                let v = r[t] * w[t];
                r[t] = if v > NEGLIGIBLE { v } else { 0.0 };
            }
            add_back(component, y, &pull, &mut self.slope);
        }
        for t in 0..BLOCK {
            let good = t < live && (0..d).all(|j| self.slope[j * BLOCK + t].is_finite());
            self.sound[t] = f64::from(u8::from(good));
            if !good {
                (0..d).for_each(|j| self.slope[j * BLOCK + t] = 0.0);
            }
        }
        (0..live).filter(|&t| w[t] > 0.0).map(|t| w[t] * log_sums[t]).sum()
    }

    /// Adds the block to the sums of component `k`.
    fn add(&mut self, k: usize, component: &Component, heavy: bool, into: &mut Sums) {
        let d = component.dim();
        let r = &self.responsibilities[k * BLOCK..(k + 1) * BLOCK];
        let q = &self.terms.distances[k * BLOCK..(k + 1) * BLOCK];
        let y = &self.standard[k * d * BLOCK..(k + 1) * d * BLOCK];
        let u = pulls(component, q);
        if !self.lanes.choose(r, y, &self.slope, &u, &self.sound) {
            return;
        }
        own_slope(&self.factors[k], &mut self.lanes);
        for t in 0..BLOCK {
            if r[t] > 0.0 {
                let pull = if heavy { r[t] * u[t] } else { r[t] };
                into.mass += r[t];
                into.mass_squares += r[t] * r[t];
                into.pull += pull;
                into.fourth += r[t] * q[t] * q[t];
            }
        }
        accumulate(&self.lanes, heavy, &mut into.first, &mut into.second);
    }
}

/// The Student-t factors `(v + d)/(v + q)`; one for a Gaussian.
fn pulls(component: &Component, distances: &[f64]) -> [f64; BLOCK] {
    let (df, d) = (component.df(), component.dim() as f64);
    let mut out = [1.0; BLOCK];
    if df < f64::INFINITY {
        for (u, q) in out.iter_mut().zip(distances) {
            *u = (df + d) / (df + q);
        }
    }
    out
}

/// From standardised coordinates back to the sums that an M step divides; the plain ones where the controls are no help.
fn moments(sums: &Sums, factor: &[f64], d: usize) -> Moments {
    let mass = sums.mass.max(f64::MIN_POSITIVE);
    let adjusted = |of: &[Regression]| of.iter().map(|r| r.adjusted(mass)).collect::<Vec<f64>>();
    let plain = |of: &[Regression]| of.iter().map(|r| r.value / mass).collect::<Vec<f64>>();
    let (mut first, mut second) = (plain(&sums.first), plain(&sums.second));
    if sums.assisted() {
        let (a, b) = (adjusted(&sums.first), adjusted(&sums.second));
        if is_covariance(&a, &b, sums.pull / mass, d) {
            (first, second) = (a, b);
        }
    }
    // x - m = L y: first moments become L f, second ones L S L'.
    let whole = |i: usize, j: usize| if i >= j { second[i * (i + 1) / 2 + j] } else { second[j * (j + 1) / 2 + i] };
    let times = |v: &dyn Fn(usize) -> f64, i: usize| (0..=i).map(|k| factor[i * d + k] * v(k)).sum::<f64>();
    let half: Vec<f64> = (0..d * d).map(|at| times(&|k| whole(k, at % d), at / d)).collect();
    let mut packed = Vec::with_capacity(second.len());
    for i in 0..d {
        for j in 0..=i {
            packed.push(sums.mass * times(&|k| half[i * d + k], j));
        }
    }
    Moments {
        mass: sums.mass,
        mass_squares: sums.mass_squares,
        pull: sums.pull,
        first: (0..d).map(|i| sums.mass * times(&|k| first[k], i)).collect(),
        second: packed,
        fourth: sums.fourth,
    }
}

/// Whether second moments (packed) about the location less the shift's part are safely positive definite.
fn is_covariance(first: &[f64], second: &[f64], pull: f64, d: usize) -> bool {
    let mut central = vec![0.0; d * d];
    for i in 0..d {
        for j in 0..=i {
            let v = second[i * (i + 1) / 2 + j] - first[i] * first[j] / pull;
            central[i * d + j] = v;
            central[j * d + i] = v;
        }
    }
    let average = (0..d).map(|i| central[i * d + i]).sum::<f64>() / d as f64;
    (0..d).for_each(|i| central[i * d + i] -= LEAST_EIGENVALUE * average);
    average > 0.0 && cholesky(&central, d).is_some()
}

#[cfg(test)]
mod tests {
    use super::super::{Anchor, Method, em, weighted_moments};
    use super::*;
    use crate::numeric::{Purpose, exp};

    fn method(iterations: usize) -> Method {
        Method { strength: 0.0, anchor: Anchor::Own, iterations, fit_df: false, diagonal: false }
    }

    fn gradients_of(target: &Mixture, points: &Points) -> Points {
        let mut out = Points::new(points.dim());
        let step = 1e-5;
        for i in 0..points.len() {
            let x = points.point(i);
            let slope = |j: usize| {
                let (mut a, mut b) = (x.clone(), x.clone());
                a[j] += step;
                b[j] -= step;
                (target.log_density_at(&a) - target.log_density_at(&b)) / (2.0 * step)
            };
            out.push(&(0..x.len()).map(slope).collect::<Vec<_>>());
        }
        out
    }

    fn weighted(target: &Mixture, from: &Mixture, n: usize, seed: u64) -> (Points, Vec<f64>) {
        let points = from.draw(n, seed, Purpose::Trial, 0).points;
        let raw: Vec<f64> =
            target.log_density(&points).iter().zip(from.log_density(&points)).map(|(l, q)| exp(l - q)).collect();
        let sum: f64 = raw.iter().sum();
        (points, raw.iter().map(|w| w / sum).collect())
    }

    /// Sixty uneven points fix a Gaussian and a Student-t target: what least squares leaves is the error of the test's differences.
    #[test]
    fn a_target_of_the_components_form_is_found_without_noise() {
        let scale = [2.0, 0.6, 0.1, 0.6, 1.0, -0.3, 0.1, -0.3, 0.5];
        for df in [f64::INFINITY, 5.0] {
            let target = Mixture::single(Component::new(vec![0.5, -1.0, 0.2], &scale, df).unwrap());
            let wide = target.map(|c| c.widened(2.5)).unwrap();
            let (points, weights) = weighted(&target, &wide, 60, 4);
            let slopes = gradients_of(&target, &points);
            let start = target.map(|c| c.widened(1.2)).unwrap();
            // Step by step: EM itself stops when a step gains less than the points can tell.
            let fitted = |slopes: Option<&Points>| {
                (0..30).fold(start.clone(), |m, _| em(&m, &points, &weights, slopes, method(1)).unwrap())
            };
            let (fit, plain) = (fitted(Some(&slopes)), fitted(None));
            let error = |m: &Mixture| {
                m.components()[0].scale().iter().zip(&scale).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max)
            };
            assert!(error(&fit) < 2e-3, "df {df}: {}", error(&fit));
            assert!(error(&plain) > 0.05, "df {df}: {}", error(&plain));
        }
    }

    /// Whatever the target, both estimate the same thing: 40,000 draws, entries of some units with standard errors of about 0.01 (plain):
    /// a bound of 0.06 is six of them.
    #[test]
    fn expectations_are_left_as_they_are() {
        let a = Component::new(vec![-1.5, 0.0], &[1.0, 0.3, 0.3, 0.5], f64::INFINITY).unwrap();
        let b = Component::new(vec![1.5, 1.0], &[0.5, 0.0, 0.0, 2.0], f64::INFINITY).unwrap();
        let target = Mixture::new(&[0.4, 0.6], vec![a, b]).unwrap();
        let (points, weights) = weighted(&target, &target, 40_000, 5);
        let slopes = gradients_of(&target, &points);
        let one = Component::new(vec![0.0, 0.5], &[3.0, 0.5, 0.5, 1.5], 8.0).unwrap();
        let mixture = Mixture::new(&[0.5, 0.5], vec![one.clone(), one.widened(0.5)]).unwrap();
        let (objective, plain) = weighted_moments(&mixture, &points, &weights, true);
        let (same, assisted) = assisted_moments(&mixture, &points, &weights, &slopes, true);
        assert!((objective - same).abs() < 1e-9);
        for (p, q) in plain.iter().zip(&assisted) {
            assert!((p.mass - q.mass).abs() < 1e-12 && (p.pull - q.pull).abs() < 1e-12);
            assert!((p.mass_squares - q.mass_squares).abs() < 1e-12 && (p.fourth / q.fourth - 1.0).abs() < 1e-9);
            for (x, y) in p.first.iter().zip(&q.first).chain(p.second.iter().zip(&q.second)) {
                assert!((x - y).abs() / p.mass < 0.06, "{x} {y}");
            }
        }
    }

    /// A half-Gaussian does not vanish at its wall: the identity for its slope is off by the density there, the check sees it, and the
    /// first moment is the plain one.
    #[test]
    fn a_target_cut_off_at_a_wall_gets_a_plain_mean() {
        let gaussian = Mixture::single(Component::new(vec![0.0], &[1.0], f64::INFINITY).unwrap());
        let drawn = gaussian.draw(2000, 6, Purpose::Trial, 0).points;
        let kept: Vec<f64> = drawn.coordinate(0).into_iter().filter(|&x| x > 0.0).collect();
        let points = Points::from_rows(1, &kept);
        let weights = vec![1.0 / kept.len() as f64; kept.len()];
        let slopes = Points::from_rows(1, &kept.iter().map(|x| -x).collect::<Vec<_>>());
        let (_, plain) = weighted_moments(&gaussian, &points, &weights, true);
        let (_, assisted) = assisted_moments(&gaussian, &points, &weights, &slopes, true);
        assert!((plain[0].first[0] - assisted[0].first[0]).abs() < 1e-12);
        // y h + 1 still has mean zero: y itself vanishes at the wall.
        assert!((plain[0].second[0] - assisted[0].second[0]).abs() < 0.1);
    }

    /// Points without a gradient lend their own value and no control.
    #[test]
    fn a_missing_gradient_is_no_number_of_the_result() {
        let target = Mixture::single(Component::new(vec![0.0, 0.0], &[1.0, 0.0, 0.0, 1.0], f64::INFINITY).unwrap());
        let (points, weights) = weighted(&target, &target, 300, 7);
        let mut slopes = gradients_of(&target, &points);
        slopes.set(5, 1, f64::NAN);
        let (_, assisted) = assisted_moments(&target, &points, &weights, &slopes, true);
        assert!(assisted[0].second.iter().chain(&assisted[0].first).all(|v| v.is_finite()));
    }
}
