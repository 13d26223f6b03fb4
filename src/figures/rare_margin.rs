//! Margin against the distance from the middle of the scores: how the event is reached, and how far out.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::axis::padded_range;
use super::canvas::Pen;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::columns::quantiles;
use super::frame::Frame;
use super::frame::SINGLE;
use super::frame::Side;
use super::key::Sample;
use super::numbers::count;
use super::numbers::significant;
use super::sought::Sought;
use super::table::Table;

/// Most dots of each kind; of more draws, evenly many are drawn.
const DOTS: usize = 1200;
/// Radius of a dot, in text sizes.
const DOT: f64 = 0.13;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct MarginData {
    /// What is looked for: of an integrand the margins are its values.
    pub sought: Sought,
    /// What the margin is called.
    pub margin_name: String,
    /// Its unit.
    pub unit: Option<String>,
    /// Distance of each draw from the origin of the standard normal scores.
    pub distance: Vec<f64>,
    /// Margin of each draw; not finite where the model failed.
    pub margin: Vec<f64>,
    /// Whether each draw lies in the event.
    pub hit: Vec<bool>,
    /// Distances of the nearest points of the event that the search found, nearest first.
    pub nearest: Vec<f64>,
}

impl MarginData {
    /// Draws that can be drawn: distance, margin, hit.
    fn draws(&self) -> Vec<(f64, f64, bool)> {
        let rows = self.distance.iter().zip(&self.margin).zip(&self.hit);
        let rows = rows.map(|((&distance, &margin), &hit)| (distance, margin, hit));
        rows.filter(|(distance, margin, _)| distance.is_finite() && margin.is_finite()).collect()
    }
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &MarginData, style: &Style) -> Drawing {
    let draws = data.draws();
    let nearest = data.nearest.iter().copied().filter(|distance| distance.is_finite());
    let far = draws.iter().map(|d| d.0).chain(nearest.clone()).fold(0.0, f64::max);
    let margins: Vec<f64> = draws.iter().map(|d| d.1).collect();
    // A few wild margins must not press all others into a line.
    let usual = quantiles(&margins, &vec![1.0; margins.len()], [0.005, 0.995]).unwrap_or([-1.0, 1.0]);
    let (low, high) = padded_range([usual[0], usual[1], 0.0], 0.08).unwrap_or((-1.0, 1.0));

    let dot = DOT * style.unit();
    let mut entries = vec![
        (Sample::Dot(1.3 * dot, MEASURED, 0.8), data.sought.inside().to_owned()),
        (Sample::Dot(1.3 * dot, REFERENCE, 0.6), data.sought.outside().to_owned()),
    ];
    if data.sought == Sought::Event {
        entries.push((Sample::Line(limit(style)), "limit of the event".to_owned()));
    }
    let guide = Pen::solid(MODELLED, 1.4 * style.hairline()).dashed(0.4 * style.unit(), 0.3 * style.unit());
    if let Some(first) = nearest.clone().reduce(f64::min) {
        let many = if nearest.clone().count() > 1 { "s, the nearest" } else { "" };
        entries.push((Sample::Line(guide), format!("{}{many} at {}", data.sought.point(), significant(first, 3))));
    }
    let x = Side {
        name: "distance from the origin of the scores",
        unit: None,
        range: (0.0, if far > 0.0 { 1.04 * far } else { 1.0 }, Scale::Linear),
    };
    let y = Side { name: &data.margin_name, unit: data.unit.as_deref(), range: (low, high, Scale::Linear) };
    let mut frame = Frame::new(&x, &[(y, SINGLE)], &entries, style);
    let end = frame.panels[0].x.high();
    for (hit, colour, opacity) in [(false, REFERENCE, 0.35), (true, MEASURED, 0.5)] {
        for (distance, margin, _) in thinned(draws.iter().copied().filter(|d| d.2 == hit).collect()) {
            if frame.panels[0].shows(distance, margin) {
                frame.canvas.disc(frame.panels[0].spot(distance, margin), dot, colour, opacity);
            }
        }
    }
    if data.sought == Sought::Event {
        frame.curve(0, [(0.0, 0.0), (end, 0.0)], limit(style));
    }
    for distance in nearest {
        frame.curve(0, [(distance, low), (distance, high)], guide);
    }
    if draws.is_empty() {
        frame.say(0, "no draw");
    }
    frame.finish("margin", caption(data, &draws), table(data, &draws))
}

fn limit(style: &Style) -> Pen {
    Pen::solid(REFERENCE, 2.0 * style.hairline())
}

/// At most [`DOTS`] of the draws, spread evenly over them.
fn thinned<T: Copy>(draws: Vec<T>) -> Vec<T> {
    if draws.len() <= DOTS {
        return draws;
    }
    (0..DOTS).map(|i| draws[i * draws.len() / DOTS]).collect()
}

fn caption(data: &MarginData, draws: &[(f64, f64, bool)]) -> String {
    let hits = draws.iter().filter(|d| d.2).count();
    let mut parts = vec![format!(
        "{} of {} draws against their distance from the origin of the standard normal scores, in standard deviations; {} {}.",
        capital(&data.margin_name),
        count(draws.len()),
        count(hits),
        data.sought.of_them()
    )];
    if let Some(nearest) = draws.iter().filter(|d| d.2).map(|d| d.0).reduce(f64::min) {
        parts.push(format!("The nearest of those is {} away.", significant(nearest, 3)));
    }
    let found: Vec<String> = data.nearest.iter().map(|&distance| significant(distance, 3)).collect();
    if !found.is_empty() {
        parts.push(format!("Dashed: {}, at {}.", data.sought.points(), found.join(", ")));
    }
    let failed = data.distance.len() - draws.len();
    match failed {
        0 => {}
        1 => parts.push("One draw has no finite value.".to_owned()),
        _ => parts.push(format!("{} draws have no finite value.", count(failed))),
    }
    parts.join(" ")
}

/// With a capital letter, for the beginning of a sentence.
fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or(String::new(), |first| first.to_uppercase().chain(letters).collect())
}

fn table(data: &MarginData, draws: &[(f64, f64, bool)]) -> Table {
    let columns = match data.sought {
        Sought::Event => ["distance", "margin", "in_event"],
        Sought::Integrand => ["distance", "integrand", "not_zero"],
    };
    let mut table = Table::new(&columns);
    for &(distance, margin, hit) in draws {
        table.push([distance.into(), margin.into(), if hit { "yes" } else { "no" }.into()]);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;
    use crate::numeric::Purpose;
    use crate::numeric::normal;
    use crate::numeric::stream;

    /// Draws around the nearest point of a bent limit, `3.5 + 0.1 y^2 - x`.
    fn data(n: usize, scale: f64) -> MarginData {
        let mut stream = stream(5, Purpose::Trial, 0, 0);
        let mut data = MarginData {
            sought: Sought::Event,
            margin_name: "freeboard at the crest".into(),
            unit: Some("m".into()),
            distance: vec![],
            margin: vec![],
            hit: vec![],
            nearest: vec![3.5, 4.7],
        };
        for i in 0..n {
            let (x, y) =
                (normal::draw(&mut stream) + if i % 3 == 0 { 0.0 } else { 3.2 }, 1.5 * normal::draw(&mut stream));
            let margin = 3.5 + 0.1 * y * y - x;
            data.distance.push((x * x + y * y).sqrt());
            data.margin.push(scale * margin);
            data.hit.push(margin < 0.0);
        }
        data
    }

    #[test]
    fn margins_of_every_kind_are_drawn_in_order() {
        let mut failed = data(300, 1e-12);
        failed.margin[7] = f64::NAN;
        failed.margin[8] = f64::INFINITY;
        let mut missed = data(40, 1e6);
        missed.hit.fill(false);
        missed.nearest.clear();
        let empty = MarginData { distance: vec![], margin: vec![], hit: vec![], nearest: vec![], ..data(0, 1.0) };
        let integrand = MarginData { sought: Sought::Integrand, margin_name: "integrand".into(), ..data(4000, 30.0) };
        let cases = [
            ("usual", data(4000, 1.0)),
            ("failed", failed),
            ("missed", missed),
            ("empty", empty),
            ("integrand", integrand),
        ];
        for (name, data) in cases {
            checks::check(&format!("margin-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    #[test]
    fn failed_draws_are_counted_and_left_out() {
        let mut data = data(300, 1.0);
        data.margin[7] = f64::NAN;
        let drawing = draw(&data, &Style::default());
        assert!(drawing.caption.contains("299 draws") && drawing.caption.contains("One draw has no finite value"));
        assert_eq!(drawing.table.rows().len(), 299);
        assert_eq!(thinned((0..5000).collect()).len(), DOTS);
    }
}
