//! Control variates: what the proposal's own components say about the luck of a round's draws.

use super::planes::Control;
use crate::numeric::linear::cholesky;
use crate::weights::{Strata, StratifiedMean};

/// Folds in which coefficients and draws are kept apart.
const FOLDS: usize = 5;
/// Draws and draws that count, for every control, below which none is used.
const DRAWS_PER_CONTROL: usize = 10;
const HITS_PER_CONTROL: usize = 2;
/// Draws for every control beyond the needed ones.
const DRAWS_PER_EXTRA: usize = 30;
/// Effective draws that must carry a control, and standard errors that its mean may be off.
const COVERED_DRAWS: f64 = 30.0;
const COVERED_ERRORS: f64 = 4.5;
/// Ridge as a share of a control's own sum of squares: the controls sum to one, so their matrix is singular without.
const RIDGE: f64 = 1e-3;
/// And in squares of the control's largest value: a control that rests on a few large values (a half-space that few draws entered) must
/// not be believed.
const RIDGE_LARGEST: f64 = 0.1;
/// A component with fewer draws makes no stratum of its own when coefficients are sought.
const STRATUM: usize = 8;

/// How far the controls are believed: coefficients are shrunk to this, so that a small part of the plain error stays both in the value
/// and in what is claimed. Believed wholly, an event that is a half-space would claim no error at all, and rounds whose few stray draws
/// happen to agree would disagree with each other beyond all measure.
const BELIEVED: f64 = 0.94;

/// Terms with control variates, and their mean.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Controlled {
    pub(crate) terms: Vec<f64>,
    pub(crate) mean: StratifiedMean,
}

/// The terms `z_i` less `sum_k b_k (c_ik - mean_k)`, where control `k` has a known mean over the proposal, so that the mean of the
/// terms stays what it is.
///
/// The coefficients minimise the variance within strata and come, for every fifth of the draws, from the other four: a draw never
/// sets the coefficients that correct it, so the mean keeps no bias beyond the rounding of the strata's sizes. The first `needed`
/// controls are used together or not at all, after the others, which are used as far as the draws go; with too few draws, or draws that
/// count, the terms come back as they are.
///
/// # Shapes
/// `labels[i]` is the component of draw `i`, in ascending order.
///
/// # Source
/// Owen & Zhou, J. Am. Stat. Assoc. 95 (2000) 135-143; the folds and the ridge are ours.
pub(crate) fn controlled(
    terms: &[f64],
    labels: &[u32],
    shares: &[f64],
    controls: &[Control],
    needed: usize,
) -> Controlled {
    let n = terms.len();
    let hits = terms.iter().filter(|z| **z != 0.0).count();
    let room = (n / DRAWS_PER_CONTROL).min(hits / HITS_PER_CONTROL);
    let (own, others) = controls.split_at(needed.min(controls.len()));
    // What resembles the event first: it explains most.
    let alike: Vec<&Control> = others.iter().filter(|c| covered(c)).take((n / DRAWS_PER_EXTRA).min(room)).collect();
    let own = if room - alike.len() < needed { &[] } else { own };
    let used: Vec<&Control> = own.iter().chain(alike).collect();
    let p = used.len();
    if p == 0 {
        return Controlled { terms: terms.to_vec(), mean: Strata::new(labels).mean(terms) };
    }
    let largest = |values: &[f64]| values.iter().fold(0.0_f64, |a, v| a.max(v.abs()));
    let unit = largest(terms);
    let units: Vec<f64> = used.iter().map(|c| largest(&c.values).max(f64::MIN_POSITIVE)).collect();
    let (strata, factors) = strata(labels, shares);
    let n_strata = factors.len();
    let mut folds: Vec<Sums> = (0..FOLDS).map(|_| Sums::new(p, n_strata)).collect();
    let mut row = vec![0.0; p + 1];
    for i in 0..n {
        for (k, control) in used.iter().enumerate() {
            row[k] = control.values[i] / units[k];
        }
        row[p] = terms[i] / unit;
        folds[i % FOLDS].add(&row, strata[i]);
    }
    let mut all = Sums::new(p, n_strata);
    folds.iter().for_each(|fold| all.combine(fold, 1.0));
    let coefficients: Vec<Option<Vec<f64>>> = folds
        .iter()
        .map(|fold| {
            let mut others = all.clone();
            others.combine(fold, -1.0);
            others.coefficients()
        })
        .collect();
    let corrected: Vec<f64> = (0..n)
        .map(|i| {
            let factor = factors[strata[i]];
            let Some(b) = &coefficients[i % FOLDS] else { return factor * terms[i] };
            let of =
                |value: &dyn Fn(&Control) -> f64| -> f64 { (0..p).map(|k| b[k] * (value(used[k]) / units[k])).sum() };
            factor * (terms[i] - BELIEVED * unit * of(&|c| c.values[i])) + BELIEVED * unit * of(&|c| c.mean)
        })
        .collect();
    let StratifiedMean { mean, se } = Strata::new(labels).mean(&corrected);
    // The folds' coefficients share draws: their common error shows in no fold's spread.
    let variance = se * se * (1.0 + p as f64 / n as f64);
    Controlled { terms: corrected, mean: StratifiedMean { mean, se: variance.sqrt() } }
}

/// Whether the draws cover a control: enough of them carry it, and their mean is the known one within its error. A half-space that
/// the proposal does not reach fails here; believing it would carry its missing part into the answer.
fn covered(control: &Control) -> bool {
    let n = control.values.len() as f64;
    let unit = control.values.iter().fold(0.0_f64, |a, v| a.max(v.abs()));
    if unit == 0.0 {
        return false;
    }
    let (mut sum, mut sizes, mut squares) = (0.0, 0.0, 0.0);
    for v in &control.values {
        sum += v / unit;
        sizes += v.abs() / unit;
        squares += (v / unit) * (v / unit);
    }
    let mean = sum / n;
    let se = ((squares / n - mean * mean).max(0.0) / n).sqrt();
    sizes * sizes >= COVERED_DRAWS * squares && (mean - control.mean / unit).abs() <= COVERED_ERRORS * se
}

/// The stratum of every draw (its component; light components together in the last one), and the factor `share n / n_s` of every
/// stratum: whole numbers of draws are not quite the shares, and beside well controlled terms that would show.
fn strata(labels: &[u32], shares: &[f64]) -> (Vec<usize>, Vec<f64>) {
    let mut counts = vec![0_usize; shares.len()];
    labels.iter().for_each(|&l| counts[l as usize] += 1);
    let big: Vec<usize> = (0..shares.len()).filter(|&l| counts[l] >= STRATUM).collect();
    let mut of_label = vec![big.len(); shares.len()];
    big.iter().enumerate().for_each(|(s, &l)| of_label[l] = s);
    let (mut share, mut draws) = (vec![0.0; big.len() + 1], vec![0.0; big.len() + 1]);
    for (label, &stratum) in of_label.iter().enumerate() {
        share[stratum] += shares[label];
        draws[stratum] += counts[label] as f64;
    }
    // Components so light that none was drawn have no stratum; theirs is spread over the others.
    let met: f64 = share.iter().zip(&draws).filter(|(_, d)| **d > 0.0).map(|(s, _)| s).sum();
    let n = labels.len() as f64;
    let factors = share.iter().zip(&draws).map(|(s, &d)| if d > 0.0 { s / met * n / d } else { 0.0 }).collect();
    (labels.iter().map(|&l| of_label[l as usize]).collect(), factors)
}

/// Sums of products of the controls and the term, and of each within its stratum.
#[derive(Debug, Clone)]
struct Sums {
    width: usize,
    products: Vec<f64>,
    of_stratum: Vec<Vec<f64>>,
    counts: Vec<f64>,
}

impl Sums {
    fn new(p: usize, n_strata: usize) -> Self {
        let width = p + 1;
        Self {
            width,
            products: vec![0.0; width * width],
            of_stratum: vec![vec![0.0; width]; n_strata],
            counts: vec![0.0; n_strata],
        }
    }

    fn add(&mut self, row: &[f64], stratum: usize) {
        for (a, x) in row.iter().enumerate() {
            for (b, y) in row[..=a].iter().enumerate() {
                self.products[a * self.width + b] += x * y;
            }
        }
        self.of_stratum[stratum].iter_mut().zip(row).for_each(|(s, x)| *s += x);
        self.counts[stratum] += 1.0;
    }

    fn combine(&mut self, other: &Self, sign: f64) {
        self.products.iter_mut().zip(&other.products).for_each(|(a, b)| *a += sign * b);
        self.counts.iter_mut().zip(&other.counts).for_each(|(a, b)| *a += sign * b);
        for (mine, theirs) in self.of_stratum.iter_mut().zip(&other.of_stratum) {
            mine.iter_mut().zip(theirs).for_each(|(a, b)| *a += sign * b);
        }
    }

    /// Least-squares coefficients of the term on the controls, all within strata.
    fn coefficients(&self) -> Option<Vec<f64>> {
        let (w, p) = (self.width, self.width - 1);
        let mut centred = self.products.clone();
        for (sums, &count) in self.of_stratum.iter().zip(&self.counts) {
            if count > 0.0 {
                for a in 0..w {
                    for b in 0..=a {
                        centred[a * w + b] -= sums[a] * sums[b] / count;
                    }
                }
            }
        }
        let mut matrix = vec![0.0; p * p];
        for a in 0..p {
            for b in 0..a {
                matrix[a * p + b] = centred[a * w + b];
                matrix[b * p + a] = centred[a * w + b];
            }
            let own = centred[a * w + a].max(0.0);
            matrix[a * p + a] = own + RIDGE * own + RIDGE_LARGEST;
        }
        let l = cholesky(&matrix, p)?;
        let mut b: Vec<f64> = (0..p).map(|a| centred[p * w + a]).collect();
        for i in 0..p {
            let known: f64 = (0..i).map(|k| l[i * p + k] * b[k]).sum();
            b[i] = (b[i] - known) / l[i * p + i];
        }
        for i in (0..p).rev() {
            let known: f64 = (i + 1..p).map(|k| l[k * p + i] * b[k]).sum();
            b[i] = (b[i] - known) / l[i * p + i];
        }
        Some(b)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::{Purpose, normal, stream, uniform};

    /// A term that is a combination of controls has no variance left; in 2,000 repetitions of a noisy one the mean keeps its
    /// expectation (4 standard errors, false alarm 6e-5) and its variance falls by the part that the controls explain.
    #[test]
    fn the_mean_stays_and_the_variance_falls() {
        let (mut plain, mut corrected) = ([0.0; 2], [0.0; 2]);
        let repetitions = 2000;
        for repetition in 0..repetitions {
            let mut rng = stream(5, Purpose::Trial, repetition, 0);
            let n = 100;
            // Two components of share one half each; responsibilities of draw i from either average to one half over both.
            let labels: Vec<u32> = (0..n).map(|i| u32::from(i >= n / 2)).collect();
            let first: Vec<f64> =
                labels.iter().map(|&l| 0.25 + 0.5 * f64::from(1 - l) + 0.4 * (uniform(&mut rng) - 0.5)).collect();
            let second = first.iter().map(|r| 1.0 - r).collect();
            let controls = [first.clone(), second].map(|values| Control { values, mean: 0.5 });
            let terms: Vec<f64> = first.iter().map(|r| 3.0 + 2.0 * r + 0.1 * normal::draw(&mut rng)).collect();
            let better = controlled(&terms, &labels, &[0.5, 0.5], &controls, 2).terms;
            for (sums, values) in [(&mut plain, &terms), (&mut corrected, &better)] {
                let mean = values.iter().sum::<f64>() / f64::from(n);
                sums[0] += mean;
                sums[1] += mean * mean;
            }
        }
        let n = f64::from(repetitions);
        let moments = |s: [f64; 2]| (s[0] / n, s[1] / n - (s[0] / n) * (s[0] / n));
        let ((_, before), (mean, after)) = (moments(plain), moments(corrected));
        assert!((mean - 4.0).abs() < 4.0 * (after / n).sqrt(), "{mean}");
        // Within strata: 4 x .4^2/12 = .0533 beside .01 of noise.
        assert!(after < 0.25 * before, "{after} {before}");
    }

    #[test]
    fn few_draws_are_left_alone() {
        let controls = vec![Control { values: vec![0.5; 10], mean: 0.5 }; 3];
        assert_eq!(controlled(&[1.0; 10], &[0; 10], &[1.0], &controls, 3).terms, vec![1.0; 10]);
    }
}
