//! Caption and table of the evenness figure.

use super::CURVE;
use super::EvennessData;
use super::TailFit;
use super::ranks;
use super::shares;
use crate::figures::numbers::count;
use crate::figures::numbers::fixed;
use crate::figures::numbers::percent;
use crate::figures::numbers::significant;
use crate::figures::table::Table;

/// Scores, shares of the heaviest draws, and the fit of the tail.
pub(super) fn caption(data: &EvennessData, falling: &[f64]) -> String {
    let total: f64 = falling.iter().sum();
    if total.is_nan() || total <= 0.0 {
        return "No draw has weight.".to_owned();
    }
    let n = falling.len();
    let half = shares(falling).iter().find(|&&(_, share)| share >= 0.5).map_or(1.0, |&(draws, _)| draws);
    let mut parts = vec![format!(
        "Cumulative share of the total weight against the share of draws (a): ESS fraction {}, perplexity {}.",
        significant(data.ess_fraction, 3),
        significant(data.perplexity, 3)
    )];
    let hundredth = n.div_ceil(100);
    if hundredth > 1 {
        let top: f64 = falling[..hundredth].iter().sum();
        parts.push(format!(
            "Half of the total rests on {} of the {} draws; the {hundredth} heaviest carry {}, the heaviest one {}.",
            percent(half),
            count(n),
            percent(top / total),
            percent(falling[0] / total)
        ));
    } else {
        parts.push(format!("The heaviest of {} draws carries {}.", count(n), percent(falling[0] / total)));
    }
    parts.push(match &data.tail {
        Some(fit) => format!(
            "Share of draws above a weight (b), with the generalised Pareto fit to the heaviest {} of the draws: tail \
             shape {}; dashed, the same at its upper bound {}, which has to stay below {}.",
            percent(fit.share_above),
            fixed(fit.shape, 2),
            fixed(fit.shape_upper, 2),
            significant(fit.limit, 1)
        ),
        None => "Share of draws above a weight (b); its tail was not fitted.".to_owned(),
    });
    parts.join(" ")
}

/// A row for each point of the curves.
pub(super) fn table(falling: &[f64], fit: Option<&TailFit>) -> Table {
    let mut table = Table::new(&["rank", "share_of_draws", "share_of_total", "weight_over_mean", "fitted_share_above"]);
    let n = falling.len() as f64;
    let mean = falling.iter().sum::<f64>() / n;
    for (rank, (draws, total)) in ranks(falling.len(), CURVE).into_iter().zip(shares(falling).into_iter().skip(1)) {
        let w = falling[rank - 1] / mean;
        let fitted = fit.filter(|fit| w >= fit.threshold).map(|fit| fit.share(w, fit.shape));
        table.push([(rank as f64).into(), draws.into(), total.into(), w.into(), fitted.into()]);
    }
    table
}
