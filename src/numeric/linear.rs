//! Small dense matrices, row by row: Cholesky factor, triangular solves, inverse factor, symmetric eigenvectors.
//!
//! Plain loops in a fixed order: the same bits on every machine. Dimensions here are those of a proposal
//! (1 to some hundreds); products over many points are the kernels of `proposal`.

/// Lower Cholesky factor `L` of the symmetric positive definite `d x d` matrix `a` (row by row): `L L' = a`.
///
/// `None` where a pivot is not positive (NaN included): the matrix is not positive definite.
///
/// ```
/// use evenpoise::numeric::linear::cholesky;
/// assert_eq!(cholesky(&[4.0, 2.0, 2.0, 5.0], 2), Some(vec![2.0, 0.0, 1.0, 2.0]));
/// assert_eq!(cholesky(&[1.0, 2.0, 2.0, 1.0], 2), None);
/// ```
#[must_use]
pub fn cholesky(a: &[f64], d: usize) -> Option<Vec<f64>> {
    let mut l = vec![0.0; d * d];
    for i in 0..d {
        for j in 0..=i {
            let mut sum = a[i * d + j];
            for k in 0..j {
                sum -= l[i * d + k] * l[j * d + k];
            }
            if i == j {
                // Written so that NaN fails.
                if !(sum > 0.0 && sum.is_finite()) {
                    return None;
                }
                l[i * d + i] = sum.sqrt();
            } else {
                l[i * d + j] = sum / l[j * d + j];
            }
        }
    }
    Some(l)
}

/// Inverse of the lower triangular `l` (row by row), lower triangular too.
#[must_use]
pub fn invert_lower(l: &[f64], d: usize) -> Vec<f64> {
    let mut inverse = vec![0.0; d * d];
    for j in 0..d {
        inverse[j * d + j] = 1.0 / l[j * d + j];
        for i in j + 1..d {
            let mut sum = 0.0;
            for k in j..i {
                sum -= l[i * d + k] * inverse[k * d + j];
            }
            inverse[i * d + j] = sum / l[i * d + i];
        }
    }
    inverse
}

/// `y = l x` for a lower triangular `l`.
#[must_use]
pub fn lower_times(l: &[f64], x: &[f64]) -> Vec<f64> {
    let d = x.len();
    (0..d).map(|i| (0..=i).map(|k| l[i * d + k] * x[k]).sum()).collect()
}

/// `y = a x` for a square `a` (row by row).
#[must_use]
pub fn times(a: &[f64], x: &[f64]) -> Vec<f64> {
    let d = x.len();
    (0..d).map(|i| dot(&a[i * d..(i + 1) * d], x)).collect()
}

/// Scalar product, summed from the left.
#[must_use]
pub fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut sum = 0.0;
    for (x, y) in a.iter().zip(b) {
        sum += x * y;
    }
    sum
}

/// Eigenvalues (ascending) and eigenvectors of a symmetric matrix.
#[derive(Debug, Clone)]
pub struct Eigen {
    /// Eigenvalues, ascending.
    pub values: Vec<f64>,
    /// Eigenvector `j` is `vectors[j]`, of unit length.
    pub vectors: Vec<Vec<f64>>,
}

/// Eigenvalues and eigenvectors of the symmetric `d x d` matrix `a` (row by row). `None` where an entry is not finite
/// or the iteration does not end.
#[must_use]
pub fn eigen(a: &[f64], d: usize) -> Option<Eigen> {
    if a.iter().any(|v| !v.is_finite()) {
        return None;
    }
    let matrix = nalgebra::DMatrix::from_row_slice(d, d, a);
    let found = nalgebra::SymmetricEigen::try_new(matrix, 1e-15, 200 * d.max(10))?;
    let mut order: Vec<usize> = (0..d).collect();
    order.sort_by(|&i, &j| found.eigenvalues[i].total_cmp(&found.eigenvalues[j]));
    Some(Eigen {
        values: order.iter().map(|&i| found.eigenvalues[i]).collect(),
        vectors: order.iter().map(|&i| found.eigenvectors.column(i).iter().copied().collect()).collect(),
    })
}

/// `sum_j values[j] v_j v_j'`, the matrix with these eigenvectors, row by row.
#[must_use]
pub fn compose(vectors: &[Vec<f64>], values: &[f64]) -> Vec<f64> {
    let d = vectors.len();
    let mut a = vec![0.0; d * d];
    for (v, &value) in vectors.iter().zip(values) {
        for i in 0..d {
            let scaled = value * v[i];
            for j in 0..d {
                a[i * d + j] += scaled * v[j];
            }
        }
    }
    a
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn factor_inverse_and_eigenvectors_agree() {
        let a = [4.0, 1.0, 0.5, 1.0, 3.0, -0.2, 0.5, -0.2, 2.0];
        let l = cholesky(&a, 3).unwrap();
        let inverse = invert_lower(&l, 3);
        let e1 = lower_times(&inverse, &lower_times(&l, &[1.0, 2.0, 3.0]));
        assert!((e1[2] - 3.0).abs() < 1e-14);
        let e = eigen(&a, 3).unwrap();
        let back = compose(&e.vectors, &e.values);
        for (x, y) in a.iter().zip(&back) {
            assert!((x - y).abs() < 1e-13);
        }
        assert!(cholesky(&[f64::NAN], 1).is_none() && eigen(&[f64::NAN], 1).is_none());
    }
}
