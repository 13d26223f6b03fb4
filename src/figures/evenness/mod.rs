//! Evenness of the weights: how few draws carry how much of the total, and how heavy the upper tail is.

use super::Drawing;
use super::LINE;
use super::Style;
use super::axis::Along;
use super::axis::Axis;
use super::axis::Room;
use super::axis::Scale;
use super::canvas::Anchor;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MEASURED_TINT;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::columns::clean;
use super::heading;
use super::numbers::fixed;
use super::numbers::significant;
use super::panel::Panel;
use super::panel::bottom_room;
use super::panel::left_room;
use super::place::Area;
use super::text;
use super::text::Face;
use super::text::wrap;

mod words;

use words::caption;
use words::table;

/// Fineness of the cumulative curve and of the table.
const CURVE: usize = 100;
/// Fineness of the dots in the tail, which stay apart from each other over a few powers of ten.
const DOTS: usize = 8;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct EvennessData {
    /// Weights of the draws on any common scale; zeros count as draws.
    pub weights: Vec<f64>,
    /// Effective sample size over the number of draws.
    pub ess_fraction: f64,
    /// `exp(entropy)` of the normalised weights over the number of draws.
    pub perplexity: f64,
    /// The fit to the upper tail, if there was one.
    pub tail: Option<TailFit>,
}

/// A generalised Pareto distribution of the excesses over a threshold; weights in units of their mean.
///
/// `P(W > w) = share_above (1 + k (w - threshold) / scale)^(-1/k)`.
#[derive(Debug, Clone, PartialEq)]
pub struct TailFit {
    /// Shape `k`.
    pub shape: f64,
    /// Upper confidence bound of the shape.
    pub shape_upper: f64,
    /// The bound has to lie below this for the weights to be sound.
    pub limit: f64,
    /// Threshold, in units of the mean weight.
    pub threshold: f64,
    /// Scale, in units of the mean weight.
    pub scale: f64,
    /// Share of the draws above the threshold.
    pub share_above: f64,
}

impl TailFit {
    /// Share of draws above `w` (in units of the mean weight) if the shape were `shape`; `w` is at least the threshold.
    pub(super) fn share(&self, w: f64, shape: f64) -> f64 {
        let excess = (w - self.threshold) / self.scale;
        if shape.abs() < 1e-9 {
            return self.share_above * crate::numeric::exp(-excess);
        }
        let inside = 1.0 + shape * excess;
        if inside <= 0.0 { 0.0 } else { self.share_above * libm::pow(inside, -1.0 / shape) }
    }
}

/// Draws the figure: two panels beside each other.
#[must_use]
pub fn draw(data: &EvennessData, style: &Style) -> Drawing {
    let unit = style.unit();
    let falling = falling_weights(&data.weights);
    let gap = 1.2 * unit;
    let cell = (style.width() - gap) / 2.0;
    let titles = ["share of the total weight", "share of draws above"];
    let room = cell - 1.6 * unit;
    let lines: Vec<Vec<String>> = titles.iter().map(|title| wrap(title, room, unit, Face::Regular, 2)).collect();
    let top = (1.0 + LINE * lines.iter().map(Vec::len).max().unwrap_or(1) as f64) * unit;
    let side = (cell - 4.2 * unit).min(24.0 * unit);
    let height = top + side + bottom_room(style) + 1.7 * unit;
    let mut canvas = Canvas::new(style.width(), height);

    let vertical = Room { along: Along::Column, length: side, size: unit, most: 6 };
    let shares_y = Axis::new(0.0, 1.0, Scale::Linear, vertical);
    let tail = Tail::new(&falling, data.tail.as_ref(), vertical);
    let margins = [left_room(&shares_y, style), left_room(&tail.y, style)].map(|margin| margin + 0.3 * unit);
    let area = |column: usize| {
        let left = column as f64 * (cell + gap) + margins[column];
        Area { left, top, right: column as f64 * (cell + gap) + cell - 0.8 * unit, bottom: top + side }
    };
    let horizontal = |column: usize| Room { along: Along::Page, length: area(column).width(), size: unit, most: 5 };

    let shares = Panel { area: area(0), x: Axis::new(0.0, 1.0, Scale::Linear, horizontal(0)), y: shares_y };
    let above =
        Panel { area: area(1), x: Axis::new(tail.low, tail.high, Scale::Log, horizontal(1)), y: tail.y.clone() };
    draw_shares(&mut canvas, style, &shares, data, &falling);
    draw_tail(&mut canvas, style, &above, data, &tail);
    let x_titles = ["share of draws, heaviest first", "weight / mean weight"];
    for (i, panel) in [&shares, &above].into_iter().enumerate() {
        let left = i as f64 * (cell + gap) + 0.3 * unit;
        heading(&mut canvas, style, ["a", "b"][i], &lines[i], (left, top - 0.75 * unit));
        panel.axes(&mut canvas, style, true);
        let width = text::width(&panel.x.title(x_titles[i], None), unit, Face::Regular);
        let middle = f64::midpoint(panel.area.left, panel.area.right).min(left + cell - 0.3 * unit - width / 2.0);
        canvas.write(
            &panel.x.title(x_titles[i], None),
            (middle, height - 0.5 * unit),
            Anchor::Middle,
            style.plain(INK),
        );
    }
    Drawing {
        name: "evenness".to_owned(),
        caption: caption(data, &falling),
        table: table(&falling, data.tail.as_ref()),
        canvas,
        dpi: style.dpi(),
    }
}

/// Weights over the largest, in falling order; what is not a positive number counts as zero.
pub(super) fn falling_weights(weights: &[f64]) -> Vec<f64> {
    let mut falling = clean(weights);
    falling.sort_by(|a, b| b.total_cmp(a));
    falling
}

/// The ranks (from 1) that are drawn, ever sparser: neighbours differ by one, or by one part in `fineness`.
pub(super) fn ranks(n: usize, fineness: usize) -> Vec<usize> {
    let mut ranks = Vec::new();
    let mut rank = 1;
    while rank < n {
        ranks.push(rank);
        rank += 1 + rank / fineness;
    }
    ranks.extend((n > 0).then_some(n));
    ranks
}

/// `(share of draws, share of the total)` after each drawn rank, starting at the origin.
fn shares(falling: &[f64]) -> Vec<(f64, f64)> {
    let n = falling.len() as f64;
    let total: f64 = falling.iter().sum();
    let mut points = vec![(0.0, 0.0)];
    if !(total > 0.0 && total.is_finite()) {
        return points;
    }
    let (mut sum, mut done) = (0.0, 0);
    for rank in ranks(falling.len(), CURVE) {
        sum += falling[done..rank].iter().sum::<f64>();
        done = rank;
        points.push((rank as f64 / n, (sum / total).min(1.0)));
    }
    points
}

fn draw_shares(canvas: &mut Canvas, style: &Style, panel: &Panel, data: &EvennessData, falling: &[f64]) {
    let unit = style.unit();
    let points = shares(falling);
    canvas.fill(points.iter().map(|&(x, y)| panel.spot(x, y)).collect(), MEASURED_TINT, 1.0);
    let diagonal = Pen::solid(REFERENCE, 1.4 * style.hairline()).dashed(0.4 * unit, 0.3 * unit);
    panel.curve(canvas, [(0.0, 0.0), (1.0, 1.0)], diagonal);
    panel.curve(canvas, points.iter().copied(), Pen::solid(MEASURED, style.stroke()));
    let right = panel.area.right - 0.2 * unit;
    if points.len() < 2 {
        let middle = panel.spot(0.42, 0.88);
        canvas.write("no draw has weight", middle, Anchor::Middle, style.plain(REFERENCE));
        return;
    }
    let score = |name: &str, value: f64| format!("{name} {}", significant(value, 2));
    let lines =
        [(score("ESS fraction", data.ess_fraction), MEASURED), (score("perplexity", data.perplexity), MEASURED)];
    write_lines(canvas, style, &lines, (right, panel.area.bottom - 0.5 * unit));
    let near = panel.spot(0.72, 0.55);
    let size = (text::width("even weights", unit, Face::Regular) + 0.4 * unit, 1.3 * unit);
    let area = canvas.free_area(Area { right, ..panel.area }, size, (near.0, near.1 + 0.5 * unit));
    canvas.write(
        "even weights",
        (area.left + 0.2 * unit, area.bottom - 0.3 * unit),
        Anchor::Start,
        style.plain(REFERENCE),
    );
}

/// Right-aligned lines, the last one with its baseline at `bottom`.
fn write_lines(canvas: &mut Canvas, style: &Style, lines: &[(String, Colour)], (right, bottom): text::Spot) {
    for (i, (line, colour)) in lines.iter().enumerate() {
        let baseline = bottom - LINE * style.unit() * (lines.len() - 1 - i) as f64;
        canvas.write(line, (right, baseline), Anchor::End, style.plain(*colour));
    }
}

/// What the right panel shows.
struct Tail {
    /// `(weight / mean, share of draws above)`, rising shares.
    points: Vec<(f64, f64)>,
    low: f64,
    high: f64,
    y: Axis,
}

impl Tail {
    fn new(falling: &[f64], fit: Option<&TailFit>, room: Room) -> Self {
        let n = falling.len() as f64;
        let mean = falling.iter().sum::<f64>() / n;
        let points: Vec<(f64, f64)> = ranks(falling.len(), DOTS)
            .into_iter()
            .map(|rank| (falling[rank - 1] / mean, (rank as f64 - 0.5) / n))
            .filter(|&(w, _)| w > 0.0 && w.is_finite())
            .collect();
        let most = points.first().map_or(1.0, |&(w, _)| w);
        // From the draw that leaves three quarters above it, or a thousandth of the largest: the tail is the subject.
        let usual = points.iter().rev().find(|&&(_, share)| share <= 0.75).map_or(most, |&(w, _)| w);
        let low = usual.max(most * 1e-4).min(fit.map_or(f64::INFINITY, |fit| fit.threshold * 0.8)) / 1.15;
        let y = Axis::new(0.4 / n.max(50.0), 1.0, Scale::Log, room);
        // Weights that hardly differ stand in the middle of a range that says so.
        let (low, high) =
            if most / low < 1.3 { (most / 2.0, most * 2.0) } else { (low, most * libm::pow(most / low, 0.12)) };
        Self { points, low, high, y }
    }
}

fn draw_tail(canvas: &mut Canvas, style: &Style, panel: &Panel, data: &EvennessData, tail: &Tail) {
    let unit = style.unit();
    for &(w, share) in tail.points.iter().filter(|&&(w, share)| panel.shows(w, share)) {
        let fitted = data.tail.as_ref().is_none_or(|fit| w >= fit.threshold);
        let (colour, radius) = if fitted { (MEASURED, 0.2) } else { (REFERENCE, 0.15) };
        canvas.disc(panel.spot(w, share), radius * unit, colour, 1.0);
    }
    let mut lines = vec![];
    if let Some(fit) = &data.tail {
        let line = |shape: f64| -> Vec<(f64, f64)> {
            (0..=120)
                .map(|i| {
                    let from = panel.x.place(fit.threshold);
                    let w = panel.x.value_at(from + (1.0 - from) * f64::from(i) / 120.0).max(fit.threshold);
                    (w, fit.share(w, shape))
                })
                .collect()
        };
        panel.curve(canvas, line(fit.shape), Pen::solid(MODELLED, 0.75 * style.stroke()));
        let bound = Pen::solid(MODELLED, 0.75 * style.stroke()).dashed(0.45 * unit, 0.3 * unit);
        panel.curve(canvas, line(fit.shape_upper), bound);
        lines.push((format!("tail shape {}", fixed(fit.shape, 2)), MODELLED));
        lines.push((format!("its bound {}", fixed(fit.shape_upper, 2)), MODELLED));
        lines.push((format!("sound below {}", significant(fit.limit, 1)), REFERENCE));
    } else {
        lines.push(("tail not fitted".to_owned(), REFERENCE));
    }
    let width = lines.iter().map(|(line, _)| text::width(line, unit, Face::Regular)).fold(0.0, f64::max);
    let size = (width + 0.6 * unit, (LINE * lines.len() as f64 + 0.2) * unit);
    let room = Area { left: panel.area.left + 0.2 * unit, right: panel.area.right + 0.4 * unit, ..panel.area };
    // A falling line leaves two corners free; with both taken, wherever least is drawn.
    let above = Area { left: room.right - size.0, bottom: room.top + size.1, ..room };
    let below = Area { right: room.left + size.0, top: room.bottom - size.1, ..room };
    let free = [above, below].into_iter().find(|corner| canvas.crowding(corner) == 0);
    let area = free.unwrap_or_else(|| canvas.free_area(room, size, (room.right, room.top)));
    write_lines(canvas, style, &lines, (area.right - 0.3 * unit, area.bottom - 0.4 * unit));
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::super::table::Cell;
    use super::*;

    /// Weights at the middles of `n` equal slices of a generalised Pareto distribution of shape `k`, plus a floor.
    fn pareto(n: usize, k: f64, floor: f64) -> Vec<f64> {
        (0..n)
            .map(|i| {
                let p = (i as f64 + 0.5) / n as f64;
                floor + if k == 0.0 { -libm::log(p) } else { (libm::pow(p, -k) - 1.0) / k }
            })
            .collect()
    }

    fn data(weights: Vec<f64>, tail: Option<TailFit>) -> EvennessData {
        let n = weights.len() as f64;
        let (sum, squares) = weights.iter().fold((0.0, 0.0), |(s, q), w| (s + w, q + w * w));
        let entropy: f64 = weights.iter().filter(|&&w| w > 0.0).map(|w| -(w / sum) * libm::log(w / sum)).sum();
        EvennessData { weights, ess_fraction: sum * sum / squares / n, perplexity: libm::exp(entropy) / n, tail }
    }

    /// The tail fit that the weights of [`pareto`] really have, above the upper fifth part of `share` of them.
    fn true_tail(k: f64, floor: f64, share: f64, mean: f64) -> TailFit {
        let excess = if k == 0.0 { -libm::log(share) } else { (libm::pow(share, -k) - 1.0) / k };
        TailFit {
            shape: k,
            shape_upper: k + 0.11,
            limit: 0.5,
            threshold: (floor + excess) / mean,
            scale: (1.0 + k * excess) / mean,
            share_above: share,
        }
    }

    fn mean(weights: &[f64]) -> f64 {
        weights.iter().sum::<f64>() / weights.len() as f64
    }

    #[test]
    fn weights_of_every_kind_are_drawn_in_order() {
        let light = pareto(4000, 0.1, 1.0);
        let heavy = pareto(4000, 0.9, 0.01);
        let cliff: Vec<f64> = (0..4000).map(|i| 1.0 + f64::from(i) / 8000.0).collect();
        let mut rare = pareto(500, 0.3, 0.0);
        rare.resize(5000, 0.0);
        let light_tail = true_tail(0.1, 1.0, 0.05, mean(&light));
        let heavy_tail = true_tail(0.9, 0.01, 0.05, mean(&heavy));
        let small: Vec<f64> = light.iter().map(|w| w * 1e-12).collect();
        let cases = [
            ("light", data(light, Some(light_tail.clone()))),
            ("heavy", data(heavy, Some(heavy_tail))),
            ("small", data(small, Some(light_tail))),
            ("equal", data(vec![0.25; 1000], None)),
            ("cliff", data(cliff, None)),
            ("rare", data(rare, None)),
            ("one", data(vec![3.0], None)),
            ("spike", data([vec![1e9], vec![1e-3; 999]].concat(), None)),
            ("none", EvennessData { weights: vec![], ess_fraction: 0.0, perplexity: 0.0, tail: None }),
            ("zero", EvennessData { weights: vec![0.0; 5], ess_fraction: 0.0, perplexity: 0.0, tail: None }),
        ];
        for (name, data) in cases {
            checks::check(&format!("evenness-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// One draw of weight 4, one of 2, two of 1 and one that is no number: the heaviest fifth carries half.
    #[test]
    fn shares_accumulate_from_the_heaviest() {
        let points = shares(&falling_weights(&[1.0, 4.0, f64::NAN, 1.0, 2.0]));
        assert_eq!(points, vec![(0.0, 0.0), (0.2, 0.5), (0.4, 0.75), (0.6, 0.875), (0.8, 1.0), (1.0, 1.0)]);
    }

    /// The fitted column of the table is the distribution itself where the fit is the truth: ranks in the middle of
    /// their slices, so the agreement is exact up to rounding.
    #[test]
    fn the_fitted_line_runs_through_weights_of_its_own_distribution() {
        let weights = pareto(1000, 0.4, 0.2);
        let fit = true_tail(0.4, 0.2, 0.05, mean(&weights));
        let drawing = draw(&data(weights, Some(fit)), &Style::default());
        let mut compared = 0;
        for row in drawing.table.rows() {
            if let (Cell::Number(rank), Cell::Number(fitted)) = (&row[0], &row[4])
                && fitted.is_finite()
            {
                assert!((fitted - (rank - 0.5) / 1000.0).abs() < 1e-12, "{row:?}");
                compared += 1;
            }
        }
        assert_eq!(compared, 50);
        assert!(drawing.caption.contains("tail shape 0.40"), "{}", drawing.caption);
    }
}
