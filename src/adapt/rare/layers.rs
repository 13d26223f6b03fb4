//! The layers of every proposal: the fitted mixture, and what keeps its weights bounded where it is wrong.

use super::directed::{Directed, Part, scaled_identity};
use super::plan::Plan;
use crate::numeric::{Points, ln};
use crate::proposal::ProposalError;

/// Share of the wide scouts.
const WIDE: f64 = 0.04;
/// Share of the unit copies: unit covariance at the components' means. With one at the design point the weight over a half-space
/// is bounded, so the fitted component may take the small variance along the normal that it wants: relative variance per draw over a
/// half-line at distance 5: unit shift alone 5.68, fitted with 10 % unit .60.
const UNIT: f64 = 0.05;
/// Share of the inflated copies: every fitted component again, its covariance times `INFLATE`. They take the place of
/// heavy tails and follow the directions of each component. With control variates the defence costs little: a quarter at four times the
/// covariance took the bridge network from 3.2 to 2.8 (relative variance times evaluations, 100 seeds) and its heaviest misses with it.
const INFLATED: f64 = 0.25;
const INFLATE: f64 = 4.0;
/// Added to the variances of inflated copies: without it the copies of a strip of width .02 cover nothing where the strip bends.
const INFLATED_FLOOR: f64 = 0.02;
/// Share of the outposts, where there are any; how many, and their variance.
const OUTPOSTS: f64 = 0.04;
const OUTPOSTS_MOST: usize = 4;
const OUTPOST_VARIANCE: f64 = 0.7;
/// A draw whose weight under the new proposal would be above this many times the mean gets an outpost.
const OUTPOST_WEIGHT: f64 = 20.0;
/// The rest's variance is inflated by this, or to one where it is smaller.
const INFLATE_REST: f64 = 1.1;
/// Unit copies nearer than this are one.
const MERGED: f64 = 1.0;
/// Wide scouts' standard deviation in the directions, where only a few are told from the rest.
const WIDE_IN_DIRECTIONS: f64 = 1.5;

/// The layers that do not follow the fit, and the shares.
#[derive(Debug, Clone)]
pub(crate) struct Layers {
    k: usize,
    rest_dim: usize,
    nominal_share: f64,
    nominal: Directed,
    wide: Directed,
    outposts: Vec<Part>,
}

/// Draws that count, met so far.
pub(crate) struct Seen {
    pub(crate) points: Points,
    pub(crate) log_target: Vec<f64>,
    /// `ln (target / pool)`.
    pub(crate) log_weights: Vec<f64>,
    /// Survey draws that no found point explains.
    pub(crate) unexplained: Vec<bool>,
    /// `ln` of the pool's mean weight.
    pub(crate) log_mean: f64,
}

/// Which layer a component of the whole proposal belongs to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Layer {
    Fitted,
    Nominal,
    Defensive,
}

impl Layers {
    pub(crate) fn new(plan: &Plan, k: usize, rest_dim: usize, scouts_sd: f64) -> Result<Self, ProposalError> {
        let sd = if rest_dim > 0 { WIDE_IN_DIRECTIONS } else { scouts_sd };
        Ok(Self {
            k,
            rest_dim,
            nominal_share: plan.nominal,
            nominal: Directed::central(k, rest_dim, 1.0, 1.0)?,
            wide: Directed::central(k, rest_dim, sd * sd, 1.0)?,
            outposts: Vec::new(),
        })
    }

    /// The whole proposal: fitted components first, then nominal, wide, unit copies, inflated copies, outposts.
    pub(crate) fn whole(&self, fitted: &Directed) -> Result<Directed, ProposalError> {
        let rest = 1.0 - self.nominal_share;
        let outposts = if self.outposts.is_empty() { 0.0 } else { OUTPOSTS };
        // Together with a nominal share of .03 the fitted components have .63, with outposts .59.
        let scale = rest.min(0.97) / 0.97;
        let others = WIDE + UNIT + INFLATED + outposts;
        let posted = if self.outposts.is_empty() { None } else { Some(Directed::new(&self.outposts, self.rest_dim)?) };
        Directed::union(&[
            (rest - others * scale, fitted),
            (self.nominal_share, &self.nominal),
            (WIDE * scale, &self.wide),
            (UNIT * scale, &self.unit_copies(fitted)?),
            (INFLATED * scale, &inflated(fitted)?),
            (outposts * scale, posted.as_ref().unwrap_or(&self.nominal)),
        ])
    }

    /// Puts outposts where draws met before would be heavy under the whole proposal around `fitted`: a part of the event that the fit
    /// lacks is then drawn from, and not left to a rare heavy draw. Survey draws that no found point explains come first.
    pub(crate) fn put_outposts(&mut self, fitted: &Directed, seen: &Seen) -> Result<(), ProposalError> {
        self.outposts.clear();
        // Told from the directions alone, heaviness is mostly the rest's: in many dimensions outposts were no help (20 exponentials).
        if self.rest_dim > 0 {
            return Ok(());
        }
        while self.outposts.len() < OUTPOSTS_MOST {
            let log_q = self.whole(fitted)?.log_density(&seen.points);
            let heavy = |i: &usize| seen.log_target[*i] - log_q[*i] > seen.log_mean + ln(OUTPOST_WEIGHT);
            let term = |i: usize| (seen.unexplained[i], seen.log_weights[i] + seen.log_target[i] - log_q[i]);
            let worse = |a: &usize, b: &usize| term(*a).0.cmp(&term(*b).0).then(term(*a).1.total_cmp(&term(*b).1));
            let Some(worst) = (0..seen.points.len()).filter(heavy).max_by(worse) else { break };
            let mean = seen.points.point(worst)[..self.k].to_vec();
            let covariance = scaled_identity(self.k, OUTPOST_VARIANCE);
            self.outposts.push(Part { mass: 1.0, mean, covariance, rest: 1.0 });
        }
        Ok(())
    }

    /// The layers that follow the fit: fitted components with their unit and inflated copies, and outposts.
    pub(crate) fn following(&self, fitted: &Directed) -> Result<Directed, ProposalError> {
        let (unit, inflated) = (self.unit_copies(fitted)?, inflated(fitted)?);
        if self.outposts.is_empty() {
            return Directed::union(&[(1.0 - UNIT - INFLATED, fitted), (UNIT, &unit), (INFLATED, &inflated)]);
        }
        let outposts = Directed::new(&self.outposts, self.rest_dim)?;
        let own = 1.0 - UNIT - INFLATED - OUTPOSTS;
        Directed::union(&[(own, fitted), (UNIT, &unit), (INFLATED, &inflated), (OUTPOSTS, &outposts)])
    }

    /// The layer of component `i` of the whole proposal around `fitted` components.
    pub(crate) fn layer_of(&self, i: usize, fitted: usize) -> Layer {
        let nominal = usize::from(self.nominal_share > 0.0);
        if i < fitted {
            Layer::Fitted
        } else if i < fitted + nominal {
            Layer::Nominal
        } else {
            Layer::Defensive
        }
    }

    /// Unit covariance at the components' means, the heaviest first, near ones merged.
    fn unit_copies(&self, fitted: &Directed) -> Result<Directed, ProposalError> {
        let mut parts = fitted.parts();
        parts.sort_by(|a, b| b.mass.total_cmp(&a.mass));
        let mut kept: Vec<Part> = Vec::new();
        for part in parts {
            let near = kept.iter_mut().find(|other| squared_distance(&other.mean, &part.mean) < MERGED * MERGED);
            match near {
                Some(other) => other.mass += part.mass,
                None => kept.push(part),
            }
        }
        for part in &mut kept {
            // Light components too get a copy that is drawn from.
            part.mass += 0.02;
            part.covariance = scaled_identity(self.k, 1.0);
            part.rest = 1.0;
        }
        Directed::new(&kept, self.rest_dim)
    }
}

fn inflated(fitted: &Directed) -> Result<Directed, ProposalError> {
    let mut parts = fitted.parts();
    for part in &mut parts {
        let k = part.mean.len();
        part.covariance.iter_mut().for_each(|v| *v *= INFLATE);
        (0..k).for_each(|i| part.covariance[i * k + i] += INFLATED_FLOOR);
        part.rest = (part.rest * INFLATE_REST).min(part.rest.max(1.0));
    }
    Directed::new(&parts, fitted.rest_dim())
}

pub(crate) fn squared_distance(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| (x - y) * (x - y)).sum()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::adapt::Settings;
    use crate::numeric::normal;

    #[test]
    fn shares_and_order_are_as_said() {
        let plan = Plan::new(&Settings::new(5000, 1), 2).unwrap();
        let layers = Layers::new(&plan, 2, 0, 3.0).unwrap();
        let part =
            |x: f64, mass: f64| Part { mass, mean: vec![x, 0.0], covariance: vec![0.1, 0.0, 0.0, 1.0], rest: 1.0 };
        let fitted = Directed::new(&[part(2.0, 0.3), part(2.5, 0.5), part(-3.0, 0.2)], 0).unwrap();
        let whole = layers.whole(&fitted).unwrap();
        // Three fitted, nominal, wide, two unit copies (two means are within 1), three inflated.
        assert_eq!(whole.len(), 10);
        let shares = whole.mixture().shares();
        assert!((shares[..3].iter().sum::<f64>() - 0.63).abs() < 1e-12 && (shares[3] - 0.03).abs() < 1e-12);
        assert!((shares[7..].iter().sum::<f64>() - 0.25).abs() < 1e-12);
        assert_eq!(whole.mixture().components()[5].location(), &[2.5, 0.0]);
        assert_eq!([2, 3, 4].map(|i| layers.layer_of(i, 3)), [Layer::Fitted, Layer::Nominal, Layer::Defensive]);
    }

    /// A draw far from the fit that would be heavy under it gets an outpost (more than one while it stays heavy); one that is covered gets
    /// none.
    #[test]
    fn heavy_draws_get_outposts() {
        let plan = Plan::new(&Settings::new(5000, 1), 2).unwrap();
        let mut layers = Layers::new(&plan, 2, 0, 3.0).unwrap();
        let part = Part { mass: 1.0, mean: vec![3.0, 0.0], covariance: vec![0.1, 0.0, 0.0, 1.0], rest: 1.0 };
        let fitted = Directed::new(&[part], 0).unwrap();
        let points = Points::from_rows(2, &[3.2, 0.1, 3.5, 0.5, -3.2, 0.3]);
        let log_target: Vec<f64> =
            (0..3).map(|i| points.point(i).iter().map(|&u| normal::log_density(u)).sum()).collect();
        let before = layers.whole(&fitted).unwrap().log_density(&points);
        let seen = Seen {
            points: points.clone(),
            log_target,
            log_weights: vec![0.0; 3],
            unexplained: vec![false; 3],
            log_mean: normal::log_upper_tail(3.0),
        };
        layers.put_outposts(&fitted, &seen).unwrap();
        let after = layers.whole(&fitted).unwrap();
        let posts = &after.mixture().components()[5..];
        assert!(!posts.is_empty() && posts.iter().all(|c| c.location() == [-3.2, 0.3]));
        let after = after.log_density(&points);
        assert!(after[2] > before[2] + 1.0 && after[0] > before[0] - 0.15);
    }
}
