//! Text: widths, outlines, shortening and wrapping, in the two faces that the crate carries.

use std::sync::OnceLock;

use ab_glyph::Font;
use ab_glyph::FontRef;
use ab_glyph::GlyphId;
use ab_glyph::OutlineCurve;

/// A place on the page: points (1/72 inch) from the left edge and from the top edge.
pub type Spot = (f64, f64);

/// How a text is set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Face {
    /// DejaVu Sans.
    Regular,
    /// DejaVu Sans Bold.
    Bold,
}

/// Height of a label box above its baseline, in units of the text size (ascenders reach 0.76).
pub const ASCENT: f64 = 0.78;
/// Depth of a label box below its baseline, in units of the text size.
pub const DESCENT: f64 = 0.24;
/// Straight pieces that stand for one quadratic curve of an outline: at 12 pt the deviation is below 1/1000 pt.
const CURVE_PIECES: u32 = 6;

static REGULAR: &[u8] = include_bytes!("fonts/DejaVuSans-subset.ttf");
static BOLD: &[u8] = include_bytes!("fonts/DejaVuSans-Bold-subset.ttf");

/// The font of a face, read once.
fn font(face: Face) -> &'static FontRef<'static> {
    static FONTS: OnceLock<[FontRef<'static>; 2]> = OnceLock::new();
    let fonts = FONTS.get_or_init(|| {
        [REGULAR, BOLD].map(|bytes| FontRef::try_from_slice(bytes).expect("the font files are part of the crate"))
    });
    match face {
        Face::Regular => &fonts[0],
        Face::Bold => &fonts[1],
    }
}

/// Font units in an em.
fn units_per_em(font: &FontRef<'static>) -> f64 {
    f64::from(font.units_per_em().unwrap_or(2048.0))
}

/// The glyphs of `text` with the pen position of each and the position after the last, in font units.
fn pen(font: &FontRef<'static>, text: &str) -> (Vec<(GlyphId, f64)>, f64) {
    let (mut glyphs, mut x) = (Vec::new(), 0.0);
    let mut previous: Option<GlyphId> = None;
    for character in text.chars() {
        let glyph = font.glyph_id(if character.is_control() { ' ' } else { character });
        if let Some(before) = previous {
            x += f64::from(font.kern_unscaled(before, glyph));
        }
        glyphs.push((glyph, x));
        x += f64::from(font.h_advance_unscaled(glyph));
        previous = Some(glyph);
    }
    (glyphs, x)
}

/// Width of `text`, in the unit of `size` (its em).
///
/// ```
/// use evenpoise::figures::text::{Face, width};
/// assert!(width("iiii", 10.0, Face::Regular) < width("MMMM", 10.0, Face::Regular));
/// ```
#[must_use]
pub fn width(text: &str, size: f64, face: Face) -> f64 {
    let font = font(face);
    pen(font, text).1 * size / units_per_em(font)
}

/// Outline of `text` with its pen starting at `(x, baseline)`: closed contours of straight pieces.
///
/// Inner contours (the eye of an "e") run the other way round.
#[must_use]
pub fn outline(text: &str, (x, baseline): Spot, size: f64, face: Face) -> Vec<Vec<Spot>> {
    let font = font(face);
    let scale = size / units_per_em(font);
    let mut contours: Vec<Vec<Spot>> = Vec::new();
    for (glyph, pen_x) in pen(font, text).0 {
        let Some(outline) = font.outline(glyph) else { continue };
        let place = |p: ab_glyph::Point| (x + (pen_x + f64::from(p.x)) * scale, baseline - f64::from(p.y) * scale);
        let mut end: Option<ab_glyph::Point> = None;
        for curve in &outline.curves {
            let (from, to) = match curve {
                OutlineCurve::Line(a, b) | OutlineCurve::Quad(a, _, b) | OutlineCurve::Cubic(a, _, _, b) => (*a, *b),
            };
            if end != Some(from) {
                contours.push(vec![place(from)]);
            }
            if let Some(contour) = contours.last_mut() {
                if let OutlineCurve::Quad(a, control, b) = curve {
                    let (a, control, b) = (place(*a), place(*control), place(*b));
                    contour
                        .extend((1..CURVE_PIECES).map(|i| bend(a, control, b, f64::from(i) / f64::from(CURVE_PIECES))));
                }
                contour.push(place(to));
            }
            end = Some(to);
        }
    }
    contours
}

/// The point of a quadratic curve at `t` between 0 and 1.
fn bend(a: Spot, control: Spot, b: Spot, t: f64) -> Spot {
    let s = 1.0 - t;
    let mix = |a: f64, c: f64, b: f64| s * s * a + 2.0 * s * t * c + t * t * b;
    (mix(a.0, control.0, b.0), mix(a.1, control.1, b.1))
}

/// `text` if it fits into `room`; otherwise its beginning and end around an ellipsis.
///
/// Both ends are kept because names of one problem often differ only in their last letters.
#[must_use]
pub fn shorten(text: &str, room: f64, size: f64, face: Face) -> String {
    if width(text, size, face) <= room {
        return text.to_owned();
    }
    let letters: Vec<char> = text.chars().collect();
    let mut kept = letters.len().saturating_sub(1);
    loop {
        let tail = kept * 2 / 5;
        let head = kept - tail;
        let start: String = letters[..head].iter().collect();
        let end: String = letters[letters.len() - tail..].iter().collect();
        let short = format!("{}…{}", start.trim_end(), end.trim_start());
        if kept == 0 || width(&short, size, face) <= room {
            return short;
        }
        kept -= 1;
    }
}

/// `text` in at most `lines` lines no wider than `room`; what does not fit is shortened in the last line.
///
/// Lines break at spaces, and after `_`, `-` and `/` in names.
#[must_use]
pub fn wrap(text: &str, room: f64, size: f64, face: Face, lines: usize) -> Vec<String> {
    let mut pieces: Vec<String> = vec![String::new()];
    for character in text.chars() {
        if let Some(piece) = pieces.last_mut() {
            piece.push(character);
        }
        if matches!(character, ' ' | '_' | '-' | '/') {
            pieces.push(String::new());
        }
    }
    let mut wrapped: Vec<String> = vec![String::new()];
    for piece in pieces {
        let Some(line) = wrapped.last_mut() else { continue };
        let joined = format!("{line}{piece}");
        if line.is_empty() || wrapped.len() >= lines || width(joined.trim_end(), size, face) <= room {
            if let Some(line) = wrapped.last_mut() {
                *line = joined;
            }
        } else {
            wrapped.push(piece);
        }
    }
    wrapped.iter().map(|line| shorten(line.trim(), room, size, face)).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: fontTools 4.68, `advance = hmtx[cmap[ord(c)]][0]` of DejaVuSans.ttf: n 1298, zero 1303 of 2048.
    #[test]
    fn widths_are_those_of_the_font() {
        assert!((width("n", 2048.0, Face::Regular) - 1298.0).abs() < 1e-9);
        assert!((width("00", 2048.0, Face::Regular) - 2606.0).abs() < 1e-9);
    }

    #[test]
    fn labels_have_their_signs() {
        let missing = font(Face::Regular).glyph_id('\u{E000}');
        for character in "−×·…≤≥±αβγσμΣ⁰¹²³⁴⁵⁶⁷⁸⁹⁻₀₁₂₉°üßéŁžπ√∞–—ЖЯ".chars()
        {
            for face in [Face::Regular, Face::Bold] {
                assert_ne!(font(face).glyph_id(character), missing, "{character} is not in {face:?}");
            }
        }
    }

    #[test]
    fn outlines_lie_where_the_box_says() {
        for (x, y) in outline("Ångström", (10.0, 20.0), 6.0, Face::Bold).into_iter().flatten() {
            assert!((10.0..10.0 + width("Ångström", 6.0, Face::Bold)).contains(&x));
            assert!(y > 20.0 - 6.0 && y <= 20.0 + 6.0 * DESCENT);
        }
        assert!(outline(" ", (0.0, 0.0), 6.0, Face::Regular).is_empty());
    }

    #[test]
    fn long_names_are_cut_in_the_middle_and_wrapped() {
        let name = "spillway_gate_coefficient_no_12";
        let room = 60.0;
        let short = shorten(name, room, 6.0, Face::Regular);
        assert!(width(&short, 6.0, Face::Regular) <= room);
        assert!(short.starts_with("spill") && short.contains('…') && short.ends_with("12"), "{short}");
        assert_eq!(shorten("gate", room, 6.0, Face::Regular), "gate");
        let lines = wrap(name, room, 6.0, Face::Regular, 2);
        assert_eq!(lines.len(), 2, "{lines:?}");
        assert!(lines.iter().all(|line| width(line, 6.0, Face::Regular) <= room), "{lines:?}");
        assert_eq!(wrap("", room, 6.0, Face::Regular, 2), vec![String::new()]);
    }
}
