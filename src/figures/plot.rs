//! The page drawn with `plotters`: marks and texts become elements on a drawing area.
//!
//! The areas of `plotters` count whole steps. A step is taken small, a hundredth of a point or less, so that slanted
//! lines stay smooth and letters evenly spaced; each writer knows how many steps make its own unit.

use plotters::coord::Shift;
use plotters::drawing::DrawingArea;
use plotters::drawing::DrawingAreaErrorKind;
use plotters::element::Circle;
use plotters::element::PathElement;
use plotters::element::Polygon;
use plotters::element::Text;
use plotters::style::Color as _;
use plotters::style::FontDesc;
use plotters::style::FontFamily;
use plotters::style::FontStyle;
use plotters::style::RGBAColor;
use plotters::style::RGBColor;
use plotters::style::ShapeStyle;
use plotters::style::TextStyle;
use plotters::style::text_anchor::HPos;
use plotters::style::text_anchor::Pos;
use plotters::style::text_anchor::VPos;
use plotters_backend::DrawingBackend;

use super::canvas::Canvas;
use super::canvas::LabelBox;
use super::canvas::Mark;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::PAPER;
use super::text::Face;
use super::text::Spot;

/// Fonts asked for, the one the layout was made with first.
const FONTS: &str = "DejaVu Sans, Verdana, Arial, sans-serif";
/// Font sizes of `plotters` for an em of one: its backends set `size / 1.24` to the em.
pub(super) const FONT_SIZE: f64 = 1.24;
/// Top of a text of `plotters` above its baseline, in ems: what its SVG adds to a text hung by its top.
pub(super) const TOP: f64 = 0.76;

/// What can go wrong on an area of the backend `B`.
pub(super) type PlotError<B> = DrawingAreaErrorKind<<B as DrawingBackend>::ErrorType>;

/// Draws the paper, all marks from the lowest layer up, then all texts; `steps` of the area make a point.
pub(super) fn plot<B: DrawingBackend>(
    canvas: &Canvas,
    area: &DrawingArea<B, Shift>,
    steps: f64,
) -> Result<(), PlotError<B>> {
    let place = |&(x, y): &Spot| (whole(x * steps), whole(y * steps));
    area.fill(&ink(PAPER, 1.0))?;
    for mark in canvas.marks() {
        match mark {
            Mark::Fill { corners, colour, opacity } => {
                let corners: Vec<(i32, i32)> = corners.iter().map(place).collect();
                area.draw(&Polygon::new(corners, ink(*colour, *opacity)))?;
            }
            Mark::Line { spots, pen } => {
                let style = ShapeStyle::from(ink(pen.colour, pen.opacity)).stroke_width(length(pen.width * steps));
                for piece in pieces(spots, pen) {
                    area.draw(&PathElement::new(piece.iter().map(place).collect::<Vec<_>>(), style))?;
                }
            }
            Mark::Disc { centre, radius, colour, opacity } => {
                let radius = length(radius * steps);
                area.draw(&Circle::new(place(centre), radius, ink(*colour, *opacity).filled()))?;
            }
        }
    }
    for label in canvas.labels() {
        let text: String = label.text.chars().map(|c| if c.is_control() { ' ' } else { c }).collect();
        let top = (label.left, label.baseline - TOP * label.size);
        area.draw(&Text::new(text, place(&top), lettering(label, steps)))?;
    }
    area.present()
}

/// How a label is set: hung by its upper left corner.
fn lettering(label: &LabelBox, steps: f64) -> TextStyle<'static> {
    let face = if label.face == Face::Bold { FontStyle::Bold } else { FontStyle::Normal };
    let font = FontDesc::new(FontFamily::Name(FONTS), label.size * steps * FONT_SIZE, face);
    font.color(&ink(label.colour, 1.0)).pos(Pos::new(HPos::Left, VPos::Top))
}

fn ink(colour: Colour, opacity: f64) -> RGBAColor {
    let [red, green, blue] = colour.channels;
    RGBColor(red, green, blue).mix(opacity)
}

fn whole(steps: f64) -> i32 {
    steps.round() as i32
}

fn length(steps: f64) -> u32 {
    (steps.round() as u32).max(1)
}

/// The visible pieces of a line.
fn pieces(spots: &[Spot], pen: &Pen) -> Vec<Vec<Spot>> {
    let Some((on, off)) = pen.dash.filter(|(on, off)| *on > 0.0 && *off > 0.0) else { return vec![spots.to_vec()] };
    let (mut pieces, mut drawing, mut left) = (Vec::new(), true, on);
    let mut piece: Vec<Spot> = spots.first().copied().into_iter().collect();
    for pair in spots.windows(2) {
        let (dx, dy) = (pair[1].0 - pair[0].0, pair[1].1 - pair[0].1);
        let length = (dx * dx + dy * dy).sqrt();
        let mut gone = 0.0;
        while length - gone > left {
            gone += left;
            let spot = (pair[0].0 + dx * gone / length, pair[0].1 + dy * gone / length);
            if drawing {
                piece.push(spot);
                pieces.push(std::mem::take(&mut piece));
            } else {
                piece = vec![spot];
            }
            drawing = !drawing;
            left = if drawing { on } else { off };
        }
        left -= length - gone;
        if drawing {
            piece.push(pair[1]);
        }
    }
    if piece.len() > 1 {
        pieces.push(piece);
    }
    pieces
}

#[cfg(test)]
mod tests {
    use super::super::colour::INK;
    use super::*;

    #[test]
    fn dashes_leave_gaps() {
        let line = [(0.0, 5.0), (10.0, 5.0), (30.0, 5.0)];
        let pieces = pieces(&line, &Pen::solid(INK, 1.0).dashed(4.0, 2.0));
        assert_eq!(pieces.len(), 5);
        let inked: f64 = pieces.iter().map(|piece| piece[piece.len() - 1].0 - piece[0].0).sum();
        assert!((inked - 20.0).abs() < 1e-9, "{inked}");
    }
}
