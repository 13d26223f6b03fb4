//! A panel: a rectangle of the page with an axis along its bottom and one along its left side.

use super::Style;
use super::axis::Axis;
use super::canvas::Anchor;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::INK;
use super::place::Area;
use super::text::Spot;
use super::ticks::Tick;

/// A rectangle with two axes.
#[derive(Debug, Clone, PartialEq)]
pub struct Panel {
    /// The rectangle, points on the page.
    pub area: Area,
    /// Axis along the bottom.
    pub x: Axis,
    /// Axis along the left side.
    pub y: Axis,
}

impl Panel {
    /// Where `(x, y)` lies on the page.
    #[must_use]
    pub fn spot(&self, x: f64, y: f64) -> Spot {
        (self.area.left + self.x.place(x) * self.area.width(), self.area.bottom - self.y.place(y) * self.area.height())
    }

    /// Draws the axes; labels below the bottom axis only if `say_x`.
    pub fn axes(&self, canvas: &mut Canvas, style: &Style, say_x: bool) {
        self.bottom_axis(canvas, style, say_x);
        self.left_axis(canvas, style);
    }

    /// Draws the bottom axis.
    pub fn bottom_axis(&self, canvas: &mut Canvas, style: &Style, say: bool) {
        let (unit, pen) = (style.unit(), Pen::solid(INK, style.hairline()));
        let bottom = self.area.bottom;
        canvas.line(vec![(self.area.left - pen.width / 2.0, bottom), (self.area.right, bottom)], pen);
        let x_of = |value: f64| self.area.left + self.x.place(value).clamp(0.0, 1.0) * self.area.width();
        for Tick { at, label } in self.x.ticks() {
            canvas.line(vec![(x_of(*at), bottom), (x_of(*at), bottom + style.tick())], pen);
            if say {
                canvas.write(label, (x_of(*at), bottom + style.tick() + 1.1 * unit), Anchor::Middle, style.plain(INK));
            }
        }
        for &at in self.x.minor() {
            canvas.line(vec![(x_of(at), bottom), (x_of(at), bottom + 0.5 * style.tick())], pen);
        }
    }

    /// Draws the left axis.
    pub fn left_axis(&self, canvas: &mut Canvas, style: &Style) {
        let (unit, pen) = (style.unit(), Pen::solid(INK, style.hairline()));
        let left = self.area.left;
        canvas.line(vec![(left, self.area.bottom), (left, self.area.top)], pen);
        let y_of = |value: f64| self.area.bottom - self.y.place(value).clamp(0.0, 1.0) * self.area.height();
        for Tick { at, label } in self.y.ticks() {
            canvas.line(vec![(left - style.tick(), y_of(*at)), (left, y_of(*at))], pen);
            let spot = (left - style.tick() - 0.25 * unit, y_of(*at) + 0.36 * unit);
            canvas.write(label, spot, Anchor::End, style.plain(INK));
        }
        for &at in self.y.minor() {
            canvas.line(vec![(left - 0.5 * style.tick(), y_of(at)), (left, y_of(at))], pen);
        }
    }

    /// Draws a line through data points, cut at the edges of the panel; a point that is not finite breaks it.
    pub fn curve(&self, canvas: &mut Canvas, points: impl IntoIterator<Item = (f64, f64)>, pen: Pen) {
        for piece in self.clipped(points) {
            canvas.curve(piece, pen);
        }
    }

    /// The visible pieces of a line through data points.
    #[must_use]
    pub fn clipped(&self, points: impl IntoIterator<Item = (f64, f64)>) -> Vec<Vec<Spot>> {
        let mut pieces: Vec<Vec<Spot>> = Vec::new();
        let mut before: Option<Spot> = None;
        for (x, y) in points {
            let spot = self.spot(x, y);
            if !(spot.0.is_finite() && spot.1.is_finite()) {
                before = None;
                continue;
            }
            if let Some((from, to)) = before.and_then(|last| cut(last, spot, &self.area)) {
                match pieces.last_mut() {
                    Some(piece) if piece.last() == Some(&from) => piece.push(to),
                    _ => pieces.push(vec![from, to]),
                }
            }
            before = Some(spot);
        }
        pieces
    }

    /// Whether the panel shows `(x, y)`.
    #[must_use]
    pub fn shows(&self, x: f64, y: f64) -> bool {
        self.x.shows(x) && self.y.shows(y)
    }
}

/// Room that the labels of a left axis take, points.
#[must_use]
pub fn left_room(axis: &Axis, style: &Style) -> f64 {
    axis.label_width(style.unit()) + style.tick() + 0.25 * style.unit()
}

/// Room that ticks and labels of a bottom axis take, points.
#[must_use]
pub fn bottom_room(style: &Style) -> f64 {
    style.tick() + 1.4 * style.unit()
}

/// The part of the straight piece from `a` to `b` inside `area` (Liang & Barsky 1984, ACM Trans. Graph. 3:1).
fn cut(a: Spot, b: Spot, area: &Area) -> Option<(Spot, Spot)> {
    let (dx, dy) = (b.0 - a.0, b.1 - a.1);
    let (mut enter, mut leave) = (0.0_f64, 1.0_f64);
    let sides = [(-dx, a.0 - area.left), (dx, area.right - a.0), (-dy, a.1 - area.top), (dy, area.bottom - a.1)];
    for (speed, distance) in sides {
        if speed == 0.0 {
            if distance < 0.0 {
                return None;
            }
        } else if speed < 0.0 {
            enter = enter.max(distance / speed);
        } else {
            leave = leave.min(distance / speed);
        }
    }
    if enter > leave {
        return None;
    }
    let at = |t: f64| {
        if t == 0.0 {
            a
        } else if t == 1.0 {
            b
        } else {
            (a.0 + t * dx, a.1 + t * dy)
        }
    };
    Some((at(enter), at(leave)))
}

#[cfg(test)]
mod tests {
    use super::super::axis::Along;
    use super::super::axis::Room;
    use super::super::axis::Scale;
    use super::*;

    fn panel() -> Panel {
        let room = Room { along: Along::Page, length: 100.0, size: 6.0, most: 5 };
        Panel {
            area: Area { left: 10.0, top: 20.0, right: 110.0, bottom: 70.0 },
            x: Axis::new(0.0, 10.0, Scale::Linear, room),
            y: Axis::new(0.0, 1.0, Scale::Linear, room),
        }
    }

    #[test]
    fn data_lie_between_the_axes() {
        let panel = panel();
        assert_eq!(panel.spot(0.0, 0.0), (10.0, 70.0));
        assert_eq!(panel.spot(10.0, 1.0), (110.0, 20.0));
        assert!(panel.shows(5.0, 0.5) && !panel.shows(11.0, 0.5));
    }

    #[test]
    fn lines_are_cut_at_the_edges() {
        let pieces =
            panel().clipped([(-5.0, 0.5), (5.0, 0.5), (5.0, 2.0), (7.0, 2.0), (f64::NAN, 0.0), (1.0, 0.1), (2.0, 0.1)]);
        assert_eq!(pieces.len(), 2, "{pieces:?}");
        assert_eq!(pieces[0], vec![(10.0, 45.0), (60.0, 45.0), (60.0, 20.0)]);
        assert_eq!(pieces[1].len(), 2);
    }
}
