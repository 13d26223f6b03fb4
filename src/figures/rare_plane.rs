//! The event in the plane of its two most important variables, with the proposal's components over it.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::axis::padded_range;
use super::canvas::Pen;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::PAPER;
use super::colour::REFERENCE;
use super::columns::quantiles;
use super::frame::Frame;
use super::frame::Side;
use super::key::Sample;
use super::numbers::count;
use super::numbers::significant;
use super::place::Area;
use super::sought::Sought;
use super::table::Table;

/// Height of the panel in text sizes: about as high as wide.
const HEIGHT: f64 = 27.0;
/// Most dots of each kind; of more draws, evenly many are drawn.
const DOTS: usize = 1500;
/// Part of the draws that the axes show at least, as quantiles.
const FRAMED: [f64; 2] = [0.0025, 0.9975];
/// Radius of a dot, in text sizes.
const DOT: f64 = 0.13;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct PlaneData {
    /// What is looked for.
    pub sought: Sought,
    /// What all values are.
    pub space: Space,
    /// The variable along the bottom.
    pub x: PlaneSide,
    /// The variable along the left side.
    pub y: PlaneSide,
    /// Whether each draw lies in the event.
    pub hit: Vec<bool>,
    /// Outlines of the components.
    pub components: Vec<PlaneOutline>,
    /// How many components there are.
    pub n_components: usize,
    /// Lines of equal nominal density around the middle.
    pub nominal: Vec<PlaneOutline>,
    /// Points of the event of the highest nominal density, found by the search.
    pub design_points: Vec<(f64, f64)>,
}

/// What the axes measure.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Space {
    /// Standard normal scores: both axes get the same scale, circles are round.
    Scores,
    /// Natural units: each axis has its own scale.
    Natural,
}

/// A variable of the plane.
#[derive(Debug, Clone, PartialEq)]
pub struct PlaneSide {
    /// What it is called.
    pub name: String,
    /// Its unit.
    pub unit: Option<String>,
    /// Its share of the squared direction cosines, if known.
    pub importance: Option<f64>,
    /// Its value at each draw.
    pub values: Vec<f64>,
}

/// The ends of an axis.
type Range = (f64, f64);

/// A closed line.
#[derive(Debug, Clone, PartialEq)]
pub struct PlaneOutline {
    /// Values along the bottom.
    pub x: Vec<f64>,
    /// Values along the left side.
    pub y: Vec<f64>,
}

impl PlaneOutline {
    fn points(&self) -> impl Iterator<Item = (f64, f64)> {
        self.x.iter().copied().zip(self.y.iter().copied())
    }
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &PlaneData, style: &Style) -> Drawing {
    let unit = style.unit();
    let draws: Vec<(f64, f64, bool)> = data
        .x
        .values
        .iter()
        .zip(&data.y.values)
        .zip(&data.hit)
        .map(|((&x, &y), &hit)| (x, y, hit))
        .filter(|(x, y, _)| x.is_finite() && y.is_finite())
        .collect();
    let fixed = || {
        let lines = data.components.iter().chain(&data.nominal).flat_map(PlaneOutline::points);
        lines.chain(data.design_points.iter().copied())
    };
    // A few draws far out must not press all others together.
    let usual = |values: Vec<f64>| quantiles(&values, &vec![1.0; values.len()], FRAMED).unwrap_or([f64::NAN; 2]);
    let range = |pick: fn((f64, f64)) -> f64| {
        let framed = usual(draws.iter().map(|d| pick((d.0, d.1))).collect());
        padded_range(framed.into_iter().chain(fixed().map(pick)), 0.04).unwrap_or((-1.0, 1.0))
    };
    let (xs, ys) = (range(|p| p.0), range(|p| p.1));
    let dot = DOT * unit;
    let nominal = Pen::solid(REFERENCE, 1.4 * style.hairline()).dashed(0.4 * unit, 0.3 * unit);
    let component = Pen::solid(MODELLED, 0.1 * unit);
    let mut entries = vec![
        (Sample::Dot(1.3 * dot, MEASURED, 0.8), data.sought.inside().to_owned()),
        (Sample::Dot(1.3 * dot, REFERENCE, 0.6), data.sought.outside().to_owned()),
    ];
    if !data.components.is_empty() {
        entries.push((Sample::Outline(component), "component, 1 sd".to_owned()));
    }
    if !data.nominal.is_empty() {
        entries.push((Sample::Outline(nominal), "nominal density, 1 to 3 sd".to_owned()));
    }
    let mut frame = frame(data, (xs, ys), &entries, style);
    for (hit, colour, opacity) in [(false, REFERENCE, 0.35), (true, MEASURED, 0.5)] {
        let kind: Vec<&(f64, f64, bool)> = draws.iter().filter(|d| d.2 == hit).collect();
        let shown = kind.len().min(DOTS);
        for i in 0..shown {
            let &(x, y, _) = kind[i * kind.len() / shown];
            if frame.panels[0].shows(x, y) {
                frame.canvas.disc(frame.panels[0].spot(x, y), dot, colour, opacity);
            }
        }
    }
    for line in &data.nominal {
        frame.curve(0, line.points(), nominal);
    }
    for line in &data.components {
        // A rim of paper keeps the line apart from the dots.
        frame.curve(0, line.points(), Pen::solid(PAPER, 0.3 * unit).faint(0.7));
        frame.curve(0, line.points(), component);
    }
    for &(x, y) in data.design_points.iter().filter(|p| p.0.is_finite() && p.1.is_finite()) {
        draw_cross(&mut frame, (x, y), style);
    }
    if draws.is_empty() {
        frame.say(0, "no draw");
    }
    let caption = caption(data, &draws, |x, y| frame.panels[0].shows(x, y));
    frame.finish("event", caption, table(data, &draws))
}

fn draw_cross(frame: &mut Frame, (x, y): (f64, f64), style: &Style) {
    let (x, y) = frame.panels[0].spot(x, y);
    let (arm, pen) = (0.45 * style.unit(), Pen::solid(MODELLED, 0.14 * style.unit()));
    frame.canvas.curve(vec![(x - arm, y), (x + arm, y)], pen);
    frame.canvas.curve(vec![(x, y - arm), (x, y + arm)], pen);
}

/// The panel that shows at least the ranges along both axes.
fn frame<'a>(data: &PlaneData, ranges: (Range, Range), entries: &[(Sample, String)], style: &'a Style) -> Frame<'a> {
    let framed = |xs: Range, ys: Range| {
        let x = Side { name: &data.x.name, unit: data.x.unit.as_deref(), range: (xs.0, xs.1, Scale::Linear) };
        let y = Side { name: &data.y.name, unit: data.y.unit.as_deref(), range: (ys.0, ys.1, Scale::Linear) };
        Frame::new(&x, &[(y, HEIGHT)], entries, style)
    };
    let (xs, ys) = ranges;
    let frame = framed(xs, ys);
    if data.space == Space::Natural {
        return frame;
    }
    // The axis with room to spare shows more than it has to.
    let Area { left, top, right, bottom } = frame.panels[0].area;
    let a_point = ((xs.1 - xs.0) / (right - left)).max((ys.1 - ys.0) / (bottom - top));
    framed(around(xs, a_point * (right - left)), around(ys, a_point * (bottom - top)))
}

/// The range of `length` with the same middle.
fn around(range: Range, length: f64) -> Range {
    let middle = f64::midpoint(range.0, range.1);
    (middle - length / 2.0, middle + length / 2.0)
}

fn caption(data: &PlaneData, draws: &[(f64, f64, bool)], shows: impl Fn(f64, f64) -> bool) -> String {
    let hits = draws.iter().filter(|d| d.2).count();
    let mut parts = vec![format!(
        "{} draws of the proposals in the plane of {} and {}; {} {}.",
        count(draws.len()),
        data.x.name,
        data.y.name,
        count(hits),
        data.sought.of_them()
    )];
    if let (Some(x), Some(y)) = (data.x.importance, data.y.importance) {
        parts.push(format!(
            "Their squared direction cosines at the nearest {} are {} and {}; the other variables blur the picture.",
            data.sought.point(),
            significant(x, 2),
            significant(y, 2)
        ));
    }
    match data.components.len() {
        0 => {}
        n if n == data.n_components => parts.push(
            "Outlines: the fitted components of the chosen proposal, one standard deviation around their centres.".to_owned(),
        ),
        n => parts.push(format!(
            "Outlines: the {n} largest of the {} fitted components of the chosen proposal, one standard deviation around their centres.",
            data.n_components
        )),
    }
    let beyond = draws.iter().filter(|d| !shows(d.0, d.1)).count();
    if beyond > 0 {
        parts.push(format!("{} draws lie outside of the axes.", count(beyond)));
    }
    if !data.nominal.is_empty() {
        parts.push("Dashed: one, two and three standard deviations of the variables' own distribution.".to_owned());
    }
    if !data.design_points.is_empty() {
        parts.push(format!("Crosses are {}.", data.sought.points()));
    }
    parts.join(" ")
}

fn table(data: &PlaneData, draws: &[(f64, f64, bool)]) -> Table {
    let (inside, outside) = match data.sought {
        Sought::Event => ("event", "outside"),
        Sought::Integrand => ("not zero", "zero"),
    };
    let mut table = Table::new(&["series", "number", &data.x.name, &data.y.name]);
    for &(x, y, hit) in draws {
        table.push([if hit { inside } else { outside }.into(), None.into(), x.into(), y.into()]);
    }
    for (series, lines) in [("component", &data.components), ("nominal", &data.nominal)] {
        for (k, line) in lines.iter().enumerate() {
            for (x, y) in line.points() {
                table.push([series.into(), (k as f64).into(), x.into(), y.into()]);
            }
        }
    }
    for (k, &(x, y)) in data.design_points.iter().enumerate() {
        table.push([data.sought.point().into(), (k as f64).into(), x.into(), y.into()]);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::table::Cell;
    use super::*;
    use crate::numeric::Purpose;
    use crate::numeric::normal;
    use crate::numeric::stream;

    fn ring((x, y): (f64, f64), (a, b): (f64, f64)) -> PlaneOutline {
        let turn = |i: u32| f64::from(i) * std::f64::consts::TAU / 90.0;
        PlaneOutline {
            x: (0..=90).map(|i| x + a * libm::cos(turn(i))).collect(),
            y: (0..=90).map(|i| y + b * libm::sin(turn(i))).collect(),
        }
    }

    /// Draws around two ways to overtop the invented Ellenmere dam: much inflow, or a gate that sticks.
    fn data(n: usize) -> PlaneData {
        let mut stream = stream(6, Purpose::Trial, 0, 0);
        let side = |name: &str, importance| PlaneSide {
            name: name.into(),
            unit: None,
            importance: Some(importance),
            values: vec![],
        };
        let mut data = PlaneData {
            sought: Sought::Event,
            space: Space::Scores,
            x: side("score of inflow", 0.61),
            y: side("score of gate_friction", 0.3),
            hit: vec![],
            components: vec![ring((3.4, 0.3), (0.5, 1.1)), ring((0.6, -3.9), (1.1, 0.4))],
            n_components: 2,
            nominal: vec![ring((0.0, 0.0), (1.0, 1.0)), ring((0.0, 0.0), (2.0, 2.0)), ring((0.0, 0.0), (3.0, 3.0))],
            design_points: vec![(3.1, 0.2), (0.5, -3.7)],
        };
        for i in 0..n {
            let (a, b) = (normal::draw(&mut stream), normal::draw(&mut stream));
            let (x, y) = if i % 5 < 3 { (3.4 + 0.5 * a, 0.3 + 1.1 * b) } else { (0.6 + 1.1 * a, -3.9 + 0.4 * b) };
            data.x.values.push(x);
            data.y.values.push(y);
            data.hit.push(x + 0.1 * y > 3.1 || y + 0.1 * x < -3.6);
        }
        data
    }

    #[test]
    fn events_of_every_kind_are_drawn_in_order() {
        let mut bare = data(60);
        bare.components.clear();
        bare.nominal.clear();
        bare.space = Space::Natural;
        bare.x.unit = Some("m³/s".into());
        bare.x.values[3] = f64::NAN;
        let mut empty = data(0);
        empty.design_points.clear();
        empty.components.clear();
        empty.nominal.clear();
        for (name, data) in [("usual", data(5000)), ("bare", bare), ("empty", empty)] {
            checks::check(&format!("event-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    #[test]
    fn the_table_has_all_draws_and_lines() {
        let drawing = draw(&data(5000), &Style::default());
        let rows = drawing.table.rows();
        assert_eq!(rows.len(), 5000 + 5 * 91 + 2);
        let hits = rows.iter().filter(|row| row[0] == Cell::Text("event".into())).count();
        assert!(drawing.caption.contains(&count(hits)), "{} {hits}", drawing.caption);
        assert!(drawing.caption.contains("0.61 and 0.30"), "{}", drawing.caption);
    }
}
