//! A figure of panels as wide as the page, above each other over one axis: keys, titles, axes and notes.

use super::Drawing;
use super::Style;
use super::TEXT_PART;
use super::axis::Along;
use super::axis::Axis;
use super::axis::Room;
use super::axis::Scale;
use super::canvas::Anchor;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::INK;
use super::colour::REFERENCE;
use super::columns::title_lines;
use super::heading;
use super::key::Key;
use super::key::Sample;
use super::panel::Panel;
use super::panel::bottom_room;
use super::panel::left_room;
use super::place::Area;
use super::table::Table;
use super::text;
use super::text::Face;
use super::text::Spot;

/// Height of the only panel of a figure, in text sizes.
pub(super) const SINGLE: f64 = 17.0;
/// Space at the edges of the page, in text sizes.
const MARGIN: f64 = 0.3;

/// An axis to be: what it says and what it shows.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Side<'a> {
    pub(super) name: &'a str,
    pub(super) unit: Option<&'a str>,
    /// Its ends and spacing.
    pub(super) range: (f64, f64, Scale),
}

/// Panels that are being drawn.
pub(super) struct Frame<'a> {
    pub(super) canvas: Canvas,
    pub(super) panels: Vec<Panel>,
    style: &'a Style,
    titles: Vec<String>,
    x_title: String,
}

impl<'a> Frame<'a> {
    /// The panels `rows`, each with its height in text sizes, under the key of `entries`; on pages whose text has
    /// stopped growing with their width, heights go on growing.
    pub(super) fn new(x: &Side, rows: &[(Side, f64)], entries: &[(Sample, String)], style: &'a Style) -> Self {
        let (unit, page) = (style.unit(), style.width() - 2.0 * MARGIN * style.unit());
        let key = Key::new(entries, page, style);
        let head = 2.2 * unit;
        let grown = (style.width() * TEXT_PART / unit).max(1.0);
        let axis = |side: &Side, room: Room| Axis::new(side.range.0, side.range.1, side.range.2, room);
        let column = |height: f64| Room {
            along: Along::Column,
            length: height * grown * unit,
            size: unit,
            most: (height / 2.2).clamp(3.0, 8.0) as usize,
        };
        let ys: Vec<Axis> = rows.iter().map(|(side, height)| axis(side, column(*height))).collect();
        let left = ys.iter().map(|y| left_room(y, style)).fold(0.0, f64::max) + MARGIN * unit;
        let along = |right: f64| Room { along: Along::Page, length: right - left, size: unit, most: 7 };
        // The last label may reach over the end of its axis by half of its width.
        let widest = style.width() - MARGIN * unit;
        let right = widest - axis(x, along(widest)).label_width(unit) / 2.0 - 0.3 * unit;
        let x_axis = axis(x, along(right));

        let mut at = key.height(style) + 0.2 * unit;
        let (mut panels, mut titles) = (Vec::new(), Vec::new());
        let letter = if rows.len() > 1 { text::width("m", unit, Face::Bold) + 0.5 * unit } else { 0.0 };
        for ((side, height), y) in rows.iter().zip(ys) {
            let area = Area { left, top: at + head, right, bottom: at + head + height * grown * unit };
            titles.push(title_lines(&y, side.name, side.unit, page - letter, unit, 1).concat());
            panels.push(Panel { area, x: x_axis.clone(), y });
            at = area.bottom + 0.9 * unit;
        }
        let bottom = panels.last().map_or(at, |panel| panel.area.bottom);
        let mut canvas = Canvas::new(style.width(), bottom + bottom_room(style) + 1.7 * unit);
        key.draw(&mut canvas, style, (MARGIN * unit, 0.2 * unit));
        let x_title = title_lines(&x_axis, x.name, x.unit, page, unit, 1).concat();
        Self { canvas, panels, style, titles, x_title }
    }

    /// Draws a line through data points of panel `k`, cut at its edges.
    pub(super) fn curve(&mut self, k: usize, points: impl IntoIterator<Item = (f64, f64)>, pen: Pen) {
        self.panels[k].curve(&mut self.canvas, points, pen);
    }

    /// Writes where nothing is drawn in panel `k`, as near as can be to a spot of the page.
    pub(super) fn note(&mut self, k: usize, note: &str, near: Spot, colour: Colour) {
        let unit = self.style.unit();
        let inside = 0.2 * unit;
        let Area { left, top, right, bottom } = self.panels[k].area;
        let room = Area { left: left + inside, top: top + inside, right: right - inside, bottom: bottom - inside };
        let note = text::shorten(note, room.width() - 0.4 * unit, unit, Face::Regular);
        let size = (text::width(&note, unit, Face::Regular) + 0.4 * unit, 1.3 * unit);
        let area = self.canvas.free_area(room, size, near);
        let spot = (area.left + 0.2 * unit, area.bottom - 0.35 * unit);
        self.canvas.write(&note, spot, Anchor::Start, self.style.plain(colour));
    }

    /// Says in the middle of panel `k` why it is empty.
    pub(super) fn say(&mut self, k: usize, why: &str) {
        let Area { left, top, right, bottom } = self.panels[k].area;
        self.note(k, why, (f64::midpoint(left, right), f64::midpoint(top, bottom)), REFERENCE);
    }

    /// Draws titles and axes over what was drawn.
    pub(super) fn finish(mut self, name: &str, caption: String, table: Table) -> Drawing {
        let (style, unit) = (self.style, self.style.unit());
        let canvas = &mut self.canvas;
        let last = self.panels.len() - 1;
        for (k, (panel, title)) in self.panels.iter().zip(&self.titles).enumerate() {
            panel.axes(canvas, style, k == last);
            let letter = if last > 0 { char::from(b'a' + k as u8).to_string() } else { String::new() };
            let start = (MARGIN * unit, panel.area.top - 0.75 * unit);
            heading(canvas, style, &letter, std::slice::from_ref(title), start);
        }
        let half = text::width(&self.x_title, unit, Face::Regular) / 2.0 + MARGIN * unit;
        let Area { left, right, .. } = self.panels[last].area;
        let middle = f64::midpoint(left, right).min(canvas.width() - half).max(half);
        let baseline = canvas.height() - 0.5 * unit;
        canvas.write(&self.x_title, (middle, baseline), Anchor::Middle, style.plain(INK));
        Drawing { name: name.to_owned(), caption, table, canvas: self.canvas, dpi: style.dpi() }
    }
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;

    #[test]
    fn frames_hold_long_titles_and_wide_labels() {
        let long = "discharge_coefficient_of_the_left_spillway_gate_at_ellenmere_in_the_year_of_the_great_flood";
        let side = |name, range| Side { name, unit: Some("m³/s"), range };
        for (name, x, y) in [
            ("plain", (0.0, 1e5, Scale::Linear), (1e-9, 1.0, Scale::Log)),
            ("powers", (1.0, 1e6, Scale::Log), (1e9 + 0.1, 1e9 + 0.9, Scale::Linear)),
        ] {
            checks::check(&format!("frame-{name}"), |style| {
                let rows = [(side(long, y), SINGLE), (side("level", (-1e5, 1e5, Scale::Linear)), 6.0)];
                let entries = [(Sample::Line(Pen::solid(INK, 1.0)), long.to_owned())];
                let mut frame = Frame::new(&side(long, x), &rows, &entries, style);
                frame.say(0, long);
                frame.curve(1, [(x.0, -1e5), (x.1, 1e5)], Pen::solid(INK, 1.0));
                frame.say(1, "a note");
                vec![frame.finish("frame", "caption".to_owned(), Table::default())]
            });
        }
    }
}
