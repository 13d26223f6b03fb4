//! An estimated column: its median with bands of half and of nine tenths of the mass, against an index.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::axis::padded_range;
use super::canvas::Pen;
use super::colour::Colour;
use super::colour::INK;
use super::colour::MEASURED;
use super::colour::MEASURED_SHADE;
use super::colour::MEASURED_TINT;
use super::frame::Frame;
use super::frame::SINGLE;
use super::frame::Side;
use super::key::Sample;
use super::numbers::count;
use super::numbers::percent;
use super::numbers::significant;
use super::table::Table;
use super::text::Spot;

/// Up to this many entries stand apart as bars; more become areas.
const BARS: usize = 30;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct BandsData {
    /// What is estimated.
    pub quantity: String,
    /// Its unit.
    pub unit: Option<String>,
    /// What the entries are ordered by.
    pub index_name: String,
    /// Its unit.
    pub index_unit: Option<String>,
    /// The entries, in any order.
    pub entries: Vec<BandEntry>,
}

/// One entry of the column.
#[derive(Debug, Clone, PartialEq)]
pub struct BandEntry {
    /// Its place along the index.
    pub index: f64,
    /// Its median.
    pub median: f64,
    /// Ends of the band of half of the mass.
    pub half: (f64, f64),
    /// Ends of the band of nine tenths of the mass.
    pub nine_tenths: (f64, f64),
    /// What was observed there.
    pub observed: Option<f64>,
}

impl BandEntry {
    fn is_sound(&self) -> bool {
        [self.index, self.median, self.half.0, self.half.1, self.nine_tenths.0, self.nine_tenths.1]
            .iter()
            .all(|value| value.is_finite())
    }

    fn observed(&self) -> Option<f64> {
        self.observed.filter(|value| value.is_finite())
    }
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &BandsData, style: &Style) -> Drawing {
    let mut entries: Vec<&BandEntry> = data.entries.iter().filter(|entry| entry.is_sound()).collect();
    entries.sort_by(|a, b| a.index.total_cmp(&b.index));
    let as_bars = entries.len() <= BARS;
    let values = entries.iter().flat_map(|e| [e.nine_tenths.0, e.nine_tenths.1, e.observed().unwrap_or(e.median)]);
    let (low, high) = padded_range(values, 0.05).unwrap_or((0.0, 1.0));
    let is_whole = entries.iter().all(|e| e.index == e.index.round());
    let ends = entries.first().zip(entries.last()).map_or((0.0, 1.0), |(first, last)| (first.index, last.index));
    // Bars need half of their distance at both ends.
    let gap = entries.windows(2).map(|pair| pair[1].index - pair[0].index).filter(|gap| *gap > 0.0);
    let gap = gap.reduce(f64::min).unwrap_or(1.0);
    let pad = if as_bars { 0.6 * gap.max((ends.1 - ends.0) / 100.0) } else { 0.0 };
    let scale = if is_whole && !entries.is_empty() { Scale::Whole } else { Scale::Linear };

    let median = Pen::solid(MEASURED, style.stroke());
    let none = Pen::solid(MEASURED_TINT, style.hairline());
    let mut key = vec![
        (Sample::Line(median), "median".to_owned()),
        (Sample::Field(MEASURED_SHADE, Pen { colour: MEASURED_SHADE, ..none }), "50 %".to_owned()),
        (Sample::Field(MEASURED_TINT, none), "90 %".to_owned()),
    ];
    if entries.iter().any(|e| e.observed().is_some()) {
        key.push((Sample::Dot(0.8 * style.marker(), INK, 1.0), "observed".to_owned()));
    }
    let x =
        Side { name: &data.index_name, unit: data.index_unit.as_deref(), range: (ends.0 - pad, ends.1 + pad, scale) };
    let y = Side { name: &data.quantity, unit: data.unit.as_deref(), range: (low, high, Scale::Linear) };
    let mut frame = Frame::new(&x, &[(y, SINGLE)], &key, style);
    if as_bars {
        let panel = &frame.panels[0];
        let apart = panel.spot(ends.0 + gap, low).0 - panel.spot(ends.0, low).0;
        let width = (0.7 * apart).clamp(0.3 * style.unit(), 1.6 * style.unit());
        for entry in &entries {
            draw_bar(&mut frame, entry, width, median);
        }
    } else {
        draw_area(&mut frame, &entries, |e| e.nine_tenths, MEASURED_TINT);
        draw_area(&mut frame, &entries, |e| e.half, MEASURED_SHADE);
        frame.curve(0, entries.iter().map(|e| (e.index, e.median)), median);
    }
    for (entry, value) in entries.iter().filter_map(|e| e.observed().map(|value| (e, value))) {
        frame.canvas.disc(frame.panels[0].spot(entry.index, value), 0.65 * style.marker(), INK, 1.0);
    }
    if entries.is_empty() {
        frame.say(0, "no entry");
    }
    frame.finish("bands", caption(data, &entries), table(data))
}

fn draw_area(frame: &mut Frame, entries: &[&BandEntry], band: fn(&BandEntry) -> (f64, f64), colour: Colour) {
    let panel = &frame.panels[0];
    let mut corners: Vec<Spot> = entries.iter().map(|e| panel.spot(e.index, band(e).1)).collect();
    corners.extend(entries.iter().rev().map(|e| panel.spot(e.index, band(e).0)));
    frame.canvas.fill(corners, colour, 1.0);
}

fn draw_bar(frame: &mut Frame, entry: &BandEntry, width: f64, median: Pen) {
    let panel = &frame.panels[0];
    for ((low, high), part, colour) in [(entry.nine_tenths, 0.5, MEASURED_TINT), (entry.half, 1.0, MEASURED_SHADE)] {
        let (x, top) = panel.spot(entry.index, high);
        let (bottom, half) = (panel.spot(entry.index, low).1, part * width / 2.0);
        let corners = vec![(x - half, top), (x + half, top), (x + half, bottom), (x - half, bottom)];
        frame.canvas.fill(corners, colour, 1.0);
    }
    let (x, y) = panel.spot(entry.index, entry.median);
    frame.canvas.curve(vec![(x - width / 2.0, y), (x + width / 2.0, y)], median);
}

fn caption(data: &BandsData, entries: &[&BandEntry]) -> String {
    if entries.is_empty() {
        return format!("There is no estimate of {}.", data.quantity);
    }
    let values = if entries.len() == 1 { "one value".to_owned() } else { format!("{} values", count(entries.len())) };
    let mut parts = vec![format!(
        "Median of {} and the bands that hold 50 % and 90 % of its mass, for {values} of {}.",
        data.quantity, data.index_name
    )];
    let widest = entries.iter().max_by(|a, b| width(a).total_cmp(&width(b)));
    if let Some(entry) = widest {
        let unit = |unit: &Option<String>| unit.as_ref().map_or(String::new(), |unit| format!(" {unit}"));
        parts.push(format!(
            "The widest 90 % band, {}{}, is at {}{}.",
            significant(width(entry), 3),
            unit(&data.unit),
            significant(entry.index, 3),
            unit(&data.index_unit)
        ));
    }
    let observed: Vec<bool> = entries
        .iter()
        .filter_map(|e| e.observed().map(|value| (e.nine_tenths.0..=e.nine_tenths.1).contains(&value)))
        .collect();
    if !observed.is_empty() {
        let inside = observed.iter().filter(|inside| **inside).count() as f64 / observed.len() as f64;
        parts.push(format!("{} of the observed values lie in their 90 % band.", percent(inside)));
    }
    parts.join(" ")
}

/// Width of the band of nine tenths.
fn width(entry: &BandEntry) -> f64 {
    entry.nine_tenths.1 - entry.nine_tenths.0
}

fn table(data: &BandsData) -> Table {
    let mut table = Table::new(&["index", "p05", "p25", "median", "p75", "p95", "observed"]);
    for e in &data.entries {
        let row = [e.index, e.nine_tenths.0, e.half.0, e.median, e.half.1, e.nine_tenths.1];
        let [index, p05, p25, median, p75, p95] = row.map(|value| value.is_finite().then_some(value));
        table.push([index.into(), p05.into(), p25.into(), median.into(), p75.into(), p95.into(), e.observed().into()]);
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;

    fn data(n: u32, step: f64, scale: f64, is_observed: bool) -> BandsData {
        let entries = (0..n).map(|i| {
            let t = f64::from(i) * 6.0 / f64::from(n.max(2) - 1);
            let (median, spread) = (scale * (10.0 + t * libm::exp(-0.3 * t) * 20.0), scale * (0.5 + 0.4 * t));
            BandEntry {
                index: step * f64::from(i + 1),
                median,
                half: (median - 0.67 * spread, median + 0.7 * spread),
                nine_tenths: (median - 1.6 * spread, median + 1.9 * spread),
                observed: is_observed.then_some(median + spread * 1.1 * libm::sin(7.0 * t)),
            }
        });
        BandsData {
            quantity: "inflow".into(),
            unit: Some("m³/s".into()),
            index_name: "time since the storm".into(),
            index_unit: Some("h".into()),
            entries: entries.collect(),
        }
    }

    #[test]
    fn columns_of_every_kind_are_drawn_in_order() {
        let mut broken = data(12, 1.0, 1e-12, true);
        broken.entries[3].median = f64::NAN;
        broken.entries[4].observed = Some(f64::INFINITY);
        broken.entries.reverse();
        let mut constant = data(50, 0.1, 1.0, false);
        for e in &mut constant.entries {
            (e.median, e.half, e.nine_tenths) = (5.0, (5.0, 5.0), (5.0, 5.0));
        }
        let cases = [
            ("hours", data(120, 0.25, 1.0, true)),
            ("gauges", data(12, 1.0, 1.0, true)),
            ("plain", data(400, 1.0, 1e6, false)),
            ("broken", broken),
            ("constant", constant),
            ("one", data(1, 3.0, 1.0, false)),
            ("empty", data(0, 1.0, 1.0, false)),
        ];
        for (name, data) in cases {
            checks::check(&format!("bands-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// Observed values swing by 1.1 spreads: all inside the band, which reaches 1.6 down; the widest band is the last,
    /// (1.6 + 1.9) (0.5 + 0.4 * 6) = 10.15.
    #[test]
    fn the_caption_counts_what_the_bands_hold() {
        let mut data = data(100, 1.0, 1.0, true);
        let caption_of = |data: &BandsData| draw(data, &Style::default()).caption;
        assert!(caption_of(&data).contains("100 % of the observed"), "{}", caption_of(&data));
        assert!(caption_of(&data).contains("10.2 m³/s, is at 100 h"), "{}", caption_of(&data));
        for entry in &mut data.entries[..25] {
            entry.observed = Some(entry.nine_tenths.1 + 0.1);
        }
        assert!(caption_of(&data).contains("75 % of the observed"), "{}", caption_of(&data));
    }
}
