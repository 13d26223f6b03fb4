//! The course of an estimate: its value with its interval, and its standard error, against what was spent.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::axis::padded_range;
use super::canvas::Pen;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MEASURED_TINT;
use super::colour::REFERENCE;
use super::frame::Frame;
use super::frame::Side;
use super::key::Sample;
use super::numbers::count;
use super::numbers::exponent_of;
use super::numbers::percent;
use super::numbers::significant;
use super::table::Table;
use super::text::Spot;

/// Up to so many points are marked one by one.
const MARKED: usize = 30;
/// Heights of the panels, in text sizes.
const HEIGHTS: (f64, f64) = (13.0, 11.0);

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct CourseData {
    /// Stem of the file name.
    pub name: String,
    /// What is estimated.
    pub quantity: String,
    /// Its unit.
    pub unit: Option<String>,
    /// What is spent: "draws", "evaluations".
    pub spent: String,
    /// What kind of number is estimated.
    pub kind: Kind,
    /// The course, in order of what was spent.
    pub points: Vec<CoursePoint>,
    /// A value known from elsewhere, to compare with.
    pub known: Option<f64>,
}

/// What kind of number is estimated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// A mean or another number on a plain axis, with its standard error.
    Mean,
    /// A small probability: on a logarithmic axis, with its relative standard error.
    Probability,
}

/// The estimate after some expense.
#[derive(Debug, Clone, PartialEq)]
pub struct CoursePoint {
    /// What was spent.
    pub spent: f64,
    /// The estimate.
    pub estimate: f64,
    /// Its standard error.
    pub standard_error: f64,
    /// Its 95 % interval.
    pub interval: (f64, f64),
}

impl CourseData {
    /// The points that can be drawn.
    fn sound(&self) -> Vec<&CoursePoint> {
        let is_sound = |p: &&CoursePoint| {
            let ends = p.interval.0.is_finite() && p.interval.1.is_finite();
            p.spent > 0.0 && p.spent.is_finite() && p.estimate.is_finite() && ends
        };
        self.points.iter().filter(is_sound).collect()
    }

    /// What the lower panel shows of a point, if a logarithmic axis can show it.
    fn error(&self, point: &CoursePoint) -> Option<(f64, f64)> {
        let error = match self.kind {
            Kind::Mean => point.standard_error,
            Kind::Probability => point.standard_error / point.estimate,
        };
        (error > 0.0 && error.is_finite()).then_some((point.spent, error))
    }
}

/// Draws the figure: the estimate in its interval above, the standard error with the slope of `1 / √n` below.
///
/// ```
/// use evenpoise::figures::Style;
/// use evenpoise::figures::course::{CourseData, CoursePoint, Kind, draw};
/// let point = |spent: f64, estimate: f64, standard_error: f64| CoursePoint {
///     spent,
///     estimate,
///     standard_error,
///     interval: (estimate - 1.96 * standard_error, estimate + 1.96 * standard_error),
/// };
/// let data = CourseData {
///     name: "course".to_owned(),
///     quantity: "mean level".to_owned(),
///     unit: Some("m".to_owned()),
///     spent: "draws".to_owned(),
///     kind: Kind::Mean,
///     points: vec![point(1e3, 12.3, 0.2), point(1e5, 12.12, 0.02)],
///     known: None,
/// };
/// assert!(draw(&data, &Style::default()).caption.contains("After 100,000 draws: 12.120 m"));
/// ```
#[must_use]
pub fn draw(data: &CourseData, style: &Style) -> Drawing {
    let points = data.sound();
    let errors: Vec<(f64, f64)> = points.iter().filter_map(|point| data.error(point)).collect();
    let ends = (points.first().map_or(1.0, |p| p.spent), points.last().map_or(1000.0, |p| p.spent));
    let low = errors.iter().map(|e| e.1).fold(f64::INFINITY, f64::min);
    let high = errors.iter().map(|e| e.1).fold(0.0, f64::max);
    let (low, high) = if low > high { (0.01, 1.0) } else { (low / 1.6, high * 1.3) };
    let x = Side { name: &data.spent, unit: None, range: (ends.0, ends.1, Scale::Log) };
    let estimate = Side { name: &data.quantity, unit: data.unit.as_deref(), range: estimate_range(data, &points) };
    let (error, unit) = match data.kind {
        Kind::Mean => ("standard error", data.unit.as_deref()),
        Kind::Probability => ("standard error / estimate", None),
    };
    let error = Side { name: error, unit, range: (low, high, Scale::Log) };
    let line = Pen::solid(MEASURED, style.stroke());
    let known = Pen::solid(INK, 1.4 * style.hairline()).dashed(0.2 * style.unit(), 0.25 * style.unit());
    let mut entries = vec![(Sample::Field(MEASURED_TINT, line), "estimate, 95 % interval".to_owned())];
    if data.known.is_some() {
        entries.push((Sample::Line(known), "known value".to_owned()));
    }
    let rows = [(estimate, HEIGHTS.0), (error, HEIGHTS.1)];
    let mut frame = Frame::new(&x, &rows, &entries, style);
    draw_band(&mut frame, &points);
    frame.curve(0, points.iter().map(|p| (p.spent, p.estimate)), line);
    let few = points.len() <= MARKED;
    for point in points.iter().filter(|p| few && frame.panels[0].shows(p.spent, p.estimate)) {
        frame.canvas.disc(frame.panels[0].spot(point.spent, point.estimate), 0.6 * style.marker(), MEASURED, 1.0);
    }
    if let Some(last) = points.last().filter(|last| frame.panels[0].shows(last.spent, last.estimate)) {
        let ends = [(last.spent, last.interval.0), (last.spent, last.interval.1)];
        frame.curve(0, ends, Pen::solid(MEASURED, 1.4 * style.hairline()));
        frame.canvas.disc(frame.panels[0].spot(last.spent, last.estimate), style.marker(), MEASURED, 1.0);
    }
    if let Some(value) = data.known {
        let x = &frame.panels[0].x;
        let ends = [(x.low(), value), (x.high(), value)];
        frame.curve(0, ends, known);
    }
    draw_errors(&mut frame, &errors, line, style);
    if points.is_empty() {
        frame.say(0, "no estimate");
    }
    frame.finish(&data.name, caption(data, &points), table(data))
}

/// Draws the lower panel with a guide below the last point.
fn draw_errors(frame: &mut Frame, errors: &[(f64, f64)], line: Pen, style: &Style) {
    let Some(&(n, error)) = errors.last() else { return frame.say(1, "no standard error") };
    let guide = Pen::solid(REFERENCE, 1.4 * style.hairline()).dashed(0.3 * style.unit(), 0.3 * style.unit());
    let level = 0.8 * error * n.sqrt();
    let x = &frame.panels[1].x;
    let ends = [x.low(), x.high()].map(|n| (n, level / n.sqrt()));
    frame.curve(1, ends, guide);
    frame.curve(1, errors.iter().copied(), line);
    frame.canvas.disc(frame.panels[1].spot(n, error), style.marker(), MEASURED, 1.0);
    let middle = (ends[0].0 * ends[1].0).sqrt();
    let (x, y) = frame.panels[1].spot(middle, level / middle.sqrt());
    frame.note(1, "slope of 1/√n", (x - 2.5 * style.unit(), y + 1.2 * style.unit()), REFERENCE);
}

/// The vertical axis of the estimate: the intervals of the later half of the course, on the scale of the other axis.
fn estimate_range(data: &CourseData, points: &[&CoursePoint]) -> (f64, f64, Scale) {
    let half = points.first().zip(points.last()).map_or(0.0, |(first, last)| (first.spent * last.spent).sqrt());
    let later = points.iter().filter(|p| p.spent >= half).flat_map(|p| [p.interval.0, p.interval.1, p.estimate]);
    let (low, high) = padded_range(later.chain(data.known), 0.0).unwrap_or((0.0, 1.0));
    match data.kind {
        Kind::Probability if high > 0.0 => {
            // An interval may reach down to zero; the axis ends two powers of ten below the estimate.
            let last = points.last().map_or(high, |p| p.estimate).max(1e-250);
            (low.max(last / 100.0) / 1.3, high * 1.3, Scale::Log)
        }
        _ => {
            let pad = 0.1 * (high - low);
            (low - pad, high + pad, Scale::Linear)
        }
    }
}

/// Fills the interval along the course, cut at the edges of the panel.
fn draw_band(frame: &mut Frame, points: &[&CoursePoint]) {
    let panel = &frame.panels[0];
    let spot = |x: f64, y: f64| -> Spot {
        let area = panel.area;
        (panel.spot(x, y).0, area.bottom - panel.y.place(y).clamp(0.0, 1.0) * area.height())
    };
    let mut corners: Vec<Spot> = points.iter().map(|p| spot(p.spent, p.interval.1)).collect();
    corners.extend(points.iter().rev().map(|p| spot(p.spent, p.interval.0)));
    frame.canvas.fill(corners, MEASURED_TINT, 1.0);
}

fn caption(data: &CourseData, points: &[&CoursePoint]) -> String {
    let Some(last) = points.last() else { return format!("There is no estimate of the {}.", data.quantity) };
    let unit = data.unit.as_ref().map_or(String::new(), |unit| format!(" {unit}"));
    let mut parts = vec![format!(
        "Estimate of the {} with its 95 % interval (a) and its standard error (b) against the {} spent.",
        data.quantity, data.spent
    )];
    let relative = last.standard_error / last.estimate.abs();
    let part =
        if relative.is_finite() { format!(", a standard error of {} of it", percent(relative)) } else { String::new() };
    let digits = digits(last);
    parts.push(format!(
        "After {} {}: {}{unit}, between {} and {}{part}.",
        count(last.spent as usize),
        data.spent,
        significant(last.estimate, digits),
        significant(last.interval.0, digits),
        significant(last.interval.1, digits)
    ));
    if let Some(known) = data.known {
        parts.push(format!("The known value is {}{unit}.", significant(known, digits)));
    }
    parts.join(" ")
}

/// Digits that end with the second one of the standard error.
fn digits(point: &CoursePoint) -> usize {
    if !(point.standard_error > 0.0 && point.standard_error.is_finite()) || point.estimate == 0.0 {
        return 4;
    }
    let apart = exponent_of(point.estimate) - exponent_of(point.standard_error);
    (apart + 2).clamp(2, 15) as usize
}

fn table(data: &CourseData) -> Table {
    let mut table = Table::new(&["spent", "estimate", "standard_error", "lower", "upper"]);
    for p in &data.points {
        let finite = |value: f64| value.is_finite().then_some(value);
        table.push([
            p.spent.into(),
            finite(p.estimate).into(),
            finite(p.standard_error).into(),
            finite(p.interval.0).into(),
            finite(p.interval.1).into(),
        ]);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::table::Cell;
    use super::*;

    fn course(kind: Kind, truth: f64, spread: f64) -> CourseData {
        let points = (0..50).map(|i| {
            let spent = (50.0 * libm::pow(10.0, f64::from(i) / 14.0)).round();
            let error = spread / spent.sqrt();
            let estimate = truth + error * libm::sin(0.7 * f64::from(i)) * 1.4;
            let interval = (estimate - 1.96 * error, estimate + 1.96 * error);
            let floor = if kind == Kind::Probability { 0.0 } else { f64::NEG_INFINITY };
            CoursePoint { spent, estimate, standard_error: error, interval: (interval.0.max(floor), interval.1) }
        });
        CourseData {
            name: "course".into(),
            quantity: if kind == Kind::Mean { "spilled volume" } else { "probability of overtopping" }.into(),
            unit: (kind == Kind::Mean).then(|| "m³".to_owned()),
            spent: if kind == Kind::Mean { "draws" } else { "evaluations" }.into(),
            kind,
            points: points.collect(),
            known: Some(truth),
        }
    }

    #[test]
    fn courses_of_every_kind_are_drawn_in_order() {
        let mut broken = course(Kind::Mean, 1e9, 3e4);
        broken.points[0].interval = (f64::NEG_INFINITY, f64::INFINITY);
        broken.points[5].estimate = f64::NAN;
        broken.points[48].standard_error = 0.0;
        broken.known = None;
        let mut one = course(Kind::Probability, 1e-9, 1e-8);
        one.points.truncate(1);
        let mut empty = course(Kind::Probability, 0.1, 0.1);
        empty.points.clear();
        empty.known = None;
        let mut still = course(Kind::Mean, 4.0, 0.0);
        still.known = None;
        let cases = [
            ("mean", course(Kind::Mean, 412.0, 900.0)),
            ("negative", course(Kind::Mean, -4.1e-5, 0.001)),
            ("probability", course(Kind::Probability, 3.2e-7, 1e-5)),
            ("broken", broken),
            ("one", one),
            ("still", still),
            ("empty", empty),
        ];
        for (name, data) in cases {
            checks::check(&format!("course-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    #[test]
    fn the_caption_and_table_end_with_the_last_point() {
        let data = course(Kind::Mean, 412.0, 900.0);
        let last = &data.points[49];
        let drawing = draw(&data, &Style::default());
        let want = format!("After {} draws: {} m³", count(last.spent as usize), significant(last.estimate, 4));
        assert_eq!(digits(last), 4, "412.8 with an error of 2.3");
        assert!(drawing.caption.contains(&want), "{}", drawing.caption);
        assert_eq!(drawing.table.rows()[49][1], Cell::Number(last.estimate));
    }
}
