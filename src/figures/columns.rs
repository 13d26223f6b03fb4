//! Variables as columns of draws, and what several figures ask of them: weighted quantiles, titles that fit.

use super::axis::Axis;
use super::text::Face;
use super::text::shorten;
use super::text::width;
use super::text::wrap;

/// A variable with its value at every draw.
#[derive(Debug, Clone, PartialEq)]
pub struct VariableColumn {
    /// Its name in the problem.
    pub name: String,
    /// What figures call it, if not by its name.
    pub label: Option<String>,
    /// Its unit.
    pub unit: Option<String>,
    /// Values in natural units, one a draw.
    pub values: Vec<f64>,
    /// Whether it takes whole numbers only.
    pub discrete: bool,
}

impl VariableColumn {
    /// What it is called in a figure.
    #[must_use]
    pub fn title(&self) -> &str {
        self.label.as_deref().map(str::trim).filter(|label| !label.is_empty()).unwrap_or(&self.name)
    }
}

/// The title of an axis in at most `lines` lines no wider than `room`. A name that is too long loses letters in its
/// middle; unit, power of ten and offset stay.
#[must_use]
pub fn title_lines(axis: &Axis, name: &str, unit: Option<&str>, room: f64, size: f64, lines: usize) -> Vec<String> {
    let mut name = name.to_owned();
    loop {
        let full = axis.title(&name, unit);
        let wrapped = wrap(&full, room, size, Face::Regular, lines);
        let dots = |text: &str| text.matches('…').count();
        let letters = name.chars().count();
        if letters <= 2 || wrapped.iter().map(|line| dots(line)).sum::<usize>() <= dots(&full) {
            return wrapped;
        }
        // One letter less at a time: what fits into all but the last bit of the present width.
        name = shorten(&name, width(&name, size, Face::Regular) - 0.3 * size, size, Face::Regular).replace("……", "…");
        if name.chars().count() >= letters {
            name = name.chars().take(letters - 1).collect();
        }
    }
}

/// Weights that can be summed: negative ones and those that are not finite count as zero.
#[must_use]
pub fn clean(weights: &[f64]) -> Vec<f64> {
    weights.iter().map(|&w| if w.is_finite() && w > 0.0 { w } else { 0.0 }).collect()
}

/// The draws with weight and a finite value, in rising order of their values (ties in order of draws).
#[must_use]
pub fn rising(values: &[f64], weights: &[f64]) -> Vec<usize> {
    let n = values.len().min(weights.len());
    let mut order: Vec<usize> = (0..n).filter(|&i| values[i].is_finite() && weights[i] > 0.0).collect();
    order.sort_by(|&a, &b| values[a].total_cmp(&values[b]).then(a.cmp(&b)));
    order
}

/// Values at the given shares of the weight, `None` without any weight.
#[must_use]
pub fn quantiles<const N: usize>(values: &[f64], weights: &[f64], shares: [f64; N]) -> Option<[f64; N]> {
    let order = rising(values, weights);
    let total: f64 = order.iter().map(|&i| weights[i]).sum();
    let last = *order.last()?;
    Some(shares.map(|share| {
        let mut sum = 0.0;
        for &i in &order {
            sum += weights[i];
            if sum >= share * total {
                return values[i];
            }
        }
        values[last]
    }))
}

/// For every draw the share of the weight at lower values plus half of that at the same value: between 0 and 1, NaN
/// for draws without weight or value.
#[must_use]
pub fn positions(values: &[f64], weights: &[f64]) -> Vec<f64> {
    let order = rising(values, weights);
    let total: f64 = order.iter().map(|&i| weights[i]).sum();
    let mut positions = vec![f64::NAN; values.len()];
    let (mut below, mut start) = (0.0, 0);
    while start < order.len() {
        let end = start + order[start..].iter().take_while(|&&i| values[i] == values[order[start]]).count();
        let here: f64 = order[start..end].iter().map(|&i| weights[i]).sum();
        for &i in &order[start..end] {
            positions[i] = (below + here / 2.0) / total;
        }
        below += here;
        start = end;
    }
    positions
}

#[cfg(test)]
mod tests {
    use super::super::axis::Along;
    use super::super::axis::Room;
    use super::super::axis::Scale;
    use super::*;

    #[test]
    fn quantiles_and_positions_count_weight() {
        let values = [3.0, 1.0, 2.0, 2.0, f64::NAN];
        let weights = [1.0, 1.0, 1.0, 1.0, 5.0];
        assert_eq!(quantiles(&values, &weights, [0.0, 0.25, 0.5, 1.0]), Some([1.0, 1.0, 2.0, 3.0]));
        let positions = positions(&values, &weights);
        assert_eq!(&positions[..4], &[0.875, 0.125, 0.5, 0.5]);
        assert!(positions[4].is_nan());
        assert_eq!(quantiles(&values, &[0.0; 5], [0.5]), None);
        assert_eq!(clean(&[-1.0, f64::NAN, f64::INFINITY, 2.0]), [0.0, 0.0, 0.0, 2.0]);
    }

    #[test]
    fn titles_keep_their_unit() {
        let room = Room { along: Along::Page, length: 100.0, size: 6.0, most: 4 };
        let axis = Axis::new(0.0, 4e-12, Scale::Linear, room);
        let lines = title_lines(&axis, "discharge_of_the_feeder_canal_7", Some("m³/s"), 60.0, 6.0, 2);
        assert_eq!(lines.len(), 2, "{lines:?}");
        assert!(lines[1].ends_with("(10⁻¹² m³/s)") && lines.concat().contains('…'), "{lines:?}");
        assert_eq!(title_lines(&axis, "q", None, 60.0, 6.0, 2), ["q (10⁻¹²)"]);
        let column = VariableColumn { name: "q".into(), label: Some(" ".into()), unit: None, values: vec![], discrete: false };
        assert_eq!(column.title(), "q");
    }
}
