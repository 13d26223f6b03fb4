//! What every figure has to keep to, whatever its data; used by the tests of each figure.

use super::Drawing;
use super::Style;
use super::table::Cell;

/// Draws at several widths and checks each drawing. If the environment variable `EVENPOISE_KEEP_FIGURES` holds a width
/// in centimetres, pictures of that width are kept in the temporary folder, to be looked at.
pub(super) fn check(name: &str, draw: impl Fn(&Style) -> Vec<Drawing>) {
    if let Ok(width) = std::env::var("EVENPOISE_KEEP_FIGURES") {
        let width: f64 = width.parse().expect("EVENPOISE_KEEP_FIGURES is a width in centimetres");
        keep(name, &draw(&Style::new(width, 300.0).unwrap()));
    }
    for width in [8.0, 11.0, 16.0, 24.0] {
        let style = Style::new(width, 100.0).unwrap();
        let drawings = draw(&style);
        assert!(!drawings.is_empty(), "{name} draws nothing");
        for drawing in &drawings {
            check_one(&format!("{name}, {width} cm"), drawing, &style);
        }
    }
    let style = Style::new(16.0, 100.0).unwrap();
    for (first, second) in draw(&style).iter().zip(&draw(&style)) {
        let png = first.png();
        assert!(png == second.png() && first.svg() == second.svg(), "{name} changes");
        let reader = png::Decoder::new(std::io::Cursor::new(&png)).read_info().unwrap();
        assert!(reader.info().pixel_dims.is_some(), "{name}: no resolution in the PNG");
    }
}

fn check_one(name: &str, drawing: &Drawing, style: &Style) {
    let labels = drawing.labels();
    for (i, label) in labels.iter().enumerate() {
        let area = label.area();
        assert!(
            drawing.page().holds(&area),
            "{name}: {:?} leaves the page: {area:?} of {:?}",
            label.text,
            drawing.page()
        );
        assert!(
            label.size >= 6.0 && label.size >= style.unit(),
            "{name}: {:?} is set in {} pt",
            label.text,
            label.size
        );
        assert!(label.colour.contrast(label.ground) >= 4.5, "{name}: {:?} is too faint", label.text);
        let mut words = label.text.split(|c: char| !c.is_alphabetic());
        assert!(!words.any(|word| word == "NaN" || word == "inf"), "{name}: {:?}", label.text);
        for other in &labels[i + 1..] {
            assert!(!area.overlaps(&other.area()), "{name}: {:?} and {:?} overlap", label.text, other.text);
        }
    }
    assert!(!drawing.caption.is_empty() && !drawing.caption.contains("NaN"), "{name}: {}", drawing.caption);
    assert!(drawing.page().height() <= 1.5 * style.width().max(400.0 * style.unit() / 12.0), "{name}: too tall");
    let cells = drawing.table.rows().iter().flatten();
    assert!(cells.filter(|cell| matches!(cell, Cell::Number(value) if value.is_infinite())).count() == 0, "{name}");
}

fn keep(name: &str, drawings: &[Drawing]) {
    for (page, drawing) in drawings.iter().enumerate() {
        let stem = std::env::temp_dir().join(format!("evenpoise-{name}-{}", page + 1));
        std::fs::write(stem.with_extension("png"), drawing.png()).unwrap();
        std::fs::write(stem.with_extension("svg"), drawing.svg()).unwrap();
        std::fs::write(stem.with_extension("txt"), format!("{}\n", drawing.caption)).unwrap();
        std::fs::write(stem.with_extension("csv"), drawing.table.to_csv().unwrap()).unwrap();
    }
}
