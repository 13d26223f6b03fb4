//! Variables as columns of draws, and what several figures ask of them: weighted quantiles, titles that fit.

use super::axis::Axis;
use super::axis::Scale;
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

/// The title of an axis in one or two lines no wider than `room`.
///
/// Two lines break before the unit where that is enough. A name that is too long even so loses letters in its middle;
/// unit and power of ten stay.
#[must_use]
pub fn title_lines(axis: &Axis, name: &str, unit: Option<&str>, room: f64, size: f64, lines: usize) -> Vec<String> {
    let full = axis.title(name, unit);
    let fits = |text: &str| width(text, size, Face::Regular) <= room;
    if fits(&full) {
        return vec![full];
    }
    // A title is the name followed by what the axis and the unit add.
    let added = full.strip_prefix(name).unwrap_or_default();
    if lines < 2 {
        let left = (room - width(added, size, Face::Regular)).max(0.0);
        return vec![format!("{}{added}", shorten(name, left, size, Face::Regular))];
    }
    let wrapped = wrap(&full, room, size, Face::Regular, lines);
    if added.is_empty() || !(fits(name) || wrapped.iter().any(|line| line.contains('…'))) {
        return wrapped;
    }
    vec![shorten(name, room, size, Face::Regular), shorten(added.trim_start(), room, size, Face::Regular)]
}

/// Shares of the weight below and above which an axis does not have to reach.
const ENDS: [f64; 2] = [0.003, 0.997];
/// From this ratio of its ends on, a positive variable gets a log axis.
const LOG_FROM: f64 = 30.0;

/// Range and spacing of a variable's axis: nearly all of the weight, with a little room on both sides.
#[must_use]
pub fn range(column: &VariableColumn, weights: &[f64]) -> (f64, f64, Scale) {
    let Some([low, high]) = quantiles(&column.values, weights, ENDS) else { return (0.0, 1.0, Scale::Linear) };
    if column.discrete {
        let pad = 0.75 + 0.03 * (high - low);
        return (low - pad, high + pad, Scale::Whole);
    }
    if low > 0.0 && high / low >= LOG_FROM {
        let pad = libm::pow(high / low, 0.08);
        return (low / pad, high * pad, Scale::Log);
    }
    if high - low <= 1e-12 * low.abs().max(high.abs()) {
        let pad = if low == 0.0 { 1.0 } else { 0.05 * low.abs() };
        return (low - pad, high + pad, Scale::Linear);
    }
    let pad = 0.08 * (high - low);
    // A variable that cannot be negative does not get an axis that says it is.
    let floor = if low >= 0.0 && low - pad < 0.0 { 0.0 } else { low - pad };
    (floor, high + pad, Scale::Linear)
}

/// Weights that can be summed: the largest is one, negative ones and those that are not finite count as zero.
#[must_use]
pub fn clean(weights: &[f64]) -> Vec<f64> {
    let counts = |w: f64| w.is_finite() && w > 0.0;
    let largest = weights.iter().copied().filter(|&w| counts(w)).fold(0.0, f64::max);
    weights.iter().map(|&w| if counts(w) { w / largest } else { 0.0 }).collect()
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
        assert_eq!(clean(&[-1.0, f64::NAN, f64::INFINITY, 1e308, 1e308]), [0.0, 0.0, 0.0, 1.0, 1.0]);
    }

    #[test]
    fn titles_keep_their_unit() {
        let room = Room { along: Along::Page, length: 100.0, size: 6.0, most: 4 };
        let axis = Axis::new(0.0, 4e-12, Scale::Linear, room);
        let title = |name: &str, lines| title_lines(&axis, name, Some("m³/s"), 70.0, 6.0, lines);
        assert_eq!(title("canal_discharge", 2), ["canal_discharge", "(10⁻¹² m³/s)"]);
        let long = title("discharge_of_the_feeder_canal_7", 2);
        assert!(long[0].starts_with("disch") && long[0].contains('…') && long[0].ends_with('7'), "{long:?}");
        assert_eq!(long[1], "(10⁻¹² m³/s)");
        let single = title("discharge_of_the_feeder_canal_7", 1);
        assert!(single.len() == 1 && single[0].contains('…') && single[0].ends_with(" (10⁻¹² m³/s)"), "{single:?}");
        let plain = Axis::new(0.0, 1.0, Scale::Linear, room);
        assert_eq!(title_lines(&plain, "width (at the crest)", None, 50.0, 6.0, 2), ["width (at the", "crest)"]);
        assert_eq!(title_lines(&axis, "q", None, 60.0, 6.0, 2), ["q (10⁻¹²)"]);
        let column =
            VariableColumn { name: "q".into(), label: Some(" ".into()), unit: None, values: vec![], discrete: false };
        assert_eq!(column.title(), "q");
    }
}
