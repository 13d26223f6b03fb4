//! Figures of a run: data in, drawing out.
//!
//! Each figure is a file with its own plain input (names, units, values) and a function `draw`. A [`Drawing`] gives
//! PNG and SVG, its caption and the table of numbers behind it. Nothing here reads or writes files, or knows where the
//! data came from.
//!
//! * [`progress`]: scores of the rounds against the evaluations spent;
//! * [`evenness`]: how evenly the weights share the total, and their upper tail with its fit;
//! * [`variables`]: the variables, each with its marginal and with the two it depends on most
//!   ([`dependence`] finds them);
//! * [`heavy`]: in which variables, and on which side, the heaviest draws lie.
//!
//! Proposals compared: [`compare_tails`] (upper tails of their weights), [`compare_df`] (ESS fraction against degrees
//! of freedom), [`compare_errors`] (running standard errors), [`compare_radial`] (tails of target and proposals), each
//! contestant with its look of [`contestants`].
//!
//! Rare events and means of integrands ([`sought`] tells them apart): [`rare_margin`] (margin against the distance in score space),
//! [`rare_plane`] (the event in the plane of two variables), [`rare_importance`] (the part of each variable).
//!
//! Production: [`course`] (an estimate with its interval and error against what was spent; for probabilities too) and
//! [`bands`] (a column of estimates with its bands).
//!
//! The toolkit below them: [`colour`], [`text`], [`numbers`], [`axis`] with its [`ticks`], [`place`], [`canvas`] (marks
//! and text boxes in points), [`panel`], [`key`], [`table`], [`columns`]. The page is drawn with `plotters`, by the two
//! writers [`raster`] and [`svg`](mod@svg).
//!
//! **Sizes.** A figure is laid out anew for the width it is asked for. The text size follows the width between 8 and
//! 16 cm, so a figure made 16 cm wide and printed 8 cm wide still has letters of 6 pt; no text is ever set below 6 pt,
//! whatever the width.
//!
//! **Invariant:** the bytes of a drawing depend on its data and style alone.

pub mod axis;
pub mod bands;
pub mod canvas;
pub mod colour;
pub mod columns;
pub mod compare_df;
pub mod compare_errors;
pub mod compare_radial;
pub mod compare_tails;
pub mod contestants;
pub mod course;
pub mod dependence;
pub mod evenness;
mod frame;
pub mod heavy;
pub mod key;
pub mod numbers;
pub mod panel;
pub mod place;
mod plot;
pub mod progress;
pub mod rare_importance;
pub mod rare_margin;
pub mod rare_plane;
pub mod raster;
pub mod sought;
pub mod svg;
pub mod table;
pub mod text;
pub mod ticks;
pub mod variables;

#[cfg(test)]
mod checks;

use thiserror::Error;

use canvas::Anchor;
use canvas::Canvas;
use canvas::LabelBox;
use canvas::TextStyle;
use colour::Colour;
use colour::INK;
use place::Area;
use table::Table;
use text::Face;
use text::Spot;

/// Points in a centimetre.
const POINTS_PER_CM: f64 = 72.0 / 2.54;
/// Widths that can be asked for, centimetres.
const WIDTHS: (f64, f64) = (8.0, 60.0);
/// Resolutions that can be asked for, dots per inch.
const RESOLUTIONS: (f64, f64) = (72.0, 1200.0);
/// Text size as a part of the width: 6.05 pt at 8 cm.
const TEXT_PART: f64 = 1.0 / 37.48;
/// Text sizes at both ends of the widths over which it grows: 8 cm and 16 cm.
const TEXT_SIZES: (f64, f64) = (6.05, 12.1);

/// What can be wrong about asking for a figure.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum FigureError {
    /// The width leaves no room for letters of 6 pt, or more pixels than a figure needs.
    #[error("a figure cannot be {0} cm wide; give a width from 8 to 60 cm")]
    Width(f64),
    /// The resolution is outside of what printers use.
    #[error("a figure cannot have {0} dots per inch; give a resolution from 72 to 1200")]
    Resolution(f64),
    /// The table of numbers could not be written as text.
    #[error("the numbers behind the figure could not be written: {0}")]
    Table(String),
}

/// Size and resolution of a figure.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Style {
    width: f64,
    dpi: f64,
}

impl Default for Style {
    /// 16 cm at 300 dots per inch.
    fn default() -> Self {
        Self { width: 16.0 * POINTS_PER_CM, dpi: 300.0 }
    }
}

impl Style {
    /// A figure `width` centimetres wide; its PNG has `dpi` dots per inch.
    ///
    /// # Errors
    /// [`FigureError::Width`] outside 8 to 60 cm, [`FigureError::Resolution`] outside 72 to 1200 dots per inch.
    ///
    /// ```
    /// use evenpoise::figures::{FigureError, Style};
    /// assert_eq!(Style::new(16.0, 300.0), Ok(Style::default()));
    /// assert_eq!(Style::new(5.0, 300.0), Err(FigureError::Width(5.0)));
    /// ```
    pub fn new(width: f64, dpi: f64) -> Result<Self, FigureError> {
        if !(WIDTHS.0..=WIDTHS.1).contains(&width) {
            return Err(FigureError::Width(width));
        }
        if !(RESOLUTIONS.0..=RESOLUTIONS.1).contains(&dpi) {
            return Err(FigureError::Resolution(dpi));
        }
        Ok(Self { width: width * POINTS_PER_CM, dpi })
    }

    /// Width, points.
    #[must_use]
    pub fn width(&self) -> f64 {
        self.width
    }

    /// Dots per inch of the PNG.
    #[must_use]
    pub fn dpi(&self) -> f64 {
        self.dpi
    }

    /// Text size, points: the unit of every layout.
    #[must_use]
    pub fn unit(&self) -> f64 {
        (self.width * TEXT_PART).clamp(TEXT_SIZES.0, TEXT_SIZES.1)
    }

    /// Width of axes and guides, points.
    #[must_use]
    pub fn hairline(&self) -> f64 {
        0.06 * self.unit()
    }

    /// Width of data lines, points.
    #[must_use]
    pub fn stroke(&self) -> f64 {
        0.14 * self.unit()
    }

    /// Radius of markers, points.
    #[must_use]
    pub fn marker(&self) -> f64 {
        0.24 * self.unit()
    }

    /// Length of ticks, points.
    #[must_use]
    pub fn tick(&self) -> f64 {
        0.3 * self.unit()
    }

    /// Text of the common size.
    #[must_use]
    pub fn plain(&self, colour: Colour) -> TextStyle {
        TextStyle { size: self.unit(), face: Face::Regular, colour }
    }

    /// The same in bold, for the letters that name panels.
    #[must_use]
    pub fn bold(&self, colour: Colour) -> TextStyle {
        TextStyle { face: Face::Bold, ..self.plain(colour) }
    }
}

/// A finished figure.
#[derive(Debug, Clone, PartialEq)]
pub struct Drawing {
    /// Stem of its file name: `progress`, `variables-2`.
    pub name: String,
    /// What it shows, in a sentence or two with the numbers that matter.
    pub caption: String,
    /// The numbers behind it.
    pub table: Table,
    canvas: Canvas,
    dpi: f64,
}

impl Drawing {
    /// The figure as a PNG file, its resolution written into it.
    #[must_use]
    pub fn png(&self) -> Vec<u8> {
        raster::png(&self.canvas, self.dpi)
    }

    /// The figure as an SVG document.
    #[must_use]
    pub fn svg(&self) -> String {
        svg::svg(&self.canvas, &self.caption)
    }

    /// Every text on it, with place, size and colour.
    #[must_use]
    pub fn labels(&self) -> &[LabelBox] {
        self.canvas.labels()
    }

    /// The page, points.
    #[must_use]
    pub fn page(&self) -> Area {
        self.canvas.page()
    }
}

/// Writes the bold letter of a panel and its title in at most `lines` lines above `bottom`; starts at `left`, may fill `room`.
fn heading(canvas: &mut Canvas, style: &Style, letter: &str, lines: &[String], (left, bottom): Spot) {
    let unit = style.unit();
    let indent = if letter.is_empty() { 0.0 } else { text::width(letter, unit, Face::Bold) + 0.5 * unit };
    for (i, line) in lines.iter().enumerate() {
        let baseline = bottom - LINE * unit * (lines.len() - 1 - i) as f64;
        if i == 0 {
            canvas.write(letter, (left, baseline), Anchor::Start, style.bold(INK));
        }
        canvas.write(line, (left + indent, baseline), Anchor::Start, style.plain(INK));
    }
}

/// Distance of baselines, in text sizes.
const LINE: f64 = 1.2;

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_width_sets_text_below_six_points() {
        for tenths in 80..600 {
            let style = Style::new(f64::from(tenths) / 10.0, 300.0).unwrap();
            assert!(style.unit() >= 6.0);
            let shrunk_to_8_cm = style.unit() * (8.0 * POINTS_PER_CM / style.width()).min(1.0);
            assert!(tenths > 160 || shrunk_to_8_cm >= 6.0, "{tenths} {shrunk_to_8_cm}");
        }
    }

    #[test]
    fn sizes_that_make_no_figure_are_refused() {
        fn is_plain<T: Send + Sync + std::error::Error>() {}
        is_plain::<FigureError>();
        assert!(matches!(Style::new(f64::NAN, 300.0), Err(FigureError::Width(_))));
        assert_eq!(Style::new(16.0, 10.0), Err(FigureError::Resolution(10.0)));
        assert!(matches!(Style::new(16.0, f64::NAN), Err(FigureError::Resolution(_))));
    }
}
