//! The page while a figure is drawn: a list of marks and a list of text boxes, in points.
//!
//! Both writers ([`raster`](super::raster), [`svg`](super::svg)) read these lists, so a picture is laid out once and
//! the text boxes can be checked: inside the page, apart from each other, large enough, readable.

use super::colour::Colour;
use super::colour::PAPER;
use super::place::Area;
use super::text;
use super::text::Face;
use super::text::Spot;

/// A text on the page.
#[derive(Debug, Clone, PartialEq)]
pub struct LabelBox {
    /// What it says.
    pub text: String,
    /// Start of the text, points from the left edge.
    pub left: f64,
    /// Its baseline, points from the top edge.
    pub baseline: f64,
    /// Width as set, points.
    pub width: f64,
    /// Text size (em), points.
    pub size: f64,
    /// Face.
    pub face: Face,
    /// Colour of the letters.
    pub colour: Colour,
    /// What they stand on.
    pub ground: Colour,
}

impl LabelBox {
    /// The rectangle that ascenders and descenders may fill.
    #[must_use]
    pub fn area(&self) -> Area {
        Area {
            left: self.left,
            top: self.baseline - text::ASCENT * self.size,
            right: self.left + self.width,
            bottom: self.baseline + text::DESCENT * self.size,
        }
    }
}

/// Which point of a text is given.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// Its start.
    Start,
    /// Its middle.
    Middle,
    /// Its end.
    End,
}

/// How a line is drawn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pen {
    /// Colour.
    pub colour: Colour,
    /// Width, points.
    pub width: f64,
    /// Lengths of dash and gap, points; `None` for an unbroken line.
    pub dash: Option<(f64, f64)>,
    /// Opacity between 0 and 1.
    pub opacity: f64,
}

impl Pen {
    /// An unbroken, opaque line.
    #[must_use]
    pub fn solid(colour: Colour, width: f64) -> Self {
        Self { colour, width, dash: None, opacity: 1.0 }
    }

    /// The same pen, dashed.
    #[must_use]
    pub fn dashed(self, dash: f64, gap: f64) -> Self {
        Self { dash: Some((dash, gap)), ..self }
    }

    /// The same pen, letting through what lies below.
    #[must_use]
    pub fn faint(self, opacity: f64) -> Self {
        Self { opacity, ..self }
    }
}

/// One drawn thing.
#[derive(Debug, Clone, PartialEq)]
pub enum Mark {
    /// A filled outline of straight pieces.
    Fill {
        /// Corners; the last is joined to the first.
        corners: Vec<Spot>,
        /// Colour.
        colour: Colour,
        /// Opacity between 0 and 1.
        opacity: f64,
    },
    /// A line of straight pieces.
    Line {
        /// Its vertices.
        spots: Vec<Spot>,
        /// How it is drawn.
        pen: Pen,
    },
    /// A filled circle.
    Disc {
        /// Centre.
        centre: Spot,
        /// Radius, points.
        radius: f64,
        /// Colour.
        colour: Colour,
        /// Opacity between 0 and 1.
        opacity: f64,
    },
}

/// A page with what is drawn on it.
#[derive(Debug, Clone, PartialEq)]
pub struct Canvas {
    width: f64,
    height: f64,
    marks: Vec<Mark>,
    labels: Vec<LabelBox>,
    /// Spots along everything that a label should keep clear of.
    busy: Vec<Spot>,
    /// Filled rectangles, which texts may stand on.
    grounds: Vec<(Area, Colour)>,
}

impl Canvas {
    /// An empty page, sizes in points.
    #[must_use]
    pub fn new(width: f64, height: f64) -> Self {
        Self { width, height, marks: Vec::new(), labels: Vec::new(), busy: Vec::new(), grounds: Vec::new() }
    }

    /// Width, points.
    #[must_use]
    pub fn width(&self) -> f64 {
        self.width
    }

    /// Height, points.
    #[must_use]
    pub fn height(&self) -> f64 {
        self.height
    }

    /// The whole page.
    #[must_use]
    pub fn page(&self) -> Area {
        Area { left: 0.0, top: 0.0, right: self.width, bottom: self.height }
    }

    /// What is drawn, from the lowest layer up; all texts lie above.
    #[must_use]
    pub fn marks(&self) -> &[Mark] {
        &self.marks
    }

    /// All texts.
    #[must_use]
    pub fn labels(&self) -> &[LabelBox] {
        &self.labels
    }

    /// Fills a rectangle.
    pub fn fill_area(&mut self, area: Area, colour: Colour) {
        let corners =
            vec![(area.left, area.top), (area.right, area.top), (area.right, area.bottom), (area.left, area.bottom)];
        self.fill(corners, colour, 1.0);
        self.grounds.push((area, colour));
    }

    /// Fills an outline.
    pub fn fill(&mut self, corners: Vec<Spot>, colour: Colour, opacity: f64) {
        if corners.len() > 2 && corners.iter().all(is_finite) {
            self.marks.push(Mark::Fill { corners, colour, opacity });
        }
    }

    /// Draws a line that labels may touch (axes, ticks, guides).
    pub fn line(&mut self, spots: Vec<Spot>, pen: Pen) {
        if spots.len() > 1 && spots.iter().all(is_finite) {
            self.marks.push(Mark::Line { spots, pen });
        }
    }

    /// Draws a line that labels keep clear of.
    pub fn curve(&mut self, spots: Vec<Spot>, pen: Pen) {
        const STEP: f64 = 2.0;
        for pair in spots.windows(2) {
            let (dx, dy) = (pair[1].0 - pair[0].0, pair[1].1 - pair[0].1);
            let pieces = ((dx * dx + dy * dy).sqrt() / STEP).ceil().clamp(1.0, 1000.0);
            for i in 0..=pieces as u32 {
                let t = f64::from(i) / pieces;
                self.busy.push((pair[0].0 + t * dx, pair[0].1 + t * dy));
            }
        }
        self.line(spots, pen);
    }

    /// Draws a filled circle that labels keep clear of.
    pub fn disc(&mut self, centre: Spot, radius: f64, colour: Colour, opacity: f64) {
        if !is_finite(&centre) {
            return;
        }
        self.keep_clear(centre, radius);
        self.marks.push(Mark::Disc { centre, radius, colour, opacity });
    }

    /// Keeps labels clear of a circle.
    pub fn keep_clear(&mut self, centre: Spot, radius: f64) {
        for (dx, dy) in [(-1.0, 0.0), (1.0, 0.0), (0.0, -1.0), (0.0, 1.0), (0.0, 0.0)] {
            self.busy.push((centre.0 + dx * radius, centre.1 + dy * radius));
        }
    }

    /// Draws an open circle: a marker of paper colour with a rim.
    pub fn ring(&mut self, centre: Spot, radius: f64, rim: f64, colour: Colour) {
        self.disc(centre, radius, colour, 1.0);
        self.marks.push(Mark::Disc { centre, radius: radius - rim, colour: PAPER, opacity: 1.0 });
    }

    /// Writes `text` at a spot on its baseline; returns its box.
    pub fn write(&mut self, text: &str, at: Spot, anchor: Anchor, style: TextStyle) -> Area {
        let width = text::width(text, style.size, style.face);
        let left = match anchor {
            Anchor::Start => at.0,
            Anchor::Middle => at.0 - width / 2.0,
            Anchor::End => at.0 - width,
        };
        let mut label = LabelBox {
            text: text.to_owned(),
            left,
            baseline: at.1,
            width,
            size: style.size,
            face: style.face,
            colour: style.colour,
            ground: PAPER,
        };
        let area = label.area();
        if let Some((_, ground)) = self.grounds.iter().rev().find(|(ground, _)| ground.overlaps(&area)) {
            label.ground = *ground;
        }
        if !text.trim().is_empty() {
            self.labels.push(label);
        }
        area
    }

    /// How many of the spots that labels keep clear of, and of the labels, lie in `area`.
    #[must_use]
    pub fn crowding(&self, area: &Area) -> usize {
        self.busy.iter().filter(|&&spot| area.has(spot)).count()
            + 1000 * self.labels.iter().filter(|label| label.area().overlaps(area)).count()
    }

    /// A rectangle of `size` inside `room` in which least is drawn; among equals the one nearest to `near`.
    #[must_use]
    pub fn free_area(&self, room: Area, size: (f64, f64), near: Spot) -> Area {
        const STEPS: u32 = 40;
        let (slack_x, slack_y) = ((room.width() - size.0).max(0.0), (room.height() - size.1).max(0.0));
        let mut best: Option<(usize, f64, Area)> = None;
        for (i, j) in (0..=STEPS).flat_map(|i| (0..=STEPS).map(move |j| (i, j))) {
            let left = room.left + slack_x * f64::from(i) / f64::from(STEPS);
            let top = room.top + slack_y * f64::from(j) / f64::from(STEPS);
            let area = Area { left, top, right: left + size.0, bottom: top + size.1 };
            let (dx, dy) = ((left + area.right) / 2.0 - near.0, (top + area.bottom) / 2.0 - near.1);
            let far = dx * dx + dy * dy;
            let crowding = self.crowding(&area);
            let better = best
                .as_ref()
                .is_none_or(|(least, nearest, _)| crowding < *least || (crowding == *least && far < *nearest));
            if better {
                best = Some((crowding, far, area));
            }
        }
        best.map_or(room, |(_, _, area)| area)
    }
}

fn is_finite(spot: &Spot) -> bool {
    spot.0.is_finite() && spot.1.is_finite()
}

/// How a text is set.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TextStyle {
    /// Em, points.
    pub size: f64,
    /// Face.
    pub face: Face,
    /// Colour of the letters.
    pub colour: Colour,
}

#[cfg(test)]
mod tests {
    use super::super::colour::INK;
    use super::*;

    const PLAIN: TextStyle = TextStyle { size: 6.0, face: Face::Regular, colour: INK };

    #[test]
    fn anchors_put_the_text_where_they_say() {
        let mut canvas = Canvas::new(100.0, 100.0);
        let start = canvas.write("gauge", (50.0, 20.0), Anchor::Start, PLAIN);
        let middle = canvas.write("gauge", (50.0, 40.0), Anchor::Middle, PLAIN);
        let end = canvas.write("gauge", (50.0, 60.0), Anchor::End, PLAIN);
        assert!((start.left - 50.0).abs() < 1e-12 && (end.right - 50.0).abs() < 1e-12);
        assert!((middle.left + middle.right - 100.0).abs() < 1e-12);
        assert_eq!(canvas.labels().len(), 3);
        canvas.write("  ", (0.0, 0.0), Anchor::Start, PLAIN);
        assert_eq!(canvas.labels().len(), 3, "blank texts leave no box");
    }

    #[test]
    fn a_free_area_keeps_clear_of_curves() {
        let mut canvas = Canvas::new(100.0, 100.0);
        canvas.curve(vec![(0.0, 0.0), (100.0, 100.0)], Pen::solid(INK, 1.0));
        let area = canvas.free_area(canvas.page(), (30.0, 10.0), (50.0, 50.0));
        assert_eq!(canvas.crowding(&area), 0, "{area:?}");
        assert!(canvas.page().holds(&area));
    }
}
