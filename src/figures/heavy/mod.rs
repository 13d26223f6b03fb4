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
use super::canvas::Canvas;
use super::canvas::Pen;
use super::colour::GROUND;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::columns::VariableColumn;
use super::key::Key;
use super::key::Sample;
use super::numbers::count;
use super::numbers::percent;
use super::panel::Panel;
use super::panel::bottom_room;
use super::place::Area;
use super::table::Cell;
use super::table::Table;
use super::text::Face;
use super::text::shorten;
use super::text::width;
use super::text::wrap;

mod strips;

use strips::Heavy;
use strips::Strip;
use strips::chance_distance;
use strips::strips;

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
    let legend = "Areas of the discs are shares of the total; the numbers at both ends are shares of the heaviest draws' weight.";
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
}
