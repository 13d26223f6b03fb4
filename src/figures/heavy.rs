//! Where the big weights sit: in which variables, and on which side, the heaviest draws differ from the others.
//!
//! Every variable is a strip from its lowest to its highest value, in quantiles of the draws that have weight, each of
//! them counted once. Where the proposal is too thin, the heaviest draws crowd together at an end of the variables
//! concerned; where it is wider than its target, in the middle. Weighted quantiles would not show it: a few draws that
//! carry everything are the weighted distribution.

use super::Drawing;
use super::LINE;
use super::Style;
use super::axis::Along;
use super::axis::Axis;
use super::axis::Room;
use super::axis::Scale;
use super::canvas::Anchor;
use super::canvas::Area;
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::GROUND;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::columns::VariableColumn;
use super::columns::clean;
use super::columns::positions;
use super::key::Key;
use super::key::Sample;
use super::numbers::count;
use super::numbers::percent;
use super::panel::Panel;
use super::panel::bottom_room;
use super::table::Cell;
use super::table::Table;
use super::text::Face;
use super::text::shorten;
use super::text::width;
use super::text::wrap;
use crate::numeric::ln;

/// Share of the draws that count as heaviest.
const SHARE: f64 = 0.01;
/// Fewest and most of them.
const DRAWS: (usize, usize) = (5, 200);
/// Most strips of a figure.
const STRIPS: usize = 30;
/// Part of a strip's area that its discs may cover together.
const COVER: f64 = 0.45;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct HeavyData {
    /// The variables.
    pub variables: Vec<VariableColumn>,
    /// Weights of the draws on any common scale.
    pub weights: Vec<f64>,
}

/// A variable with the places of the heaviest draws.
struct Strip<'a> {
    column: &'a VariableColumn,
    /// Places of the heaviest draws, heaviest first: quantiles of the draws.
    places: Vec<f64>,
    /// Share of their weight in the lowest and in the highest tenth.
    ends: (f64, f64),
    /// Largest difference between the distribution of their weight and an even one.
    distance: f64,
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &HeavyData, style: &Style) -> Drawing {
    let heavy = Heavy::new(data);
    let strips = strips(data, &heavy);
    let shown = &strips[..strips.len().min(STRIPS)];
    let (unit, margin) = (style.unit(), 0.3 * style.unit());
    let key = Key::new(&entries(&heavy, style), style.width() - 2.0 * margin, style);
    let top = key.height(style) + 2.1 * unit;
    let row = (48.0 / shown.len().max(1) as f64).clamp(1.6, 3.0) * unit;
    let bottom = top + row * shown.len().max(1) as f64;
    let mut canvas = Canvas::new(style.width(), bottom + bottom_room(style) + 2.1 * unit);
    let drawing = |canvas: Canvas| Drawing {
        name: "heavy".to_owned(),
        caption: caption(&strips, &heavy),
        table: table(data, &strips, &heavy),
        canvas,
        dpi: style.dpi(),
    };
    if heavy.draws.is_empty() || shown.is_empty() {
        let middle = (style.width() / 2.0, f64::midpoint(top, bottom));
        canvas.write("no draw has weight", middle, Anchor::Middle, style.plain(REFERENCE));
        return drawing(canvas);
    }
    key.draw(&mut canvas, style, (margin, 0.2 * unit));

    let names = names(shown, row, style);
    let percents = width("100 %", unit, Face::Regular);
    let names_end = margin + names.iter().flatten().map(|line| width(line, unit, Face::Regular)).fold(0.0, f64::max);
    let left = names_end + percents + 1.4 * unit;
    let right = style.width() - percents - 0.9 * unit;
    let axis =
        Axis::new(0.0, 1.0, Scale::Linear, Room { along: Along::Page, length: right - left, size: unit, most: 6 });
    let scale = disc_scale(&heavy, right - left, row);
    let chance = chance_distance(strips.len(), &heavy.shares);
    for (i, strip) in shown.iter().enumerate() {
        let middle = top + row * (i as f64 + 0.5);
        let area = Area { left, top: middle - 0.46 * row, right, bottom: middle + 0.46 * row };
        draw_strip(&mut canvas, style, area, strip, &heavy, scale);
        for (k, line) in names[i].iter().enumerate() {
            let baseline = middle + (0.36 + LINE * (k as f64 - (names[i].len() - 1) as f64 / 2.0)) * unit;
            canvas.write(line, (margin, baseline), Anchor::Start, style.plain(INK));
        }
        for (share, at) in [(strip.ends.0, left - 0.45 * unit), (strip.ends.1, style.width() - margin)] {
            // Three times what an even distribution has, if it is not chance.
            let text = if share >= 0.3 && strip.distance > chance { style.bold(INK) } else { style.plain(REFERENCE) };
            canvas.write(&percent_whole(share), (at, middle + 0.36 * unit), Anchor::End, text);
        }
    }
    let frame = Panel { area: Area { left, top, right, bottom }, x: axis.clone(), y: axis };
    frame.bottom_axis(&mut canvas, style, true);
    write_titles(&mut canvas, style, &frame.area);
    drawing(canvas)
}

/// The heaviest draws.
struct Heavy {
    weights: Vec<f64>,
    /// Their numbers, heaviest first.
    draws: Vec<usize>,
    /// Their shares of the total weight.
    shares: Vec<f64>,
    /// How many draws there are in all.
    of: usize,
}

impl Heavy {
    fn new(data: &HeavyData) -> Self {
        let weights = clean(&data.weights);
        let total: f64 = weights.iter().sum();
        let mut draws: Vec<usize> = (0..weights.len()).filter(|&i| weights[i] > 0.0).collect();
        draws.sort_by(|&a, &b| weights[b].total_cmp(&weights[a]).then(a.cmp(&b)));
        let wanted = (SHARE * weights.len() as f64).ceil() as usize;
        draws.truncate(wanted.clamp(DRAWS.0, DRAWS.1));
        let shares = draws.iter().map(|&i| weights[i] / total).collect();
        Self { of: weights.len(), weights, draws, shares }
    }

    fn share(&self) -> f64 {
        self.shares.iter().sum()
    }
}

/// All variables, those first in which the heaviest draws are furthest from even.
fn strips<'a>(data: &'a HeavyData, heavy: &Heavy) -> Vec<Strip<'a>> {
    let once: Vec<f64> = heavy.weights.iter().map(|&w| if w > 0.0 { 1.0 } else { 0.0 }).collect();
    let mut strips: Vec<Strip> = data
        .variables
        .iter()
        .map(|column| {
            let all = positions(&column.values, &once);
            let places: Vec<f64> = heavy.draws.iter().map(|&i| all.get(i).copied().unwrap_or(f64::NAN)).collect();
            let total = heavy.share();
            let share = |inside: &dyn Fn(f64) -> bool| -> f64 {
                let pairs = places.iter().zip(&heavy.shares).filter(|(place, _)| inside(**place));
                pairs.map(|(_, share)| share).sum::<f64>() / total
            };
            let ends = (share(&|place| place < 0.1), share(&|place| place > 0.9));
            let distance = distance(&places, &heavy.shares);
            Strip { column, places, ends, distance }
        })
        .collect();
    strips.sort_by(|a, b| b.distance.total_cmp(&a.distance));
    strips
}

/// Largest distance between the share of weight up to a place and that place (Kolmogorov's distance to an even
/// distribution), between 0 and 1.
///
/// A draw counts with half of its weight on either side of its own place.
fn distance(places: &[f64], shares: &[f64]) -> f64 {
    let mut order: Vec<usize> = (0..places.len()).filter(|&i| places[i].is_finite()).collect();
    order.sort_by(|&a, &b| places[a].total_cmp(&places[b]).then(a.cmp(&b)));
    let total: f64 = order.iter().map(|&i| shares[i]).sum();
    let (mut sum, mut most) = (0.0, 0.0_f64);
    for &i in &order {
        most = most.max(((sum + shares[i] / 2.0) / total - places[i]).abs());
        sum += shares[i];
    }
    most
}

/// The distance that chance alone stays below in 19 of 20 figures, if the heaviest draws lay like all others: the
/// inequality of Dvoretzky, Kiefer & Wolfowitz with Massart's constant (Ann. Probab. 18 (1990) 1269-1283), over all
/// variables, for as many draws as the shares are worth.
fn chance_distance(variables: usize, shares: &[f64]) -> f64 {
    let (sum, squares) = shares.iter().fold((0.0, 0.0), |(sum, squares), s| (sum + s, squares + s * s));
    (ln(2.0 * variables as f64 / 0.05) * squares / (2.0 * sum * sum)).sqrt()
}

fn entries(heavy: &Heavy, style: &Style) -> Vec<(Sample, String)> {
    let Some(first) = heavy.shares.first() else { return Vec::new() };
    let radius = 1.3 * style.marker();
    let mut entries =
        vec![(Sample::Dot(radius, MODELLED, 0.9), format!("heaviest draw: {} of the total", percent(*first)))];
    let others = heavy.draws.len() - 1;
    if others > 0 {
        let text = format!("the next {}: {}", count(others), percent(heavy.share() - first));
        entries.push((Sample::Dot(radius, MEASURED, 0.5), text));
    }
    entries
}

/// Names of the strips, in two lines where the strips are tall enough.
fn names(strips: &[Strip], row: f64, style: &Style) -> Vec<Vec<String>> {
    let unit = style.unit();
    let room = 0.3 * style.width();
    let name = |strip: &Strip| {
        let title = strip.column.title();
        if row >= 2.5 * unit {
            wrap(title, room, unit, Face::Regular, 2)
        } else {
            vec![shorten(title, room, unit, Face::Regular)]
        }
    };
    strips.iter().map(name).collect()
}

/// Radius of the disc of the heaviest draw: the discs together cover a set part of a strip, none leaves it.
fn disc_scale(heavy: &Heavy, length: f64, row: f64) -> f64 {
    let largest = heavy.shares[0];
    let areas: f64 = heavy.shares.iter().map(|share| share / largest).sum::<f64>() * std::f64::consts::PI;
    (COVER * length * row / areas).sqrt().min(0.4 * row)
}

fn draw_strip(canvas: &mut Canvas, style: &Style, area: Area, strip: &Strip, heavy: &Heavy, scale: f64) {
    canvas.fill_area(area, GROUND);
    let rule = Pen::solid(REFERENCE, style.hairline()).dashed(0.25 * style.unit(), 0.25 * style.unit());
    for tenth in [0.1, 0.9] {
        let x = area.left + tenth * area.width();
        canvas.line(vec![(x, area.top), (x, area.bottom)], rule);
    }
    // Lightest first, so that the heaviest lies on top; heights spread evenly (multiples of the golden section).
    for i in (0..heavy.draws.len()).rev().filter(|&i| strip.places[i].is_finite()) {
        let radius = (scale * (heavy.shares[i] / heavy.shares[0]).sqrt()).max(0.5 * style.hairline());
        let turn = i as f64 * 0.618_033_988_749_894_9 + 0.5;
        let slack = (area.height() - 2.0 * radius).max(0.0);
        let y = area.top + radius + slack * (turn - turn.floor());
        let x = area.left + strip.places[i] * area.width();
        let (colour, opacity) = if i == 0 { (MODELLED, 0.9) } else { (MEASURED, 0.5) };
        canvas.disc((x.clamp(area.left + radius, area.right - radius), y), radius, colour, opacity);
    }
}

fn percent_whole(share: f64) -> String {
    format!("{} %", super::numbers::fixed(100.0 * share, 0))
}

/// Column heads above the strips and the title of the axis below.
fn write_titles(canvas: &mut Canvas, style: &Style, frame: &Area) {
    let unit = style.unit();
    let baseline = frame.top - 0.7 * unit;
    canvas.write(
        "lowest tenth",
        (frame.left - 0.45 * unit - width("100 %", unit, Face::Regular), baseline),
        Anchor::Start,
        style.plain(INK),
    );
    canvas.write("highest tenth", (canvas.width() - 0.3 * unit, baseline), Anchor::End, style.plain(INK));
    let title = "quantile of the draws";
    let half = width(title, unit, Face::Regular) / 2.0 + 0.3 * unit;
    let middle = f64::midpoint(frame.left, frame.right).min(canvas.width() - half);
    canvas.write(title, (middle, canvas.height() - 0.6 * unit), Anchor::Middle, style.plain(INK));
}

fn caption(strips: &[Strip], heavy: &Heavy) -> String {
    let (Some(first), Some(strip)) = (heavy.shares.first(), strips.first()) else {
        return "No draw has weight.".to_owned();
    };
    let mut parts = vec![format!(
        "The {} heaviest of {} draws carry {} of the total weight, the heaviest one {}.",
        count(heavy.draws.len()),
        count(heavy.of),
        percent(heavy.share()),
        percent(*first)
    )];
    let (name, distance) = (strip.column.title(), super::numbers::fixed(strip.distance, 2));
    let (low, high) = strip.ends;
    let (side, share) = if high >= low { ("highest", high) } else { ("lowest", low) };
    parts.push(if strip.distance <= chance_distance(strips.len(), &heavy.shares) {
        format!(
            "In no variable do they lie further from an even spread than chance alone may put them (largest distance \
             {distance}, in {name})."
        )
    } else if share >= 0.2 {
        format!(
            "They differ most from the other draws in {name}, where {} of their weight lies in the {side} tenth \
             (distance from an even spread {distance}).",
            percent_whole(share)
        )
    } else {
        format!("They differ most from the other draws in {name}, away from both ends (distance from an even spread {distance}).")
    });
    let legend =
        "Areas of the discs are shares of the total; the numbers at both ends, shares of the heaviest draws' weight.";
    parts.push(legend.to_owned());
    if strips.len() > STRIPS {
        parts.push(format!("The {} variables with the most even spread are left out.", strips.len() - STRIPS));
    }
    parts.join(" ")
}

fn table(data: &HeavyData, strips: &[Strip], heavy: &Heavy) -> Table {
    let mut table = Table::new(&["variable", "distance", "draw", "share_of_total", "quantile", "value"]);
    let shown = heavy.draws.iter().zip(&heavy.shares);
    for strip in strips {
        for ((&draw, &share), &place) in shown.clone().zip(&strip.places) {
            let value = strip.column.values.get(draw).copied();
            let name = Cell::Text(strip.column.name.clone());
            table.push([name, strip.distance.into(), (draw as f64).into(), share.into(), place.into(), value.into()]);
        }
    }
    debug_assert_eq!(strips.len(), data.variables.len());
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;
    use crate::numeric::Purpose;
    use crate::numeric::normal;
    use crate::numeric::stream;
    use crate::numeric::uniform;

    /// Draws of `d` standard normal variables (scaled by `scale`); weights grow with the first one to the power `pull`.
    fn data(d: usize, n: usize, pull: f64, scale: f64, name: impl Fn(usize) -> String) -> HeavyData {
        let mut stream = stream(11, Purpose::Trial, 0, 0);
        let columns: Vec<Vec<f64>> = (0..d).map(|_| (0..n).map(|_| normal::draw(&mut stream)).collect()).collect();
        let weights = (0..n)
            .map(|i| {
                let tilt = pull * (columns[0][i] - columns.get(2).map_or(0.0, |c| 0.7 * c[i]));
                libm::exp(tilt) * (0.9 + 0.2 * uniform(&mut stream))
            })
            .collect();
        let variable = |(j, values): (usize, Vec<f64>)| VariableColumn {
            name: name(j),
            label: None,
            unit: None,
            values: values.iter().map(|v| scale * v).collect(),
            discrete: false,
        };
        HeavyData { variables: columns.into_iter().enumerate().map(variable).collect(), weights }
    }

    fn short(j: usize) -> String {
        ["inflow", "crest_level", "gate_friction", "uplift", "roughness", "seepage"][j % 6].to_owned()
    }

    #[test]
    fn weights_of_every_kind_are_drawn_in_order() {
        let long = |j: usize| format!("{}_of_ellenmere_{j:02}", ["discharge_coeff", "spillway_levels"][j % 2]);
        let mut equal = data(5, 2000, 0.0, 1.0, short);
        equal.weights = vec![1.0; 2000];
        let mut spike = data(4, 1000, 0.0, 1e9, short);
        spike.weights[10] = 1e6;
        let cases = [
            ("pulled", data(6, 4000, 0.8, 1.0, short)),
            ("strong", data(6, 4000, 2.5, 1e-12, short)),
            ("thirty", data(30, 4000, 0.6, 1.0, long)),
            ("forty", data(40, 30_000, 0.6, 1.0, long)),
            ("ten", data(10, 1000, 1.2, 1e9, long)),
            ("one", data(1, 500, 1.0, 1.0, short)),
            ("equal", equal),
            ("spike", spike),
            ("few", data(3, 3, 0.3, 1.0, short)),
            ("empty", HeavyData { variables: vec![], weights: vec![] }),
        ];
        for (name, data) in cases {
            checks::check(&format!("heavy-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// Weights that grow with one variable and fall with another put their heaviest draws at opposite ends of those two.
    #[test]
    fn the_variables_that_pull_come_first_with_their_side() {
        let data = data(6, 4000, 1.5, 1.0, short);
        let heavy = Heavy::new(&data);
        let strips = strips(&data, &heavy);
        assert_eq!(strips[0].column.name, "inflow");
        assert_eq!(strips[1].column.name, "gate_friction");
        assert!(strips[0].places.iter().sum::<f64>() / strips[0].places.len() as f64 > 0.6);
        assert!(strips[1].places.iter().sum::<f64>() / (strips[1].places.len() as f64) < 0.4);
        assert!(strips[2].distance < strips[1].distance);
    }

    /// Places in the middles of equal slices are as even as five draws can be; all at one place are as uneven as that
    /// place is far from the middle.
    #[test]
    fn distances_of_known_places() {
        assert!(distance(&[0.1, 0.3, 0.5, 0.7, 0.9], &[1.0; 5]).abs() < 1e-12);
        assert!((distance(&[0.95; 4], &[1.0; 4]) - (0.95 - 0.125)).abs() < 1e-12);
        assert_eq!(distance(&[0.5], &[0.7]), 0.0);
        assert_eq!(distance(&[f64::NAN], &[0.7]), 0.0);
    }

    /// Equal weights are a false alarm in at most one of twenty seeds; all six variables of 40 seeds, draws taken from
    /// one stream: at most 6 alarms has a probability of 0.986 under that rate.
    #[test]
    fn even_weights_rarely_seem_uneven() {
        let mut stream = stream(3, Purpose::Trial, 1, 0);
        let mut alarms = 0;
        for _ in 0..40 {
            let shares = [0.01; 40];
            let far = (0..6).any(|_| {
                let places: Vec<f64> = (0..40).map(|_| uniform(&mut stream)).collect();
                distance(&places, &shares) > chance_distance(6, &shares)
            });
            alarms += usize::from(far);
        }
        assert!(alarms <= 6, "{alarms}");
    }
}
