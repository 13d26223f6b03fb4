//! The page as PNG: every shape covers each pixel by the share of its area, to a sixteenth.
//!
//! A shape is a set of closed contours. Each edge adds, row by row, the signed area between itself and the right end
//! of the row; a running sum along the row then is the share of the pixel that the shape covers. Inner contours run
//! the other way round and take away. No grid of sub-pixels, so slanted lines and letters are smooth at any size.

use super::canvas::Canvas;
use super::canvas::Mark;
use super::canvas::Pen;
use super::colour::Colour;
use super::text;
use super::text::Spot;

/// Steps of the covered share. No eye tells finer ones at printing resolutions, and files are half as large.
const COVER_STEPS: f64 = 16.0;
/// Corners of the polygon that stands for a circle.
const CIRCLE_CORNERS: u32 = 48;

/// A picture of three bytes a pixel.
struct Raster {
    width: usize,
    height: usize,
    pixels: Vec<u8>,
}

/// The page as a PNG file of `dpi` dots per inch, with the resolution written into it (`pHYs`).
///
/// The bytes depend on the canvas and on `dpi` alone.
#[must_use]
pub fn png(canvas: &Canvas, dpi: f64) -> Vec<u8> {
    let scale = dpi / 72.0;
    let raster = paint(canvas, scale);
    let dots_per_metre = (dpi / 0.0254).round() as u32;
    let mut bytes = Vec::new();
    let mut encoder = png::Encoder::new(&mut bytes, raster.width as u32, raster.height as u32);
    encoder.set_color(png::ColorType::Rgb);
    encoder.set_depth(png::BitDepth::Eight);
    // Flat areas and few tones: no filter leaves the longest repetitions.
    encoder.set_compression(png::Compression::High);
    encoder.set_filter(png::Filter::NoFilter);
    encoder.set_pixel_dims(Some(png::PixelDimensions {
        xppu: dots_per_metre,
        yppu: dots_per_metre,
        unit: png::Unit::Meter,
    }));
    let mut writer = encoder.write_header().expect("a header can be written to memory");
    writer.write_image_data(&raster.pixels).expect("the picture has as many bytes as its header says");
    writer.finish().expect("an end can be written to memory");
    bytes
}

/// Draws marks, then texts, at `scale` pixels a point.
fn paint(canvas: &Canvas, scale: f64) -> Raster {
    let size = |points: f64| ((points * scale).round() as usize).max(1);
    let (width, height) = (size(canvas.width()), size(canvas.height()));
    let mut raster = Raster { width, height, pixels: vec![255; width * height * 3] };
    let pixel = |&(x, y): &Spot| (x * scale, y * scale);
    for mark in canvas.marks() {
        match mark {
            Mark::Fill { corners, colour, opacity } => {
                raster.fill(&[corners.iter().map(pixel).collect()], *colour, *opacity);
            }
            Mark::Line { spots, pen } => {
                let spots: Vec<Spot> = spots.iter().map(pixel).collect();
                let pen = Pen { width: pen.width * scale, dash: pen.dash.map(|(a, b)| (a * scale, b * scale)), ..*pen };
                raster.fill(&stroke(&spots, pen), pen.colour, pen.opacity);
            }
            Mark::Disc { centre, radius, colour, opacity } => {
                raster.fill(&[circle(pixel(centre), radius * scale)], *colour, *opacity);
            }
        }
    }
    for label in canvas.labels() {
        let contours = text::outline(&label.text, (label.left, label.baseline), label.size, label.face);
        let contours: Vec<Vec<Spot>> = contours.iter().map(|contour| contour.iter().map(pixel).collect()).collect();
        raster.fill(&contours, label.colour, 1.0);
    }
    raster
}

impl Raster {
    /// Blends `colour` into the pixels by the share that the contours cover.
    fn fill(&mut self, contours: &[Vec<Spot>], colour: Colour, opacity: f64) {
        let spots = || contours.iter().flatten();
        let edge = |pick: fn(&Spot) -> f64, high: bool, most: usize| -> usize {
            let extreme =
                spots().map(pick).fold(if high { 0.0 } else { most as f64 }, if high { f64::max } else { f64::min });
            (if high { extreme.ceil() } else { extreme.floor() }).clamp(0.0, most as f64) as usize
        };
        let (left, right) = (edge(|s| s.0, false, self.width), edge(|s| s.0, true, self.width));
        let (top, bottom) = (edge(|s| s.1, false, self.height), edge(|s| s.1, true, self.height));
        if left >= right || top >= bottom {
            return;
        }
        let mut cover = Cover::new(left, top, right - left, bottom - top);
        for contour in contours {
            for (i, &from) in contour.iter().enumerate() {
                cover.edge(from, contour[(i + 1) % contour.len()]);
            }
        }
        for row in 0..cover.height {
            let mut sum = 0.0;
            let start = ((top + row) * self.width + left) * 3;
            for (column, pixel) in self.pixels[start..start + cover.width * 3].chunks_exact_mut(3).enumerate() {
                sum += cover.sums[row * (cover.width + 2) + column];
                let share = (sum.abs().min(1.0) * COVER_STEPS).round() / COVER_STEPS * opacity;
                if share > 0.0 {
                    for (channel, &ink) in pixel.iter_mut().zip(&colour.channels) {
                        let mixed = f64::from(*channel) + share * (f64::from(ink) - f64::from(*channel));
                        *channel = (mixed + 0.5) as u8;
                    }
                }
            }
        }
    }
}

/// Signed areas of a window of the picture, as differences along each row.
struct Cover {
    left: f64,
    top: f64,
    width: usize,
    height: usize,
    /// Rows of `width + 2`: what falls to the right of the window lands in the last two.
    sums: Vec<f64>,
}

impl Cover {
    fn new(left: usize, top: usize, width: usize, height: usize) -> Self {
        Self { left: left as f64, top: top as f64, width, height, sums: vec![0.0; (width + 2) * height] }
    }

    /// Adds the edge from `a` to `b`.
    fn edge(&mut self, a: Spot, b: Spot) {
        let (a, b) = ((a.0 - self.left, a.1 - self.top), (b.0 - self.left, b.1 - self.top));
        if a.1 == b.1 {
            return;
        }
        let (sign, (x0, y0), (x1, y1)) = if a.1 < b.1 { (1.0, a, b) } else { (-1.0, b, a) };
        let slope = (x1 - x0) / (y1 - y0);
        let (from, to) = (y0.max(0.0), y1.min(self.height as f64));
        let mut y = from;
        while y < to {
            let row = (y.floor() as usize).min(self.height - 1);
            let next = ((row + 1) as f64).min(to);
            self.piece(row, sign * (next - y), x0 + (y - y0) * slope, x0 + (next - y0) * slope);
            y = next;
        }
    }

    /// Adds a piece within one row: it runs from `x0` to `x1` and is `rise` high (signed).
    fn piece(&mut self, row: usize, rise: f64, x0: f64, x1: f64) {
        let most = self.width as f64;
        let (low, high) = if x0 < x1 {
            (x0.clamp(0.0, most), x1.clamp(0.0, most))
        } else {
            (x1.clamp(0.0, most), x0.clamp(0.0, most))
        };
        let row = &mut self.sums[row * (self.width + 2)..(row + 1) * (self.width + 2)];
        let mut add = |column: usize, rise: f64, middle: f64| {
            let inside = middle - column as f64;
            row[column] += rise * (1.0 - inside);
            row[column + 1] += rise * inside;
        };
        let (first, last) = (low.floor() as usize, high.floor() as usize);
        if first == last {
            add(first, rise, f64::midpoint(low, high));
            return;
        }
        let per_column = rise / (high - low);
        let mut x = low;
        for column in first..=last {
            let next = ((column + 1) as f64).min(high);
            add(column, per_column * (next - x), f64::midpoint(x, next));
            x = next;
        }
    }
}

/// A circle as a polygon.
fn circle(centre: Spot, radius: f64) -> Vec<Spot> {
    (0..CIRCLE_CORNERS)
        .map(|i| {
            let angle = f64::from(i) * std::f64::consts::TAU / f64::from(CIRCLE_CORNERS);
            (centre.0 + radius * libm::cos(angle), centre.1 + radius * libm::sin(angle))
        })
        .collect()
}

/// The outline of a line of `pen`: one quadrilateral a piece, meeting without overlap where the line bends gently,
/// with a wedge where it bends sharply. All run the same way round, so their areas add up.
fn stroke(spots: &[Spot], pen: Pen) -> Vec<Vec<Spot>> {
    let mut contours = Vec::new();
    for piece in dashes(spots, pen.dash) {
        thicken(&piece, pen.width / 2.0, &mut contours);
    }
    contours
}

/// The visible pieces of a line.
fn dashes(spots: &[Spot], dash: Option<(f64, f64)>) -> Vec<Vec<Spot>> {
    let mut distinct: Vec<Spot> = Vec::with_capacity(spots.len());
    for &spot in spots {
        // Vertices closer than a twentieth of a pixel have no direction worth drawing.
        if distinct.last().is_none_or(|last| (spot.0 - last.0).abs() + (spot.1 - last.1).abs() > 0.05) {
            distinct.push(spot);
        }
    }
    let Some((on, off)) = dash.filter(|(on, off)| *on > 0.0 && *off > 0.0) else { return vec![distinct] };
    let (mut pieces, mut drawing, mut left) = (Vec::new(), true, on);
    let mut piece: Vec<Spot> = distinct.first().copied().into_iter().collect();
    for pair in distinct.windows(2) {
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

/// Adds the outline of one unbroken line, `half` its width.
fn thicken(spots: &[Spot], half: f64, contours: &mut Vec<Vec<Spot>>) {
    let normals: Vec<Spot> = spots
        .windows(2)
        .map(|pair| {
            let (dx, dy) = (pair[1].0 - pair[0].0, pair[1].1 - pair[0].1);
            let length = (dx * dx + dy * dy).sqrt();
            (-dy / length * half, dx / length * half)
        })
        .collect();
    let closed = spots.len() > 2 && spots.first() == spots.last();
    // The offset at a vertex between two pieces: their common corner if they bend by less than 60 degrees.
    let corner = |a: Spot, b: Spot| {
        let dot = (a.0 * b.0 + a.1 * b.1) / (half * half);
        (dot > 0.5).then(|| ((a.0 + b.0) / (1.0 + dot), (a.1 + b.1) / (1.0 + dot)))
    };
    for (i, &normal) in normals.iter().enumerate() {
        let before = if i > 0 { Some(normals[i - 1]) } else { closed.then(|| normals[normals.len() - 1]) };
        let after = if i + 1 < normals.len() { Some(normals[i + 1]) } else { closed.then(|| normals[0]) };
        let start = before.and_then(|other| corner(other, normal)).unwrap_or(normal);
        let end = after.and_then(|other| corner(normal, other)).unwrap_or(normal);
        let (a, b) = (spots[i], spots[i + 1]);
        contours.push(vec![
            (a.0 + start.0, a.1 + start.1),
            (b.0 + end.0, b.1 + end.1),
            (b.0 - end.0, b.1 - end.1),
            (a.0 - start.0, a.1 - start.1),
        ]);
        if let Some(other) = after.filter(|&other| corner(normal, other).is_none()) {
            let turn = normal.0 * other.1 - normal.1 * other.0;
            let side = if turn > 0.0 { -1.0 } else { 1.0 };
            let (p, q) = ((b.0 + side * normal.0, b.1 + side * normal.1), (b.0 + side * other.0, b.1 + side * other.1));
            contours.push(if side > 0.0 { vec![b, p, q] } else { vec![b, q, p] });
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::colour::INK;
    use super::*;

    const BLACK: Colour = Colour { channels: [0, 0, 0] };

    fn darkness(raster: &Raster) -> f64 {
        raster.pixels.iter().map(|&v| 255.0 - f64::from(v)).sum::<f64>() / (3.0 * 255.0)
    }

    fn blank(width: usize, height: usize) -> Raster {
        Raster { width, height, pixels: vec![255; width * height * 3] }
    }

    /// Covered areas are those of geometry: a slanted square, a line with a gentle bend, one with a right angle (its
    /// outer corner is cut off), a circle (polygon of 48 corners: 0.285 % less). Rounding to sixteenths is off by
    /// 1/32 of a pixel at most; over the rim the errors cancel to less than a third of that.
    #[test]
    fn shapes_cover_their_area() {
        let check = |contours: &[Vec<Spot>], area: f64, rim: f64| {
            let mut raster = blank(40, 40);
            raster.fill(contours, BLACK, 1.0);
            assert!((darkness(&raster) - area).abs() < rim / 96.0, "{} {area}", darkness(&raster));
        };
        let square = vec![(20.0, 3.3), (36.7, 20.0), (20.0, 36.7), (3.3, 20.0)];
        check(&[square], 2.0 * 16.7 * 16.7, 8.0 * 16.7);
        let pen = Pen::solid(BLACK, 3.0);
        let length = (15.0_f64 * 15.0 + 81.0).sqrt() + (15.0_f64 * 15.0 + 16.0).sqrt();
        check(&stroke(&[(5.0, 5.0), (20.0, 14.0), (35.0, 18.0)], pen), 3.0 * length, 2.0 * length);
        // Two arms of 20.3 share a square of 1.5 x 1.5; the wedge outside is half of another one.
        let arms = 2.0 * 3.0 * 20.3 - 1.5 * 1.5 + 1.5 * 1.5 / 2.0;
        check(&stroke(&[(5.2, 5.4), (25.5, 5.4), (25.5, 25.7)], pen), arms, 4.0 * 20.3);
        let disc = std::f64::consts::PI * 12.3 * 12.3;
        check(&[circle((20.3, 19.6), 12.3)], 0.997_15 * disc, 2.0 * disc / 12.3);
    }

    #[test]
    fn shapes_may_leave_the_picture_on_every_side() {
        let mut raster = blank(10, 10);
        raster.fill(&[vec![(-50.0, -50.0), (50.0, -50.0), (50.0, 50.0), (-50.0, 50.0)]], BLACK, 1.0);
        assert!((darkness(&raster) - 100.0).abs() < 1e-9);
        let mut raster = blank(10, 10);
        raster.fill(&[vec![(20.0, 1.0), (30.0, 1.0), (30.0, 8.0)]], BLACK, 1.0);
        assert_eq!(darkness(&raster), 0.0);
    }

    #[test]
    fn dashes_leave_gaps() {
        let line = [(0.0, 5.0), (10.0, 5.0), (30.0, 5.0)];
        let pieces = dashes(&line, Some((4.0, 2.0)));
        assert_eq!(pieces.len(), 5);
        let inked: f64 = pieces.iter().map(|piece| piece[piece.len() - 1].0 - piece[0].0).sum();
        assert!((inked - 20.0).abs() < 1e-9, "{inked}");
    }

    #[test]
    fn the_file_states_its_resolution() {
        let mut canvas = Canvas::new(72.0, 36.0);
        canvas.disc((36.0, 18.0), 10.0, INK, 0.5);
        let bytes = png(&canvas, 300.0);
        let reader = png::Decoder::new(std::io::Cursor::new(&bytes)).read_info().unwrap();
        let info = reader.info();
        assert_eq!((info.width, info.height), (300, 150));
        let dims = info.pixel_dims.unwrap();
        assert_eq!((dims.xppu, dims.yppu, dims.unit), (11811, 11811, png::Unit::Meter));
        assert_eq!(bytes, png(&canvas, 300.0));
    }
}
