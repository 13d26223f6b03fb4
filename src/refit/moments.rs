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

/// Columns that the sums over one block need: only the points that weigh on the component, side by side.
struct Work {
    shifted: Vec<f64>,
    pulls: Vec<f64>,
    lanes: Vec<usize>,
}

/// Sums run over this many lanes at once.
const LANES: usize = 8;

impl Work {
    fn new(d: usize) -> Self {
        Self { shifted: vec![0.0; d * BLOCK], pulls: vec![0.0; BLOCK], lanes: Vec::with_capacity(BLOCK) }
    }

    fn add(&mut self, block: &[f64], location: &[f64], r: &[f64], distances: &[f64], df: f64, into: &mut Moments) {
        let d = location.len();
        self.lanes.clear();
        for t in 0..BLOCK {
            if r[t] > 0.0 {
                let u = if df == f64::INFINITY { r[t] } else { r[t] * (df + d as f64) / (df + distances[t]) };
                into.mass += r[t];
                into.mass_squares += r[t] * r[t];
                into.fourth += r[t] * distances[t] * distances[t];
                into.pull += u;
                self.pulls[self.lanes.len()] = u;
                self.lanes.push(t);
            }
        }
        // Whole groups of lanes: the spare ones pull with nothing at the centre.
        let n = self.lanes.len().next_multiple_of(LANES);
        self.pulls[self.lanes.len()..n].fill(0.0);
        for j in 0..d {
            let column = &block[j * BLOCK..(j + 1) * BLOCK];
            let to = &mut self.shifted[j * BLOCK..j * BLOCK + n];
            for (slot, &t) in to.iter_mut().zip(&self.lanes) {
                *slot = column[t] - location[j];
            }
            to[self.lanes.len()..].fill(0.0);
        }
        add_products(&self.shifted, &self.pulls[..n], d, &mut into.first, &mut into.second);
    }
}

/// `first_j += sum u y_j` and `second_jl += sum u y_j y_l` (lower triangle, packed), four columns `l` at a time.
#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn add_products(shifted: &[f64], u: &[f64], d: usize, first: &mut [f64], second: &mut [f64]) {
    let n = u.len();
    let mut pulled = [0.0; BLOCK];
    let mut at = 0;
    for j in 0..d {
        let y = &shifted[j * BLOCK..j * BLOCK + n];
        let mut sum = [0.0; LANES];
        for from in (0..n).step_by(LANES) {
            for t in 0..LANES {
                let v = u[from + t] * y[from + t];
                pulled[from + t] = v;
                sum[t] += v;
            }
        }
        first[j] += total(&sum);
        let mut l = 0;
        while l + 4 <= j + 1 {
            let mut sums = [[0.0; LANES]; 4];
            let columns: [&[f64]; 4] = std::array::from_fn(|c| &shifted[(l + c) * BLOCK..(l + c) * BLOCK + n]);
            for from in (0..n).step_by(LANES) {
                let p = &pulled[from..from + LANES];
                for c in 0..4 {
                    let y = &columns[c][from..from + LANES];
                    for t in 0..LANES {
                        sums[c][t] += p[t] * y[t];
                    }
                }
            }
            for sum in &sums {
                second[at] += total(sum);
                at += 1;
            }
            l += 4;
        }
        while l <= j {
            let y = &shifted[l * BLOCK..l * BLOCK + n];
            let mut sum = [0.0; LANES];
            for from in (0..n).step_by(LANES) {
                for t in 0..LANES {
                    sum[t] += pulled[from + t] * y[from + t];
                }
            }
            second[at] += total(&sum);
            at += 1;
            l += 1;
        }
    }
}

#[inline(always)]
fn total(sum: &[f64; LANES]) -> f64 {
    ((sum[0] + sum[4]) + (sum[2] + sum[6])) + ((sum[1] + sum[5]) + (sum[3] + sum[7]))
}
