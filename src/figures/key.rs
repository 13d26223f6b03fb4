//! A key: what the marks of a figure with many panels stand for.

use super::LINE;
use super::Style;
use super::canvas::Anchor;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::INK;
use super::contestants::Look;
use super::place::Area;
use super::text::Face;
use super::text::shorten;
use super::text::width;

/// A mark shown in a key.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Sample {
    /// A line.
    Line(Pen),
    /// A filled rectangle with a rim.
    Field(Colour, Pen),
    /// A dot: radius in points, colour, opacity.
    Dot(f64, Colour, f64),
    /// A closed outline.
    Outline(Pen),
    /// A line with a marker of a radius in points.
    Marked(Look, f64),
    /// A marker alone.
    Marker(Look, f64),
}

/// Marks and what they stand for.
#[derive(Debug, Clone, PartialEq)]
pub struct Key {
    lines: Vec<Vec<(Sample, String)>>,
}

impl Key {
    /// Sets the entries into as few lines of at most `room` points as will do, in equal columns.
    #[must_use]
    pub fn new(entries: &[(Sample, String)], room: f64, style: &Style) -> Self {
        let entries: Vec<(Sample, String)> = entries
            .iter()
            .map(|(sample, text)| (*sample, shorten(text, room - indent(style), style.unit(), Face::Regular)))
            .collect();
        // The fewest lines on which equal columns fit.
        let mut lines: Vec<Vec<(Sample, String)>> = Vec::new();
        for count in 1..=entries.len() {
            lines = entries.chunks(entries.len().div_ceil(count)).map(<[_]>::to_vec).collect();
            let needed: f64 = column_widths(&lines, style).iter().sum();
            if needed <= room + gap(style) {
                break;
            }
        }
        Self { lines }
    }

    /// Height, points.
    #[must_use]
    pub fn height(&self, style: &Style) -> f64 {
        self.lines.len() as f64 * 1.1 * LINE * style.unit()
    }

    /// Draws it with its upper left corner at `(left, top)`.
    pub fn draw(&self, canvas: &mut Canvas, style: &Style, (left, top): super::text::Spot) {
        let unit = style.unit();
        let widths = column_widths(&self.lines, style);
        for (i, line) in self.lines.iter().enumerate() {
            let baseline = top + (0.9 + 1.1 * LINE * i as f64) * unit;
            let mut at = left;
            for ((sample, text), width) in line.iter().zip(&widths) {
                draw_sample(canvas, style, *sample, (at, baseline - 0.32 * unit));
                canvas.write(text, (at + indent(style), baseline), Anchor::Start, style.plain(INK));
                at += width;
            }
        }
    }
}

fn gap(style: &Style) -> f64 {
    1.4 * style.unit()
}

fn indent(style: &Style) -> f64 {
    2.0 * style.unit()
}

/// Width of each column with the gap behind it.
fn column_widths(lines: &[Vec<(Sample, String)>], style: &Style) -> Vec<f64> {
    let columns = lines.first().map_or(0, Vec::len);
    let width = |line: &Vec<(Sample, String)>, k: usize| {
        line.get(k).map_or(0.0, |(_, text)| width(text, style.unit(), Face::Regular))
    };
    (0..columns)
        .map(|k| indent(style) + lines.iter().map(|line| width(line, k)).fold(0.0, f64::max) + gap(style))
        .collect()
}

fn draw_sample(canvas: &mut Canvas, style: &Style, sample: Sample, (x, y): super::text::Spot) {
    let unit = style.unit();
    let middle = (x + 0.75 * unit, y);
    match sample {
        Sample::Line(pen) => canvas.line(vec![(x, y), (x + 1.5 * unit, y)], pen),
        Sample::Field(colour, pen) => {
            let area = Area { left: x, top: y - 0.35 * unit, right: x + 1.5 * unit, bottom: y + 0.35 * unit };
            canvas.fill_area(area, colour);
            canvas.line(vec![(area.left, area.top), (area.right, area.top)], pen);
        }
        Sample::Marked(look, radius) => {
            canvas.line(vec![(x, y), (x + 1.5 * unit, y)], look.pen);
            look.shape.draw(canvas, middle, radius, look.pen.colour);
        }
        Sample::Marker(look, radius) => look.shape.draw(canvas, middle, radius, look.pen.colour),
        Sample::Dot(radius, colour, opacity) => canvas.disc(middle, radius, colour, opacity),
        Sample::Outline(pen) => {
            let ellipse = (0..=40).map(|i| {
                let angle = f64::from(i) * std::f64::consts::TAU / 40.0;
                (middle.0 + 0.75 * unit * libm::cos(angle), middle.1 + 0.38 * unit * libm::sin(angle))
            });
            canvas.line(ellipse.collect(), pen);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn entries_run_on_to_the_next_line() {
        let style = Style::default();
        let entries: Vec<(Sample, String)> =
            (0..5).map(|i| (Sample::Dot(1.0, INK, 1.0), format!("entry number {i}"))).collect();
        let key = Key::new(&entries, 300.0, &style);
        assert_eq!(key.lines.iter().map(Vec::len).collect::<Vec<_>>(), [2, 2, 1]);
        let few = Key::new(&entries[..4], 400.0, &style);
        assert_eq!(few.lines.iter().map(Vec::len).collect::<Vec<_>>(), [2, 2], "not three and one");
        let mut canvas = Canvas::new(300.0, 300.0);
        key.draw(&mut canvas, &style, (0.0, 0.0));
        assert_eq!(canvas.labels().len(), 5);
        let bottom = canvas.labels().iter().map(|label| label.area().bottom).fold(0.0, f64::max);
        assert!(bottom <= key.height(&style) + 1e-9, "{bottom} {}", key.height(&style));
    }
}
