//! The point of a few half-spaces that lies nearest to the origin.

use crate::numeric::linear::{cholesky, dot};

/// One half-space `{ u : normal . u <= bound }`, `normal` of unit length.
#[derive(Debug, Clone)]
pub(crate) struct Cut {
    pub(crate) normal: Vec<f64>,
    pub(crate) bound: f64,
}

/// Slack that rounding may leave.
const SLACK: f64 = 1e-9;

/// `argmin |u|^2` subject to all cuts; `None` where they have no point in common (or nearly so).
///
/// The minimum is `u = -sum_i y_i normal_i` with `y >= 0` and `y_i = 0` for cuts that are not tight (Karush-Kuhn-Tucker).
/// With at most a handful of cuts every set of tight ones is tried, smallest first: at most `2^m` systems of `m` equations.
///
/// # Source
/// The least-distance problem of Lawson & Hanson, "Solving Least Squares Problems" (1974), chapter 23; trying the active
/// sets is ours.
pub(crate) fn least_distance(cuts: &[Cut]) -> Option<Vec<f64>> {
    let m = cuts.len();
    let d = cuts.first()?.normal.len();
    let mut sets: Vec<u32> = (0..1_u32 << m).collect();
    sets.sort_by_key(|set| (set.count_ones(), *set));
    sets.into_iter().find_map(|set| {
        let tight: Vec<&Cut> = (0..m).filter(|i| set >> i & 1 == 1).map(|i| &cuts[i]).collect();
        let pull = pulls(&tight)?;
        let mut u = vec![0.0; d];
        for (cut, y) in tight.iter().zip(&pull) {
            for (slot, n) in u.iter_mut().zip(&cut.normal) {
                *slot -= y * n;
            }
        }
        let all_hold = cuts.iter().all(|c| dot(&c.normal, &u) <= c.bound + SLACK * (1.0 + c.bound.abs()));
        (all_hold && pull.iter().all(|&y| y >= -SLACK)).then_some(u)
    })
}

/// Solution of `G y = -bound`, `G` the products of the tight normals; `None` where they depend on each other.
fn pulls(tight: &[&Cut]) -> Option<Vec<f64>> {
    let m = tight.len();
    let mut products = vec![0.0; m * m];
    for i in 0..m {
        for j in 0..m {
            products[i * m + j] = dot(&tight[i].normal, &tight[j].normal);
        }
    }
    let l = cholesky(&products, m)?;
    if (0..m).any(|i| l[i * m + i] < 1e-5) {
        return None;
    }
    let mut y: Vec<f64> = tight.iter().map(|c| -c.bound).collect();
    for i in 0..m {
        let known: f64 = (0..i).map(|k| l[i * m + k] * y[k]).sum();
        y[i] = (y[i] - known) / l[i * m + i];
    }
    for i in (0..m).rev() {
        let known: f64 = (i + 1..m).map(|k| l[k * m + i] * y[k]).sum();
        y[i] = (y[i] - known) / l[i * m + i];
    }
    Some(y)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cut(normal: &[f64], bound: f64) -> Cut {
        Cut { normal: normal.to_vec(), bound }
    }

    /// By hand: one active side, a corner, a redundant cut, no point in common.
    #[test]
    fn small_cases_by_hand() {
        let close =
            |a: Option<Vec<f64>>, b: [f64; 2]| a.is_some_and(|a| a.iter().zip(b).all(|(x, y)| (x - y).abs() < 1e-12));
        assert!(close(least_distance(&[cut(&[-1.0, 0.0], -2.0)]), [2.0, 0.0]));
        assert!(close(least_distance(&[cut(&[-1.0, 0.0], -2.0), cut(&[0.0, -1.0], -1.0)]), [2.0, 1.0]));
        assert!(close(least_distance(&[cut(&[-1.0, 0.0], -2.0), cut(&[0.0, -1.0], 5.0)]), [2.0, 0.0]));
        assert!(close(least_distance(&[cut(&[1.0, 0.0], 3.0)]), [0.0, 0.0]));
        assert!(least_distance(&[cut(&[-1.0, 0.0], -2.0), cut(&[1.0, 0.0], 1.0)]).is_none());
        // The same cut twice: the matrix of products is singular, the single one answers.
        assert!(close(least_distance(&[cut(&[-1.0, 0.0], -2.0), cut(&[-1.0, 0.0], -2.0)]), [2.0, 0.0]));
    }

    /// A corner of six planes in five dimensions. Source: SciPy 1.17.1, `scipy.optimize.minimize(SLSQP)` on the same numbers would need
    /// a tolerance; the conditions of optimality are exact, so they are checked themselves.
    #[test]
    fn the_conditions_of_optimality_hold() {
        let raw: [[f64; 5]; 6] = [
            [-1.0, 0.2, 0.1, 0.0, 0.3],
            [-0.5, -1.0, 0.2, 0.1, 0.0],
            [0.3, -0.2, -1.0, 0.4, 0.1],
            [-0.9, -0.8, 0.1, 0.2, 0.2],
            [0.1, 0.1, 0.1, -1.0, 0.5],
            [-1.0, -1.0, -1.0, -1.0, -1.0],
        ];
        let cuts: Vec<Cut> = raw
            .iter()
            .zip([-1.0, -1.5, -0.5, -2.0, 0.2, -2.5])
            .map(|(n, b)| {
                let norm = dot(n, n).sqrt();
                cut(&n.map(|v| v / norm), b / norm)
            })
            .collect();
        let u = least_distance(&cuts).unwrap();
        assert!(cuts.iter().all(|c| dot(&c.normal, &u) <= c.bound + 1e-9));
        // No feasible step shortens it: random feasible points are farther.
        let norm = dot(&u, &u);
        let mut rng = crate::numeric::stream(3, crate::numeric::Purpose::Trial, 0, 0);
        let mut feasible = 0;
        for _ in 0..20_000 {
            let v: Vec<f64> = u.iter().map(|x| x + 0.3 * crate::numeric::normal::draw(&mut rng)).collect();
            if cuts.iter().all(|c| dot(&c.normal, &v) <= c.bound) {
                feasible += 1;
                assert!(dot(&v, &v) >= norm - 1e-9);
            }
        }
        assert!(feasible > 100, "{feasible}");
    }
}
