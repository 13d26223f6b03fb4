//! Numerical integration over an interval.

/// Nodes and weights of the Gauss-Legendre rule of 20 points on `[-1, 1]`, one half of them: `(node, weight)`.
///
/// Source: mpmath 1.3.0 at 40 digits, roots `x` of `legendre(20, x)` and `2/((1 - x^2) P'(x)^2)`.
const GAUSS_LEGENDRE_20: [(f64, f64); 10] = [
    (0.076526521133497333755, 0.1527533871307258507),
    (0.22778585114164507808, 0.14917298647260374679),
    (0.37370608871541956067, 0.14209610931838205133),
    (0.510867001950827098, 0.1316886384491766269),
    (0.63605368072651502545, 0.11819453196151841731),
    (0.74633190646015079261, 0.10193011981724043504),
    (0.83911697182221882339, 0.083276741576704748725),
    (0.91223442825132590587, 0.06267204833410906357),
    (0.96397192727791379127, 0.040601429800386941331),
    (0.99312859918509492479, 0.017614007139152118312),
];

/// The points of the Gauss-Legendre rule of 20 points on `[low, high]` with their weights, in a fixed order: exact for
/// polynomials up to degree 39 (Abramowitz & Stegun 25.4.30).
///
/// ```
/// use evenpoise::numeric::quadrature::gauss_legendre;
/// let integral: f64 = gauss_legendre(0.0, 2.0).map(|(x, weight)| weight * x * x).sum();
/// assert!((integral - 8.0 / 3.0).abs() < 1e-14);
/// ```
pub fn gauss_legendre(low: f64, high: f64) -> impl Iterator<Item = (f64, f64)> {
    let (centre, half) = (0.5 * (low + high), 0.5 * (high - low));
    GAUSS_LEGENDRE_20
        .into_iter()
        .flat_map(move |(node, weight)| [(centre - half * node, half * weight), (centre + half * node, half * weight)])
}

/// [`gauss_legendre`] on `panels` equal parts of `[low, high]`.
pub fn composite(low: f64, high: f64, panels: u32) -> impl Iterator<Item = (f64, f64)> {
    let width = (high - low) / f64::from(panels);
    (0..panels).flat_map(move |k| gauss_legendre(low + width * f64::from(k), low + width * f64::from(k + 1)))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The rule is exact up to degree 39 and no further; by symmetry odd powers vanish.
    #[test]
    fn the_degree_is_39() {
        for degree in [0, 1, 2, 19, 38, 39] {
            let got: f64 = gauss_legendre(-1.0, 1.0).map(|(x, weight)| weight * x.powi(degree)).sum();
            let want = if degree % 2 == 1 { 0.0 } else { 2.0 / f64::from(degree + 1) };
            assert!((got - want).abs() < 2e-15, "degree {degree}: {got}");
        }
        let got: f64 = gauss_legendre(-1.0, 1.0).map(|(x, weight)| weight * x.powi(40)).sum();
        assert!((got - 2.0 / 41.0).abs() > 1e-12);
        let exponential: f64 = composite(0.0, 30.0, 10).map(|(x, weight)| weight * libm::exp(-x)).sum();
        assert!((exponential - 1.0).abs() < 1e-12);
    }
}
