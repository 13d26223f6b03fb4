//! Running standard errors of several proposals against the draws spent.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::canvas::Pen;
use super::colour::REFERENCE;
use super::contestants::look;
use super::frame::Frame;
use super::frame::SINGLE;
use super::frame::Side;
use super::key::Sample;
use super::numbers::count;
use super::numbers::significant;
use super::table::Table;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct ErrorsData {
    /// What is estimated.
    pub quantity: String,
    /// Its unit.
    pub unit: Option<String>,
    /// The proposals, in order.
    pub contestants: Vec<ErrorCourse>,
}

/// How the standard error of one proposal fell.
#[derive(Debug, Clone, PartialEq)]
pub struct ErrorCourse {
    /// Name of the proposal.
    pub name: String,
    /// Draws spent, rising.
    pub draws: Vec<f64>,
    /// Standard error of the estimate from as many draws, one for each entry of `draws`.
    pub standard_error: Vec<f64>,
}

impl ErrorCourse {
    /// What a logarithmic plot can show.
    fn points(&self) -> impl Iterator<Item = (f64, f64)> {
        let pairs = self.draws.iter().copied().zip(self.standard_error.iter().copied());
        pairs.filter(|&(n, se)| n > 0.0 && n.is_finite() && se > 0.0 && se.is_finite())
    }
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &ErrorsData, style: &Style) -> Drawing {
    let all = || data.contestants.iter().flat_map(ErrorCourse::points);
    let range = |pick: fn((f64, f64)) -> f64| {
        let (low, high) = all().map(pick).fold((f64::INFINITY, 0.0_f64), |(low, high), v| (low.min(v), high.max(v)));
        if low > high { (1.0, 1000.0) } else { (low, high) }
    };
    let (draws, errors) = (range(|p| p.0), range(|p| p.1));
    let x = Side { name: "draws", unit: None, range: (draws.0, draws.1, Scale::Log) };
    let name = format!("standard error of {}", data.quantity);
    let y = Side { name: &name, unit: data.unit.as_deref(), range: (errors.0 / 1.6, errors.1 * 1.3, Scale::Log) };
    let lines = data.contestants.iter().enumerate();
    let entries: Vec<(Sample, String)> =
        lines.map(|(k, c)| (Sample::Marked(look(k, style), 0.8 * style.marker()), c.name.clone())).collect();
    let mut frame = Frame::new(&x, &[(y, SINGLE)], &entries, style);
    let guide = guide(data);
    if let Some(level) = guide {
        let pen = Pen::solid(REFERENCE, 1.4 * style.hairline()).dashed(0.3 * style.unit(), 0.3 * style.unit());
        let x = &frame.panels[0].x;
        let ends = [x.low(), x.high()].map(|n| (n, level / n.sqrt()));
        frame.curve(0, ends, pen);
    }
    for (k, contestant) in data.contestants.iter().enumerate() {
        let look = look(k, style);
        frame.curve(0, contestant.points(), look.pen);
        if let Some((n, se)) = contestant.points().last() {
            look.shape.draw(&mut frame.canvas, frame.panels[0].spot(n, se), 0.8 * style.marker(), look.pen.colour);
        }
    }
    match guide {
        Some(level) => {
            let n = (draws.0 * draws.1).sqrt();
            let (x, y) = frame.panels[0].spot(n, level / n.sqrt());
            frame.note(0, "slope of 1/√n", (x - 2.5 * style.unit(), y + 1.2 * style.unit()), REFERENCE);
        }
        None => frame.say(0, "no standard error"),
    }
    frame.finish("errors", caption(data), table(data))
}

/// `c` of the guide `c / √n`: below the last points of all proposals.
fn guide(data: &ErrorsData) -> Option<f64> {
    let ends = data.contestants.iter().filter_map(|contestant| contestant.points().last());
    ends.map(|(n, se)| 0.8 * se * n.sqrt()).reduce(f64::min)
}

fn caption(data: &ErrorsData) -> String {
    let unit = data.unit.as_ref().map_or(String::new(), |unit| format!(" {unit}"));
    let ends: Vec<String> = data
        .contestants
        .iter()
        .filter_map(|c| c.points().last().map(|end| (c, end)))
        .map(|(c, (n, se))| format!("{} {}{unit} at {} draws", c.name, significant(se, 2), count(n as usize)))
        .collect();
    let mut caption = format!("Standard error of {} against the draws spent.", data.quantity);
    if !ends.is_empty() {
        caption.push_str(&format!(
            " At their ends (markers): {}. Where the weights have a finite variance, lines fall along \
             the guide; a jump is a draw that the proposal had made too rare.",
            ends.join("; ")
        ));
    }
    caption
}

fn table(data: &ErrorsData) -> Table {
    let mut table = Table::new(&["proposal", "draws", "standard_error"]);
    for contestant in &data.contestants {
        for (&draws, &se) in contestant.draws.iter().zip(&contestant.standard_error) {
            table.push([contestant.name.as_str().into(), draws.into(), se.into()]);
        }
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;

    fn course(name: &str, scale: f64, power: f64, jumps: bool) -> ErrorCourse {
        let draws: Vec<f64> = (0..60).map(|i| (100.0 * libm::pow(10.0, f64::from(i) / 15.0)).round()).collect();
        let error = |(i, n): (usize, &f64)| {
            scale * libm::pow(*n, power) * if jumps { [1.0, 0.9, 0.8, 2.0][i / 5 % 4] } else { 1.0 }
        };
        let standard_error = draws.iter().enumerate().map(error).collect();
        ErrorCourse { name: name.to_owned(), draws, standard_error }
    }

    fn data(contestants: Vec<ErrorCourse>) -> ErrorsData {
        ErrorsData { quantity: "the spilled volume".into(), unit: Some("m³".into()), contestants }
    }

    #[test]
    fn courses_of_every_kind_are_drawn_in_order() {
        let mut broken = course("with gaps", 1e-9, -0.5, false);
        broken.standard_error[0] = f64::NAN;
        broken.standard_error[20] = 0.0;
        let cases = [
            (
                "three",
                data(vec![
                    course("tuned", 3.0, -0.5, false),
                    course("Gaussian", 9.0, -0.3, true),
                    course("nominal", 60.0, -0.5, false),
                ]),
            ),
            (
                "six",
                data(
                    (0..6)
                        .map(|k| course(&format!("proposal_number_{k}_of_the_set"), 1.0 + f64::from(k), -0.5, k == 3))
                        .collect(),
                ),
            ),
            ("broken", data(vec![broken])),
            ("point", data(vec![ErrorCourse { name: "one".into(), draws: vec![100.0], standard_error: vec![2.0] }])),
            ("empty", data(vec![])),
        ];
        for (name, data) in cases {
            checks::check(&format!("errors-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// Errors that fall as 3/√n have a guide at 0.8 times 3, and the caption says where they end.
    #[test]
    fn the_guide_has_the_slope_of_the_root() {
        let data = data(vec![course("tuned", 3.0, -0.5, false), course("wide", 30.0, -0.5, false)]);
        assert!((guide(&data).unwrap() - 2.4).abs() < 1e-9);
        let n = data.contestants[0].draws[59];
        let caption = draw(&data, &Style::default()).caption;
        let end = format!("tuned {} m³ at {} draws", significant(3.0 / n.sqrt(), 2), count(n as usize));
        assert!(caption.contains(&end), "{caption}");
    }
}
