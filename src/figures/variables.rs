//! The variables: each with its marginal distribution and with the two variables it depends on most.
//!
//! One row a variable: draws weighted to the target against the proposal's density, then the same draws as dots of
//! equal weight under the outlines of the components, in natural units throughout.

use super::Drawing;
use super::LINE;
use super::Style;
use super::axis::Along;
use super::axis::Axis;
use super::axis::Room;
use super::axis::Scale;
use super::canvas::Anchor;
use super::canvas::Area;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MEASURED_TINT;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::columns::VariableColumn;
use super::columns::clean;
use super::columns::quantiles;
use super::columns::title_lines;
use super::heading;
use super::key::Key;
use super::key::Sample;
use super::marginal::Marginal;
use super::numbers::count;
use super::numbers::percent;
use super::panel::Panel;
use super::panel::bottom_room;
use super::panel::left_room;
use super::table::Cell;
use super::table::Table;
use super::text::Face;
use super::text::width;

/// Dots that stand for the whole weight in a panel.
const DOTS: usize = 500;
/// Shares of the weight below and above which an axis does not have to reach.
const ENDS: [f64; 2] = [0.003, 0.997];
/// From this ratio of its ends on, a positive variable gets a log axis.
const LOG_FROM: f64 = 30.0;
/// Tallest page, in widths (a sheet of A4 with its caption).
const TALLEST: f64 = 1.4;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct VariablesData {
    /// All variables that rows and partners name.
    pub variables: Vec<VariableColumn>,
    /// Weights of the draws on any common scale.
    pub weights: Vec<f64>,
    /// The rows, in order.
    pub rows: Vec<VariableRow>,
}

/// A row of the figure.
#[derive(Debug, Clone, PartialEq)]
pub struct VariableRow {
    /// Its variable, an index into [`VariablesData::variables`].
    pub variable: usize,
    /// Places at which the proposal's density is given, rising, natural units.
    pub proposal_at: Vec<f64>,
    /// Marginal density of the proposal there, per natural unit (mass at whole numbers for a discrete variable).
    pub proposal_density: Vec<f64>,
    /// The variables it is shown with, at most two are drawn.
    pub partners: Vec<Partner>,
}

/// A variable that a row is shown with.
#[derive(Debug, Clone, PartialEq)]
pub struct Partner {
    /// The variable, an index into [`VariablesData::variables`].
    pub variable: usize,
    /// Outlines of the components, one standard deviation from their centres.
    pub outlines: Vec<Outline>,
}

/// A closed line around a component, in natural units.
#[derive(Debug, Clone, PartialEq)]
pub struct Outline {
    /// Number of the component.
    pub component: usize,
    /// Values of the row's variable along the line.
    pub x: Vec<f64>,
    /// Values of the partner along the line.
    pub y: Vec<f64>,
}

/// Draws the figure, on as many pages as its rows need.
#[must_use]
pub fn draw(data: &VariablesData, style: &Style) -> Vec<Drawing> {
    let sample = Thinned::new(data);
    let rows: Vec<&VariableRow> = data.rows.iter().filter(|row| row.variable < data.variables.len()).collect();
    let layout = Layout::new(&rows, data, style);
    let pages = rows.len().div_ceil(layout.rows_a_page).max(1);
    let rows_a_page = rows.len().div_ceil(pages).max(1);
    let mut drawings = Vec::new();
    for (page, rows) in (0..pages).map(|page| (page, rows.chunks(rows_a_page).nth(page).unwrap_or_default())) {
        let mut drawing = draw_page(data, rows, &sample, &layout, style);
        drawing.name = if pages == 1 { "variables".to_owned() } else { format!("variables-{}", page + 1) };
        if pages > 1 {
            drawing.caption = format!("{} Page {} of {pages}.", drawing.caption, page + 1);
        }
        drawings.push(drawing);
    }
    drawings
}

/// Dots of equal weight: how many each draw gets.
struct Thinned {
    weights: Vec<f64>,
    dots: Vec<usize>,
}

impl Thinned {
    /// Systematic resampling with its steps starting half a step in, so that nothing is left to chance.
    fn new(data: &VariablesData) -> Self {
        let weights = clean(&data.weights);
        let total: f64 = weights.iter().sum();
        let mut dots = vec![0; weights.len()];
        if total > 0.0 {
            let (mut sum, mut next) = (0.0, 0.5);
            for (dot, weight) in dots.iter_mut().zip(&weights) {
                sum += weight / total * DOTS as f64;
                while next < sum && next < DOTS as f64 {
                    *dot += 1;
                    next += 1.0;
                }
            }
        }
        Self { weights, dots }
    }
}

/// Sizes that all pages share.
struct Layout {
    columns: usize,
    /// Height of a panel, points.
    height: f64,
    /// Lines of the titles above panels.
    lines: usize,
    rows_a_page: usize,
}

impl Layout {
    fn new(rows: &[&VariableRow], data: &VariablesData, style: &Style) -> Self {
        let unit = style.unit();
        let columns = 1 + rows.iter().map(|row| partners(row, data).len()).max().unwrap_or(0);
        let cell = style.width() / columns as f64;
        let height = (0.5 * cell).clamp(5.5 * unit, 11.0 * unit);
        // Titles of a page may take two lines where one is too narrow for most names.
        let lines = if columns == 1 { 1 } else { 2 };
        let mut layout = Self { columns, height, lines, rows_a_page: 1 };
        let most = TALLEST * style.width().max(37.0 * unit) - 3.0 * unit;
        layout.rows_a_page = ((most / layout.row_height(style)).floor() as usize).clamp(1, 8);
        layout
    }

    fn head(&self, style: &Style) -> f64 {
        (1.0 + LINE * self.lines as f64) * style.unit()
    }

    fn row_height(&self, style: &Style) -> f64 {
        self.head(style) + self.height + bottom_room(style) + 1.9 * style.unit()
    }
}

fn partners<'a>(row: &'a VariableRow, data: &VariablesData) -> Vec<&'a Partner> {
    row.partners.iter().filter(|partner| partner.variable < data.variables.len()).take(2).collect()
}

/// Range and spacing of a variable's axis.
fn range(column: &VariableColumn, weights: &[f64]) -> (f64, f64, Scale) {
    let Some([low, high]) = quantiles(&column.values, weights, ENDS) else { return (0.0, 1.0, Scale::Linear) };
    if column.discrete {
        let pad = 0.75 + 0.03 * (high - low);
        return (low - pad, high + pad, Scale::Whole);
    }
    if low > 0.0 && high / low >= LOG_FROM {
        let pad = libm::pow(high / low, 0.08);
        return (low / pad, high * pad, Scale::Log);
    }
    let pad = 0.08 * (high - low);
    // A variable that cannot be negative does not get an axis that says it is.
    let floor = if low >= 0.0 && low - pad < 0.0 { 0.0 } else { low - pad };
    (floor, high + pad, Scale::Linear)
}

fn axis(column: &VariableColumn, weights: &[f64], along: Along, length: f64, style: &Style) -> Axis {
    let (low, high, scale) = range(column, weights);
    let most = if along == Along::Page { 4 } else { 3 };
    Axis::new(low, high, scale, Room { along, length, size: style.unit(), most: most + (length / (12.0 * style.unit())) as usize })
}

/// The panels of one row before they have a place: vertical axes, first the density's.
struct RowAxes {
    marginal: Marginal,
    y: Vec<Axis>,
}

fn draw_page(data: &VariablesData, rows: &[&VariableRow], sample: &Thinned, layout: &Layout, style: &Style) -> Drawing {
    let unit = style.unit();
    let margin = 0.3 * unit;
    let dot = 0.11 * unit;
    let outline = Pen::solid(MODELLED, 0.09 * unit);
    let shown = sample.dots.iter().sum::<usize>();
    let key = Key::new(
        &[
            (Sample::Field(MEASURED_TINT, Pen::solid(MEASURED, 0.6 * style.stroke())), "weighted draws".to_owned()),
            (Sample::Line(Pen::solid(MODELLED, 0.8 * style.stroke())), "proposal".to_owned()),
            (Sample::Dot(1.4 * dot, MEASURED, 0.8), format!("1/{DOTS} of the weight")),
            (Sample::Outline(outline), "component, 1 sd".to_owned()),
        ][..if layout.columns == 1 { 2 } else { 4 }],
        style.width() - 2.0 * margin,
        style,
    );
    let top = key.height(style) + 0.2 * unit;
    let height = top + rows.len().max(1) as f64 * layout.row_height(style);
    let mut canvas = Canvas::new(style.width(), height);
    let mut table = Table::new(&["variable", "series", "partner", "component", "x", "y", "dots"]);
    if rows.is_empty() || shown == 0 {
        canvas.write("no draw has weight", (style.width() / 2.0, height / 2.0), Anchor::Middle, style.plain(REFERENCE));
        return Drawing { name: String::new(), caption: "No draw has weight.".to_owned(), table, canvas, dpi: style.dpi() };
    }
    key.draw(&mut canvas, style, (margin, 0.2 * unit));

    let axes: Vec<RowAxes> = rows.iter().map(|row| row_axes(data, row, sample, layout, style)).collect();
    let cells = cells(&axes, layout, style);
    for (i, (row, row_axes)) in rows.iter().zip(&axes).enumerate() {
        let row_top = top + i as f64 * layout.row_height(style) + layout.head(style);
        let column = &data.variables[row.variable];
        let mut x_axis: Option<Axis> = None;
        for (k, y) in row_axes.y.iter().enumerate() {
            let (left, right) = cells[k];
            let area = Area { left, top: row_top, right, bottom: row_top + layout.height };
            let x = axis(column, &sample.weights, Along::Page, area.width(), style);
            let panel = Panel { area, x, y: y.clone() };
            let partner = (k > 0).then(|| partners(row, data)[k - 1]);
            let letter = if k == 0 { char::from(b'a' + i as u8).to_string() } else { String::new() };
            let from = if k == 0 { margin } else { left - left_room(y, style) };
            let indent = if k == 0 { width(&letter, unit, Face::Bold) + 0.5 * unit } else { 0.0 };
            let room = right - from - indent + if k + 1 < cells.len() { 0.3 * unit } else { 0.0 };
            let title = match partner {
                None => title_lines(y, "density", Some(&row_axes.marginal.unit(column)), room, unit, layout.lines),
                Some(partner) => {
                    let other = &data.variables[partner.variable];
                    title_lines(y, other.title(), other.unit.as_deref(), room, unit, layout.lines)
                }
            };
            heading(&mut canvas, style, &letter, &title, (from, row_top - 0.75 * unit));
            match partner {
                None => row_axes.marginal.draw(&mut canvas, style, &panel),
                Some(partner) => draw_pair(&mut canvas, &panel, data, row, partner, sample, (dot, outline)),
            }
            panel.axes(&mut canvas, style, true);
            x_axis = Some(panel.x);
        }
        if let Some(x) = x_axis {
            let (left, right) = (cells[0].0, cells[row_axes.y.len() - 1].1);
            let title = title_lines(&x, column.title(), column.unit.as_deref(), style.width() - 2.0 * margin, unit, 1);
            let baseline = row_top + layout.height + bottom_room(style) + 1.05 * unit;
            write_centred(&mut canvas, style, &title.concat(), f64::midpoint(left, right), baseline);
        }
        add_rows(&mut table, data, row, row_axes, sample);
    }
    Drawing { name: String::new(), caption: caption(data, rows, sample), table, canvas, dpi: style.dpi() }
}

/// Writes a text centred at `middle`, moved as far as it takes to stay on the page.
fn write_centred(canvas: &mut Canvas, style: &Style, text: &str, middle: f64, baseline: f64) {
    let half = width(text, style.unit(), Face::Regular) / 2.0 + 0.2 * style.unit();
    let middle = middle.min(canvas.width() - half).max(half);
    canvas.write(text, (middle, baseline), Anchor::Middle, style.plain(INK));
}

fn row_axes(data: &VariablesData, row: &VariableRow, sample: &Thinned, layout: &Layout, style: &Style) -> RowAxes {
    let column = &data.variables[row.variable];
    let marginal = Marginal::new(column, row, &sample.weights, range(column, &sample.weights));
    let room = Room { along: Along::Column, length: layout.height, size: style.unit(), most: 4 };
    let mut y = vec![Axis::new(0.0, marginal.highest() * 1.08, Scale::Linear, room)];
    for partner in partners(row, data) {
        y.push(axis(&data.variables[partner.variable], &sample.weights, Along::Column, layout.height, style));
    }
    RowAxes { marginal, y }
}

/// Left and right edges of the panels of each column: the same for all rows of a page.
fn cells(axes: &[RowAxes], layout: &Layout, style: &Style) -> Vec<(f64, f64)> {
    let unit = style.unit();
    let margins: Vec<f64> = (0..layout.columns)
        .map(|k| axes.iter().filter_map(|row| row.y.get(k)).map(|y| left_room(y, style)).fold(0.0, f64::max))
        .collect();
    let gap = 1.1 * unit;
    let free = style.width() - 0.3 * unit - margins.iter().sum::<f64>() - gap * layout.columns as f64;
    let panel = free / layout.columns as f64;
    let mut at = 0.3 * unit;
    margins
        .iter()
        .map(|margin| {
            let left = at + margin;
            at = left + panel + gap;
            (left, left + panel)
        })
        .collect()
}

fn draw_pair(
    canvas: &mut Canvas,
    panel: &Panel,
    data: &VariablesData,
    row: &VariableRow,
    partner: &Partner,
    sample: &Thinned,
    (dot, outline): (f64, Pen),
) {
    let (xs, ys) = (&data.variables[row.variable].values, &data.variables[partner.variable].values);
    for ((&x, &y), &dots) in xs.iter().zip(ys).zip(&sample.dots) {
        if dots > 0 && panel.shows(x, y) {
            canvas.disc(panel.spot(x, y), dot * (dots as f64).sqrt(), MEASURED, 0.4);
        }
    }
    for line in &partner.outlines {
        panel.curve(canvas, line.x.iter().copied().zip(line.y.iter().copied()), outline);
    }
}

fn caption(data: &VariablesData, rows: &[&VariableRow], sample: &Thinned) -> String {
    let draws = sample.weights.iter().filter(|&&w| w > 0.0).count();
    let mut outside: f64 = 0.0;
    let total: f64 = sample.weights.iter().sum();
    for row in rows {
        let column = &data.variables[row.variable];
        let (low, high, _) = range(column, &sample.weights);
        let inside = column.values.iter().zip(&sample.weights).filter(|(v, _)| (low..=high).contains(*v));
        outside = outside.max(1.0 - inside.map(|(_, w)| w).sum::<f64>() / total);
    }
    let pairs = rows.iter().any(|row| !partners(row, data).is_empty());
    let mut text = format!(
        "Marginal distribution of the {} weighted draws, and marginal density of the proposal.",
        count(draws)
    );
    if pairs {
        text = format!(
            "{text} Right of it, the same draws over the variables that depend on it most: every dot stands for 1/{DOTS} of \
             the weight (larger ones for several), lines for one standard deviation of each component."
        );
    }
    if outside > 5e-4 {
        text = format!("{text} At most {} of the weight lies outside an axis.", percent(outside));
    }
    text
}

fn add_rows(table: &mut Table, data: &VariablesData, row: &VariableRow, axes: &RowAxes, sample: &Thinned) {
    let column = &data.variables[row.variable];
    let name = || Cell::Text(column.name.clone());
    let none = || Cell::Number(f64::NAN);
    for (series, points) in [("weighted draws", axes.marginal.middles()), ("proposal", axes.marginal.curve().to_vec())] {
        for (x, y) in points {
            table.push([name(), series.into(), "".into(), none(), x.into(), y.into(), none()]);
        }
    }
    for partner in partners(row, data) {
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

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::dependence::strongest_partners;
    use super::*;
    use crate::numeric::normal;
    use crate::numeric::uniform;

    /// Draws of `d` variables of the Ellenmere spillway (invented), with curves and outlines computed from them.
    fn data(d: usize, name: impl Fn(usize) -> String, value: impl Fn(usize, f64) -> f64, heavy: bool) -> VariablesData {
        let n = 1500;
        let mut stream = crate::numeric::stream(7, crate::numeric::Purpose::Trial, 0, 0);
        let mut scores = vec![vec![0.0; n]; d];
        for i in 0..n {
            for j in 0..d {
                let fresh = normal::draw(&mut stream);
                scores[j][i] = match j {
                    0 => fresh,
                    1 => 0.6 * (scores[0][i] * scores[0][i] - 1.0) + 0.4 * fresh,
                    _ => 0.7 * scores[j - 1][i] + 0.7 * fresh,
                };
            }
        }
        let weights: Vec<f64> = (0..n)
            .map(|i| {
                let u = uniform(&mut stream);
                if heavy { libm::pow(u, -0.9) } else { 0.8 + 0.4 * u * if scores[0][i] > 0.0 { 1.5 } else { 1.0 } }
            })
            .collect();
        let unit = |j: usize| ["m³/s", "m", "", "kN/m²"][j % 4].to_owned();
        let variables: Vec<VariableColumn> = (0..d)
            .map(|j| VariableColumn {
                name: name(j),
                label: None,
                unit: Some(unit(j)),
                values: scores[j].iter().map(|&s| value(j, s)).collect(),
                discrete: false,
            })
            .collect();
        let columns: Vec<&[f64]> = variables.iter().map(|v| v.values.as_slice()).collect();
        let chosen = strongest_partners(&columns, &weights, 2);
        let rows = (0..d).map(|j| {
            let steps: Vec<f64> = (0..=160).map(|i| -4.0 + f64::from(i) * 0.05).collect();
            let at: Vec<f64> = steps.iter().map(|&s| value(j, s)).collect();
            let density = |k: usize| {
                let (a, b) = (k.saturating_sub(1), (k + 1).min(160));
                let slope = (at[b] - at[a]) / (steps[b] - steps[a]);
                libm::exp(-steps[k] * steps[k] / 2.6) / (1.3 * std::f64::consts::TAU).sqrt() / slope
            };
            let proposal_density = (0..=160).map(density).collect();
            let partners = chosen[j].iter().map(|&other| Partner {
                variable: other,
                outlines: (0..3)
                    .map(|c| {
                        let turn = |i: u32| f64::from(i) * std::f64::consts::TAU / 90.0;
                        let centre = f64::from(c) - 1.0;
                        let x = (0..=90).map(|i| value(j, centre + 0.8 * libm::cos(turn(i)))).collect();
                        let y = (0..=90).map(|i| value(other, 0.5 * centre + 0.7 * libm::sin(turn(i) + 0.5))).collect();
                        Outline { component: c as usize, x, y }
                    })
                    .collect(),
            });
            VariableRow { variable: j, proposal_at: at.clone(), proposal_density, partners: partners.collect() }
        });
        let rows = rows.collect();
        VariablesData { variables, weights, rows }
    }

    fn short(j: usize) -> String {
        ["inflow", "crest_level", "gate_friction", "uplift", "roughness", "seepage"][j % 6].to_owned()
    }

    #[test]
    fn variables_of_every_kind_are_drawn_in_order() {
        let mild = |j: usize, s: f64| [12.0 + 2.0 * s, 0.3 + 0.05 * s, libm::exp(1.4 * s), 140.0 + 20.0 * s][j % 4];
        let long = |j: usize| format!("{}_of_ellenmere_{j:02}", ["discharge_coeff", "spillway_levels"][j % 2]);
        let wild = |j: usize, s: f64| {
            [1e-12 * (3.0 + s), 1e9 * (4.0 + s), 1e9 + 0.3 * s, 1e-12 * libm::exp(3.0 * s), -7e4 * s][j % 5]
        };
        let mut counts = data(3, short, |j, s| if j == 1 { (4.0 + 1.5 * s).round().max(0.0) } else { mild(j, s) }, false);
        counts.variables[1].discrete = true;
        let mut empty = data(2, short, mild, false);
        empty.weights.clear();
        let mut constant = data(3, short, |_, _| 5.0, false);
        constant.weights = vec![1.0; constant.weights.len()];
        let cases = [
            ("one", data(1, short, mild, false)),
            ("two", data(2, short, mild, false)),
            ("four", data(4, short, mild, false)),
            ("thirty", data(30, long, wild, true)),
            ("heavy", data(6, short, mild, true)),
            ("counts", counts),
            ("empty", empty),
            ("constant", constant),
        ];
        for (name, data) in cases {
            checks::check(&format!("variables-{name}"), |style| draw(&data, style));
        }
    }

    #[test]
    fn every_variable_has_its_row_on_one_of_the_pages() {
        let data = data(30, |j| format!("gauge_{j}"), |_, s| s, false);
        let pages = draw(&data, &Style::default());
        assert!(pages.len() >= 4 && pages[0].name == "variables-1" && pages[1].name == "variables-2");
        for j in 0..30 {
            let want = format!("gauge_{j}");
            let found = pages.iter().filter(|page| {
                page.table.rows().iter().any(|row| row[0] == Cell::Text(want.clone()))
            });
            assert_eq!(found.count(), 1, "{want}");
        }
    }

    /// A draw with half of the weight gets half of the dots; the dots are all there.
    #[test]
    fn dots_stand_for_equal_weight() {
        let mut data = data(2, short, |_, s| s, false);
        data.weights = [vec![1.0; 1499], vec![1499.0]].concat();
        let thinned = Thinned::new(&data);
        assert_eq!(thinned.dots.iter().sum::<usize>(), DOTS);
        assert_eq!(thinned.dots[1499], DOTS / 2);
    }
}
