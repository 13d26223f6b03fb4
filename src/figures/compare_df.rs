//! ESS fraction against the degrees of freedom of the components: what heavy tails win and cost.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::canvas::Pen;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::frame::Frame;
use super::frame::SINGLE;
use super::frame::Side;
use super::numbers::significant;
use super::table::Table;

/// Half a 95 % interval in standard errors.
const HALF_95: f64 = 1.959_964;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct DfData {
    /// Scores of one mixture under several degrees of freedom, in any order.
    pub scores: Vec<DfScore>,
    /// The degrees of freedom that the refit chose; `None` for Gaussian components.
    pub fitted: Option<f64>,
}

/// The score of one choice.
#[derive(Debug, Clone, PartialEq)]
pub struct DfScore {
    /// Degrees of freedom; `None` for Gaussian components.
    pub df: Option<f64>,
    /// ESS fraction.
    pub ess_fraction: f64,
    /// Its standard error.
    pub ess_fraction_se: Option<f64>,
}

impl DfScore {
    fn is_sound(&self) -> bool {
        self.ess_fraction.is_finite() && self.df.is_none_or(|df| df > 0.0 && df.is_finite())
    }

    /// Ends of the 95 % interval, within 0 and 1.
    fn interval(&self) -> Option<(f64, f64)> {
        let half = HALF_95 * self.ess_fraction_se.filter(|se| se.is_finite())?;
        Some(((self.ess_fraction - half).max(0.0), (self.ess_fraction + half).min(1.0)))
    }
}

/// Draws the figure. Gaussian components stand apart, at the right end of the axis.
///
/// ```
/// use evenpoise::figures::Style;
/// use evenpoise::figures::compare_df::{DfData, DfScore, draw};
/// let score = |df, ess_fraction| DfScore { df, ess_fraction, ess_fraction_se: Some(0.01) };
/// let data = DfData { scores: vec![score(Some(8.0), 0.84), score(None, 0.61)], fitted: Some(9.2) };
/// let drawing = draw(&data, &Style::default());
/// assert!(drawing.caption.contains("The highest, 0.840, belongs to 8.0 degrees of freedom."));
/// ```
#[must_use]
pub fn draw(data: &DfData, style: &Style) -> Drawing {
    let mut scores: Vec<&DfScore> = data.scores.iter().filter(|score| score.is_sound()).collect();
    scores.sort_by(|a, b| a.df.unwrap_or(f64::INFINITY).total_cmp(&b.df.unwrap_or(f64::INFINITY)));
    let fitted = data.fitted.filter(|df| *df > 0.0 && df.is_finite());
    let dfs = scores.iter().filter_map(|score| score.df).chain(fitted);
    let (low, high) = dfs.fold((f64::INFINITY, 0.0_f64), |(low, high), df| (low.min(df), high.max(df)));
    let (low, high) = if low > high { (1.0, 100.0) } else { (low / 1.2, (high * 1.2).max(4.0 * low)) };
    let has_gaussian = scores.iter().any(|score| score.df.is_none());
    let beyond = |share: f64| high * libm::pow(high / low, share);
    let (gaussian, end) = if has_gaussian { (beyond(0.17), beyond(0.28)) } else { (high, high) };
    let tops = scores.iter().map(|score| score.interval().map_or(score.ess_fraction, |(_, top)| top));
    let most = tops.fold(0.0, f64::max);
    let top = if most > 0.5 || most <= 0.0 { 1.0 } else { 1.25 * most };

    let x = Side { name: "degrees of freedom", unit: None, range: (low, end, Scale::Log) };
    let y = Side { name: "ESS fraction", unit: None, range: (0.0, top, Scale::Linear) };
    let mut frame = Frame::new(&x, &[(y, SINGLE)], &[], style);
    if has_gaussian {
        let x = frame.panels[0].x.clone();
        frame.panels[0].x = x.with_far_tick(high, gaussian, "Gaussian");
    }
    let chosen = fitted.or((has_gaussian && data.fitted.is_none()).then_some(gaussian));
    if let Some(df) = chosen {
        let guide = Pen::solid(MODELLED, 1.4 * style.hairline()).dashed(0.4 * style.unit(), 0.3 * style.unit());
        frame.curve(0, [(df, 0.0), (df, top)], guide);
    }
    let student = scores.iter().filter_map(|score| score.df.map(|df| (df, score.ess_fraction)));
    frame.curve(0, student, Pen::solid(MEASURED, style.stroke()));
    for score in &scores {
        draw_score(&mut frame, score, score.df.unwrap_or(gaussian), style);
    }
    if let Some(df) = chosen {
        let text = fitted.map_or("chosen: Gaussian".to_owned(), |df| format!("fitted {}", significant(df, 2)));
        let near = frame.panels[0].spot(df, 0.0);
        frame.note(0, &text, (near.0 + 3.0 * style.unit(), near.1 - style.unit()), MODELLED);
    }
    if scores.is_empty() {
        frame.say(0, "no score");
    }
    frame.finish("degrees-of-freedom", caption(&scores, fitted), table(&scores))
}

fn draw_score(frame: &mut Frame, score: &DfScore, at: f64, style: &Style) {
    let (cap, thin) = (0.22 * style.unit(), Pen::solid(MEASURED, 1.4 * style.hairline()));
    let panel = &frame.panels[0];
    if let Some((low, high)) = score.interval() {
        let ends = [panel.spot(at, low), panel.spot(at, high)];
        frame.canvas.curve(ends.to_vec(), thin);
        for end in ends {
            frame.canvas.line(vec![(end.0 - cap, end.1), (end.0 + cap, end.1)], thin);
        }
    }
    frame.canvas.disc(panel.spot(at, score.ess_fraction), style.marker(), MEASURED, 1.0);
}

fn name(df: Option<f64>) -> String {
    df.map_or("Gaussian components".to_owned(), |df| format!("{} degrees of freedom", significant(df, 2)))
}

fn caption(scores: &[&DfScore], fitted: Option<f64>) -> String {
    let mut parts =
        vec!["ESS fraction of the same mixture with other degrees of freedom of its components.".to_owned()];
    if let Some(best) = scores.iter().max_by(|a, b| a.ess_fraction.total_cmp(&b.ess_fraction)) {
        parts.push(format!("The highest, {}, belongs to {}.", significant(best.ess_fraction, 3), name(best.df)));
    }
    if fitted.is_some() {
        parts.push(format!("The refit chose {} (dashed).", name(fitted)));
    }
    if scores.iter().any(|score| score.interval().is_some()) {
        parts.push("Bars are 95 % intervals.".to_owned());
    }
    parts.join(" ")
}

fn table(scores: &[&DfScore]) -> Table {
    let mut table = Table::new(&["family", "df", "ess_fraction", "ess_fraction_se"]);
    for score in scores {
        let family = if score.df.is_some() { "student-t" } else { "gaussian" };
        table.push([family.into(), score.df.into(), score.ess_fraction.into(), score.ess_fraction_se.into()]);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::table::Cell;
    use super::*;

    fn scores(dfs: &[f64], gaussian: bool, best: f64, scale: f64) -> Vec<DfScore> {
        let mut scores: Vec<DfScore> = dfs
            .iter()
            .map(|&df| {
                let far = libm::log(df / best);
                DfScore {
                    df: Some(df),
                    ess_fraction: scale * libm::exp(-0.3 * far * far),
                    ess_fraction_se: Some(0.02 * scale),
                }
            })
            .collect();
        if gaussian {
            scores.push(DfScore { df: None, ess_fraction: 0.3 * scale, ess_fraction_se: Some(0.08 * scale) });
        }
        scores
    }

    #[test]
    fn scores_of_every_kind_are_drawn_in_order() {
        let dfs = [3.0, 5.0, 8.0, 12.0, 20.0, 35.0, 60.0];
        let mut bare = scores(&dfs, true, 10.0, 1e-4);
        bare.iter_mut().for_each(|score| score.ess_fraction_se = None);
        bare.push(DfScore { df: Some(f64::NAN), ess_fraction: 0.5, ess_fraction_se: None });
        let cases = [
            ("usual", scores(&dfs, true, 10.0, 0.9), Some(9.3)),
            ("student", scores(&dfs, false, 60.0, 0.4), Some(60.0)),
            ("gaussian", scores(&[], true, 10.0, 0.9), None),
            ("bare", bare, None),
            ("wide", scores(&[1.0, 10.0, 100.0, 1000.0], true, 1000.0, 1.0), Some(1.0)),
            ("one", scores(&[5.0], false, 5.0, 0.7), Some(5.0)),
            ("empty", vec![], Some(4.0)),
        ];
        for (name, scores, fitted) in cases {
            let data = DfData { scores, fitted };
            checks::check(&format!("df-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    #[test]
    fn the_caption_names_the_best_and_the_table_rises() {
        let data = DfData { scores: scores(&[20.0, 5.0, 10.0], true, 10.0, 0.9), fitted: Some(9.3) };
        let drawing = draw(&data, &Style::default());
        assert!(drawing.caption.contains("0.900, belongs to 10 degrees"), "{}", drawing.caption);
        assert!(drawing.caption.contains("chose 9.3"), "{}", drawing.caption);
        let dfs: Vec<&Cell> = drawing.table.rows().iter().map(|row| &row[1]).collect();
        assert_eq!(dfs[..3], [&Cell::Number(5.0), &Cell::Number(10.0), &Cell::Number(20.0)]);
    }
}
