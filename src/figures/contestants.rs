//! The looks of things that are compared: a colour, a dash and a marker each, so that none rests on its hue alone.

use super::Style;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::text::Spot;

/// Colours by turns. The first two are those of every other figure.
const COLOURS: [Colour; 6] = [
    MEASURED,
    MODELLED,
    Colour { channels: [0, 116, 104] },
    Colour { channels: [128, 55, 138] },
    REFERENCE,
    Colour { channels: [112, 96, 0] },
];
/// Dash and gap by turns, in text sizes.
const DASHES: [Option<(f64, f64)>; 6] =
    [None, Some((0.9, 0.35)), Some((0.4, 0.3)), Some((1.6, 0.4)), Some((0.16, 0.28)), Some((0.65, 0.65))];
/// Markers by turns.
const SHAPES: [Shape; 6] = [Shape::Disc, Shape::Square, Shape::Diamond, Shape::Up, Shape::Ring, Shape::Down];

/// A marker.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Shape {
    /// A filled circle.
    Disc,
    /// An open circle.
    Ring,
    /// A square.
    Square,
    /// A square on its corner.
    Diamond,
    /// A triangle pointing up.
    Up,
    /// A triangle pointing down.
    Down,
}

impl Shape {
    /// Draws it around `(x, y)`; all shapes of one radius (points) look equally large.
    pub fn draw(self, canvas: &mut Canvas, (x, y): Spot, radius: f64, colour: Colour) {
        let r = radius;
        let corners: &[Spot] = match self {
            Self::Disc => return canvas.disc((x, y), r, colour, 1.0),
            Self::Ring => return canvas.ring((x, y), 1.1 * r, 0.4 * r, colour),
            Self::Square => &[(-0.88, -0.88), (0.88, -0.88), (0.88, 0.88), (-0.88, 0.88)],
            Self::Diamond => &[(-1.25, 0.0), (0.0, -1.25), (1.25, 0.0), (0.0, 1.25)],
            Self::Up => &[(-1.2, 0.85), (0.0, -1.25), (1.2, 0.85)],
            Self::Down => &[(-1.2, -0.85), (0.0, 1.25), (1.2, -0.85)],
        };
        let corners = corners.iter().map(|(dx, dy)| (x + dx * r, y + dy * r)).collect();
        canvas.keep_clear((x, y), r);
        canvas.fill(corners, colour, 1.0);
    }
}

/// How one of the things compared is drawn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Look {
    /// Its line; the colour is that of its marker and name too.
    pub pen: Pen,
    /// Its marker.
    pub shape: Shape,
}

/// The look of the thing of number `k`.
#[must_use]
pub fn look(k: usize, style: &Style) -> Look {
    // After six the colours come again with the dash and marker of another.
    let turned = (k + k / COLOURS.len()) % DASHES.len();
    let pen = Pen::solid(COLOURS[k % COLOURS.len()], 0.85 * style.stroke());
    let pen = DASHES[turned].map_or(pen, |(on, off)| pen.dashed(on * style.unit(), off * style.unit()));
    Look { pen, shape: SHAPES[turned] }
}

#[cfg(test)]
mod tests {
    use super::super::colour::PAPER;
    use super::*;

    #[test]
    fn looks_are_readable_and_differ() {
        let style = Style::default();
        let looks: Vec<Look> = (0..18).map(|k| look(k, &style)).collect();
        for (k, one) in looks.iter().enumerate() {
            assert!(one.pen.colour.contrast(PAPER) >= 4.5, "{k}: {}", one.pen.colour.contrast(PAPER));
            assert!(looks[k + 1..].iter().all(|other| other != one), "{k}");
        }
        for (k, one) in looks[..6].iter().enumerate() {
            assert!(looks[k + 1..6].iter().all(|other| other.shape != one.shape && other.pen.dash != one.pen.dash));
        }
    }

    #[test]
    fn shapes_keep_labels_away() {
        for shape in SHAPES {
            let mut canvas = Canvas::new(100.0, 100.0);
            shape.draw(&mut canvas, (50.0, 50.0), 3.0, MEASURED);
            assert!(canvas.crowding(&canvas.page()) > 0 && !canvas.marks().is_empty(), "{shape:?}");
        }
    }
}
