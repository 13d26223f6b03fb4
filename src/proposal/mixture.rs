//! A mixture of components: shares that sum to one, log density in batches, stratified draws.

use super::{BlockTerms, Component, ProposalError};
use crate::numeric::{BLOCK, Points, Purpose, exp, ln, normal, stream, uniform};
use rayon::prelude::*;
use std::sync::Arc;

/// `q(x) = sum_k share_k f_k(x)`.
///
/// Invariant: at least one component, all of one dimension; shares are positive and sum to one.
#[derive(Debug, Clone, PartialEq)]
pub struct Mixture {
    shares: Vec<f64>,
    log_shares: Vec<f64>,
    components: Vec<Component>,
    /// For each component, an earlier one of the same shape and the factor between their squared distances.
    twins: Vec<Option<(usize, f64)>>,
}

/// Points drawn from a mixture and the component that each came from.
#[derive(Debug, Clone, PartialEq)]
pub struct Drawn {
    /// The points, in the order of their components.
    pub points: Points,
    /// The component of each.
    pub labels: Vec<u32>,
}

impl Mixture {
    /// A mixture from positive masses (made to sum to one) and their components. Components of mass zero are left out.
    ///
    /// # Errors
    /// [`ProposalError::Shares`] where no mass is left or one is negative or not finite, [`ProposalError::WrongLength`] where dimensions differ.
    ///
    /// ```
    /// use evenpoise::proposal::{Component, Mixture};
    /// let light = Component::new(vec![-1.0], &[0.25], f64::INFINITY).unwrap();
    /// let heavy = Component::new(vec![2.0], &[1.0], 5.0).unwrap();
    /// let mixture = Mixture::new(&[1.0, 3.0], vec![light, heavy]).unwrap();
    /// assert_eq!(mixture.shares(), &[0.25, 0.75]);
    /// ```
    pub fn new(masses: &[f64], components: Vec<Component>) -> Result<Self, ProposalError> {
        let sum: f64 = masses.iter().sum();
        let count = components.len();
        if masses.len() != count || masses.iter().any(|&m| !(m >= 0.0)) || !(sum > 0.0 && sum.is_finite()) {
            return Err(ProposalError::Shares { sum, count });
        }
        let d = components[0].dim();
        if let Some(k) = components.iter().position(|c| c.dim() != d) {
            return Err(ProposalError::WrongLength { component: k, got: components[k].dim(), wanted: d });
        }
        let (mut shares, mut kept) = (Vec::with_capacity(count), Vec::with_capacity(count));
        for (&mass, component) in masses.iter().zip(components) {
            if mass / sum > 0.0 {
                shares.push(mass / sum);
                kept.push(component);
            }
        }
        let log_shares = shares.iter().map(|&s| ln(s)).collect();
        let twins = (0..kept.len()).map(|k| twin_of(&kept, k)).collect();
        Ok(Self { shares, log_shares, components: kept, twins })
    }

    /// A single component.
    #[must_use]
    pub fn single(component: Component) -> Self {
        Self { shares: vec![1.0], log_shares: vec![0.0], components: vec![component], twins: vec![None] }
    }

    /// Mixtures mixed: part `i` with weight `parts[i].0 >= 0`.
    ///
    /// # Errors
    /// As [`Mixture::new`].
    pub fn union(parts: &[(f64, &Self)]) -> Result<Self, ProposalError> {
        let mut masses = Vec::new();
        let mut components = Vec::new();
        for (weight, part) in parts {
            masses.extend(part.shares.iter().map(|s| s * weight));
            components.extend(part.components.iter().cloned());
        }
        Self::new(&masses, components)
    }

    /// The same components with every one changed by `change`.
    ///
    /// # Errors
    /// As [`Mixture::new`].
    pub fn map(&self, change: impl Fn(&Component) -> Component) -> Result<Self, ProposalError> {
        Self::new(&self.shares, self.components.iter().map(change).collect())
    }

    /// The mixture in the coordinates `near + spread * x`.
    ///
    /// # Errors
    /// As [`Component::rescaled`].
    pub fn rescaled(&self, near: &[f64], spread: &[f64]) -> Result<Self, ProposalError> {
        let components = self
            .components
            .iter()
            .enumerate()
            .map(|(k, c)| c.rescaled(near, spread).map_err(|e| e.at(k)))
            .collect::<Result<Vec<_>, _>>()?;
        Self::new(&self.shares, components)
    }

    /// Dimension `d`.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.components[0].dim()
    }

    /// Number of components `K`.
    #[must_use]
    pub fn len(&self) -> usize {
        self.components.len()
    }

    /// Never: a mixture has at least one component.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        false
    }

    /// Shares, summing to one.
    #[must_use]
    pub fn shares(&self) -> &[f64] {
        &self.shares
    }

    /// Logarithms of the shares.
    #[must_use]
    pub fn log_shares(&self) -> &[f64] {
        &self.log_shares
    }

    /// The components.
    #[must_use]
    pub fn components(&self) -> &[Component] {
        &self.components
    }

    /// An earlier component whose distances, times a factor, are those of component `k`.
    pub(crate) fn twin(&self, k: usize) -> Option<(usize, f64)> {
        self.twins[k]
    }

    /// `ln q(x)` of one point, nats.
    #[must_use]
    pub fn log_density_at(&self, x: &[f64]) -> f64 {
        let terms: Vec<f64> = self.components.iter().zip(&self.log_shares).map(|(c, s)| c.log_density(x) + s).collect();
        crate::numeric::log_sum_exp(&terms)
    }

    /// `ln q(x)` of every point, nats. Shared over the cores; the result does not depend on their number.
    #[must_use]
    pub fn log_density(&self, points: &Points) -> Vec<f64> {
        let mut out = vec![0.0; points.n_blocks() * BLOCK];
        out.par_chunks_mut(BLOCK).enumerate().for_each_init(BlockTerms::default, |terms, (b, slot)| {
            terms.fill(self, points.block(b));
            terms.log_sum(&self.log_shares, slot);
        });
        out.truncate(points.len());
        out
    }

    /// `ln f_k(x)` of every component (outer) at every point (inner), without shares.
    #[must_use]
    pub fn component_log_densities(&self, points: &Points) -> Vec<Vec<f64>> {
        let n = points.len();
        let blocks: Vec<Vec<f64>> = (0..points.n_blocks())
            .into_par_iter()
            .map_init(BlockTerms::default, |terms, b| {
                terms.fill(self, points.block(b));
                terms.log_densities.clone()
            })
            .collect();
        let mut out = vec![Vec::with_capacity(n); self.len()];
        for (b, block) in blocks.iter().enumerate() {
            let live = points.block_len(b);
            for (k, column) in out.iter_mut().enumerate() {
                column.extend_from_slice(&block[k * BLOCK..k * BLOCK + live]);
            }
        }
        out
    }

    /// Draws `n` points, stratified: the number from each component is fixed by systematic sampling.
    ///
    /// Every block of 128 points has its own stream, so the draws do not depend on the number of threads, and any
    /// block can be drawn again by itself.
    #[must_use]
    pub fn draw(&self, n: usize, seed: u64, purpose: Purpose, round: u32) -> Drawn {
        let labels = self.systematic_labels(n, uniform(&mut stream(seed, purpose, round, 0)));
        let mut points = Points::zeros(self.dim(), n);
        let blocks: Vec<(usize, &mut [f64])> = points.blocks_mut().enumerate().collect();
        blocks.into_par_iter().for_each(|(b, block)| {
            let mut rng = stream(seed, purpose, round, b as u32 + 1);
            let live = &labels[b * BLOCK..((b + 1) * BLOCK).min(n)];
            self.draw_block(live, &mut rng, block);
        });
        Drawn { points, labels }
    }

    /// The component of each of `n` stratified draws: `(i + offset) / n` looked up in the cumulated shares.
    #[must_use]
    pub fn systematic_labels(&self, n: usize, offset: f64) -> Vec<u32> {
        let mut labels = Vec::with_capacity(n);
        let (mut k, mut cumulated) = (0, self.shares[0]);
        for i in 0..n {
            let u = (i as f64 + offset) / n as f64;
            while u >= cumulated && k + 1 < self.len() {
                k += 1;
                cumulated += self.shares[k];
            }
            labels.push(k as u32);
        }
        labels
    }

    /// Fills one block with draws from the components named by `labels`.
    pub fn draw_block(&self, labels: &[u32], rng: &mut crate::numeric::Stream, block: &mut [f64]) {
        let d = self.dim();
        let mut z = vec![0.0; d];
        let mut factors: Vec<Option<Vec<f64>>> = vec![None; self.len()];
        for (t, &label) in labels.iter().enumerate() {
            let component = &self.components[label as usize];
            for v in &mut z {
                *v = normal::draw(rng);
            }
            let stretch = heaviness(component.df(), rng);
            let factor = factors[label as usize].get_or_insert_with(|| component.factor());
            for i in 0..d {
                let mut sum = 0.0;
                for j in 0..=i {
                    sum += factor[i * d + j] * z[j];
                }
                block[i * BLOCK + t] = component.location()[i] + stretch * sum;
            }
        }
    }
}

fn twin_of(components: &[Component], k: usize) -> Option<(usize, f64)> {
    let (shape, widening) = components[k].shape();
    components[..k].iter().enumerate().find_map(|(j, earlier)| {
        let (other, width) = earlier.shape();
        Arc::ptr_eq(shape, other).then_some((j, width / widening))
    })
}

/// `sqrt(v / chi2_v)`, the factor that makes a Gaussian draw a Student-t draw; one for a Gaussian.
fn heaviness(df: f64, rng: &mut crate::numeric::Stream) -> f64 {
    if df == f64::INFINITY {
        return 1.0;
    }
    let half = 0.5 * df;
    let gamma = normal::draw_gamma(half, rng);
    // A gamma draw that underflows (tiny df) would throw the point to infinity: it goes as far as a double can say.
    let stretch = (half / gamma.max(f64::MIN_POSITIVE)).sqrt();
    stretch.min(exp(300.0))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn one(location: f64, variance: f64, df: f64) -> Component {
        Component::new(vec![location], &[variance], df).unwrap()
    }

    /// Source: mpmath 1.3 at 50 digits, from the definition: `log(0.25*npdf(x,-1,0.5) + 0.75*npdf(x,2,1))`.
    /// Exponentiating first loses digits at 40 and gives -inf at -200.
    #[test]
    fn mixture_log_density_matches_mpmath() {
        let mixture =
            Mixture::new(&[0.25, 0.75], vec![one(-1.0, 0.25, f64::INFINITY), one(2.0, 1.0, f64::INFINITY)]).unwrap();
        for (x, want) in
            [(0.0, -2.695_794_981_890_463_f64), (40.0, -723.206_620_605_656_4), (-200.0, -20_403.206_620_605_655)]
        {
            let got = mixture.log_density(&Points::from_rows(1, &[x]))[0];
            assert!(((got - want) / want).abs() <= 4.0 * f64::EPSILON, "x = {x}: {got}");
            assert!((mixture.log_density_at(&[x]) - want).abs() <= 8.0 * f64::EPSILON * want.abs());
        }
    }

    #[test]
    fn blocks_and_single_points_agree() {
        let a = Component::new(vec![0.0, 1.0, 2.0], &[2.0, 0.3, 0.1, 0.3, 1.0, 0.2, 0.1, 0.2, 0.7], 4.0).unwrap();
        let b =
            Component::new(vec![1.0, 1.0, 0.0], &[1.0, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 1.0], f64::INFINITY).unwrap();
        let mixture = Mixture::new(&[0.4, 0.6], vec![a, b]).unwrap();
        let drawn = mixture.draw(300, 3, Purpose::Trial, 0);
        let batch = mixture.log_density(&drawn.points);
        let columns = mixture.component_log_densities(&drawn.points);
        for i in [0, 127, 128, 299] {
            let x = drawn.points.point(i);
            assert!((batch[i] - mixture.log_density_at(&x)).abs() < 1e-12);
            assert!((columns[1][i] - mixture.components()[1].log_density(&x)).abs() < 1e-12);
        }
        assert_eq!(drawn.labels.iter().filter(|&&k| k == 0).count(), 120);
    }

    /// Mean and scale of 40,000 draws of a Student-t: within 4.5 standard errors (false alarm 7e-6 each).
    #[test]
    fn draws_have_the_moments_of_the_mixture() {
        let c = Component::new(vec![1.0, -2.0], &[2.0, 0.8, 0.8, 1.0], 12.0).unwrap();
        let n = 40_000;
        let drawn = Mixture::single(c).draw(n, 5, Purpose::Trial, 1);
        let inflate: f64 = 12.0 / 10.0;
        let x = drawn.points.coordinate(0);
        let y = drawn.points.coordinate(1);
        let mean = x.iter().sum::<f64>() / n as f64;
        assert!((mean - 1.0).abs() < 4.5 * (2.0 * inflate / n as f64).sqrt(), "mean {mean}");
        let covariance = x.iter().zip(&y).map(|(a, b)| (a - 1.0) * (b + 2.0)).sum::<f64>() / n as f64;
        assert!((covariance - 0.8 * inflate).abs() < 4.5 * 2.6 / (n as f64).sqrt(), "covariance {covariance}");
    }

    #[test]
    fn a_point_infinitely_far_has_no_density_and_no_nan() {
        let mixture = Mixture::single(one(0.0, 1.0, f64::INFINITY));
        assert_eq!(mixture.log_density(&Points::from_rows(1, &[1e200]))[0], f64::NEG_INFINITY);
    }

    #[test]
    fn shares_are_checked() {
        assert!(matches!(Mixture::new(&[f64::NAN], vec![one(0.0, 1.0, 1.0)]), Err(ProposalError::Shares { .. })));
        assert!(matches!(Mixture::new(&[], vec![]), Err(ProposalError::Shares { .. })));
        let kept = Mixture::new(&[0.0, 1.0], vec![one(0.0, 1.0, 1.0), one(1.0, 1.0, 1.0)]).unwrap();
        assert_eq!(kept.len(), 1);
    }
}
