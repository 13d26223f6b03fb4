//! The page as PNG: a backend of `plotters` on which every shape covers each pixel by the share of its area, to a
//! sixteenth.
//!
//! A shape is a set of closed contours. Each edge adds, row by row, the signed area between itself and the right end
//! of the row; a running sum along the row then is the share of the pixel that the shape covers. Inner contours run
//! the other way round and take away. No grid of sub-pixels, so slanted lines and letters are smooth at any size.

use std::convert::Infallible;

use plotters::drawing::IntoDrawingArea as _;
use plotters::style::FontStyle;
use plotters::style::text_anchor::HPos;
use plotters::style::text_anchor::VPos;
use plotters_backend::BackendColor;
use plotters_backend::BackendCoord;
use plotters_backend::BackendStyle;
use plotters_backend::BackendTextStyle;
use plotters_backend::DrawingBackend;
use plotters_backend::DrawingErrorKind;

use super::canvas::Canvas;
use super::plot::FONT_SIZE;
use super::plot::TOP;
use super::plot::plot;
use super::text;
use super::text::Face;
use super::text::Spot;

mod cover;
mod outline;

use cover::Cover;
use outline::circle;
use outline::thicken;

/// Steps of the drawing area to a pixel. With fewer, the directions of short pieces of a curve would waver.
const STEPS: f64 = 256.0;
/// Steps of the covered share. No eye tells finer ones at printing resolutions, and files are half as large.
const COVER_STEPS: f64 = 16.0;
/// Vertices of a line closer than this, in pixels, have no direction worth drawing.
const NEAREST: f64 = 0.05;
/// Half of the height of an `x` in ems: where `plotters` takes the middle of a text to be.
const HALF_X: f64 = 0.27;

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
    let size = |points: f64| ((points * scale).round() as usize).max(1);
    let mut raster = Raster::new(size(canvas.width()), size(canvas.height()));
    plot(canvas, &(&mut raster).into_drawing_area(), scale * STEPS).expect("nothing can fail on a picture in memory");
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

impl Raster {
    /// A white picture.
    fn new(width: usize, height: usize) -> Self {
        Self { width, height, pixels: vec![255; width * height * 3] }
    }

    /// Blends `colour` into the pixels by the share that the contours cover.
    fn fill(&mut self, contours: &[Vec<Spot>], colour: BackendColor) {
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
            cover.outline(contour);
        }
        let inks = [colour.rgb.0, colour.rgb.1, colour.rgb.2];
        for row in 0..bottom - top {
            let start = ((top + row) * self.width + left) * 3;
            let pixels = self.pixels[start..start + (right - left) * 3].chunks_exact_mut(3);
            for (pixel, share) in pixels.zip(cover.shares(row)) {
                let share = (share * COVER_STEPS).round() / COVER_STEPS * colour.alpha;
                if share > 0.0 {
                    for (channel, ink) in pixel.iter_mut().zip(inks) {
                        let mixed = f64::from(*channel) + share * (f64::from(ink) - f64::from(*channel));
                        *channel = (mixed + 0.5) as u8;
                    }
                }
            }
        }
    }

    /// Draws a line of `width` pixels.
    fn stroke(&mut self, spots: impl IntoIterator<Item = Spot>, width: f64, colour: BackendColor) {
        let mut distinct: Vec<Spot> = Vec::new();
        for spot in spots {
            if distinct.last().is_none_or(|last| (spot.0 - last.0).abs() + (spot.1 - last.1).abs() > NEAREST) {
                distinct.push(spot);
            }
        }
        self.fill(&thicken(&distinct, width / 2.0), colour);
    }
}

/// The place of steps on the picture, in pixels.
fn spot((x, y): BackendCoord) -> Spot {
    (f64::from(x) / STEPS, f64::from(y) / STEPS)
}

/// The corners of a rectangle.
fn corners((left, top): Spot, (right, bottom): Spot) -> Vec<Spot> {
    vec![(left, top), (right, top), (right, bottom), (left, bottom)]
}

type Drawn = Result<(), DrawingErrorKind<Infallible>>;

/// Coordinates, line widths, radii and font sizes count steps, 256 to a pixel. Texts are set in the faces of the
/// crate, whatever their family; they cannot be turned.
impl DrawingBackend for &mut Raster {
    type ErrorType = Infallible;

    fn get_size(&self) -> (u32, u32) {
        ((self.width as f64 * STEPS) as u32, (self.height as f64 * STEPS) as u32)
    }

    fn ensure_prepared(&mut self) -> Drawn {
        Ok(())
    }

    fn present(&mut self) -> Drawn {
        Ok(())
    }

    fn draw_pixel(&mut self, point: BackendCoord, colour: BackendColor) -> Drawn {
        self.draw_rect(point, (point.0 + 1, point.1 + 1), &colour, true)
    }

    fn draw_line<S: BackendStyle>(&mut self, from: BackendCoord, to: BackendCoord, style: &S) -> Drawn {
        self.draw_path([from, to], style)
    }

    fn draw_rect<S: BackendStyle>(&mut self, start: BackendCoord, end: BackendCoord, style: &S, fill: bool) -> Drawn {
        let mut corners = corners(spot(start), spot(end));
        if fill {
            self.fill(&[corners], style.color());
        } else {
            corners.push(corners[0]);
            self.stroke(corners, f64::from(style.stroke_width()) / STEPS, style.color());
        }
        Ok(())
    }

    fn draw_path<S: BackendStyle, I: IntoIterator<Item = BackendCoord>>(&mut self, path: I, style: &S) -> Drawn {
        self.stroke(path.into_iter().map(spot), f64::from(style.stroke_width()) / STEPS, style.color());
        Ok(())
    }

    fn fill_polygon<S: BackendStyle, I: IntoIterator<Item = BackendCoord>>(&mut self, path: I, style: &S) -> Drawn {
        self.fill(&[path.into_iter().map(spot).collect()], style.color());
        Ok(())
    }

    fn draw_circle<S: BackendStyle>(&mut self, centre: BackendCoord, radius: u32, style: &S, fill: bool) -> Drawn {
        let mut rim = circle(spot(centre), f64::from(radius) / STEPS);
        if fill {
            self.fill(&[rim], style.color());
        } else {
            rim.push(rim[0]);
            self.stroke(rim, f64::from(style.stroke_width()) / STEPS, style.color());
        }
        Ok(())
    }

    fn draw_text<S: BackendTextStyle>(&mut self, text: &str, style: &S, at: BackendCoord) -> Drawn {
        let em = style.size() / FONT_SIZE / STEPS;
        let face = if matches!(style.style(), FontStyle::Bold) { Face::Bold } else { Face::Regular };
        let (x, y) = spot(at);
        let left = match style.anchor().h_pos {
            HPos::Left => x,
            HPos::Center => x - text::width(text, em, face) / 2.0,
            HPos::Right => x - text::width(text, em, face),
        };
        let baseline = match style.anchor().v_pos {
            VPos::Top => y + TOP * em,
            VPos::Center => y + HALF_X * em,
            VPos::Bottom => y - HALF_X * em,
        };
        self.fill(&text::outline(text, (left, baseline), em, face), style.color());
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use plotters::backend::BitMapBackend;
    use plotters::style::BLACK;
    use plotters::style::FontDesc;
    use plotters::style::FontFamily;
    use plotters::style::ShapeStyle;
    use plotters::style::text_anchor::Pos;

    use super::super::canvas::Pen;
    use super::super::colour::INK;
    use super::super::colour::MODELLED;
    use super::*;

    const INKED: BackendColor = BackendColor { alpha: 1.0, rgb: (0, 0, 0) };

    fn darkness(raster: &Raster) -> f64 {
        raster.pixels.iter().map(|&v| 255.0 - f64::from(v)).sum::<f64>() / (3.0 * 255.0)
    }

    /// Covered areas are those of geometry: a slanted square, a line with a gentle bend, one with a right angle (its
    /// outer corner is cut off), a circle (polygon of 48 corners: 0.285 % less). Rounding to sixteenths is off by
    /// 1/32 of a pixel at most; over the rim the errors cancel to less than a third of that.
    #[test]
    fn shapes_cover_their_area() {
        let check = |draw: &dyn Fn(&mut Raster), area: f64, rim: f64| {
            let mut raster = Raster::new(40, 40);
            draw(&mut raster);
            assert!((darkness(&raster) - area).abs() < rim / 96.0, "{} {area}", darkness(&raster));
        };
        let square = vec![(20.0, 3.3), (36.7, 20.0), (20.0, 36.7), (3.3, 20.0)];
        check(&|raster| raster.fill(std::slice::from_ref(&square), INKED), 2.0 * 16.7 * 16.7, 8.0 * 16.7);
        let length = (15.0_f64 * 15.0 + 81.0).sqrt() + (15.0_f64 * 15.0 + 16.0).sqrt();
        let bend = [(5.0, 5.0), (20.0, 14.0), (35.0, 18.0)];
        check(&|raster| raster.stroke(bend, 3.0, INKED), 3.0 * length, 2.0 * length);
        // Two arms of 20.3 share a square of 1.5 x 1.5; the wedge outside is half of another one.
        let arms = 2.0 * 3.0 * 20.3 - 1.5 * 1.5 + 1.5 * 1.5 / 2.0;
        let angle = [(5.2, 5.4), (25.5, 5.4), (25.5, 25.7)];
        check(&|raster| raster.stroke(angle, 3.0, INKED), arms, 4.0 * 20.3);
        let disc = std::f64::consts::PI * 12.3 * 12.3;
        check(&|raster| raster.fill(&[circle((20.3, 19.6), 12.3)], INKED), 0.997_15 * disc, 2.0 * disc / 12.3);
    }

    #[test]
    fn shapes_may_leave_the_picture_on_every_side() {
        let mut raster = Raster::new(10, 10);
        raster.fill(&[corners((-50.0, -50.0), (50.0, 50.0))], INKED);
        assert!((darkness(&raster) - 100.0).abs() < 1e-9);
        let mut raster = Raster::new(10, 10);
        raster.fill(&[vec![(20.0, 1.0), (30.0, 1.0), (30.0, 8.0)]], INKED);
        raster.stroke([(3.0, 3.0)], 1.0, INKED);
        assert_eq!(darkness(&raster), 0.0);
    }

    /// The same page on the bitmap of `plotters` itself, drawn eight times as large and averaged: no pixel without
    /// text differs by more than the jagged rims of that bitmap allow, and very few come near that.
    #[test]
    fn shapes_are_those_of_the_bitmap_of_plotters() {
        const TIMES: usize = 8;
        let mut canvas = Canvas::new(48.0, 36.0);
        canvas.fill(vec![(3.0, 4.0), (20.3, 9.0), (12.0, 30.7)], MODELLED, 0.5);
        canvas.line(vec![(5.0, 33.0), (30.0, 2.5), (44.0, 8.0)], Pen::solid(INK, 2.0));
        canvas.line(vec![(2.0, 20.0), (46.0, 26.0)], Pen::solid(INK, 1.5).dashed(4.0, 3.0));
        canvas.disc((33.0, 24.0), 6.5, MODELLED, 1.0);
        let mut raster = Raster::new(48, 36);
        plot(&canvas, &(&mut raster).into_drawing_area(), STEPS).unwrap();
        let mut large = vec![0; 48 * 36 * 3 * TIMES * TIMES];
        let backend = BitMapBackend::with_buffer(&mut large, (48 * TIMES as u32, 36 * TIMES as u32));
        plot(&canvas, &backend.into_drawing_area(), TIMES as f64).unwrap();
        let averaged = |row: usize, column: usize, channel: usize| -> f64 {
            let cells = (0..TIMES * TIMES).map(|i| (row * TIMES + i / TIMES, column * TIMES + i % TIMES));
            let sum: u32 = cells.map(|(y, x)| u32::from(large[(y * 48 * TIMES + x) * 3 + channel])).sum();
            f64::from(sum) / (TIMES * TIMES) as f64
        };
        let differences: Vec<f64> = (0..48 * 36 * 3)
            .map(|i| (f64::from(raster.pixels[i]) - averaged(i / 144, i % 144 / 3, i % 3)).abs() / 255.0)
            .collect();
        let most = differences.iter().copied().fold(0.0, f64::max);
        let mean = differences.iter().sum::<f64>() / differences.len() as f64;
        assert!(darkness(&raster) > 200.0 && most < 0.3 && mean < 0.01, "{most} {mean}");
    }

    /// Wherever it hangs from, a text lies where its anchor says, and rings and frames are hollow.
    #[test]
    fn anchors_and_outlines_are_those_of_plotters() {
        let dark_columns = |raster: &Raster| -> Vec<usize> {
            (0..raster.width)
                .filter(|x| (0..raster.height).any(|y| raster.pixels[(y * raster.width + x) * 3] < 128))
                .collect()
        };
        let step = STEPS as i32;
        for (anchor, first) in [(HPos::Left, 40), (HPos::Center, 20), (HPos::Right, 0)] {
            let mut raster = Raster::new(100, 30);
            // As large as makes the letter 40 pixels wide.
            let size = 40.0 / text::width("H", 1.0, Face::Regular) * FONT_SIZE * STEPS;
            let font = FontDesc::new(FontFamily::SansSerif, size, FontStyle::Normal);
            let style = font.color(&BLACK).pos(Pos::new(anchor, VPos::Center));
            (&mut raster).into_drawing_area().draw_text("H", &style, (40 * step, 15 * step)).unwrap();
            let dark = dark_columns(&raster);
            assert!(dark[0] >= first && dark[dark.len() - 1] < first + 40, "{first}: {dark:?}");
        }
        let mut raster = Raster::new(40, 40);
        let mut backend = &mut raster;
        let style = ShapeStyle::from(BLACK).stroke_width(2 * step as u32);
        backend.draw_circle((20 * step, 20 * step), 10 * step as u32, &style, false).unwrap();
        backend.draw_rect((5 * step, 5 * step), (35 * step, 35 * step), &style, false).unwrap();
        let (ring, frame) = (std::f64::consts::PI * (11.0 * 11.0 - 9.0 * 9.0), 4.0 * 30.0 * 2.0);
        assert!((darkness(&raster) / (ring + frame) - 1.0).abs() < 0.02, "{}", darkness(&raster));
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
