//! Progress of the rounds: what each round's proposal scored, against the evaluations spent.

use super::Drawing;
use super::Style;
use super::axis::Along;
use super::axis::Axis;
use super::axis::Room;
use super::axis::Scale;
use super::canvas::Anchor;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::GROUND;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::heading;
use super::panel::Panel;
use super::panel::bottom_room;
use super::panel::left_room;
use super::place::Area;
use super::place::spread;
use super::text;
use super::text::Face;

mod rows;
mod words;

use rows::Kind;
use rows::Series;
use rows::rows;
use words::caption;
use words::table;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct ProgressData {
    /// Spans of the evaluations, in order; may be empty.
    pub phases: Vec<Phase>,
    /// The rounds, in order.
    pub rounds: Vec<RoundScore>,
    /// What [`RoundScore::schedule`] is.
    pub schedule: Schedule,
    /// Score of the report draws, if they were taken.
    pub report: Option<ReportScore>,
}

/// A span of the evaluations.
#[derive(Debug, Clone, PartialEq)]
pub struct Phase {
    /// Its name: "survey".
    pub name: String,
    /// Evaluations spent at its beginning.
    pub from: f64,
    /// Evaluations spent at its end.
    pub to: f64,
    /// Whether it is shaded; the rounds are not.
    pub shaded: bool,
}

/// Scores of one round.
#[derive(Debug, Clone, PartialEq)]
pub struct RoundScore {
    /// Its number.
    pub round: u32,
    /// Evaluations spent at its end.
    pub evaluations: f64,
    /// ESS fraction that the rounds before predicted for its proposal.
    pub predicted_ess_fraction: Option<f64>,
    /// ESS fraction of its own draws.
    pub ess_fraction: Option<f64>,
    /// Standard error of that.
    pub ess_fraction_se: Option<f64>,
    /// Variance of its weights over their squared mean.
    pub weight_variance: Option<f64>,
    /// Tempering exponent or width of smoothing.
    pub schedule: Option<f64>,
    /// Components of its proposal.
    pub components: usize,
}

/// How the rounds approach their target.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Schedule {
    /// By an exponent of the target, 1 at the target itself.
    Exponent,
    /// By a smoothed event, 0 at the event itself.
    Smoothing,
}

/// Score of the report draws.
#[derive(Debug, Clone, PartialEq)]
pub struct ReportScore {
    /// Evaluations spent at their end.
    pub evaluations: f64,
    /// ESS fraction.
    pub ess_fraction: f64,
    /// Its standard error.
    pub ess_fraction_se: Option<f64>,
    /// Variance of the weights over their squared mean.
    pub weight_variance: f64,
}

/// Draws the figure: panels above each other over one axis of evaluations.
#[must_use]
pub fn draw(data: &ProgressData, style: &Style) -> Drawing {
    let unit = style.unit();
    let rows = rows(data);
    let top = if data.phases.is_empty() { 0.0 } else { 1.8 * unit };
    let head = 2.6 * unit;
    let heights: Vec<f64> = rows.iter().map(|row| row.height * unit).collect();
    let body: f64 = heights.iter().map(|height| height + head).sum();
    let height = top + body + bottom_room(style) + 1.7 * unit;
    let mut canvas = Canvas::new(style.width(), height);

    let most = data.rounds.iter().map(|round| round.evaluations);
    let ends = data.phases.iter().map(|phase| phase.to).chain(data.report.iter().map(|report| report.evaluations));
    let end = most.chain(ends).filter(|end| end.is_finite()).fold(0.0, f64::max);
    let y_axes: Vec<Axis> = rows
        .iter()
        .zip(&heights)
        .map(|(row, &length)| {
            Axis::new(row.low, row.high, row.scale, Room { along: Along::Column, length, size: unit, most: row.ticks })
        })
        .collect();
    let left = y_axes.iter().map(|axis| left_room(axis, style)).fold(0.0, f64::max) + 0.3 * unit;
    let right = style.width() - 1.6 * unit;
    let x = Axis::new(
        0.0,
        if end > 0.0 { end * 1.02 } else { 1.0 },
        Scale::Linear,
        Room { along: Along::Page, length: right - left, size: unit, most: 6 },
    );

    let mut panels = Vec::new();
    let mut at = top;
    for (axis, height) in y_axes.into_iter().zip(&heights) {
        let area = Area { left, top: at + head, right, bottom: at + head + height };
        panels.push(Panel { area, x: x.clone(), y: axis });
        at = area.bottom;
    }
    draw_phases(&mut canvas, style, &data.phases, &panels, top);
    for (i, (row, panel)) in rows.iter().zip(&panels).enumerate() {
        let letter = char::from(b'a' + i as u8).to_string();
        let title = panel.y.title(row.title, None);
        heading(&mut canvas, style, &letter, &[title], (0.3 * unit, panel.area.top - 0.75 * unit));
        panel.axes(&mut canvas, style, i + 1 == rows.len());
        for series in &row.series {
            draw_series(&mut canvas, style, panel, series);
        }
        if row.series.is_empty() {
            let middle = (f64::midpoint(left, right), f64::midpoint(panel.area.top, panel.area.bottom));
            canvas.write("no round has a score", middle, Anchor::Middle, style.plain(REFERENCE));
        }
        if i == 0 {
            for series in &row.series {
                name_series(&mut canvas, style, panel, series);
            }
        }
    }
    let middle = f64::midpoint(left, right);
    canvas.write(&x.title("evaluations", None), (middle, height - 0.5 * unit), Anchor::Middle, style.plain(INK));
    Drawing { name: "progress".to_owned(), caption: caption(data), table: table(data), canvas, dpi: style.dpi() }
}

/// Shades the spans through all panels and names them above.
fn draw_phases(canvas: &mut Canvas, style: &Style, phases: &[Phase], panels: &[Panel], top: f64) {
    let (Some(first), Some(last)) = (panels.first(), panels.last()) else { return };
    let unit = style.unit();
    let place = |value: f64| first.area.left + first.x.place(value).clamp(0.0, 1.0) * first.area.width();
    let rule = Pen::solid(REFERENCE, style.hairline());
    let mut spans = Vec::new();
    for phase in phases.iter().filter(|phase| phase.from.is_finite() && phase.to > phase.from) {
        let (from, to) = (place(phase.from), place(phase.to));
        let inset = (0.08 * unit).min((to - from) / 4.0);
        if phase.shaded {
            canvas.fill_area(Area { left: from + inset, top, right: to - inset, bottom: last.area.bottom }, GROUND);
        }
        canvas.line(vec![(from + inset, top), (to - inset, top)], rule);
        spans.push((phase.name.as_str(), f64::midpoint(from, to)));
    }
    let widths: Vec<f64> = spans.iter().map(|(name, _)| text::width(name, unit, Face::Regular)).collect();
    let gaps: Vec<f64> = widths.windows(2).map(|pair| f64::midpoint(pair[0], pair[1]) + 0.7 * unit).collect();
    let wanted: Vec<f64> = spans.iter().map(|&(_, middle)| middle).collect();
    let half = |width: Option<&f64>| width.map_or(0.0, |width| width / 2.0 + 0.2 * unit);
    let (low, high) = (half(widths.first()), style.width() - half(widths.last()));
    for ((name, middle), at) in spans.iter().zip(spread(&wanted, &gaps, low, high)) {
        canvas.write(name, (at, top - 0.55 * unit), Anchor::Middle, style.plain(REFERENCE));
        if (at - middle).abs() > 0.5 * unit {
            canvas.line(vec![(at, top - 0.25 * unit), (*middle, top)], rule);
        }
    }
}

fn draw_series(canvas: &mut Canvas, style: &Style, panel: &Panel, series: &Series) {
    let colour = if series.kind == Kind::Predicted { MODELLED } else { MEASURED };
    let pen = Pen::solid(colour, style.stroke());
    let pen = if series.kind == Kind::Predicted { pen.dashed(0.5 * style.unit(), 0.3 * style.unit()) } else { pen };
    panel.curve(canvas, series.points.iter().map(|p| (p.x, p.y)), pen);
    for point in &series.points {
        let centre = panel.spot(point.x, point.y);
        if let Some((low, high)) = point.interval {
            let (bottom, top) = (panel.spot(point.x, low), panel.spot(point.x, high));
            let cap = 0.22 * style.unit();
            let thin = Pen::solid(colour, 1.4 * style.hairline());
            canvas.curve(vec![bottom, top], thin);
            for end in [bottom, top] {
                canvas.line(vec![(end.0 - cap, end.1), (end.0 + cap, end.1)], thin);
            }
        }
        match series.kind {
            Kind::Fresh => canvas.disc(centre, style.marker(), colour, 1.0),
            Kind::Predicted => canvas.ring(centre, 1.1 * style.marker(), style.stroke() * 0.8, colour),
            Kind::Report => {
                let (x, y, r) = (centre.0, centre.1, 1.9 * style.marker());
                canvas.fill(vec![(x - r, y), (x, y - r), (x + r, y), (x, y + r)], colour, 1.0);
                canvas.curve(vec![(x - r, y), (x + r, y)], Pen::solid(colour, style.hairline()));
            }
        }
    }
}

/// Writes the name of a series where nothing is drawn, near its last point.
fn name_series(canvas: &mut Canvas, style: &Style, panel: &Panel, series: &Series) {
    let Some(last) = series.points.last() else { return };
    let unit = style.unit();
    let colour = if series.kind == Kind::Predicted { MODELLED } else { MEASURED };
    let (x, y) = panel.spot(last.x, last.y);
    let size = (text::width(series.name, unit, Face::Regular) + 0.5 * unit, 1.25 * unit);
    // Beside the end of a line, predictions above; below the diamond.
    let near = match series.kind {
        Kind::Predicted => (x + size.0 / 2.0 + 0.5 * unit, y - 0.7 * unit),
        Kind::Fresh => (x + size.0 / 2.0 + 0.5 * unit, y + 0.7 * unit),
        Kind::Report => (x, y + 1.6 * unit),
    };
    let room = Area { left: panel.area.left + 0.3 * unit, right: canvas.width() - 0.2 * unit, ..panel.area };
    let area = canvas.free_area(room, size, near);
    canvas.write(series.name, (area.left + 0.25 * unit, area.bottom - 0.3 * unit), Anchor::Start, style.plain(colour));
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::table::Cell;
    use super::*;

    fn run(rounds: u32, best: f64, schedule: Schedule) -> ProgressData {
        let start = 3000.0;
        let per_round = 12_000.0 / f64::from(rounds);
        let scores = (1..=rounds).map(|round| {
            let part = 1.0 - libm::exp(-2.5 * f64::from(round) / f64::from(rounds));
            let ess = best * part * if round % 4 == 2 { 0.8 } else { 1.0 };
            let tempered = round * 3 < rounds;
            RoundScore {
                round,
                evaluations: start + per_round * f64::from(round),
                predicted_ess_fraction: (!tempered).then_some(best * part * 1.04),
                ess_fraction: Some(ess),
                ess_fraction_se: (round % 5 != 1).then_some(0.03 * best),
                weight_variance: Some(1.0 / ess - 1.0),
                schedule: Some(match schedule {
                    Schedule::Exponent => (3.0 * f64::from(round) / f64::from(rounds)).min(1.0),
                    Schedule::Smoothing => (2.0 - 6.0 * f64::from(round) / f64::from(rounds)).max(0.0),
                }),
                components: 2 + (round as usize * 5) / (rounds as usize),
            }
        });
        let phase = |name: &str, from, to, shaded| Phase { name: name.to_owned(), from, to, shaded };
        ProgressData {
            phases: vec![
                phase("survey", 0.0, start, true),
                phase("rounds", start, 15_000.0, false),
                phase("confirm", 15_000.0, 17_000.0, true),
                phase("report", 17_000.0, 22_000.0, true),
            ],
            rounds: scores.collect(),
            schedule,
            report: Some(ReportScore {
                evaluations: 22_000.0,
                ess_fraction: best * 0.93,
                ess_fraction_se: Some(0.01 * best),
                weight_variance: 1.0 / (best * 0.93) - 1.0,
            }),
        }
    }

    #[test]
    fn runs_of_every_kind_are_drawn_in_order() {
        let mut even = run(6, 1.0, Schedule::Exponent);
        for round in &mut even.rounds {
            round.ess_fraction = Some(1.0);
            round.predicted_ess_fraction = Some(1.0);
            round.weight_variance = Some(0.0);
        }
        let mut bare = run(1, 0.4, Schedule::Exponent);
        bare.phases.clear();
        bare.report = None;
        let empty = ProgressData { phases: vec![], rounds: vec![], schedule: Schedule::Exponent, report: None };
        let mut long = run(20, 1e-12, Schedule::Smoothing);
        for round in &mut long.rounds {
            round.evaluations *= 1e5;
            round.components *= 60;
        }
        for phase in &mut long.phases {
            phase.from *= 1e5;
            phase.to *= 1e5;
        }
        if let Some(report) = &mut long.report {
            report.evaluations *= 1e5;
        }
        let mut narrow = run(20, 0.9, Schedule::Exponent);
        narrow.phases[0].to = 100.0;
        narrow.phases[1].from = 100.0;
        narrow.phases[2].from = 21_000.0;
        narrow.phases[1].to = 21_000.0;
        narrow.phases[2].to = 21_500.0;
        narrow.phases[3].from = 21_500.0;
        let cases = [
            ("eight", run(8, 0.86, Schedule::Exponent)),
            ("twenty", run(20, 0.92, Schedule::Smoothing)),
            ("one", run(1, 0.4, Schedule::Exponent)),
            ("bare", bare),
            ("even", even),
            ("long", long),
            ("narrow", narrow),
            ("empty", empty),
        ];
        for (name, data) in cases {
            checks::check(&format!("progress-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    #[test]
    fn the_caption_and_table_carry_the_numbers() {
        let mut data = run(8, 0.86, Schedule::Exponent);
        data.rounds[7].ess_fraction = Some(0.8123);
        let drawing = draw(&data, &Style::default());
        assert!(drawing.caption.contains("0.812") && drawing.caption.contains("22,000"), "{}", drawing.caption);
        assert_eq!(drawing.table.rows().len(), 8 + 4 + 1);
        assert_eq!(drawing.table.rows()[7][4], Cell::Number(0.8123));
    }
}
