//! The marginal distribution of one variable: a histogram of weighted draws and the proposal's density.

use std::f64::consts::LN_10;

use super::VariableRow;
use crate::figures::Style;
use crate::figures::axis::Scale;
use crate::figures::canvas::Canvas;
use crate::figures::canvas::Pen;
use crate::figures::colour::MEASURED;
use crate::figures::colour::MEASURED_TINT;
use crate::figures::colour::MODELLED;
use crate::figures::columns::VariableColumn;
use crate::figures::numbers::log10;
use crate::figures::panel::Panel;

/// Fewest and most bins.
const BINS: (f64, f64) = (8.0, 40.0);

/// Histogram and curve, both as densities along the axis: per unit, or per decade on a log axis.
pub(super) struct Marginal {
    scale: Scale,
    /// Edges of the bins and the density in each.
    bins: Vec<(f64, f64, f64)>,
    curve: Vec<(f64, f64)>,
}

impl Marginal {
    /// Counts weights into bins over `(low, high)`.
    pub(super) fn new(
        column: &VariableColumn,
        row: &VariableRow,
        weights: &[f64],
        (low, high, scale): (f64, f64, Scale),
    ) -> Self {
        let edges = edges(low, high, scale, weights);
        let mut sums = vec![0.0; edges.len().saturating_sub(1)];
        let total: f64 = column.values.iter().zip(weights).filter(|(v, _)| v.is_finite()).map(|(_, w)| w).sum();
        for (&value, &weight) in column.values.iter().zip(weights) {
            let bin = edges.partition_point(|&edge| edge <= value);
            if weight > 0.0 && (1..edges.len()).contains(&bin) {
                sums[bin - 1] += weight;
            }
        }
        let wide = |from: f64, to: f64| if scale == Scale::Log { log10(to / from) } else { to - from };
        let bins =
            edges.windows(2).zip(sums).map(|(edge, sum)| (edge[0], edge[1], sum / total / wide(edge[0], edge[1])));
        let per = |x: f64| if scale == Scale::Log { x * LN_10 } else { 1.0 };
        let curve = row.proposal_at.iter().zip(&row.proposal_density).map(|(&x, &density)| (x, density * per(x)));
        let curve = curve.filter(|&(x, density)| (low..=high).contains(&x) && density.is_finite()).collect();
        Self { scale, bins: bins.filter(|bin| bin.2.is_finite()).collect(), curve }
    }

    /// The highest density shown.
    pub(super) fn highest(&self) -> f64 {
        let heights = self.bins.iter().map(|bin| bin.2).chain(self.curve.iter().map(|point| point.1));
        let most = heights.fold(0.0, f64::max);
        if most > 0.0 { most } else { 1.0 }
    }

    /// What its vertical axis shows.
    pub(super) fn name(&self) -> &'static str {
        if self.scale == Scale::Whole { "probability" } else { "density" }
    }

    /// The unit of that.
    pub(super) fn unit(&self, column: &VariableColumn) -> Option<String> {
        match (self.scale, column.unit.as_deref().map(str::trim).filter(|unit| !unit.is_empty())) {
            (Scale::Log, _) => Some("per decade".to_owned()),
            (Scale::Linear, Some(unit)) => Some(format!("per {unit}")),
            (Scale::Linear | Scale::Whole, _) => None,
        }
    }

    /// Middle and density of every bin.
    pub(super) fn middles(&self) -> Vec<(f64, f64)> {
        let middle = |from: f64, to: f64| {
            if self.scale == Scale::Log { from.sqrt() * to.sqrt() } else { f64::midpoint(from, to) }
        };
        self.bins.iter().map(|&(from, to, density)| (middle(from, to), density)).collect()
    }

    /// The proposal's density.
    pub(super) fn curve(&self) -> &[(f64, f64)] {
        &self.curve
    }

    /// Draws the histogram as a filled step line and the density as a curve (as dots for whole numbers).
    pub(super) fn draw(&self, canvas: &mut Canvas, style: &Style, panel: &Panel) {
        let steps: Vec<(f64, f64)> =
            self.bins.iter().flat_map(|&(from, to, density)| [(from, density), (to, density)]).collect();
        if let (Some(first), Some(last)) = (steps.first(), steps.last()) {
            let mut corners = vec![panel.spot(first.0, 0.0)];
            corners.extend(steps.iter().map(|&(x, y)| panel.spot(x, y)));
            corners.push(panel.spot(last.0, 0.0));
            for corner in &mut corners {
                corner.0 = corner.0.clamp(panel.area.left, panel.area.right);
            }
            canvas.fill(corners, MEASURED_TINT, 1.0);
            panel.curve(canvas, steps, Pen::solid(MEASURED, 0.6 * style.stroke()));
        }
        if self.scale == Scale::Whole {
            for &(x, density) in &self.curve {
                canvas.ring(panel.spot(x, density), 0.8 * style.marker(), 0.7 * style.stroke(), MODELLED);
            }
        } else {
            panel.curve(canvas, self.curve.iter().copied(), Pen::solid(MODELLED, 0.8 * style.stroke()));
        }
    }
}

/// Edges of bins: around every whole number, or as many as twice the cube root of the effective draws.
fn edges(low: f64, high: f64, scale: Scale, weights: &[f64]) -> Vec<f64> {
    if scale == Scale::Whole {
        let (first, last) = (low.ceil(), high.floor());
        let every = ((last - first + 1.0) / BINS.1).ceil().max(1.0);
        let bins = ((last - first + 1.0) / every).ceil();
        return (0..=bins as u32).map(|i| first - 0.5 + f64::from(i) * every).collect();
    }
    let largest = weights.iter().copied().fold(0.0, f64::max);
    let (sum, squares) =
        weights.iter().fold((0.0, 0.0), |(s, q), w| (s + w / largest, q + w / largest * (w / largest)));
    let bins = (2.0 * libm::cbrt(sum * sum / squares)).clamp(BINS.0, BINS.1).round();
    let bins = if bins.is_finite() { bins } else { BINS.0 };
    (0..=bins as u32)
        .map(|i| {
            let t = f64::from(i) / bins;
            if scale == Scale::Log { low * libm::pow(high / low, t) } else { low + t * (high - low) }
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn column(values: Vec<f64>, discrete: bool) -> VariableColumn {
        VariableColumn { name: "v".into(), label: None, unit: Some("m".into()), values, discrete }
    }

    fn row(at: Vec<f64>, density: Vec<f64>) -> VariableRow {
        VariableRow { variable: 0, proposal_at: at, proposal_density: density, partners: vec![] }
    }

    /// The area under a histogram that covers all draws is one, in the units of its axis.
    #[test]
    fn densities_integrate_to_one() {
        let values: Vec<f64> = (0..999).map(|i| 10.0 + f64::from(i)).collect();
        let weights: Vec<f64> = (0..999).map(|i| 1.0 + f64::from(i % 7)).collect();
        for (scale, want) in [(Scale::Linear, "per m"), (Scale::Log, "per decade")] {
            let column = column(values.clone(), false);
            let marginal = Marginal::new(&column, &row(vec![], vec![]), &weights, (5.0, 2000.0, scale));
            let wide = |from: f64, to: f64| if scale == Scale::Log { log10(to / from) } else { to - from };
            let area: f64 = marginal.bins.iter().map(|&(from, to, density)| density * wide(from, to)).sum();
            assert!((area - 1.0).abs() < 1e-12, "{scale:?} {area}");
            assert_eq!(marginal.unit(&column).as_deref(), Some(want));
        }
    }

    /// A density of `1 / (x ln 10)` is flat, of height one, per decade.
    #[test]
    fn the_curve_follows_the_axis() {
        let at: Vec<f64> = (1..50).map(f64::from).collect();
        let density = at.iter().map(|x| 1.0 / (x * LN_10)).collect();
        let marginal = Marginal::new(&column(vec![1.0], false), &row(at, density), &[1.0], (1.0, 100.0, Scale::Log));
        assert!(marginal.curve().iter().all(|(_, y)| (y - 1.0).abs() < 1e-12));
    }

    #[test]
    fn whole_numbers_get_a_bin_each() {
        let column = column(vec![0.0, 1.0, 1.0, 3.0], true);
        let marginal = Marginal::new(&column, &row(vec![], vec![]), &[1.0; 4], (-0.75, 3.75, Scale::Whole));
        let bins: Vec<(f64, f64)> = marginal.middles();
        assert_eq!(bins, vec![(0.0, 0.25), (1.0, 0.5), (2.0, 0.0), (3.0, 0.25)]);
    }
}
