//! The page as SVG, written by `plotters`: the unit of the view box is a hundredth of a point.

use plotters::backend::SVGBackend;
use plotters::drawing::IntoDrawingArea as _;

use super::canvas::Canvas;
use super::plot::plot;

/// Steps of the drawing area to a point.
const STEPS: f64 = 100.0;

/// The page as an SVG document; `title` is what screen readers and tooltips say.
#[must_use]
pub fn svg(canvas: &Canvas, title: &str) -> String {
    let (width, height) = ((canvas.width() * STEPS).round(), (canvas.height() * STEPS).round());
    let mut written = String::new();
    let backend = SVGBackend::with_string(&mut written, (width as u32, height as u32));
    plot(canvas, &backend.into_drawing_area(), STEPS).expect("nothing can fail in memory");

    // The root element asks for pixels of the screen; a figure has a size on paper.
    let body = written.split_once(">\n").map_or("", |(_, body)| body);
    let centimetres = |steps: f64| steps / STEPS / 72.0 * 2.54;
    let mut text = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{:.2}cm\" height=\"{:.2}cm\" viewBox=\"0 0 {width} {height}\">\n<title>{}</title>\n",
        centimetres(width),
        centimetres(height),
        escaped(title)
    );
    // Texts keep the width of the layout when another font has to be taken.
    let mut parts = body.split("<text ");
    text.push_str(parts.next().unwrap_or_default());
    for (part, label) in parts.zip(canvas.labels()) {
        let width = (label.width * STEPS).round();
        text.push_str(&format!("<text textLength=\"{width}\" lengthAdjust=\"spacingAndGlyphs\" {part}"));
    }
    text
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
    use super::super::text::Face;
    use super::*;

    #[test]
    fn marks_and_texts_are_written_in_hundredths_of_a_point() {
        let mut canvas = Canvas::new(72.0, 36.0);
        canvas.line(vec![(0.0, 1.234), (10.0, -0.001)], Pen::solid(INK, 0.5).faint(0.5));
        canvas.line(vec![(0.0, 1.0), (5.0, 1.0)], Pen::solid(INK, 0.5).dashed(2.0, 1.0));
        canvas.disc((1.0, 2.0), 3.0, INK, 1.0);
        let style = TextStyle { size: 6.0, face: Face::Bold, colour: INK };
        let area = canvas.write("p < 1 & q\u{7}", (5.0, 20.0), Anchor::Start, style);
        canvas.write("second", (5.0, 30.0), Anchor::Start, style);
        let text = svg(&canvas, "a <b>");
        assert!(text.starts_with("<svg ") && text.ends_with("</svg>\n"), "{text}");
        for want in [
            "width=\"2.54cm\" height=\"1.27cm\" viewBox=\"0 0 7200 3600\"",
            "<title>a &lt;b&gt;</title>",
            "opacity=\"0.5\" stroke=\"#21252B\" stroke-width=\"50\" points=\"0,123 1000,0 \"",
            "points=\"0,100 200,100 \"",
            "points=\"300,100 500,100 \"",
            "<circle cx=\"100\" cy=\"200\" r=\"300\" opacity=\"1\" fill=\"#21252B\"",
            &format!("textLength=\"{}\" lengthAdjust=\"spacingAndGlyphs\" x=\"500\"", (area.width() * 100.0).round()),
            // Hung 0.76 em above its baseline, which is where `dy` brings it back to.
            "y=\"1544\" dy=\"0.76em\" text-anchor=\"start\" font-family=\"DejaVu Sans, Verdana, Arial, sans-serif\" font-size=\"600\"",
            "font-weight=\"bold\"",
            "\np &lt; 1 &amp; q \n",
        ] {
            assert!(text.contains(want), "{want} is not in {text}");
        }
        assert_eq!(text.matches("<text ").count(), 2);
    }
}
