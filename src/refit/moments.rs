//! Weighted moments of every component's responsibilities: the sums that an EM step divides.

use crate::numeric::{BLOCK, Points};
use crate::proposal::{BlockTerms, Mixture};
use multiversion::multiversion;

/// Sums over the points, for one component: `r` its responsibility times the weight of the point, `u` the same times
/// the Student-t factor `(v + d) / (v + q)` (one for a Gaussian), `y = x - m` with `m` its present location.
#[derive(Debug, Clone, PartialEq)]
pub struct Moments {
    /// `sum r`.
    pub mass: f64,
    /// `sum r^2`.
    pub mass_squares: f64,
    /// `sum u`.
    pub pull: f64,
    /// `sum u y`, length `d`.
    pub first: Vec<f64>,
    /// `sum u y y'`, the lower triangle row by row, packed.
    pub second: Vec<f64>,
    /// `sum r q^2`, for the fourth moment.
    pub fourth: f64,
}

impl Moments {
    fn zero(d: usize) -> Self {
        Self {
            mass: 0.0,
            mass_squares: 0.0,
            pull: 0.0,
            first: vec![0.0; d],
            second: vec![0.0; d * (d + 1) / 2],
            fourth: 0.0,
        }
    }

    /// Effective points of this component, `(sum r)^2 / sum r^2`: not its share times those of all.
    #[must_use]
    pub fn effective(&self) -> f64 {
        if self.mass_squares > 0.0 { self.mass * self.mass / self.mass_squares } else { 0.0 }
    }
}

/// Responsibilities below this, times the weight, change no sum of doubles that matters.
const NEGLIGIBLE: f64 = 1e-13;

/// The E step: moments of every component and the weighted log density `sum w ln q(x)`, weights summing to one.
///
/// `heavy` applies the Student-t factor to `u` (EM of a t mixture: Liu & Rubin 1995; Peel & McLachlan 2000); without it
/// `u = r` and the moments are the plain ones.
#[must_use]
pub fn weighted_moments(mixture: &Mixture, points: &Points, weights: &[f64], heavy: bool) -> (f64, Vec<Moments>) {
    let d = mixture.dim();
    let mut moments = vec![Moments::zero(d); mixture.len()];
    let mut terms = BlockTerms::default();
    let mut responsibilities = Vec::new();
    let mut log_sums = [0.0; BLOCK];
    let mut work = Work::new(d);
    let mut objective = 0.0;
    for b in 0..points.n_blocks() {
        let live = points.block_len(b);
        let mut w = [0.0; BLOCK];
        w[..live].copy_from_slice(&weights[b * BLOCK..b * BLOCK + live]);
        terms.fill(mixture, points.block(b));
        terms.log_sum(mixture.log_shares(), &mut log_sums);
        terms.responsibilities(mixture.log_shares(), &log_sums, &mut responsibilities);
        for t in 0..live {
            if w[t] > 0.0 {
                objective += w[t] * log_sums[t];
            }
        }
        for (k, component) in mixture.components().iter().enumerate() {
            let r = &mut responsibilities[k * BLOCK..(k + 1) * BLOCK];
            let mut any = false;
            for t in 0..BLOCK {
                let v = r[t] * w[t];
                r[t] = if v > NEGLIGIBLE { v } else { 0.0 };
                any |= r[t] > 0.0;
            }
            if any {
                let distances = &terms.distances[k * BLOCK..(k + 1) * BLOCK];
                let df = if heavy { component.df() } else { f64::INFINITY };
                work.add(points.block(b), component.location(), r, distances, df, &mut moments[k]);
            }
        }
    }
    (objective, moments)
}

/// Columns that the sums over one block need.
struct Work {
    shifted: Vec<f64>,
    pulled: Vec<f64>,
}

impl Work {
    fn new(d: usize) -> Self {
        Self { shifted: vec![0.0; d * BLOCK], pulled: vec![0.0; BLOCK] }
    }

    fn add(&mut self, block: &[f64], location: &[f64], r: &[f64], distances: &[f64], df: f64, into: &mut Moments) {
        let d = location.len();
        let mut u = [0.0; BLOCK];
        for t in 0..BLOCK {
            into.mass += r[t];
            into.mass_squares += r[t] * r[t];
            if r[t] > 0.0 {
                into.fourth += r[t] * distances[t] * distances[t];
                u[t] = if df == f64::INFINITY { r[t] } else { r[t] * (df + d as f64) / (df + distances[t]) };
                into.pull += u[t];
            }
        }
        add_products(block, location, &u, &mut self.shifted, &mut self.pulled, &mut into.first, &mut into.second);
    }
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn add_products(
    block: &[f64],
    location: &[f64],
    u: &[f64],
    shifted: &mut [f64],
    pulled: &mut [f64],
    first: &mut [f64],
    second: &mut [f64],
) {
    let d = location.len();
    for j in 0..d {
        for t in 0..BLOCK {
            // A point without weight may be anything, infinity included: it must not touch the sums.
            let y = block[j * BLOCK + t] - location[j];
            shifted[j * BLOCK + t] = if u[t] > 0.0 { y } else { 0.0 };
        }
    }
    let mut at = 0;
    for j in 0..d {
        let mut sum = [0.0; 16];
        for from in (0..BLOCK).step_by(16) {
            for t in 0..16 {
                let v = u[from + t] * shifted[j * BLOCK + from + t];
                pulled[from + t] = v;
                sum[t] += v;
            }
        }
        first[j] += total(&sum);
        for l in 0..=j {
            let mut sum = [0.0; 16];
            let other = &shifted[l * BLOCK..(l + 1) * BLOCK];
            for from in (0..BLOCK).step_by(16) {
                for t in 0..16 {
                    sum[t] += pulled[from + t] * other[from + t];
                }
            }
            second[at] += total(&sum);
            at += 1;
        }
    }
}

#[inline(always)]
fn total(sum: &[f64; 16]) -> f64 {
    let mut all = 0.0;
    for v in sum {
        all += v;
    }
    all
}
