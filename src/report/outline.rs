//! Outlines of components: where a component is one standard deviation from its centre, for a pair of variables.

use super::marginal::Direction;
use crate::figures::variables::Outline;
use crate::numeric::Points;
use crate::numeric::linear::cholesky;
use crate::problem::Problem;
use crate::proposal::Component;
use crate::proposal::Mixture;

/// Corners of an outline.
const CORNERS: usize = 72;
/// Components with a smaller share are not drawn.
const LEAST_SHARE: f64 = 0.005;

/// Outlines at most: more hide the points under them.
const MOST: usize = 8;
/// A centre nearer than this to a larger component's, in squared distance a dimension, with a width within a third: the same again.
const NEAR: f64 = 0.15;
const LIKE_WIDTH: f64 = 0.33;

/// Components of some share, the largest first, that stand apart from larger ones: the last fits joined repeat one another.
pub(super) fn sizeable(mixture: &Mixture) -> Vec<usize> {
    let shares = mixture.shares();
    let mut order: Vec<usize> = (0..mixture.len()).filter(|&k| shares[k] >= LEAST_SHARE).collect();
    order.sort_by(|&a, &b| shares[b].total_cmp(&shares[a]).then(a.cmp(&b)));
    let mut chosen: Vec<usize> = Vec::new();
    for k in order {
        let one = &mixture.components()[k];
        let repeats = |&c: &usize| {
            let other = &mixture.components()[c];
            let width = (one.log_det_factor() - other.log_det_factor()).abs() / mixture.dim() as f64;
            other.distance(one.location()) < NEAR * mixture.dim() as f64 && width < LIKE_WIDTH
        };
        if chosen.len() < MOST && !chosen.iter().any(repeats) {
            chosen.push(k);
        }
    }
    chosen
}

/// The outlines of the components `which`, in natural units.
///
/// With `P` the directions of the two scores and `S` the covariance (the scale where a Student-t has none), the outline
/// is `m + S P' C^-T (cos t, sin t)`, `C C' = P S P'`: on it the pair is one standard deviation from its centre and every other
/// coordinate is where it is expected given the pair.
pub(super) fn outlines(
    problem: &Problem,
    mixture: &Mixture,
    which: &[usize],
    rows: [(usize, &Direction); 2],
) -> Vec<Outline> {
    which.iter().filter_map(|&k| outline(problem, &mixture.components()[k], k, rows)).collect()
}

fn outline(problem: &Problem, component: &Component, k: usize, rows: [(usize, &Direction); 2]) -> Option<Outline> {
    let d = component.dim();
    let df = component.df();
    let stretch = if df > 2.0 && df.is_finite() { df / (df - 2.0) } else { 1.0 };
    let scale = component.scale();
    let towards = rows.map(|(_, direction)| {
        (0..d).map(|i| (0..d).map(|j| stretch * scale[i * d + j] * direction[j]).sum::<f64>()).collect::<Vec<f64>>()
    });
    let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
    let between = dot(rows[0].1, &towards[1]);
    let pair = [dot(rows[0].1, &towards[0]), between, between, dot(rows[1].1, &towards[1])];
    let factor = cholesky(&pair, 2)?;
    let mut around = Points::new(d);
    // The line closes where it begins.
    for corner in (0..CORNERS).chain([0]) {
        let angle = std::f64::consts::TAU * corner as f64 / CORNERS as f64;
        // C^-T (cos, sin) by back substitution.
        let second = libm::sin(angle) / factor[3];
        let first = (libm::cos(angle) - factor[2] * second) / factor[0];
        let z: Vec<f64> =
            (0..d).map(|i| component.location()[i] + towards[0][i] * first + towards[1][i] * second).collect();
        around.push(&z);
    }
    let natural = problem.to_natural(&around);
    Some(Outline { component: k + 1, x: natural.coordinate(rows[0].0), y: natural.coordinate(rows[1].0) })
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::path::Path;

    /// On natural coordinates the outline is the ellipse `(x - m)' S^-1 (x - m) = 1` of the pair, whatever the other
    /// coordinates.
    #[test]
    fn outlines_are_one_standard_deviation_away() {
        let text = "title = \"Three\"\n[variables]\n\
                    a = { range = [-inf, inf], near = 0.0, spread = 1.0 }\n\
                    b = { range = [-inf, inf], near = 0.0, spread = 1.0 }\n\
                    c = { range = [0.0, inf], near = 1.0, spread = 1.0 }\n\
                    [target]\naim = \"density\"\nlog_density = \"-a^2 - b^2 - c\"\n";
        let problem = Problem::parse(text, "three.toml", Path::new(".")).unwrap();
        let scale = [2.0, 0.5, 0.1, 0.5, 1.0, -0.3, 0.1, -0.3, 0.4];
        let component = Component::new(vec![1.0, -1.0, 0.2], &scale, f64::INFINITY).unwrap();
        let mixture = Mixture::single(component);
        let unit = |j: usize| (0..3).map(|i| f64::from(u8::from(i == j))).collect::<Vec<f64>>();
        let found = outlines(&problem, &mixture, &sizeable(&mixture), [(0, &unit(0)), (1, &unit(1))]);
        let determinant = 2.0 * 1.0 - 0.25;
        for (x, y) in found[0].x.iter().zip(&found[0].y) {
            let (u, v) = (x - 1.0, y + 1.0);
            let distance = (u * u - 2.0 * 0.5 * u * v + 2.0 * v * v) / determinant;
            assert!((distance - 1.0).abs() < 1e-12, "{distance}");
        }
        // Its own copies are not drawn again; one that stands apart is.
        let apart = Component::new(vec![3.0, -1.0, 0.2], &mixture.components()[0].scale(), f64::INFINITY).unwrap();
        let copies = Mixture::union(&[(0.5, &mixture), (0.3, &mixture), (0.2, &Mixture::single(apart))]).unwrap();
        assert_eq!(sizeable(&copies), [0, 2]);
        let with_half_line = outlines(&problem, &mixture, &[0], [(2, &unit(2)), (0, &unit(0))]);
        assert!(with_half_line[0].x.iter().all(|&c| c > 0.0));
        let widest = with_half_line[0].x.iter().copied().fold(0.0, f64::max);
        assert!((widest - libm::exp(0.2 + 0.4_f64.sqrt())).abs() < 0.01 * widest);
    }
}
