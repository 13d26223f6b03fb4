//! Which variables depend on each other most, seen through weighted draws.

use super::columns::clean;
use super::columns::positions;

/// Bins of equal weight for each variable.
const BINS: usize = 8;

/// For each variable the others by falling dependence, at most `most` of them.
///
/// # Shapes
/// `columns` holds a slice of values for each variable, all as long as `weights`.
///
/// ```
/// use evenpoise::figures::dependence::strongest_partners;
/// let x: Vec<f64> = (0..400).map(|i| f64::from(i % 20)).collect();
/// let y: Vec<f64> = (0..400).map(|i| f64::from(i / 20)).collect();
/// let parabola: Vec<f64> = x.iter().map(|x| (x - 9.5) * (x - 9.5)).collect();
/// let partners = strongest_partners(&[&x, &y, &parabola], &[1.0; 400], 1);
/// assert_eq!(partners, vec![vec![2], vec![0], vec![0]]);
/// ```
#[must_use]
pub fn strongest_partners(columns: &[&[f64]], weights: &[f64], most: usize) -> Vec<Vec<usize>> {
    let weights = clean(weights);
    let bins: Vec<Vec<usize>> = columns.iter().map(|values| bins(values, &weights)).collect();
    let d = columns.len();
    let mut information = vec![0.0; d * d];
    for (i, j) in (0..d).flat_map(|i| (0..i).map(move |j| (i, j))) {
        information[i * d + j] = mutual_information(&bins[i], &bins[j], &weights);
        information[j * d + i] = information[i * d + j];
    }
    (0..d)
        .map(|i| {
            let mut others: Vec<usize> = (0..d).filter(|&j| j != i).collect();
            others.sort_by(|&a, &b| information[i * d + b].total_cmp(&information[i * d + a]).then(a.cmp(&b)));
            others.truncate(most);
            others
        })
        .collect()
}

/// The bin of every draw; `BINS` for a draw without weight or value.
fn bins(values: &[f64], weights: &[f64]) -> Vec<usize> {
    let bin = |position: f64| ((position * BINS as f64) as usize).min(BINS - 1);
    positions(values, weights).into_iter().map(|p| if p.is_nan() { BINS } else { bin(p) }).collect()
}

/// Mutual information `sum p_ij ln(p_ij / (p_i p_j))` of two binned variables, in nats.
///
/// It sees dependence of any form, a parabola as well as a line. Binned samples overstate it, all pairs alike (by
/// about `(bins - 1)^2 / (2 ess)`), which leaves the order of pairs as it is.
fn mutual_information(a: &[usize], b: &[usize], weights: &[f64]) -> f64 {
    let mut joint = [[0.0; BINS]; BINS];
    let mut total = 0.0;
    for ((&i, &j), &weight) in a.iter().zip(b).zip(weights) {
        if i < BINS && j < BINS {
            joint[i][j] += weight;
            total += weight;
        }
    }
    let rows: Vec<f64> = joint.iter().map(|row| row.iter().sum()).collect();
    let columns: Vec<f64> = (0..BINS).map(|j| joint.iter().map(|row| row[j]).sum()).collect();
    let mut information = 0.0;
    for (i, j) in (0..BINS).flat_map(|i| (0..BINS).map(move |j| (i, j))) {
        if joint[i][j] > 0.0 {
            information += joint[i][j] / total * crate::numeric::ln(joint[i][j] * total / (rows[i] * columns[j]));
        }
    }
    information
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A variable and itself: `ln 8` for eight filled bins; independent ones: zero (full factorial design).
    #[test]
    fn information_of_known_pairs() {
        let x: Vec<f64> = (0..4096).map(|i| f64::from(i % 64)).collect();
        let y: Vec<f64> = (0..4096).map(|i| f64::from(i / 64)).collect();
        let weights = vec![0.5; 4096];
        let (a, b) = (bins(&x, &weights), bins(&y, &weights));
        assert!((mutual_information(&a, &a, &weights) - 8.0_f64.ln()).abs() < 1e-12);
        assert!(mutual_information(&a, &b, &weights).abs() < 1e-12);
    }

    #[test]
    fn weight_decides_and_missing_values_do_not() {
        let x = [1.0, 2.0, 3.0, 4.0, f64::NAN, 9.0];
        let y = [4.0, 3.0, 2.0, 1.0, 1.0, 2.0];
        let z = [1.0, 1.0, 1.0, 1.0, 1.0, 1.0];
        let weights = [1.0, 1.0, 1.0, 1.0, 1.0, 0.0];
        assert_eq!(strongest_partners(&[&x, &y, &z], &weights, 2), vec![vec![1, 2], vec![0, 2], vec![0, 1]]);
        assert_eq!(strongest_partners(&[&x], &weights, 2), vec![Vec::<usize>::new()]);
        assert!(strongest_partners(&[], &[], 2).is_empty());
    }
}
