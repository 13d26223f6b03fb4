//! The panels of the progress figure: which series each shows, over which range.

use super::ProgressData;
use super::RoundScore;
use super::Schedule;
use crate::figures::axis::Scale;

/// Half a 95 % interval in standard errors.
const HALF_95: f64 = 1.959_964;
/// Weight variances below this are drawn as if they were this: even weights have none at all, a log axis has no zero.
pub(super) const LEAST_VARIANCE: f64 = 1e-6;

/// A panel to be: its title, axis and series.
pub(super) struct Row {
    pub(super) title: &'static str,
    /// Height in text sizes.
    pub(super) height: f64,
    pub(super) low: f64,
    pub(super) high: f64,
    pub(super) scale: Scale,
    pub(super) ticks: usize,
    pub(super) series: Vec<Series>,
}

/// Points of one kind.
pub(super) struct Series {
    pub(super) name: &'static str,
    pub(super) kind: Kind,
    pub(super) points: Vec<Point>,
}

#[derive(Clone, Copy, PartialEq)]
pub(super) enum Kind {
    /// Filled markers, unbroken line.
    Fresh,
    /// Open markers, dashed line.
    Predicted,
    /// A diamond.
    Report,
}

/// A point with the ends of its interval.
pub(super) struct Point {
    pub(super) x: f64,
    pub(super) y: f64,
    pub(super) interval: Option<(f64, f64)>,
}

pub(super) fn rows(data: &ProgressData) -> Vec<Row> {
    let series = |name, kind, pick: &dyn Fn(&RoundScore) -> Option<Point>| Series {
        name,
        kind,
        points: data.rounds.iter().filter_map(pick).filter(|p| p.x.is_finite() && p.y.is_finite()).collect(),
    };
    let plain = |round: &RoundScore, y: Option<f64>| y.map(|y| Point { x: round.evaluations, y, interval: None });
    let mut rows = Vec::new();

    let interval = |y: f64, se: Option<f64>| se.map(|se| ((y - HALF_95 * se).max(0.0), (y + HALF_95 * se).min(1.0)));
    let mut ess = vec![
        series("predicted", Kind::Predicted, &|round| plain(round, round.predicted_ess_fraction)),
        series("fresh draws", Kind::Fresh, &|round| {
            round.ess_fraction.map(|y| Point { x: round.evaluations, y, interval: interval(y, round.ess_fraction_se) })
        }),
    ];
    if let Some(report) = &data.report {
        let y = report.ess_fraction;
        let point = Point { x: report.evaluations, y, interval: interval(y, report.ess_fraction_se) };
        ess.push(Series { name: "report draws", kind: Kind::Report, points: vec![point] });
    }
    let tops = ess.iter().flat_map(|s| s.points.iter().map(|p| p.interval.map_or(p.y, |(_, top)| top)));
    let most = tops.filter(|top| top.is_finite()).fold(0.0, f64::max);
    let high = if most > 0.5 || most <= 0.0 { 1.0 } else { 1.25 * most };
    push_row(
        &mut rows,
        Row { title: "ESS fraction", height: 9.0, low: 0.0, high, scale: Scale::Linear, ticks: 6, series: ess },
    );

    let floored = |y: f64| y.max(LEAST_VARIANCE);
    let mut variance =
        vec![series("fresh draws", Kind::Fresh, &|round| plain(round, round.weight_variance.map(floored)))];
    if let Some(report) = &data.report {
        let point = Point { x: report.evaluations, y: floored(report.weight_variance), interval: None };
        variance.push(Series { name: "report draws", kind: Kind::Report, points: vec![point] });
    }
    let values: Vec<f64> =
        variance.iter().flat_map(|s| s.points.iter().map(|p| p.y)).filter(|y| y.is_finite()).collect();
    let (low, high) = values.iter().fold((f64::INFINITY, 0.0_f64), |(low, high), &y| (low.min(y), high.max(y)));
    // At least one power of ten, so that noise does not fill the panel.
    let widening = (10.0 * low / high).max(2.56).sqrt();
    push_row(
        &mut rows,
        Row {
            title: "weight variance",
            height: 6.0,
            low: low / widening,
            high: high * widening,
            scale: Scale::Log,
            ticks: 5,
            series: variance,
        },
    );

    let steps = vec![series("", Kind::Fresh, &|round| plain(round, round.schedule))];
    let most = steps[0].points.iter().map(|p| p.y).fold(0.0, f64::max);
    let (title, high) = match data.schedule {
        Schedule::Exponent => ("tempering exponent", 1.0),
        Schedule::Smoothing => ("width of the smoothed event", if most > 0.0 { 1.1 * most } else { 1.0 }),
    };
    push_row(&mut rows, Row { title, height: 4.5, low: 0.0, high, scale: Scale::Linear, ticks: 3, series: steps });

    let components = vec![series("", Kind::Fresh, &|round| plain(round, Some(round.components as f64)))];
    let most = components[0].points.iter().map(|p| p.y).fold(1.0, f64::max);
    push_row(
        &mut rows,
        Row {
            title: "components",
            height: 4.5,
            low: 0.0,
            high: most * 1.1 + 0.2,
            scale: Scale::Whole,
            ticks: 4,
            series: components,
        },
    );
    rows
}

/// Keeps a row that has something to show.
fn push_row(rows: &mut Vec<Row>, mut row: Row) {
    row.series.retain(|series| !series.points.is_empty());
    if !row.series.is_empty() || rows.is_empty() {
        rows.push(row);
    }
}
