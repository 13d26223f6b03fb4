//! Importance of the variables for an event: the squared direction cosines of its most likely point.

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
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MODELLED;
use super::colour::REFERENCE;
use super::key::Key;
use super::key::Sample;
use super::numbers::significant;
use super::panel::Panel;
use super::panel::bottom_room;
use super::place::Area;
use super::sought::Sought;
use super::table::Table;
use super::text::Face;
use super::text::width;
use super::text::wrap;

/// Most bars.
const BARS: usize = 25;
/// Up to as many variables, names may take two lines.
const TWO_LINES: usize = 15;
/// Distance of bars with names of one line, in text sizes.
const ROW: f64 = 1.6;
/// Space at the edges of the page, in text sizes.
const MARGIN: f64 = 0.3;
/// Largest part of the page that names may take.
const NAMES: f64 = 0.34;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct ImportanceData {
    /// What is looked for.
    pub sought: Sought,
    /// What is to be said of the point, a sentence each.
    pub remarks: Vec<String>,
    /// The variables, in any order.
    pub variables: Vec<Importance>,
}

/// The part of one variable in the event.
#[derive(Debug, Clone, PartialEq)]
pub struct Importance {
    /// What the variable is called.
    pub name: String,
    /// Cosine of the angle between its axis and the way from the origin of the scores to the most likely point of the
    /// event: positive where a larger value brings the event nearer. The squares sum to one.
    pub cosine: f64,
}

/// A bar: the lines of its name, its signed square, whether it stands for several variables.
struct Bar {
    name: Vec<String>,
    signed: f64,
    others: bool,
}

/// Draws the figure: bars to the right for variables whose large values lead to the event, to the left for those
/// whose small values do.
///
/// ```
/// use evenpoise::figures::Style;
/// use evenpoise::figures::rare_importance::{Importance, ImportanceData, draw};
/// use evenpoise::figures::sought::Sought;
/// let variable = |name: &str, cosine| Importance { name: name.to_owned(), cosine };
/// let variables = vec![variable("gate", -0.28), variable("inflow", 0.96)];
/// let data = ImportanceData { sought: Sought::Event, remarks: vec![], variables };
/// let drawing = draw(&data, &Style::default());
/// assert!(drawing.caption.ends_with("Nine tenths of it rest on inflow."));
/// ```
#[must_use]
pub fn draw(data: &ImportanceData, style: &Style) -> Drawing {
    let bars = bars(data, style);
    let (unit, margin) = (style.unit(), MARGIN * style.unit());
    let to = match data.sought {
        Sought::Event => "to the event",
        Sought::Integrand => "to the mode",
    };
    let entries = [
        (Sample::Field(MEASURED, Pen::solid(MEASURED, style.hairline())), format!("larger values lead {to}")),
        (Sample::Field(MODELLED, Pen::solid(MODELLED, style.hairline())), format!("smaller values lead {to}")),
    ];
    let key = Key::new(&entries, style.width() - 2.0 * margin, style);
    let top = key.height(style) + 0.9 * unit;
    let row = if bars.iter().any(|bar| bar.name.len() > 1) { 2.0 * LINE + 0.4 } else { ROW } * unit;
    let bottom = top + row * bars.len().max(2) as f64;
    let mut canvas = Canvas::new(style.width(), bottom + bottom_room(style) + 1.9 * unit);
    key.draw(&mut canvas, style, (margin, 0.2 * unit));
    let panel = panel(&bars, (top, bottom), style);
    for (i, bar) in bars.iter().enumerate() {
        draw_bar(&mut canvas, &panel, bar, top + row * (i as f64 + 0.5), style);
    }
    let middle = f64::midpoint(panel.area.left, panel.area.right);
    if bars.is_empty() {
        let spot = (middle, f64::midpoint(top, bottom));
        canvas.write("no variable", spot, Anchor::Middle, style.plain(REFERENCE));
    }
    let zero = panel.spot(0.0, 0.0).0;
    canvas.line(vec![(zero, top), (zero, bottom)], Pen::solid(INK, style.hairline()));
    panel.bottom_axis(&mut canvas, style, true);
    let title = "signed square of the direction cosine";
    let half = width(title, unit, Face::Regular) / 2.0 + margin;
    let spot = (middle.min(style.width() - half).max(half), canvas.height() - 0.5 * unit);
    canvas.write(title, spot, Anchor::Middle, style.plain(INK));
    let (name, caption, table) = ("importance".to_owned(), caption(data), table(data));
    Drawing { name, caption, table, canvas, dpi: style.dpi() }
}

/// The panel of the bars: names stand to its left, numbers beyond the ends of bars on either side.
fn panel(bars: &[Bar], (top, bottom): (f64, f64), style: &Style) -> Panel {
    let unit = style.unit();
    let names = bars.iter().flat_map(|bar| &bar.name);
    let names = names.map(|line| width(line, unit, Face::Regular)).fold(0.0, f64::max);
    let number = width("−0.000", unit, Face::Regular) + 0.6 * unit;
    let ends = bars.iter().fold((0.0_f64, 0.0_f64), |(low, high), bar| (low.min(bar.signed), high.max(bar.signed)));
    let (low, high) = if ends.1 - ends.0 > 0.0 { ends } else { (0.0, 1.0) };
    let left = (MARGIN + 0.6) * unit + names + if low < 0.0 { number } else { 0.0 };
    let right = style.width() - MARGIN * unit - number;
    let room = Room { along: Along::Page, length: right - left, size: unit, most: 7 };
    let axis = Axis::new(low, high, Scale::Linear, room);
    Panel { area: Area { left, top, right, bottom }, x: axis.clone(), y: axis }
}

fn draw_bar(canvas: &mut Canvas, panel: &Panel, bar: &Bar, middle: f64, style: &Style) {
    let (unit, baseline) = (style.unit(), middle + 0.36 * style.unit());
    let colour = match bar.signed {
        _ if bar.others => REFERENCE,
        signed if signed < 0.0 => MODELLED,
        _ => MEASURED,
    };
    let (zero, end) = (panel.spot(0.0, 0.0).0, panel.spot(bar.signed, 0.0).0);
    let half = 0.32 * ROW * unit;
    let (top, bottom) = (middle - half, middle + half);
    canvas.fill(vec![(zero, top), (end, top), (end, bottom), (zero, bottom)], colour, 1.0);
    let size = bar.signed.abs();
    let number = if size < 0.001 { "< 0.001".to_owned() } else { significant(bar.signed, 2) };
    let (x, anchor) =
        if bar.signed < 0.0 { (end - 0.3 * unit, Anchor::End) } else { (end + 0.3 * unit, Anchor::Start) };
    canvas.write(&number, (x, baseline), anchor, style.plain(colour));
    let ink = if bar.others { REFERENCE } else { INK };
    for (i, line) in bar.name.iter().enumerate() {
        let baseline = baseline + LINE * unit * (i as f64 - (bar.name.len() - 1) as f64 / 2.0);
        canvas.write(line, (MARGIN * unit, baseline), Anchor::Start, style.plain(ink));
    }
}

/// All variables with a finite cosine, the most important one first.
fn sorted(data: &ImportanceData) -> Vec<&Importance> {
    let mut sorted: Vec<&Importance> = data.variables.iter().filter(|v| v.cosine.is_finite()).collect();
    sorted.sort_by(|a, b| b.cosine.abs().total_cmp(&a.cosine.abs()));
    sorted
}

fn bars(data: &ImportanceData, style: &Style) -> Vec<Bar> {
    let sorted = sorted(data);
    let lines = if sorted.len() <= TWO_LINES { 2 } else { 1 };
    let name = |name: &str| wrap(name, NAMES * style.width(), style.unit(), Face::Regular, lines);
    let shown = if sorted.len() > BARS { BARS - 1 } else { sorted.len() };
    let bar = |v: &&Importance| Bar { name: name(&v.name), signed: v.cosine * v.cosine.abs(), others: false };
    let mut bars: Vec<Bar> = sorted[..shown].iter().map(bar).collect();
    if sorted.len() > shown {
        let rest = &sorted[shown..];
        let signed = rest.iter().map(|v| v.cosine * v.cosine).sum();
        bars.push(Bar { name: name(&format!("{} others", rest.len())), signed, others: true });
    }
    bars
}

fn caption(data: &ImportanceData) -> String {
    let sorted = sorted(data);
    let mut parts = vec![format!(
        "Signed squared direction cosines of the nearest {}: the share of each variable in its squared distance from the origin \
         of the scores, to the right where a larger value leads there.",
        data.sought.point()
    )];
    let (mut sum, mut most) = (0.0, 0);
    let total: f64 = sorted.iter().map(|v| v.cosine * v.cosine).sum();
    while most < sorted.len() && sum < 0.9 * total {
        sum += sorted[most].cosine * sorted[most].cosine;
        most += 1;
    }
    if most > 0 {
        let names: Vec<&str> = sorted[..most.min(5)].iter().map(|v| v.name.as_str()).collect();
        let rest = if most > 5 { format!(" and {} more", most - 5) } else { String::new() };
        parts.push(format!("Nine tenths of it rest on {}{rest}.", names.join(", ")));
    }
    parts.extend(data.remarks.iter().cloned());
    parts.join(" ")
}

fn table(data: &ImportanceData) -> Table {
    let mut table = Table::new(&["variable", "direction_cosine", "squared"]);
    for v in sorted(data) {
        table.push([v.name.as_str().into(), v.cosine.into(), (v.cosine * v.cosine).into()]);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;

    fn data(cosines: &[f64], name: impl Fn(usize) -> String) -> ImportanceData {
        let norm = cosines.iter().map(|c| c * c).sum::<f64>().sqrt();
        let variables = cosines.iter().enumerate().map(|(i, c)| Importance { name: name(i), cosine: c / norm });
        ImportanceData { sought: Sought::Event, remarks: vec![], variables: variables.collect() }
    }

    #[test]
    fn importances_of_every_kind_are_drawn_in_order() {
        let gauge = |i: usize| format!("gauge_{i}");
        let long = |i: usize| format!("discharge_coefficient_of_gate_{i}_in_the_northern_spillway");
        let many: Vec<f64> =
            (0..60).map(|i| libm::exp(-0.1 * f64::from(i)) * if i % 3 == 0 { -1.0 } else { 1.0 }).collect();
        let mut broken = data(&[1.0, -0.5], gauge);
        broken.variables[0].cosine = f64::NAN;
        let cases = [
            ("five", data(&[0.8, -0.45, 0.3, 0.02, -0.2], gauge)),
            ("rising", data(&[0.8, 0.4, 0.3], long)),
            ("falling", data(&[-0.8, -0.4, -0.3], gauge)),
            ("many", data(&many, long)),
            ("broken", broken),
            (
                "zero",
                ImportanceData {
                    variables: vec![Importance { name: "still".into(), cosine: 0.0 }],
                    ..data(&[], gauge)
                },
            ),
            ("empty", data(&[], gauge)),
        ];
        for (name, data) in cases {
            checks::check(&format!("importance-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// Bars keep the sum of squares, and those left out stand together in the last.
    #[test]
    fn bars_add_up_to_one() {
        let cosines: Vec<f64> = (0..60).map(|i| f64::from(i) - 20.0).collect();
        let bars = bars(&data(&cosines, |i| format!("v{i}")), &Style::default());
        assert_eq!(
            (bars.len(), &bars[0].name[..], &bars[24].name[..]),
            (BARS, &["v59".to_owned()][..], &["36 others".to_owned()][..])
        );
        assert!((bars.iter().map(|bar| bar.signed.abs()).sum::<f64>() - 1.0).abs() < 1e-12);
        assert!(bars.iter().any(|bar| bar.signed < 0.0));
    }

    #[test]
    fn the_caption_names_what_matters() {
        let caption = caption(&data(&[0.1, -0.9, 0.5], |i| ["inflow", "friction", "level"][i].to_owned()));
        assert!(caption.contains("rest on friction, level."), "{caption}");
    }
}
