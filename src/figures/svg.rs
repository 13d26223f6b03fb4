//! The page as SVG: the unit of the view box is a point, coordinates keep hundredths of it.

use std::fmt::Write as _;

use super::canvas::Canvas;
use super::canvas::Mark;
use super::text::Face;
use super::text::Spot;

/// Fonts asked for, the one the layout was made with first. `textLength` keeps the widths when another is taken.
const FONTS: &str = "DejaVu Sans, Verdana, Arial, sans-serif";

/// The page as an SVG document; `title` is what screen readers and tooltips say.
#[must_use]
pub fn svg(canvas: &Canvas, title: &str) -> String {
    let (width, height) = (canvas.width(), canvas.height());
    let mut text = String::new();
    let centimetres = |points: f64| number(points / 72.0 * 2.54);
    // Writing to a string cannot fail.
    let _ = writeln!(
        text,
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{}cm\" height=\"{}cm\" viewBox=\"0 0 {} {}\">\n<title>{}</title>",
        centimetres(width),
        centimetres(height),
        number(width),
        number(height),
        escaped(title)
    );
    let _ = writeln!(text, "<rect width=\"{}\" height=\"{}\" fill=\"#ffffff\"/>", number(width), number(height));
    for mark in canvas.marks() {
        draw(&mut text, mark);
    }
    let _ = writeln!(text, "<g font-family=\"{FONTS}\">");
    for label in canvas.labels() {
        let weight = if label.face == Face::Bold { " font-weight=\"bold\"" } else { "" };
        let _ = writeln!(
            text,
            "<text x=\"{}\" y=\"{}\" font-size=\"{}\"{weight} fill=\"{}\" textLength=\"{}\" lengthAdjust=\"spacingAndGlyphs\">{}</text>",
            number(label.left),
            number(label.baseline),
            number(label.size),
            label.colour.hex(),
            number(label.width),
            escaped(&label.text)
        );
    }
    text.push_str("</g>\n</svg>\n");
    text
}

fn draw(text: &mut String, mark: &Mark) {
    let share = |name: &str, opacity: f64| {
        if opacity < 1.0 { format!(" {name}=\"{}\"", number(opacity)) } else { String::new() }
    };
    let _ = match mark {
        Mark::Fill { corners, colour, opacity } => writeln!(
            text,
            "<polygon points=\"{}\" fill=\"{}\"{}/>",
            pairs(corners),
            colour.hex(),
            share("fill-opacity", *opacity)
        ),
        Mark::Line { spots, pen } => {
            let dash = pen
                .dash
                .map_or(String::new(), |(on, off)| format!(" stroke-dasharray=\"{},{}\"", number(on), number(off)));
            writeln!(
                text,
                "<polyline points=\"{}\" fill=\"none\" stroke=\"{}\" stroke-width=\"{}\"{dash}{}/>",
                pairs(spots),
                pen.colour.hex(),
                number(pen.width),
                share("stroke-opacity", pen.opacity)
            )
        }
        Mark::Disc { centre, radius, colour, opacity } => writeln!(
            text,
            "<circle cx=\"{}\" cy=\"{}\" r=\"{}\" fill=\"{}\"{}/>",
            number(centre.0),
            number(centre.1),
            number(*radius),
            colour.hex(),
            share("fill-opacity", *opacity)
        ),
    };
}

fn pairs(spots: &[Spot]) -> String {
    let pairs: Vec<String> = spots.iter().map(|&(x, y)| format!("{},{}", number(x), number(y))).collect();
    pairs.join(" ")
}

/// Hundredths, without trailing zeros.
fn number(value: f64) -> String {
    let text = format!("{value:.2}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0".to_owned() } else { text.to_owned() }
}

/// Text that may stand in an element. Control characters are not allowed in XML and become spaces.
fn escaped(text: &str) -> String {
    let mut safe = String::with_capacity(text.len());
    for character in text.chars() {
        match character {
            '<' => safe.push_str("&lt;"),
            '>' => safe.push_str("&gt;"),
            '&' => safe.push_str("&amp;"),
            other if other.is_control() => safe.push(' '),
            other => safe.push(other),
        }
    }
    safe
}

#[cfg(test)]
mod tests {
    use super::super::canvas::Anchor;
    use super::super::canvas::Pen;
    use super::super::canvas::TextStyle;
    use super::super::colour::INK;
    use super::*;

    #[test]
    fn marks_and_texts_are_written_in_points() {
        let mut canvas = Canvas::new(72.0, 36.0);
        canvas.line(vec![(0.0, 1.234), (10.0, -0.001)], Pen::solid(INK, 0.5).dashed(2.0, 1.0).faint(0.5));
        canvas.disc((1.0, 2.0), 3.0, INK, 1.0);
        let style = TextStyle { size: 6.0, face: Face::Bold, colour: INK };
        canvas.write("p < 1 & q\u{7}", (5.0, 20.0), Anchor::Start, style);
        let text = svg(&canvas, "a <b>");
        assert!(text.starts_with("<svg ") && text.ends_with("</svg>\n"));
        for want in [
            "width=\"2.54cm\" height=\"1.27cm\" viewBox=\"0 0 72 36\"",
            "<title>a &lt;b&gt;</title>",
            "points=\"0,1.23 10,0\" fill=\"none\" stroke=\"#21252b\" stroke-width=\"0.5\" stroke-dasharray=\"2,1\" stroke-opacity=\"0.5\"",
            "<circle cx=\"1\" cy=\"2\" r=\"3\" fill=\"#21252b\"/>",
            "font-weight=\"bold\"",
            ">p &lt; 1 &amp; q </text>",
        ] {
            assert!(text.contains(want), "{want} is not in {text}");
        }
    }
}
