//! Caption and table of the progress figure.

use super::ProgressData;
use super::Schedule;
use super::rows::LEAST_VARIANCE;
use crate::figures::numbers::count;
use crate::figures::numbers::significant;
use crate::figures::table::Cell;
use crate::figures::table::Table;

/// One sentence on the rounds, one on the last of them, one on the report draws.
pub(super) fn caption(data: &ProgressData) -> String {
    let rounds = data.rounds.len();
    let mut parts = vec![match rounds {
        0 => "No round was finished.".to_owned(),
        1 => "Scores of the only round against the evaluations spent.".to_owned(),
        _ => format!("Scores of the {rounds} rounds against the evaluations spent."),
    }];
    if let Some(last) = data.rounds.last() {
        let components =
            if last.components == 1 { "1 component".to_owned() } else { format!("{} components", last.components) };
        if let Some(ess) = last.ess_fraction {
            let se =
                last.ess_fraction_se.map_or(String::new(), |se| format!(" ± {} (standard error)", significant(se, 1)));
            let predicted =
                last.predicted_ess_fraction.map_or(String::new(), |p| format!(", predicted {}", significant(p, 3)));
            let variance = last
                .weight_variance
                .map_or(String::new(), |v| format!(", at a weight variance of {}", significant(v, 2)));
            parts.push(format!(
                "Round {}, with {components}, reached an ESS fraction of {}{se} on its own fresh draws{predicted}{variance}.",
                last.round,
                significant(ess, 3)
            ));
        }
    }
    if let Some(report) = &data.report {
        parts.push(format!(
            "The report draws score {} (diamond), after {} evaluations in all.",
            significant(report.ess_fraction, 3),
            count(report.evaluations.max(0.0) as usize)
        ));
    }
    if data.rounds.iter().any(|round| round.weight_variance.is_some_and(|variance| variance < LEAST_VARIANCE)) {
        parts.push(format!("Weight variances below {} are drawn there.", significant(LEAST_VARIANCE, 1)));
    }
    if data.rounds.iter().any(|round| round.ess_fraction_se.is_some()) {
        parts.push("Bars are 95 % intervals.".to_owned());
    }
    parts.join(" ")
}

/// A row a round, then the ends of the spans, then the report draws.
pub(super) fn table(data: &ProgressData) -> Table {
    let mut table = Table::new(&[
        "row",
        "round",
        "evaluations",
        "predicted_ess_fraction",
        "ess_fraction",
        "ess_fraction_se",
        "weight_variance",
        match data.schedule {
            Schedule::Exponent => "exponent",
            Schedule::Smoothing => "smoothing",
        },
        "components",
    ]);
    for round in &data.rounds {
        table.push([
            "round".into(),
            f64::from(round.round).into(),
            round.evaluations.into(),
            round.predicted_ess_fraction.into(),
            round.ess_fraction.into(),
            round.ess_fraction_se.into(),
            round.weight_variance.into(),
            round.schedule.into(),
            (round.components as f64).into(),
        ]);
    }
    for phase in &data.phases {
        let none = || Cell::Number(f64::NAN);
        table.push([
            Cell::Text(format!("end of {}", phase.name)),
            none(),
            phase.to.into(),
            none(),
            none(),
            none(),
            none(),
            none(),
            none(),
        ]);
    }
    if let Some(report) = &data.report {
        let none = || Cell::Number(f64::NAN);
        table.push([
            "report draws".into(),
            none(),
            report.evaluations.into(),
            none(),
            report.ess_fraction.into(),
            report.ess_fraction_se.into(),
            report.weight_variance.into(),
            none(),
            none(),
        ]);
    }
    table
}
