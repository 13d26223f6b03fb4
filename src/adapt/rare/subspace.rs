//! The few directions in which an event of many variables differs from the nominal density.

use super::directed::Directed;
use crate::numeric::linear::{dot, eigen};
use crate::numeric::{BLOCK, Points, Purpose, normal, stream};
use crate::proposal::{Component, Mixture, ProposalError};
use rayon::prelude::*;

/// An orthonormal basis of `k` directions in `d` dimensions; with `k = d` the space itself.
#[derive(Debug, Clone)]
pub(crate) struct Subspace {
    dim: usize,
    /// `None`: all of the space, in its own coordinates.
    basis: Option<Vec<Vec<f64>>>,
}

/// Most directions that are told apart.
const MOST: usize = 5;
/// A direction whose singular value is below this share of the first is left to the rest.
const LEAST: f64 = 0.12;
/// Blocks of the rest's draws have streams of their own, beyond those of the directions.
const REST_BLOCKS: u32 = 0x4000_0000;

impl Subspace {
    /// All of the space.
    pub(crate) fn whole(dim: usize) -> Self {
        Self { dim, basis: None }
    }

    /// Leading right singular vectors of `rows`: unit gradients, and found points times two.
    ///
    /// In the manner of the active subspaces of Constantine, Dow & Wang (SIAM J. Sci. Comput. 36 (2014) A1500-A1524); weights,
    /// threshold and the most directions are ours.
    pub(crate) fn leading(rows: &[Vec<f64>], dim: usize) -> Option<Self> {
        let m = rows.len();
        let mut products = vec![0.0; m * m];
        for i in 0..m {
            for j in 0..m {
                products[i * m + j] = dot(&rows[i], &rows[j]);
            }
        }
        let found = eigen(&products, m)?;
        let largest = found.values.last().copied().filter(|&v| v > 0.0)?;
        let mut basis: Vec<Vec<f64>> = Vec::new();
        for (value, left) in found.values.iter().zip(&found.vectors).rev().take(MOST) {
            // Squared singular values; below rounding of the largest there is no direction.
            if *value <= (LEAST * LEAST * largest).max(1e-12 * largest) {
                break;
            }
            let mut direction = vec![0.0; dim];
            for (weight, row) in left.iter().zip(rows) {
                for (slot, r) in direction.iter_mut().zip(row) {
                    *slot += weight * r;
                }
            }
            for other in &basis {
                let along = dot(other, &direction);
                for (slot, o) in direction.iter_mut().zip(other) {
                    *slot -= along * o;
                }
            }
            let norm = dot(&direction, &direction).sqrt();
            basis.push(direction.iter().map(|v| v / norm).collect());
        }
        Some(Self { dim, basis: Some(basis) })
    }

    /// The directions as unit vectors.
    pub(crate) fn directions(&self) -> Vec<Vec<f64>> {
        let axis = |j: usize| (0..self.dim).map(|i| f64::from(u8::from(i == j))).collect();
        self.basis.clone().unwrap_or_else(|| (0..self.dim).map(axis).collect())
    }

    /// Number of directions `k`.
    pub(crate) fn k(&self) -> usize {
        self.basis.as_ref().map_or(self.dim, Vec::len)
    }

    /// Dimension of the rest.
    pub(crate) fn rest_dim(&self) -> usize {
        self.dim - self.k()
    }

    /// Coordinates along the directions, and the squared length of the rest where there is one.
    pub(crate) fn reduce(&self, u: &Points) -> Points {
        let Some(basis) = &self.basis else { return u.clone() };
        let k = basis.len();
        let mut reduced = Points::zeros(k + 1, u.len());
        for i in 0..u.len() {
            let point = u.point(i);
            let mut rest = dot(&point, &point);
            for (j, direction) in basis.iter().enumerate() {
                let along = dot(direction, &point);
                reduced.set(i, j, along);
                rest -= along * along;
            }
            reduced.set(i, k, rest.max(0.0));
        }
        reduced
    }

    /// Draws `n` points from a mixture over the directions, with the component of each. Blocks have streams of their own, so the
    /// number of threads does not matter.
    pub(crate) fn draw(&self, q: &Directed, n: usize, seed: u64, purpose: Purpose, round: u32) -> (Points, Vec<u32>) {
        let drawn = q.mixture().draw(n, seed, purpose, round);
        let Some(basis) = &self.basis else { return (drawn.points, drawn.labels) };
        let k = basis.len();
        let mut points = Points::zeros(self.dim, n);
        let blocks: Vec<(usize, &mut [f64])> = points.blocks_mut().enumerate().collect();
        blocks.into_par_iter().for_each(|(b, block)| {
            let mut rng = stream(seed, purpose, round, REST_BLOCKS | b as u32);
            let mut u = vec![0.0; self.dim];
            for t in 0..drawn.points.block_len(b) {
                let i = b * BLOCK + t;
                let scale = q.rest()[drawn.labels[i] as usize].sqrt();
                for slot in &mut u {
                    *slot = scale * normal::draw(&mut rng);
                }
                for (j, direction) in basis.iter().enumerate().take(k) {
                    let change = drawn.points.get(i, j) - dot(direction, &u);
                    for (slot, o) in u.iter_mut().zip(direction) {
                        *slot += change * o;
                    }
                }
                for (j, &v) in u.iter().enumerate() {
                    block[j * BLOCK + t] = v;
                }
            }
        });
        (points, drawn.labels)
    }

    /// The same mixture with full covariances, `B S B' + rest (I - B B')`.
    pub(crate) fn expand(&self, q: &Directed) -> Result<Mixture, ProposalError> {
        let Some(basis) = &self.basis else { return Ok(q.mixture().clone()) };
        let (d, k) = (self.dim, basis.len());
        let components = q
            .mixture()
            .components()
            .iter()
            .zip(q.rest())
            .enumerate()
            .map(|(at, (c, &rest))| {
                let mut location = vec![0.0; d];
                for (m, direction) in c.location().iter().zip(basis) {
                    for (slot, o) in location.iter_mut().zip(direction) {
                        *slot += m * o;
                    }
                }
                let inner = c.scale();
                let mut scale = super::directed::scaled_identity(d, rest);
                for a in 0..k {
                    for b in 0..k {
                        let extra = inner[a * k + b] - if a == b { rest } else { 0.0 };
                        for i in 0..d {
                            for j in 0..d {
                                scale[i * d + j] += extra * (basis[a][i] * basis[b][j]);
                            }
                        }
                    }
                }
                Component::new(location, &scale, f64::INFINITY).map_err(|e| e.at(at))
            })
            .collect::<Result<Vec<_>, _>>()?;
        Mixture::new(q.mixture().shares(), components)
    }
}

#[cfg(test)]
mod tests {
    use super::super::directed::Part;
    use super::*;

    fn tilted() -> (Subspace, Directed) {
        let rows = vec![vec![1.0, 1.0, 0.0, 0.0, 0.0, 1.0], vec![0.0, 1.0, 1.0, 0.5, 0.0, 0.0]];
        let space = Subspace::leading(&rows, 6).unwrap();
        let parts = [
            Part { mass: 0.6, mean: vec![2.0, 0.5], covariance: vec![0.4, 0.1, 0.1, 0.8], rest: 1.1 },
            Part { mass: 0.4, mean: vec![-1.0, 0.0], covariance: vec![1.0, 0.0, 0.0, 2.0], rest: 0.9 },
        ];
        (space, Directed::new(&parts, 4).unwrap())
    }

    #[test]
    fn the_expanded_mixture_has_the_same_density() {
        let (space, q) = tilted();
        assert_eq!((space.k(), space.rest_dim()), (2, 4));
        let full = space.expand(&q).unwrap();
        let (points, labels) = space.draw(&q, 300, 5, Purpose::Trial, 1);
        assert_eq!(labels.iter().filter(|&&l| l == 0).count(), 180);
        let reduced = q.log_density(&space.reduce(&points));
        for (a, b) in reduced.iter().zip(full.log_density(&points)) {
            assert!((a - b).abs() < 1e-11);
        }
    }

    /// The mean of `p/q` over draws from `q` is one for a Gaussian `p` inside it: 4 standard errors, false alarm 6e-5.
    #[test]
    fn draws_follow_the_density() {
        let (space, q) = tilted();
        let n = 20_000;
        let (points, _) = space.draw(&q, n, 8, Purpose::Trial, 2);
        let log_q = q.log_density(&space.reduce(&points));
        let narrow = Directed::new(
            &[Part { mass: 1.0, mean: vec![1.8, 0.4], covariance: vec![0.3, 0.0, 0.0, 0.5], rest: 0.8 }],
            4,
        )
        .unwrap();
        let log_p = narrow.log_density(&space.reduce(&points));
        let w: Vec<f64> = log_p.iter().zip(&log_q).map(|(p, q)| crate::numeric::exp(p - q)).collect();
        let mean = w.iter().sum::<f64>() / n as f64;
        let variance = w.iter().map(|v| (v - mean) * (v - mean)).sum::<f64>() / n as f64;
        assert!((mean - 1.0).abs() < 4.0 * (variance / n as f64).sqrt(), "{mean} {variance}");
    }
}
