//! Upper tails of the weights of several proposals, on one pair of logarithmic axes.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::contestants::look;
use super::evenness::TailFit;
use super::evenness::falling_weights;
use super::evenness::ranks;
use super::frame::Frame;
use super::frame::SINGLE;
use super::frame::Side;
use super::key::Sample;
use super::numbers::fixed;
use super::numbers::percent;
use super::table::Table;

/// Fineness of the markers and of the table: neighbours differ by one rank, or by one part in this.
const FINENESS: usize = 3;
/// Markers start with the draw that leaves this share above it.
const FROM: f64 = 0.5;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct TailsData {
    /// The proposals, in order.
    pub contestants: Vec<WeightTail>,
}

/// The weights that one proposal earned.
#[derive(Debug, Clone, PartialEq)]
pub struct WeightTail {
    /// Name of the proposal.
    pub name: String,
    /// Weights of its draws on any scale; zeros count as draws.
    pub weights: Vec<f64>,
    /// The fit to their upper tail, if there was one.
    pub tail: Option<TailFit>,
}

/// A proposal with what is drawn of it.
struct Drawn<'a> {
    contestant: &'a WeightTail,
    /// Rank, weight over mean and share of draws above, from the heaviest on.
    points: Vec<(usize, f64, f64)>,
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &TailsData, style: &Style) -> Drawing {
    let drawn: Vec<Drawn> = data.contestants.iter().map(prepare).collect();
    let shown = || drawn.iter().flat_map(|d| d.points.iter().filter(|&&(_, _, share)| share <= FROM));
    let (low, high) = shown().fold((f64::INFINITY, 0.0_f64), |(low, high), p| (low.min(p.1), high.max(p.1)));
    let (low, high) = if low > high { (0.1, 10.0) } else { (low.max(1e-4 * high), high) };
    // Weights that hardly differ stand in the middle of a range that says so.
    let range =
        if high / low < 1.3 { (high / 2.0, high * 2.0) } else { (low / 1.2, high * libm::pow(high / low, 0.1)) };
    let least = shown().map(|p| p.2).fold(0.01, f64::min);

    let radius = 0.75 * style.marker();
    let entries: Vec<(Sample, String)> = drawn
        .iter()
        .enumerate()
        .map(|(k, d)| (Sample::Marked(look(k, style), radius), d.contestant.name.clone()))
        .collect();
    let x = Side { name: "weight / mean weight", unit: None, range: (range.0, range.1, Scale::Log) };
    let y = Side { name: "share of draws above", unit: None, range: (least / 1.5, 1.0, Scale::Log) };
    let mut frame = Frame::new(&x, &[(y, SINGLE)], &entries, style);
    for (k, d) in drawn.iter().enumerate() {
        let look = look(k, style);
        if let Some(fit) = &d.contestant.tail {
            let x = &frame.panels[0].x;
            let from = x.place(fit.threshold).max(0.0);
            let at = |i: u32| x.value_at(from + (1.0 - from) * f64::from(i) / 120.0).max(fit.threshold);
            let line: Vec<(f64, f64)> = (0..=120).map(at).map(|w| (w, fit.share(w, fit.shape))).collect();
            frame.curve(0, line, look.pen);
        }
        for &(_, w, share) in d.points.iter().filter(|&&(_, _, share)| share <= FROM) {
            if frame.panels[0].shows(w, share) {
                look.shape.draw(&mut frame.canvas, frame.panels[0].spot(w, share), radius, look.pen.colour);
            }
        }
    }
    if shown().next().is_none() {
        frame.say(0, "no draw has weight");
    }
    frame.finish("tails", caption(&drawn), table(&drawn))
}

fn prepare(contestant: &WeightTail) -> Drawn<'_> {
    let falling = falling_weights(&contestant.weights);
    let n = falling.len() as f64;
    let mean = falling.iter().sum::<f64>() / n;
    let points = ranks(falling.len(), FINENESS)
        .into_iter()
        .map(|rank| (rank, falling[rank - 1] / mean, (rank as f64 - 0.5) / n))
        .filter(|&(_, w, _)| w > 0.0 && w.is_finite())
        .collect();
    Drawn { contestant, points }
}

fn caption(drawn: &[Drawn]) -> String {
    let fits: Vec<String> = drawn
        .iter()
        .map(|d| match &d.contestant.tail {
            Some(fit) => format!(
                "{} {} (at most {}, from the heaviest {})",
                d.contestant.name,
                fixed(fit.shape, 2),
                fixed(fit.shape_upper, 2),
                percent(fit.share_above)
            ),
            None => format!("{} not fitted", d.contestant.name),
        })
        .collect();
    let mut caption = "Share of draws whose weight exceeds a multiple of the mean weight (markers).".to_owned();
    if !fits.is_empty() {
        caption.push_str(&format!(
            " Lines are generalised Pareto fits, with the tail shapes: {}. The \
             steeper a tail falls, the safer its proposal.",
            fits.join("; ")
        ));
    }
    caption
}

fn table(drawn: &[Drawn]) -> Table {
    let mut table = Table::new(&["proposal", "rank", "weight_over_mean", "share_above", "fitted_share_above"]);
    for d in drawn {
        for &(rank, w, share) in &d.points {
            let fit = d.contestant.tail.as_ref().filter(|fit| w >= fit.threshold);
            let fitted = fit.map(|fit| fit.share(w, fit.shape));
            table.push([
                d.contestant.name.as_str().into(),
                (rank as f64).into(),
                w.into(),
                share.into(),
                fitted.into(),
            ]);
        }
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::table::Cell;
    use super::*;

    /// Weights at the middles of `n` equal slices of a generalised Pareto distribution of shape `k` over 0.3, with
    /// the fit that its upper fifth has.
    fn contestant(name: &str, n: usize, k: f64) -> WeightTail {
        let excess = |p: f64| (libm::pow(p, -k) - 1.0) / k;
        let weights: Vec<f64> = (0..n).map(|i| 0.3 + excess((i as f64 + 0.5) / n as f64)).collect();
        let mean = weights.iter().sum::<f64>() / n as f64;
        let tail = TailFit {
            shape: k,
            shape_upper: k + 0.1,
            limit: 0.5,
            threshold: (0.3 + excess(0.2)) / mean,
            scale: (1.0 + k * excess(0.2)) / mean,
            share_above: 0.2,
        };
        WeightTail { name: name.to_owned(), weights, tail: Some(tail) }
    }

    #[test]
    fn tails_of_every_kind_are_drawn_in_order() {
        let three = vec![
            contestant("tuned, Student t", 4000, 0.12),
            contestant("tuned, Gaussian", 4000, 0.45),
            contestant("Laplace approximation", 3000, 0.8),
        ];
        let many =
            (0..8).map(|k| contestant(&format!("proposal_with_a_long_name_{k}"), 500, 0.05 + 0.1 * f64::from(k)));
        let even = WeightTail { name: "even".into(), weights: vec![2.0; 100], tail: None };
        let none = WeightTail { name: "none".into(), weights: vec![0.0, f64::NAN], tail: None };
        let cases = [
            ("three", three.clone()),
            ("many", many.collect()),
            ("even", vec![even.clone()]),
            ("mixed", vec![three[2].clone(), even, none.clone()]),
            ("nothing", vec![none]),
            ("empty", vec![]),
        ];
        for (name, contestants) in cases {
            let data = TailsData { contestants };
            checks::check(&format!("tails-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// Where the fit is the truth, the fitted column is that of the draws up to rounding.
    #[test]
    fn fitted_lines_run_through_their_own_weights() {
        let data = TailsData { contestants: vec![contestant("a", 1000, 0.4), contestant("b", 1000, 0.1)] };
        let drawing = draw(&data, &Style::default());
        let mut compared = 0;
        for row in drawing.table.rows() {
            if let [_, _, _, Cell::Number(share), Cell::Number(fitted)] = &row[..]
                && fitted.is_finite()
            {
                assert!((share - fitted).abs() < 1e-12, "{row:?}");
                compared += 1;
            }
        }
        assert_eq!(compared, 30);
        assert!(drawing.caption.contains("a 0.40") && drawing.caption.contains("b 0.10"), "{}", drawing.caption);
    }
}
