//! Gaussian mixtures that know a few directions: full covariances there, one common variance in all other directions.

use crate::numeric::{BLOCK, Points, ln};
use crate::proposal::{BlockTerms, Component, Mixture, ProposalError};
use rayon::prelude::*;
use std::f64::consts::PI;

/// A mixture over `k` directions and the rest of the space.
///
/// Component `i` is a Gaussian in the `k` directions times an isotropic one, `N(0, rest_i)` in each of the `m` remaining directions,
/// centred on zero. With `m = 0` it is an ordinary Gaussian mixture.
///
/// # Shapes
/// Points have `k` coordinates, and where `m > 0` one more: the squared length of the rest.
#[derive(Debug, Clone)]
pub(crate) struct Directed {
    mixture: Mixture,
    rest: Vec<f64>,
    rest_dim: usize,
}

/// One component: mean and covariance in the directions, variance in the rest.
#[derive(Debug, Clone)]
pub(crate) struct Part {
    pub(crate) mass: f64,
    pub(crate) mean: Vec<f64>,
    pub(crate) covariance: Vec<f64>,
    pub(crate) rest: f64,
}

impl Directed {
    /// A mixture of `parts`, whose masses need not sum to one; parts of mass zero are left out.
    pub(crate) fn new(parts: &[Part], rest_dim: usize) -> Result<Self, ProposalError> {
        let kept: Vec<&Part> = parts.iter().filter(|p| p.mass > 0.0).collect();
        let masses: Vec<f64> = kept.iter().map(|p| p.mass).collect();
        let components = kept
            .iter()
            .enumerate()
            .map(|(i, p)| Component::new(p.mean.clone(), &p.covariance, f64::INFINITY).map_err(|e| e.at(i)))
            .collect::<Result<Vec<_>, _>>()?;
        let mixture = Mixture::new(&masses, components)?;
        Ok(Self { mixture, rest: kept.iter().map(|p| p.rest).collect(), rest_dim })
    }

    /// One Gaussian around zero: `variance` in every direction, `rest` in the others.
    pub(crate) fn central(k: usize, rest_dim: usize, variance: f64, rest: f64) -> Result<Self, ProposalError> {
        Self::new(&[Part { mass: 1.0, mean: vec![0.0; k], covariance: scaled_identity(k, variance), rest }], rest_dim)
    }

    /// Number of directions `k`.
    pub(crate) fn k(&self) -> usize {
        self.mixture.dim()
    }

    /// Number of components.
    pub(crate) fn len(&self) -> usize {
        self.mixture.len()
    }

    /// Dimension of the rest.
    pub(crate) fn rest_dim(&self) -> usize {
        self.rest_dim
    }

    /// The mixture in the directions.
    pub(crate) fn mixture(&self) -> &Mixture {
        &self.mixture
    }

    /// Variances in the rest, a component each.
    pub(crate) fn rest(&self) -> &[f64] {
        &self.rest
    }

    /// The components as plain values.
    pub(crate) fn parts(&self) -> Vec<Part> {
        (0..self.len())
            .map(|i| {
                let c = &self.mixture.components()[i];
                Part {
                    mass: self.mixture.shares()[i],
                    mean: c.location().to_vec(),
                    covariance: c.scale(),
                    rest: self.rest[i],
                }
            })
            .collect()
    }

    /// `ln f_i` of every component at a block of reduced points.
    pub(crate) fn fill(&self, terms: &mut BlockTerms, block: &[f64]) {
        terms.fill(&self.mixture, block);
        if self.rest_dim == 0 {
            return;
        }
        let squares = &block[self.k() * BLOCK..(self.k() + 1) * BLOCK];
        for (i, column) in terms.log_densities.chunks_exact_mut(BLOCK).enumerate() {
            let constant = -0.5 * self.rest_dim as f64 * ln(2.0 * PI * self.rest[i]);
            let factor = -0.5 / self.rest[i];
            for (l, r) in column.iter_mut().zip(squares) {
                *l += constant + factor * r;
            }
        }
    }

    /// `ln q` of every reduced point.
    pub(crate) fn log_density(&self, points: &Points) -> Vec<f64> {
        let mut out = vec![0.0; points.n_blocks() * BLOCK];
        out.par_chunks_mut(BLOCK).enumerate().for_each_init(BlockTerms::default, |terms, (b, slot)| {
            self.fill(terms, points.block(b));
            terms.log_sum(self.mixture.log_shares(), slot);
        });
        out.truncate(points.len());
        out
    }

    /// Responsibilities, a component a column, and `ln q`.
    pub(crate) fn responsibilities(&self, points: &Points) -> (Vec<Vec<f64>>, Vec<f64>) {
        let blocks: Vec<(Vec<f64>, [f64; BLOCK])> = (0..points.n_blocks())
            .into_par_iter()
            .map_init(BlockTerms::default, |terms, b| {
                self.fill(terms, points.block(b));
                let mut sums = [0.0; BLOCK];
                terms.log_sum(self.mixture.log_shares(), &mut sums);
                let mut shares = Vec::new();
                terms.responsibilities(self.mixture.log_shares(), &sums, &mut shares);
                (shares, sums)
            })
            .collect();
        let mut columns = vec![Vec::with_capacity(points.len()); self.len()];
        let mut logs = Vec::with_capacity(points.len());
        for (b, (shares, sums)) in blocks.iter().enumerate() {
            let live = points.block_len(b);
            for (i, column) in columns.iter_mut().enumerate() {
                column.extend_from_slice(&shares[i * BLOCK..i * BLOCK + live]);
            }
            logs.extend_from_slice(&sums[..live]);
        }
        (columns, logs)
    }

    /// Parts mixed: `weights[i]` of `parts[i]`.
    pub(crate) fn union(parts: &[(f64, &Self)]) -> Result<Self, ProposalError> {
        let all: Vec<(f64, &Mixture)> = parts.iter().map(|(w, p)| (*w, &p.mixture)).collect();
        let mixture = Mixture::union(&all)?;
        let rest = parts.iter().filter(|(w, _)| *w > 0.0).flat_map(|(_, p)| p.rest.iter().copied()).collect();
        Ok(Self { mixture, rest, rest_dim: parts[0].1.rest_dim })
    }
}

/// `value I`, row by row.
pub(crate) fn scaled_identity(k: usize, value: f64) -> Vec<f64> {
    let mut a = vec![0.0; k * k];
    for i in 0..k {
        a[i * k + i] = value;
    }
    a
}

#[cfg(test)]
mod tests {
    use super::*;

    /// In five dimensions, along one direction: the density equals that of the full Gaussian.
    #[test]
    fn a_direction_and_the_rest_make_the_full_density() {
        let part = Part { mass: 1.0, mean: vec![2.0], covariance: vec![0.3], rest: 1.7 };
        let directed = Directed::new(&[part], 4).unwrap();
        let mut scale = scaled_identity(5, 1.7);
        scale[0] = 0.3;
        let full = Component::new(vec![2.0, 0.0, 0.0, 0.0, 0.0], &scale, f64::INFINITY).unwrap();
        let u = [1.5, 0.2, -0.7, 1.1, 0.4];
        let rest: f64 = u[1..].iter().map(|v| v * v).sum();
        let got = directed.log_density(&Points::from_rows(2, &[1.5, rest]))[0];
        assert!((got - full.log_density(&u)).abs() < 1e-13);
    }
}
