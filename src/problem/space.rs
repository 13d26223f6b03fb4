//! The space the proposal lives in: all coordinates of a point together, with their densities and Jacobians.
//!
//! A point `z` of coordinates becomes a point `x` of natural units in three steps: correlated groups of scores are
//! mixed (`u = L e`, with `L L^T` the correlation of the scores), each coordinate is mapped by its own axis, and
//! variables whose parameters depend on others are drawn out of their scores given those (Rosenblatt 1952). What the
//! variables' own distributions contribute to the log density, Jacobians included, is [`Space::log_base`].

use rayon::prelude::*;

use super::given::GivenGroup;
use super::variable::Coordinate;
use crate::distribution::Distribution;
use crate::numeric::BLOCK;
use crate::numeric::Points;

/// `ln sqrt(2 pi)`.
const LOG_ROOT_TWO_PI: f64 = 0.918_938_533_204_672_8;

/// `ln phi(u)`, the log density of the standard normal distribution.
#[inline]
pub(crate) fn log_normal(u: f64) -> f64 {
    -0.5 * u * u - LOG_ROOT_TWO_PI
}

/// How one coordinate and its variable hang together.
#[derive(Debug, Clone)]
pub(crate) enum Axis {
    /// A range: no density of its own.
    Flat(Coordinate),
    /// A distribution seen through a coordinate of its support.
    Own(Distribution, Coordinate),
    /// A distribution seen through its standard normal score.
    Score(Distribution),
    /// A member of `groups[k]`: the score given other variables.
    Given(usize),
}

/// Variables with correlated scores.
#[derive(Debug, Clone)]
pub(crate) struct Bundle {
    pub(crate) members: Vec<usize>,
    /// Lower factor of the correlation of the scores, row by row.
    pub(crate) lower: Vec<f64>,
    /// Its inverse.
    pub(crate) inverse: Vec<f64>,
    /// `ln det L`.
    pub(crate) log_det: f64,
    /// Whether the coordinates are the independent scores `e`; else each member keeps a coordinate of its own and the
    /// bundle adds the density of the copula.
    pub(crate) mixed: bool,
}

/// See the page of this module.
#[derive(Debug, Clone)]
pub(crate) struct Space {
    pub(crate) axes: Vec<Axis>,
    pub(crate) bundles: Vec<Bundle>,
    /// Groups with dependent parameters, each after those it depends on.
    pub(crate) groups: Vec<GivenGroup>,
}

/// Runs `work` over the blocks of `points` on all cores; a block's result depends on that block only.
pub(crate) fn over_blocks(points: &mut Points, work: impl Fn(usize, &mut [f64]) + Sync) {
    let blocks: Vec<&mut [f64]> = points.blocks_mut().collect();
    blocks.into_par_iter().enumerate().for_each(|(b, block)| work(b, block));
}

/// One number a point, worked out block by block on all cores.
pub(crate) fn per_point(n: usize, work: impl Fn(usize, &mut [f64]) + Sync) -> Vec<f64> {
    let mut out = vec![0.0; n];
    out.par_chunks_mut(BLOCK).enumerate().for_each(|(b, chunk)| work(b, chunk));
    out
}

impl Space {
    pub(crate) fn dim(&self) -> usize {
        self.axes.len()
    }

    /// The coordinates with every mixed bundle turned back into its correlated scores.
    fn scores(&self, z: &Points) -> Points {
        let mut u = z.clone();
        if self.bundles.iter().any(|bundle| bundle.mixed) {
            over_blocks(&mut u, |b, block| {
                for i in 0..z.block_len(b) {
                    for bundle in self.bundles.iter().filter(|bundle| bundle.mixed) {
                        bundle.mix(block, i);
                    }
                }
            });
        }
        u
    }

    /// Natural units of points in coordinates.
    pub(crate) fn to_natural(&self, z: &Points) -> Points {
        let u = self.scores(z);
        let mut x = Points::zeros(self.dim(), z.len());
        over_blocks(&mut x, |b, block| {
            let n = z.block_len(b);
            for (j, axis) in self.axes.iter().enumerate() {
                let from = &u.column(b, j)[..n];
                let to = &mut block[j * BLOCK..j * BLOCK + n];
                match axis {
                    Axis::Flat(coordinate) | Axis::Own(_, coordinate) => {
                        for (x, &z) in to.iter_mut().zip(from) {
                            *x = coordinate.natural(z);
                        }
                    }
                    Axis::Score(distribution) => {
                        for (x, &u) in to.iter_mut().zip(from) {
                            *x = distribution.from_score(u);
                        }
                    }
                    Axis::Given(_) => {}
                }
            }
        });
        for group in &self.groups {
            group.fill(&u, &mut x);
        }
        x
    }

    /// Coordinates of points in natural units; NaN or infinite where a value is outside its support or on its end.
    pub(crate) fn to_coordinates(&self, x: &Points) -> Points {
        let parameters: Vec<Vec<Points>> = self.groups.iter().map(|group| group.parameter_values(x)).collect();
        let mut z = Points::zeros(self.dim(), x.len());
        over_blocks(&mut z, |b, block| {
            for i in 0..x.block_len(b) {
                for (j, axis) in self.axes.iter().enumerate() {
                    let value = x.column(b, j)[i];
                    block[j * BLOCK + i] = match axis {
                        Axis::Flat(coordinate) | Axis::Own(_, coordinate) => coordinate.of_natural(value),
                        Axis::Score(distribution) => distribution.score(value),
                        Axis::Given(k) => self.groups[*k]
                            .distribution_at(&parameters[*k], b * BLOCK + i)
                            .map_or(f64::NAN, |distribution| distribution.score(value)),
                    };
                }
                for bundle in self.bundles.iter().filter(|bundle| bundle.mixed) {
                    bundle.unmix(block, i);
                }
            }
        });
        z
    }

    /// What the variables' own distributions contribute to the log density in coordinates, Jacobians included.
    ///
    /// Flat ranges contribute their Jacobian alone. `-inf` where a natural value is not finite or has no density.
    pub(crate) fn log_base(&self, z: &Points, x: &Points) -> Vec<f64> {
        per_point(z.len(), |b, sums| {
            let n = sums.len();
            let mut density = [0.0; BLOCK];
            for (j, axis) in self.axes.iter().enumerate() {
                let (coordinates, naturals) = (&z.column(b, j)[..n], &x.column(b, j)[..n]);
                match axis {
                    Axis::Flat(coordinate) => {
                        for (sum, &z) in sums.iter_mut().zip(coordinates) {
                            *sum += coordinate.log_jacobian(z);
                        }
                    }
                    Axis::Own(distribution, coordinate) => {
                        distribution.log_density_column(naturals, &mut density[..n]);
                        for ((sum, &z), &density) in sums.iter_mut().zip(coordinates).zip(&density) {
                            *sum += density + coordinate.log_jacobian(z);
                        }
                    }
                    Axis::Score(_) | Axis::Given(_) => {
                        for (sum, &z) in sums.iter_mut().zip(coordinates) {
                            *sum += log_normal(z);
                        }
                    }
                }
                for (sum, &x) in sums.iter_mut().zip(naturals) {
                    if !x.is_finite() {
                        *sum = f64::NEG_INFINITY;
                    }
                }
            }
            for bundle in self.bundles.iter().filter(|bundle| !bundle.mixed) {
                for (i, sum) in sums.iter_mut().enumerate() {
                    *sum += bundle.log_copula(&self.bundle_scores(bundle, z, x, b * BLOCK + i));
                }
            }
            for sum in sums.iter_mut() {
                // inf - inf, of a density that has no bound at its end: no point of the support is there.
                if sum.is_nan() {
                    *sum = f64::NEG_INFINITY;
                }
            }
        })
    }

    /// `ln |dx/dz|`, natural units over coordinates. A discrete variable counts with the density of its score over
    /// its mass, so that weights are the same on both sides.
    pub(crate) fn log_jacobian(&self, z: &Points, x: &Points) -> Vec<f64> {
        let parameters: Vec<Vec<Points>> = self.groups.iter().map(|group| group.parameter_values(x)).collect();
        let u = self.scores(z);
        per_point(z.len(), |b, sums| {
            for (i, sum) in sums.iter_mut().enumerate() {
                for (j, axis) in self.axes.iter().enumerate() {
                    let (u, x) = (u.column(b, j)[i], x.column(b, j)[i]);
                    *sum += match axis {
                        Axis::Flat(coordinate) | Axis::Own(_, coordinate) => coordinate.log_jacobian(u),
                        Axis::Score(distribution) => log_normal(u) - distribution.log_density(x),
                        Axis::Given(k) => self.groups[*k]
                            .distribution_at(&parameters[*k], b * BLOCK + i)
                            .map_or(f64::NAN, |distribution| log_normal(u) - distribution.log_density(x)),
                    };
                }
                *sum += self.bundles.iter().filter(|bundle| bundle.mixed).map(|bundle| bundle.log_det).sum::<f64>();
            }
        })
    }

    /// Gradients with respect to coordinates, from gradients `slopes` with respect to natural units.
    ///
    /// With `own`, the gradient of [`Space::log_base`] is added.
    pub(crate) fn pull_back(&self, z: &Points, x: &Points, slopes: &Points, own: bool) -> Points {
        let u = self.scores(z);
        let mut natural = slopes.clone();
        if own {
            self.add_own_slopes(z, x, &mut natural);
        }
        let mut gradient = Points::zeros(self.dim(), z.len());
        // Last group first: each hands the slopes of its parameters on to the variables they depend on.
        for group in self.groups.iter().rev() {
            group.pull_back(&u, x, &mut natural, &mut gradient);
        }
        over_blocks(&mut gradient, |b, block| {
            for i in 0..z.block_len(b) {
                for (j, axis) in self.axes.iter().enumerate() {
                    let (slope, u, x) = (natural.column(b, j)[i], u.column(b, j)[i], x.column(b, j)[i]);
                    let at = j * BLOCK + i;
                    match axis {
                        Axis::Flat(coordinate) | Axis::Own(_, coordinate) => {
                            block[at] = slope * coordinate.slope(u);
                            if own {
                                block[at] += coordinate.log_jacobian_slope(u);
                            }
                        }
                        Axis::Score(distribution) if distribution.is_discrete() => block[at] = 0.0,
                        Axis::Score(distribution) => block[at] = slope * distribution.score_slope(u, x),
                        Axis::Given(_) => {}
                    }
                }
                for bundle in self.bundles.iter().filter(|bundle| bundle.mixed) {
                    bundle.pull_back(block, i);
                }
                if own {
                    self.add_score_slopes(z, x, b, i, block);
                    for (j, axis) in self.axes.iter().enumerate() {
                        if matches!(axis, Axis::Score(_) | Axis::Given(_)) {
                            block[j * BLOCK + i] -= z.column(b, j)[i];
                        }
                    }
                }
            }
        });
        gradient
    }

    /// Adds `d log_base / dx` of the distributions and copulas that are seen in coordinates of their support.
    fn add_own_slopes(&self, z: &Points, x: &Points, natural: &mut Points) {
        over_blocks(natural, |b, block| {
            let n = z.block_len(b);
            for (j, axis) in self.axes.iter().enumerate() {
                if let Axis::Own(distribution, _) = axis {
                    for i in 0..n {
                        block[j * BLOCK + i] += distribution.log_density_slope(x.column(b, j)[i]);
                    }
                }
            }
            for bundle in self.bundles.iter().filter(|bundle| !bundle.mixed) {
                for i in 0..n {
                    let u = self.bundle_scores(bundle, z, x, b * BLOCK + i);
                    for ((&j, slope), &u) in bundle.members.iter().zip(bundle.log_copula_slopes(&u)).zip(&u) {
                        if let Axis::Own(distribution, _) = &self.axes[j] {
                            block[j * BLOCK + i] += slope / distribution.score_slope(u, x.column(b, j)[i]);
                        }
                    }
                }
            }
        });
    }

    /// Adds, for point `i` of block `b`, what a copula owes to members that are seen in their own scores.
    fn add_score_slopes(&self, z: &Points, x: &Points, b: usize, i: usize, block: &mut [f64]) {
        for bundle in self.bundles.iter().filter(|bundle| !bundle.mixed) {
            let u = self.bundle_scores(bundle, z, x, b * BLOCK + i);
            for (&j, slope) in bundle.members.iter().zip(bundle.log_copula_slopes(&u)) {
                if matches!(self.axes[j], Axis::Score(_)) {
                    block[j * BLOCK + i] += slope;
                }
            }
        }
    }

    /// Scores of the members of a bundle at point `i`.
    fn bundle_scores(&self, bundle: &Bundle, z: &Points, x: &Points, i: usize) -> Vec<f64> {
        let score = |&j: &usize| match &self.axes[j] {
            Axis::Own(distribution, _) => distribution.score(x.get(i, j)),
            Axis::Score(_) | Axis::Flat(_) | Axis::Given(_) => z.get(i, j),
        };
        bundle.members.iter().map(score).collect()
    }
}

impl Bundle {
    /// `u = L e` in place, for point `i` of a block.
    fn mix(&self, block: &mut [f64], i: usize) {
        let m = self.members.len();
        // Last row first: row r needs the entries before it as they were.
        for r in (0..m).rev() {
            let sum: f64 = (0..=r).map(|k| self.lower[r * m + k] * block[self.members[k] * BLOCK + i]).sum();
            block[self.members[r] * BLOCK + i] = sum;
        }
    }

    /// `e = L^-1 u` in place.
    fn unmix(&self, block: &mut [f64], i: usize) {
        let m = self.members.len();
        for r in (0..m).rev() {
            let sum: f64 = (0..=r).map(|k| self.inverse[r * m + k] * block[self.members[k] * BLOCK + i]).sum();
            block[self.members[r] * BLOCK + i] = sum;
        }
    }

    /// Slopes with respect to `e` from those with respect to `u`: `L^T g`, in place.
    fn pull_back(&self, block: &mut [f64], i: usize) {
        let m = self.members.len();
        for k in 0..m {
            let sum: f64 = (k..m).map(|r| self.lower[r * m + k] * block[self.members[r] * BLOCK + i]).sum();
            block[self.members[k] * BLOCK + i] = sum;
        }
    }

    /// Log density of the Gaussian copula at scores `u`: `ln phi_R(u) - sum ln phi(u_i)`.
    fn log_copula(&self, u: &[f64]) -> f64 {
        if u.iter().any(|u| !u.is_finite()) {
            return f64::NEG_INFINITY;
        }
        let m = u.len();
        let mut sum = 0.0;
        for r in 0..m {
            let e: f64 = (0..=r).map(|k| self.inverse[r * m + k] * u[k]).sum();
            sum += u[r] * u[r] - e * e;
        }
        0.5 * sum - self.log_det
    }

    /// Its derivatives: `u - R^-1 u`.
    fn log_copula_slopes(&self, u: &[f64]) -> Vec<f64> {
        let m = u.len();
        let e: Vec<f64> = (0..m).map(|r| (0..=r).map(|k| self.inverse[r * m + k] * u[k]).sum()).collect();
        (0..m).map(|k| u[k] - (k..m).map(|r| self.inverse[r * m + k] * e[r]).sum::<f64>()).collect()
    }
}
