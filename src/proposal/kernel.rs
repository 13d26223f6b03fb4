//! The kernel: log densities of all components at a block of 128 points.
//!
//! Rows of the inverse factor meet columns of the block, so the inner loop is a plain `a*b + c` over lanes of points and
//! becomes vector instructions; it is compiled for several instruction sets and chosen at run time. No fused
//! multiply-add: every instruction set gives the same bits.

use super::{Component, Mixture};
use crate::numeric::{BLOCK, exp, ln};
use multiversion::multiversion;

/// Points worked on together: 32 doubles fill the vector registers without spilling.
const LANES: usize = 32;
/// Terms further than this below the largest one do not change a sum of doubles.
const NEGLIGIBLE: f64 = -40.0;

/// Log densities and squared distances of every component at one block of points; reused from block to block.
#[derive(Debug, Clone, Default)]
pub struct BlockTerms {
    /// `log f_k(x)` without the share: column `k` at `128 k`.
    pub log_densities: Vec<f64>,
    /// Squared distances: column `k` at `128 k`.
    pub distances: Vec<f64>,
    scratch: Vec<f64>,
}

impl BlockTerms {
    /// Fills the terms of `mixture` at a block (all its columns, one after the other).
    pub fn fill(&mut self, mixture: &Mixture, block: &[f64]) {
        let components = mixture.components();
        let d = mixture.dim();
        self.log_densities.resize(components.len() * BLOCK, 0.0);
        self.distances.resize(components.len() * BLOCK, 0.0);
        self.scratch.resize(d * LANES, 0.0);
        for (k, component) in components.iter().enumerate() {
            let (before, rest) = self.distances.split_at_mut(k * BLOCK);
            let distances = &mut rest[..BLOCK];
            let (shape, widening) = component.shape();
            match mixture.twin(k) {
                // The same shape at another width: its distances are known up to a factor.
                Some((j, factor)) => {
                    for (q, base) in distances.iter_mut().zip(&before[j * BLOCK..]) {
                        *q = base * factor;
                    }
                }
                None => {
                    squared_distances(block, &shape.location, &shape.inverse, &mut self.scratch, distances);
                    if widening != 1.0 {
                        distances.iter_mut().for_each(|q| *q /= widening);
                    }
                }
            }
            finish(component, distances, &mut self.log_densities[k * BLOCK..(k + 1) * BLOCK]);
        }
    }

    /// Log densities that the components would have with `df` degrees of freedom at these squared distances.
    pub fn with_tails(&mut self, mixture: &Mixture, df: f64, distances: &[f64]) {
        self.log_densities.resize(distances.len(), 0.0);
        let columns = distances.chunks_exact(BLOCK).zip(self.log_densities.chunks_exact_mut(BLOCK));
        for ((q, out), component) in columns.zip(mixture.components()) {
            finish(&component.with_df(df), q, out);
        }
    }

    /// `ln sum_k share_k f_k(x)` for the 128 points of the block.
    pub fn log_sum(&self, log_shares: &[f64], out: &mut [f64]) {
        log_sum_columns(&self.log_densities, log_shares, out);
    }

    /// Turns the log densities into responsibilities `share_k f_k / sum`, given the log sums.
    pub fn responsibilities(&self, log_shares: &[f64], log_sums: &[f64], out: &mut Vec<f64>) {
        out.resize(self.log_densities.len(), 0.0);
        responsibilities(&self.log_densities, log_shares, log_sums, out);
    }
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn squared_distances(block: &[f64], location: &[f64], inverse: &[f64], shifted: &mut [f64], out: &mut [f64]) {
    let d = location.len();
    for from in (0..BLOCK).step_by(LANES) {
        for j in 0..d {
            let column = &block[j * BLOCK + from..j * BLOCK + from + LANES];
            let y = &mut shifted[j * LANES..(j + 1) * LANES];
            for t in 0..LANES {
                y[t] = column[t] - location[j];
            }
        }
        let mut q = [0.0; LANES];
        let mut at = 0;
        let mut i = 0;
        // Two rows at once share every load of a shifted column.
        while i + 1 < d {
            let (row_a, row_b) = (&inverse[at..at + i + 1], &inverse[at + i + 1..at + 2 * i + 3]);
            let (mut a, mut b) = ([0.0; LANES], [0.0; LANES]);
            for j in 0..=i {
                let y = &shifted[j * LANES..(j + 1) * LANES];
                let (la, lb) = (row_a[j], row_b[j]);
                for t in 0..LANES {
                    a[t] += la * y[t];
                    b[t] += lb * y[t];
                }
            }
            let y = &shifted[(i + 1) * LANES..(i + 2) * LANES];
            let lb = row_b[i + 1];
            for t in 0..LANES {
                b[t] += lb * y[t];
                q[t] += a[t] * a[t] + b[t] * b[t];
            }
            at += 2 * i + 3;
            i += 2;
        }
        if i < d {
            let row = &inverse[at..at + i + 1];
            let mut a = [0.0; LANES];
            for j in 0..=i {
                let y = &shifted[j * LANES..(j + 1) * LANES];
                let l = row[j];
                for t in 0..LANES {
                    a[t] += l * y[t];
                }
            }
            for t in 0..LANES {
                q[t] += a[t] * a[t];
            }
        }
        out[from..from + LANES].copy_from_slice(&q);
    }
}

fn finish(component: &Component, distances: &[f64], out: &mut [f64]) {
    let constant = component.log_constant();
    let df = component.df();
    if df == f64::INFINITY {
        for (o, &q) in out.iter_mut().zip(distances) {
            *o = constant - 0.5 * q;
        }
    } else {
        heavy_log_density(constant, 0.5 * (df + component.dim() as f64), 1.0 / df, distances, out);
    }
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn heavy_log_density(constant: f64, power: f64, one_over_df: f64, distances: &[f64], out: &mut [f64]) {
    for (o, &q) in out.iter_mut().zip(distances) {
        *o = constant - power * ln(1.0 + q * one_over_df);
    }
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn log_sum_columns(log_densities: &[f64], log_shares: &[f64], out: &mut [f64]) {
    let mut max = [f64::NEG_INFINITY; BLOCK];
    for (column, &share) in log_densities.chunks_exact(BLOCK).zip(log_shares) {
        for t in 0..BLOCK {
            let v = column[t] + share;
            max[t] = if v > max[t] { v } else { max[t] };
        }
    }
    let mut sum = [0.0; BLOCK];
    for (column, &share) in log_densities.chunks_exact(BLOCK).zip(log_shares) {
        for t in 0..BLOCK {
            let v = column[t] + share - max[t];
            // A maximum of -inf (a point infinitely far from every component) must not become NaN.
            let e = exp(v);
            sum[t] += if v > NEGLIGIBLE { e } else { 0.0 };
        }
    }
    for t in 0..BLOCK {
        let l = max[t] + ln(sum[t]);
        out[t] = if max[t] == f64::NEG_INFINITY { f64::NEG_INFINITY } else { l };
    }
}

#[multiversion(targets("x86_64+avx512f+avx512dq+avx512vl+avx512bw+avx2", "x86_64+avx2", "aarch64+neon"))]
fn responsibilities(log_densities: &[f64], log_shares: &[f64], log_sums: &[f64], out: &mut [f64]) {
    let columns = log_densities.chunks_exact(BLOCK).zip(out.chunks_exact_mut(BLOCK));
    for ((column, r), &share) in columns.zip(log_shares) {
        for t in 0..BLOCK {
            let v = column[t] + share - log_sums[t];
            let e = exp(v);
            r[t] = if v > NEGLIGIBLE { e } else { 0.0 };
        }
    }
}
