//! Caption and table of the variables figure.

use super::VariablesData;
use super::layout::Prepared;
use super::thinned::DOTS;
use super::thinned::Thinned;
use crate::figures::columns::range;
use crate::figures::numbers::count;
use crate::figures::numbers::percent;
use crate::figures::table::Cell;
use crate::figures::table::Table;

/// What the page shows, and how much of the weight it leaves out.
pub(super) fn caption(data: &VariablesData, rows: &[Prepared], sample: &Thinned) -> String {
    let draws = sample.weights.iter().filter(|&&w| w > 0.0).count();
    let mut outside: f64 = 0.0;
    let total: f64 = sample.weights.iter().sum();
    for row in rows {
        let column = &data.variables[row.row.variable];
        let (low, high, _) = range(column, &sample.weights);
        let inside = column.values.iter().zip(&sample.weights).filter(|(v, _)| (low..=high).contains(*v));
        outside = outside.max(1.0 - inside.map(|(_, w)| w).sum::<f64>() / total);
    }
    let pairs = rows.iter().any(|row| !row.partners.is_empty());
    let mut text =
        format!("Marginal distribution of the {} weighted draws, and marginal density of the proposal.", count(draws));
    if rows.iter().any(|row| data.variables[row.row.variable].discrete) {
        text = format!("{text} Circles are the proposal's probabilities of whole numbers.");
    }
    if pairs {
        text = format!(
            "{text} To the right, the same draws over the variables that depend on it most: every dot stands for 1/{DOTS} of \
             the weight (larger ones for several), lines for one standard deviation of components."
        );
    }
    if outside > 5e-4 {
        text = format!("{text} At most {} of the weight lies outside an axis.", percent(outside));
    }
    text
}

/// Adds histogram, density, dots and outlines of a row.
pub(super) fn add_rows(table: &mut Table, data: &VariablesData, row: &Prepared, sample: &Thinned) {
    let column = &data.variables[row.row.variable];
    let name = || Cell::Text(column.name.clone());
    let none = || Cell::Number(f64::NAN);
    for (series, points) in [("weighted draws", row.marginal.middles()), ("proposal", row.marginal.curve().to_vec())] {
        for (x, y) in points {
            table.push([name(), series.into(), "".into(), none(), x.into(), y.into(), none()]);
        }
    }
    for partner in &row.partners {
        let other = &data.variables[partner.variable];
        for ((&x, &y), &dots) in column.values.iter().zip(&other.values).zip(&sample.dots) {
            if dots > 0 {
                let partner = Cell::Text(other.name.clone());
                table.push([name(), "dots".into(), partner, none(), x.into(), y.into(), (dots as f64).into()]);
            }
        }
        for line in &partner.outlines {
            for (&x, &y) in line.x.iter().zip(&line.y) {
                let (partner, component) = (Cell::Text(other.name.clone()), line.component as f64);
                table.push([name(), "component".into(), partner, component.into(), x.into(), y.into(), none()]);
            }
        }
    }
}
