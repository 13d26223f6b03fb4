//! Shares of components or layers by minimising the predicted weight variance, which is convex in them.

use crate::numeric::exp;

/// Shares `a` that minimise `sum_i w_i t_i / q_i(a)`, `q_i(a) = sum_g a_g f_g(x_i)`, the second moment of the weights as predicted
/// from pooled points; every share at least its floor.
///
/// # Shapes
/// `log_densities[g][i] = ln f_g(x_i)`; `weights` (`w = t / mixture`, any scale) and `log_target` have one entry a point.
///
/// Multiplicative steps `a_g <- a_g sqrt(gradient_g)`: with floors of zero the objective never rises (an EM for the measure `w t / q`; the
/// square root is its damped form). Source of the convexity: He & Owen, "Optimal mixture weights in multiple importance sampling",
/// arXiv 1411.3954 (2014), section 3. The step is ours.
#[must_use]
pub fn minimise_variance(
    log_densities: &[Vec<f64>],
    weights: &[f64],
    log_target: &[f64],
    start: &[f64],
    floors: &[f64],
    iterations: usize,
) -> Vec<f64> {
    let (groups, n) = (log_densities.len(), weights.len());
    let mut shares = normalised(start, floors);
    // Relative to the largest group at each point: targets of any log scale stay in range.
    let live: Vec<usize> = (0..n).filter(|&i| weights[i] > 0.0 && log_target[i] > f64::NEG_INFINITY).collect();
    let mut ratios = Vec::with_capacity(live.len());
    let mut largest = f64::NEG_INFINITY;
    let tops: Vec<f64> =
        live.iter().map(|&i| (0..groups).map(|g| log_densities[g][i]).fold(f64::NEG_INFINITY, f64::max)).collect();
    for (&i, &top) in live.iter().zip(&tops) {
        largest = largest.max(log_target[i] - top);
    }
    for (&i, &top) in live.iter().zip(&tops) {
        ratios.push(weights[i] * exp(log_target[i] - top - largest));
    }
    let columns: Vec<Vec<f64>> = log_densities
        .iter()
        .map(|column| live.iter().zip(&tops).map(|(&i, &top)| exp(column[i] - top)).collect())
        .collect();
    for _ in 0..iterations {
        let mut q = vec![0.0; live.len()];
        for (column, &a) in columns.iter().zip(&shares) {
            for (sum, f) in q.iter_mut().zip(column) {
                *sum += a * f;
            }
        }
        let v: Vec<f64> = ratios.iter().zip(&q).map(|(r, q)| r / q).collect();
        let total: f64 = v.iter().sum();
        if !(total > 0.0 && total.is_finite()) {
            break;
        }
        let pulls: Vec<f64> = v.iter().zip(&q).map(|(v, q)| v / q).collect();
        let moved: Vec<f64> = columns
            .iter()
            .zip(&shares)
            .map(|(column, &a)| {
                let mut gradient = 0.0;
                for (f, p) in column.iter().zip(&pulls) {
                    gradient += f * p;
                }
                a * (gradient / total).sqrt()
            })
            .collect();
        let moved = normalised(&moved, floors);
        let change = moved.iter().zip(&shares).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        shares = moved;
        if change < 1e-4 {
            break;
        }
    }
    shares
}

/// Raised to the floors and made to sum to one, the excess taken from the shares above their floors.
fn normalised(shares: &[f64], floors: &[f64]) -> Vec<f64> {
    let sum: f64 = shares.iter().sum();
    let mut out: Vec<f64> = shares.iter().zip(floors).map(|(a, f)| (a / sum).max(*f)).collect();
    let sum: f64 = out.iter().sum();
    let spare: f64 = out.iter().zip(floors).map(|(a, f)| a - f).sum();
    if spare > 0.0 {
        let cut = (sum - 1.0) / spare;
        for (a, f) in out.iter_mut().zip(floors) {
            *a -= cut * (*a - f);
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::{Points, Purpose};
    use crate::proposal::{Component, Mixture};

    /// A target that is itself `0.2 f_1 + 0.8 f_2`: the variance is zero at these shares, so they must come out
    /// (to the accuracy that the stopping rule of 1e-4 a step leaves), whatever the scale of the log target.
    #[test]
    fn shares_of_the_target_itself_are_found() {
        let a = Component::new(vec![-2.0], &[1.0], f64::INFINITY).unwrap();
        let b = Component::new(vec![2.0], &[1.0], f64::INFINITY).unwrap();
        let target = Mixture::new(&[0.2, 0.8], vec![a, b]).unwrap();
        let drawn = Mixture::new(&[0.5, 0.5], target.components().to_vec()).unwrap();
        let points: Points = drawn.draw(4000, 1, Purpose::Trial, 0).points;
        let columns = target.component_log_densities(&points);
        for shift in [0.0, 5000.0, -5000.0] {
            let log_target: Vec<f64> = target.log_density(&points).iter().map(|l| l + shift).collect();
            let weights: Vec<f64> =
                log_target.iter().zip(drawn.log_density(&points)).map(|(t, q)| exp(t - q - shift)).collect();
            let shares = minimise_variance(&columns, &weights, &log_target, &[0.5, 0.5], &[0.01, 0.01], 200);
            assert!((shares[0] - 0.2).abs() < 0.01, "{shares:?}");
        }
    }

    #[test]
    fn floors_are_kept() {
        let shares = normalised(&[1.0, 0.0, 0.0], &[0.0, 0.1, 0.05]);
        assert!((shares.iter().sum::<f64>() - 1.0).abs() < 1e-15);
        assert!(shares[1] >= 0.1 - 1e-15 && shares[2] >= 0.05 - 1e-15);
    }
}
