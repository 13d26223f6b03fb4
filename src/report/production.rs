//! Figures of a production run: the course of its answer, and bands of estimates that are columns.

use crate::figures::Drawing;
use crate::figures::Style;
use crate::figures::bands;
use crate::figures::bands::BandEntry;
use crate::figures::bands::BandsData;
use crate::figures::course;
use crate::figures::course::CourseData;
use crate::figures::course::CoursePoint;
use crate::figures::course::Kind;
use crate::production::EstimateOutcome;
use crate::production::Job;
use crate::production::Outcome;
use crate::store::CourseRow;

/// The quantiles of bands: nine tenths, one half, the median.
pub const BAND_SHARES: [f64; 5] = [0.05, 0.25, 0.5, 0.75, 0.95];

/// The answer with its interval against the draws.
#[must_use]
pub fn course_figure(job: &Job, course: &[CourseRow], style: &Style) -> Drawing {
    let (quantity, kind) = match job.aim.as_str() {
        "probability" => ("probability", Kind::Probability),
        "expectation" => ("expectation", Kind::Mean),
        _ => ("log normalising constant", Kind::Mean),
    };
    let known = |x: Option<f64>| x.unwrap_or(f64::NAN);
    let points = course.iter().map(|row| CoursePoint {
        spent: row.draws as f64,
        estimate: known(row.value),
        standard_error: known(row.se),
        interval: (known(row.interval_95[0]), known(row.interval_95[1])),
    });
    let data = CourseData {
        name: "course".to_owned(),
        quantity: quantity.to_owned(),
        unit: None,
        spent: "draws".to_owned(),
        kind,
        points: points.collect(),
        known: None,
    };
    course::draw(&data, style)
}

/// Whether any estimate is an entry of a column.
#[must_use]
pub fn has_columns(names: &[String]) -> bool {
    names.iter().any(|name| entry_of(name).is_some())
}

/// One figure for every column among the estimates that has its bands.
#[must_use]
pub fn bands_figures(outcome: &Outcome, style: &Style) -> Vec<Drawing> {
    let mut columns: Vec<(&str, Vec<(&str, &EstimateOutcome)>)> = Vec::new();
    for (name, estimate) in &outcome.estimates {
        let Some((column, label)) = entry_of(name) else { continue };
        match columns.iter_mut().find(|(known, _)| *known == column) {
            Some((_, entries)) => entries.push((label, estimate)),
            None => columns.push((column, vec![(label, estimate)])),
        }
    }
    let drawn = columns.into_iter().filter_map(|(column, entries)| {
        // Labels that are numbers are the index; others stand for their places.
        let numbers: Option<Vec<f64>> = entries.iter().map(|(label, _)| label.parse().ok()).collect();
        let index = |k: usize| numbers.as_ref().map_or(k as f64 + 1.0, |numbers| numbers[k]);
        let bands = entries.iter().enumerate().filter_map(|(k, (_, estimate))| band(index(k), estimate));
        let entries: Vec<BandEntry> = bands.collect();
        if entries.is_empty() {
            return None;
        }
        let data = BandsData {
            quantity: column.to_owned(),
            unit: None,
            index_name: if numbers.is_some() { "entry" } else { "place in the column" }.to_owned(),
            index_unit: None,
            entries,
        };
        let mut drawing = bands::draw(&data, style);
        drawing.name =
            format!("bands-{}", column.chars().map(|c| if c.is_alphanumeric() { c } else { '_' }).collect::<String>());
        Some(drawing)
    });
    drawn.collect()
}

fn band(index: f64, estimate: &EstimateOutcome) -> Option<BandEntry> {
    let quantile = |share: f64| estimate.quantiles.iter().find(|q| q.share == share).and_then(|q| q.value);
    Some(BandEntry {
        index,
        median: quantile(0.5)?,
        half: (quantile(0.25)?, quantile(0.75)?),
        nine_tenths: (quantile(0.05)?, quantile(0.95)?),
        observed: None,
    })
}

/// `("typical", "Alder")` of `typical[Alder]`.
fn entry_of(name: &str) -> Option<(&str, &str)> {
    name.strip_suffix(']').and_then(|name| name.split_once('['))
}
