//! The variables: each with its marginal distribution and with the two variables it depends on most.
//!
//! One row a variable: draws weighted to the target against the proposal's density, then the same draws as dots of
//! equal weight under the outlines of the components, in natural units throughout.

use super::Drawing;
use super::Style;
use super::axis::Along;
use super::axis::Axis;
use super::canvas::Anchor;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MEASURED_TINT;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::columns::VariableColumn;
use super::columns::title_lines;
use super::heading;
use super::key::Key;
use super::key::Sample;
use super::panel::Panel;
use super::panel::bottom_room;
use super::place::Area;
use super::table::Table;
use super::text::Face;
use super::text::Spot;
use super::text::width;

mod layout;
mod marginal;
mod thinned;
mod words;

use layout::Layout;
use layout::Prepared;
use layout::axis;
use layout::title_start;
use thinned::DOTS;
use thinned::Thinned;
use words::add_rows;
use words::caption;

/// Space at the edges of the page, in text sizes.
const MARGIN: f64 = 0.3;
/// Radius of a dot, in text sizes.
const DOT: f64 = 0.11;
/// Columns of the table.
const COLUMNS: [&str; 7] = ["variable", "series", "partner", "component", "x", "y", "dots"];

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
    let sample = Thinned::new(&data.weights);
    if data.rows.iter().all(|row| row.variable >= data.variables.len()) || sample.dots.iter().all(|&dots| dots == 0) {
        return vec![nothing(style)];
    }
    let layout = Layout::new(data, &sample, style);
    let pages = layout.rows.len().div_ceil(layout.rows_a_page);
    let rows_a_page = layout.rows.len().div_ceil(pages);
    let mut drawings = Vec::new();
    for (page, rows) in layout.rows.chunks(rows_a_page).enumerate() {
        let mut drawing = draw_page(data, rows, &sample, &layout, style);
        if pages > 1 {
            drawing.name = format!("variables-{}", page + 1);
            drawing.caption = format!("{} Page {} of {pages}.", drawing.caption, page + 1);
        }
        drawings.push(drawing);
    }
    drawings
}

/// The figure of a run without weighted draws.
fn nothing(style: &Style) -> Drawing {
    let mut canvas = Canvas::new(style.width(), 8.0 * style.unit());
    let middle = (style.width() / 2.0, 4.0 * style.unit());
    canvas.write("no draw has weight", middle, Anchor::Middle, style.plain(REFERENCE));
    let (name, caption) = ("variables".to_owned(), "No draw has weight.".to_owned());
    Drawing { name, caption, table: Table::new(&COLUMNS), canvas, dpi: style.dpi() }
}

fn draw_page(data: &VariablesData, rows: &[Prepared], sample: &Thinned, layout: &Layout, style: &Style) -> Drawing {
    let unit = style.unit();
    let outline = Pen::solid(MODELLED, 0.09 * unit);
    let entries = [
        (Sample::Field(MEASURED_TINT, Pen::solid(MEASURED, 0.6 * style.stroke())), "weighted draws".to_owned()),
        (Sample::Line(Pen::solid(MODELLED, 0.8 * style.stroke())), "proposal".to_owned()),
        (Sample::Dot(1.4 * DOT * unit, MEASURED, 0.8), format!("1/{DOTS} of the weight")),
        (Sample::Outline(outline), "component, 1 sd".to_owned()),
    ];
    let entries = &entries[..if layout.cells.len() == 1 { 2 } else { 4 }];
    let key = Key::new(entries, style.width() - 2.0 * MARGIN * unit, style);
    let top = key.height(style) + 0.2 * unit;
    let height = top + rows.len() as f64 * layout.row_height(style);
    let mut canvas = Canvas::new(style.width(), height);
    key.draw(&mut canvas, style, (MARGIN * unit, 0.2 * unit));
    let mut table = Table::new(&COLUMNS);
    for (i, row) in rows.iter().enumerate() {
        let row_top = top + i as f64 * layout.row_height(style) + layout.head(style);
        let column = &data.variables[row.row.variable];
        let letter = char::from(b'a' + i as u8).to_string();
        for (k, (y, &(left, right))) in row.y.iter().zip(&layout.cells).enumerate() {
            let area = Area { left, top: row_top, right, bottom: row_top + layout.height };
            let panel =
                Panel { area, x: axis(column, &sample.weights, Along::Page, area.width(), style), y: y.clone() };
            let start = (title_start(k, left, y, style), row_top - 0.75 * unit);
            heading(&mut canvas, style, if k == 0 { &letter } else { "" }, &row.titles[k], start);
            if k == 0 {
                row.marginal.draw(&mut canvas, style, &panel);
                let middle = f64::midpoint(left, layout.cells[row.y.len() - 1].1);
                let baseline = area.bottom + bottom_room(style) + 1.05 * unit;
                write_name(&mut canvas, style, column, &panel.x, (middle, baseline));
            } else {
                draw_pair(&mut canvas, &panel, data, row.row, row.partners[k - 1], sample, (DOT * unit, outline));
            }
            panel.axes(&mut canvas, style, true);
        }
        add_rows(&mut table, data, row, sample);
    }
    let (name, caption) = ("variables".to_owned(), caption(data, rows, sample));
    Drawing { name, caption, table, canvas, dpi: style.dpi() }
}

/// Writes the name of a row's variable below its panels, as near to their middle as the page allows.
fn write_name(canvas: &mut Canvas, style: &Style, column: &VariableColumn, x: &Axis, (middle, baseline): Spot) {
    let unit = style.unit();
    let room = canvas.width() - 2.0 * MARGIN * unit;
    let title = title_lines(x, column.title(), column.unit.as_deref(), room, unit, 1).concat();
    let half = width(&title, unit, Face::Regular) / 2.0 + MARGIN * unit;
    let middle = middle.min(canvas.width() - half).max(half);
    canvas.write(&title, (middle, baseline), Anchor::Middle, style.plain(INK));
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

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::dependence::strongest_partners;
    use super::super::table::Cell;
    use super::*;
    use crate::numeric::normal;
    use crate::numeric::uniform;

    /// Draws of `d` variables of the Ellenmere spillway (invented), with curves and outlines computed from them.
    fn data(d: usize, name: impl Fn(usize) -> String, value: impl Fn(usize, f64) -> f64, heavy: bool) -> VariablesData {
        let n = 1500;
        let mut stream = crate::numeric::stream(7, crate::numeric::Purpose::Trial, 0, 0);
        let mut scores: Vec<Vec<f64>> = vec![Vec::with_capacity(n); d];
        for i in 0..n {
            for j in 0..d {
                let fresh = normal::draw(&mut stream);
                let score = match j {
                    0 => fresh,
                    1 => 0.6 * (scores[0][i] * scores[0][i] - 1.0) + 0.4 * fresh,
                    _ => 0.7 * scores[j - 1][i] + 0.7 * fresh,
                };
                scores[j].push(score);
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
                libm::exp(-steps[k] * steps[k] / 2.6) / (1.3 * std::f64::consts::TAU).sqrt() / slope.abs()
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
        let mut counts =
            data(3, short, |j, s| if j == 1 { (4.0 + 1.5 * s).round().max(0.0) } else { mild(j, s) }, false);
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
            let found =
                pages.iter().filter(|page| page.table.rows().iter().any(|row| row[0] == Cell::Text(want.clone())));
            assert_eq!(found.count(), 1, "{want}");
        }
    }
}
