//! Layout of the variables figure: rows with their axes and titles, columns of equal panels, rows a page.

use super::MARGIN;
use super::Partner;
use super::VariableRow;
use super::VariablesData;
use super::marginal::Marginal;
use super::thinned::Thinned;
use crate::figures::LINE;
use crate::figures::Style;
use crate::figures::axis::Along;
use crate::figures::axis::Axis;
use crate::figures::axis::Room;
use crate::figures::axis::Scale;
use crate::figures::columns::VariableColumn;
use crate::figures::columns::range;
use crate::figures::columns::title_lines;
use crate::figures::panel::bottom_room;
use crate::figures::panel::left_room;
use crate::figures::text::Face;
use crate::figures::text::width;

/// Tallest page, in widths (a sheet of A4 with its caption).
const TALLEST: f64 = 1.45;

/// Sizes that all pages share.
pub(super) struct Layout<'a> {
    pub(super) rows: Vec<Prepared<'a>>,
    /// Left and right edges of the panels of each column.
    pub(super) cells: Vec<(f64, f64)>,
    /// Height of a panel, points.
    pub(super) height: f64,
    /// Most lines of a title above a panel.
    pub(super) lines: usize,
    pub(super) rows_a_page: usize,
}

/// A row before it has a place.
pub(super) struct Prepared<'a> {
    pub(super) row: &'a VariableRow,
    pub(super) partners: Vec<&'a Partner>,
    pub(super) marginal: Marginal,
    /// Vertical axes, first the density's.
    pub(super) y: Vec<Axis>,
    /// Titles above the panels.
    pub(super) titles: Vec<Vec<String>>,
}

impl<'a> Layout<'a> {
    pub(super) fn new(data: &'a VariablesData, sample: &Thinned, style: &Style) -> Self {
        let unit = style.unit();
        let rows: Vec<&VariableRow> = data.rows.iter().filter(|row| row.variable < data.variables.len()).collect();
        let columns = 1 + rows.iter().map(|row| partners(row, data).len()).max().unwrap_or(0);
        let height = (0.45 * style.width() / columns as f64).clamp(5.5 * unit, 11.0 * unit);
        let mut prepared: Vec<Prepared> =
            rows.into_iter().map(|row| Prepared::new(data, row, sample, height, style)).collect();
        let cells = cells(&prepared, columns, style);
        for row in &mut prepared {
            row.set_titles(data, &cells, style);
        }
        let lines = prepared.iter().flat_map(|row| &row.titles).map(Vec::len).max().unwrap_or(1);
        let mut layout = Self { rows: prepared, cells, height, lines, rows_a_page: 1 };
        let most = TALLEST * style.width() - 3.0 * unit;
        layout.rows_a_page = ((most / layout.row_height(style)).floor() as usize).clamp(1, 8);
        layout
    }

    pub(super) fn head(&self, style: &Style) -> f64 {
        (1.0 + LINE * self.lines as f64) * style.unit()
    }

    pub(super) fn row_height(&self, style: &Style) -> f64 {
        self.head(style) + self.height + bottom_room(style) + 1.9 * style.unit()
    }
}

impl<'a> Prepared<'a> {
    pub(super) fn new(
        data: &'a VariablesData,
        row: &'a VariableRow,
        sample: &Thinned,
        height: f64,
        style: &Style,
    ) -> Self {
        let column = &data.variables[row.variable];
        let marginal = Marginal::new(column, row, &sample.weights, range(column, &sample.weights));
        let room = Room { along: Along::Column, length: height, size: style.unit(), most: 4 };
        let mut y = vec![Axis::new(0.0, marginal.highest() * 1.08, Scale::Linear, room)];
        let partners = partners(row, data);
        for partner in &partners {
            y.push(axis(&data.variables[partner.variable], &sample.weights, Along::Column, height, style));
        }
        Self { row, partners, marginal, y, titles: Vec::new() }
    }

    /// Titles over the panels, starting above the labels of their axes.
    fn set_titles(&mut self, data: &VariablesData, cells: &[(f64, f64)], style: &Style) {
        let unit = style.unit();
        for (k, (y, &(left, right))) in self.y.iter().zip(cells).enumerate() {
            let room = right + 0.3 * unit - title_start(k, left, y, style);
            let title = if k == 0 {
                let column = &data.variables[self.row.variable];
                let letter = width("a", unit, Face::Bold) + 0.5 * unit;
                title_lines(y, self.marginal.name(), self.marginal.unit(column).as_deref(), room - letter, unit, 2)
            } else {
                let other = &data.variables[self.partners[k - 1].variable];
                title_lines(y, other.title(), other.unit.as_deref(), room, unit, 2)
            };
            self.titles.push(title);
        }
    }
}

/// Where the title of a panel starts.
pub(super) fn title_start(k: usize, left: f64, y: &Axis, style: &Style) -> f64 {
    if k == 0 { MARGIN * style.unit() } else { left - left_room(y, style) }
}

fn partners<'a>(row: &'a VariableRow, data: &VariablesData) -> Vec<&'a Partner> {
    row.partners.iter().filter(|partner| partner.variable < data.variables.len()).take(2).collect()
}

pub(super) fn axis(column: &VariableColumn, weights: &[f64], along: Along, length: f64, style: &Style) -> Axis {
    let (low, high, scale) = range(column, weights);
    let most = if along == Along::Page { 4 } else { 3 };
    Axis::new(
        low,
        high,
        scale,
        Room { along, length, size: style.unit(), most: most + (length / (12.0 * style.unit())) as usize },
    )
}

/// Left and right edges of the panels of each column: the same for all rows.
fn cells(rows: &[Prepared], columns: usize, style: &Style) -> Vec<(f64, f64)> {
    let unit = style.unit();
    let margins: Vec<f64> = (0..columns)
        .map(|k| rows.iter().filter_map(|row| row.y.get(k)).map(|y| left_room(y, style)).fold(0.0, f64::max))
        .collect();
    let gap = 1.1 * unit;
    let free = style.width() - MARGIN * unit - margins.iter().sum::<f64>() - gap * columns as f64;
    let panel = free / columns as f64;
    let mut at = MARGIN * unit;
    margins
        .iter()
        .map(|margin| {
            let left = at + margin;
            at = left + panel + gap;
            (left, left + panel)
        })
        .collect()
}
