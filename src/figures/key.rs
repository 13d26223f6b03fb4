//! A key in running lines: what the marks of a figure with many panels stand for.

use super::LINE;
use super::Style;
use super::canvas::Anchor;
use super::canvas::Area;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::INK;
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
}

/// Marks and what they stand for.
#[derive(Debug, Clone, PartialEq)]
pub struct Key {
    lines: Vec<Vec<(Sample, String)>>,
}

impl Key {
    /// Sets the entries into lines of at most `room` points.
    #[must_use]
    pub fn new(entries: &[(Sample, String)], room: f64, style: &Style) -> Self {
        let mut lines: Vec<Vec<(Sample, String)>> = Vec::new();
        let mut filled = 0.0;
        for (sample, text) in entries {
            let text = shorten(text, room - indent(style), style.unit(), Face::Regular);
            let needed = entry_width(&text, style);
            match lines.last_mut() {
                Some(line) if filled + needed <= room + gap(style) => line.push((*sample, text)),
                _ => {
                    lines.push(vec![(*sample, text)]);
                    filled = 0.0;
                }
            }
            filled += needed;
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
        for (i, line) in self.lines.iter().enumerate() {
            let baseline = top + (0.9 + 1.1 * LINE * i as f64) * unit;
            let mut at = left;
            for (sample, text) in line {
                draw_sample(canvas, style, *sample, (at, baseline - 0.32 * unit));
                canvas.write(text, (at + indent(style), baseline), Anchor::Start, style.plain(INK));
                at += entry_width(text, style);
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

fn entry_width(text: &str, style: &Style) -> f64 {
    indent(style) + width(text, style.unit(), Face::Regular) + gap(style)
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
        let mut canvas = Canvas::new(300.0, 300.0);
        key.draw(&mut canvas, &style, (0.0, 0.0));
        assert_eq!(canvas.labels().len(), 5);
        let bottom = canvas.labels().iter().map(|label| label.area().bottom).fold(0.0, f64::max);
        assert!(bottom <= key.height(&style) + 1e-9, "{bottom} {}", key.height(&style));
    }
}
