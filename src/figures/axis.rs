//! Axes: a range, how it is spaced, and as many labels as fit.
//!
//! An axis gets as many labels as fit beside each other. Long numbers lose their common power of ten, and a large
//! common offset, to the title: `flow − 10⁹ (10⁻³ m³/s)`.

use super::numbers::log10;
use super::numbers::significant;
use super::numbers::ten_to;
use super::text;
use super::text::Face;
use super::ticks::Marking;
use super::ticks::Tick;
use super::ticks::marking;

/// How values are spaced along an axis.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scale {
    /// Evenly.
    Linear,
    /// Evenly, ticks at whole numbers only.
    Whole,
    /// By their logarithm.
    Log,
}

/// The direction of an axis.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Along {
    /// From left to right: labels beside each other.
    Page,
    /// From bottom to top: labels above each other.
    Column,
}

/// Where the labels of an axis have to fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Room {
    /// Direction.
    pub along: Along,
    /// Length of the axis, points.
    pub length: f64,
    /// Text size of the labels, points.
    pub size: f64,
    /// Most labels, however much room there is.
    pub most: usize,
}

/// An axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    low: f64,
    high: f64,
    scale: Scale,
    marking: Marking,
}

impl Axis {
    /// The axis from `low` to `high` with as many labels as fit.
    ///
    /// A range that is empty, turned round or not finite is replaced by one that can be drawn: around the value if
    /// there is one, otherwise 0 to 1. On a log axis both ends become positive.
    #[must_use]
    pub fn new(low: f64, high: f64, scale: Scale, room: Room) -> Self {
        let (low, high) = drawable(low, high, scale);
        let mut chosen = marking(low, high, scale, 2);
        for most in (2..=room.most.max(2)).rev() {
            let trial = marking(low, high, scale, most);
            if fits(&trial, low, high, scale, room) {
                chosen = trial;
                break;
            }
        }
        if !fits(&chosen, low, high, scale, room) {
            for tick in chosen.ticks.iter_mut().skip(1) {
                tick.label.clear();
            }
        }
        let powers = log10(high / low).max(1.0);
        if room.length / powers < 2.0 * room.size {
            chosen.minor.clear();
        }
        Self { low, high, scale, marking: chosen }
    }

    /// Low end.
    #[must_use]
    pub fn low(&self) -> f64 {
        self.low
    }

    /// High end.
    #[must_use]
    pub fn high(&self) -> f64 {
        self.high
    }

    /// How values are spaced.
    #[must_use]
    pub fn scale(&self) -> Scale {
        self.scale
    }

    /// Ticks, labelled ones and ones without a label.
    #[must_use]
    pub fn ticks(&self) -> &[Tick] {
        &self.marking.ticks
    }

    /// Small ticks between.
    #[must_use]
    pub fn minor(&self) -> &[f64] {
        &self.marking.minor
    }

    /// Whether the axis shows `value`.
    #[must_use]
    pub fn shows(&self, value: f64) -> bool {
        (self.low..=self.high).contains(&value)
    }

    /// Place of `value` along the axis: 0 at the low end, 1 at the high end, between -10 and 11 outside; NaN stays.
    #[must_use]
    pub fn place(&self, value: f64) -> f64 {
        place(value, self.low, self.high, self.scale)
    }

    /// The value at a place between 0 and 1.
    #[must_use]
    pub fn value_at(&self, place: f64) -> f64 {
        if self.scale == Scale::Log {
            libm::pow(10.0, log10(self.low) + place * (log10(self.high) - log10(self.low)))
        } else {
            self.low + place * (self.high - self.low)
        }
    }

    /// `name` with the offset, power of ten and unit of the labels.
    #[must_use]
    pub fn title(&self, name: &str, unit: Option<&str>) -> String {
        let Marking { power, offset, .. } = self.marking;
        let mut title = name.to_owned();
        if offset != 0.0 {
            let sign = if offset > 0.0 { '−' } else { '+' };
            title = format!("{title} {sign} {}", significant(offset.abs(), 15));
        }
        match (power, unit.map(str::trim).filter(|unit| !unit.is_empty())) {
            (0, None) => title,
            (0, Some(unit)) => format!("{title} ({unit})"),
            (_, None) => format!("{title} ({})", ten_to(power)),
            (_, Some(unit)) => format!("{title} ({} {unit})", ten_to(power)),
        }
    }

    /// The axis with all ticks beyond `last` replaced by one at `at` that says `label`: a value out of the row.
    #[must_use]
    pub fn with_far_tick(mut self, last: f64, at: f64, label: &str) -> Self {
        self.marking.ticks.retain(|tick| tick.at <= last);
        self.marking.minor.retain(|&minor| minor <= last);
        self.marking.ticks.push(Tick { at, label: label.to_owned() });
        self
    }

    /// Width of the widest label, points.
    #[must_use]
    pub fn label_width(&self, size: f64) -> f64 {
        let widths = self.marking.ticks.iter().map(|tick| text::width(&tick.label, size, Face::Regular));
        widths.fold(0.0, f64::max)
    }
}

/// The range of finite `values`, widened by `share` of its length on both sides; `None` if there are none.
#[must_use]
pub fn padded_range(values: impl IntoIterator<Item = f64>, share: f64) -> Option<(f64, f64)> {
    let finite = values.into_iter().filter(|value| value.is_finite());
    let (low, high) = finite.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (low.min(v), high.max(v)));
    if low > high {
        return None;
    }
    let pad = share * (high - low);
    Some((low - pad, high + pad))
}

fn drawable(low: f64, high: f64, scale: Scale) -> (f64, f64) {
    let (mut low, mut high) = if low <= high { (low, high) } else { (high, low) };
    if !low.is_finite() || !high.is_finite() {
        (low, high) = if scale == Scale::Log { (0.1, 1.0) } else { (0.0, 1.0) };
    }
    // The ends of the number range itself are left out: steps and powers of ten have to stay inside it.
    (low, high) = (tame(low), tame(high));
    if scale == Scale::Log {
        high = if high > 0.0 { high } else { 1.0 };
        low = if low > 0.0 { low } else { high * 1e-6 };
        // Less than one part in a thousand is one value to the eye.
        if high / low < 1.001 { (low / 2.0, high * 2.0) } else { (low, high) }
    } else {
        let size = low.abs().max(high.abs());
        // Numbers this close share all but their last digits: there is nothing to draw between them.
        if high - low > 1e-13 * size {
            (low, high)
        } else if size == 0.0 {
            (-1.0, 1.0)
        } else {
            (low - 0.05 * size, high + 0.05 * size)
        }
    }
}

fn tame(value: f64) -> f64 {
    if value.abs() < 1e-280 { 0.0 } else { value.clamp(-1e280, 1e280) }
}

fn place(value: f64, low: f64, high: f64, scale: Scale) -> f64 {
    if scale == Scale::Log {
        if value <= 0.0 {
            return -10.0;
        }
        ((log10(value) - log10(low)) / (log10(high) - log10(low))).clamp(-10.0, 11.0)
    } else {
        ((value - low) / (high - low)).clamp(-10.0, 11.0)
    }
}

fn fits(marking: &Marking, low: f64, high: f64, scale: Scale, room: Room) -> bool {
    let spaces: Vec<(f64, f64)> = marking
        .ticks
        .iter()
        .filter(|tick| !tick.label.is_empty())
        .map(|tick| {
            let half = match room.along {
                Along::Page => text::width(&tick.label, room.size, Face::Regular) / 2.0 + 0.35 * room.size,
                Along::Column => 0.63 * room.size,
            };
            (place(tick.at, low, high, scale) * room.length, half)
        })
        .collect();
    spaces.windows(2).all(|pair| pair[1].0 - pair[0].0 >= pair[0].1 + pair[1].1)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn axis(low: f64, high: f64, scale: Scale) -> Axis {
        Axis::new(low, high, scale, Room { along: Along::Page, length: 200.0, size: 6.0, most: 6 })
    }

    fn labels(axis: &Axis) -> Vec<&str> {
        axis.ticks().iter().map(|tick| tick.label.as_str()).filter(|label| !label.is_empty()).collect()
    }

    #[test]
    fn ticks_are_round() {
        assert_eq!(labels(&axis(0.0, 1.0, Scale::Linear)), ["0.0", "0.2", "0.4", "0.6", "0.8", "1.0"]);
        assert_eq!(labels(&axis(-3.1, 3.2, Scale::Linear)), ["−2", "0", "2"]);
        assert_eq!(labels(&axis(0.0, 20_000.0, Scale::Linear)), ["0", "5000", "10,000", "15,000", "20,000"]);
        assert_eq!(labels(&axis(0.7, 4.3, Scale::Whole)), ["1", "2", "3", "4"]);
        assert_eq!(labels(&axis(1.0, 1e5, Scale::Log)), ["10⁰", "10¹", "10²", "10³", "10⁴", "10⁵"]);
        assert_eq!(labels(&axis(1e-196, 1.0, Scale::Log)), ["10⁻¹⁵⁰", "10⁻¹⁰⁰", "10⁻⁵⁰", "10⁰"]);
        assert_eq!(axis(1e-196, 1.0, Scale::Log).ticks().len(), 4, "no tick for every power");
        assert_eq!(labels(&axis(0.3, 7.0, Scale::Log)), ["0.5", "1", "2", "5"]);
        assert_eq!(labels(&axis(0.9, 1.1, Scale::Log)), ["0.90", "0.95", "1.00", "1.05", "1.10"]);
    }

    #[test]
    fn long_numbers_hand_their_power_and_offset_to_the_title() {
        let small = axis(1.2e-12, 5.9e-12, Scale::Linear);
        assert_eq!(labels(&small), ["2", "3", "4", "5"]);
        assert_eq!(small.title("leakage", Some("m³/s")), "leakage (10⁻¹² m³/s)");
        let large = axis(0.0, 4e9, Scale::Linear);
        assert_eq!(large.title("cost", None), "cost (10⁹)");
        let far = axis(1e9 + 0.1, 1e9 + 0.9, Scale::Linear);
        assert_eq!(labels(&far), ["0.2", "0.4", "0.6", "0.8"]);
        assert_eq!(far.title("level", Some("m")), "level − 10⁹ (m)");
        assert_eq!(axis(0.0, 1.0, Scale::Linear).title("share", None), "share");
    }

    /// Whatever the range, an axis has two ends, a tick, and labels that keep apart.
    #[test]
    fn every_range_can_be_drawn() {
        let mut ranges =
            vec![(0.0, 0.0), (5.0, 5.0), (f64::NAN, 1.0), (1.0, f64::INFINITY), (3.0, -2.0), (1e-300, 1.0)];
        ranges.extend([
            (-1e-12, 2e-12),
            (1e9, 1e9 + 1e-6),
            (1e300, 1.1e300),
            (0.999, 1.0),
            (0.21, 0.79),
            (-1e-320, 1e-320),
        ]);
        for (low, high) in ranges {
            for scale in [Scale::Linear, Scale::Whole, Scale::Log] {
                for length in [40.0, 90.0, 400.0] {
                    let room = Room { along: Along::Page, length, size: 6.0, most: 6 };
                    let axis = Axis::new(low, high, scale, room);
                    assert!(axis.low() < axis.high() && axis.low().is_finite() && axis.high().is_finite());
                    assert!(
                        fits(&axis.marking, axis.low(), axis.high(), scale, room),
                        "{low} {high} {scale:?}: {axis:?}"
                    );
                    assert!(axis.place(axis.low()).abs() < 1e-9 && (axis.place(axis.high()) - 1.0).abs() < 1e-9);
                    let middle = axis.value_at(0.5);
                    assert!((axis.place(middle) - 0.5).abs() < 1e-6, "{axis:?}");
                    let edge = 1e-6;
                    assert!(
                        axis.ticks().iter().all(|tick| (-edge..1.0 + edge).contains(&axis.place(tick.at))),
                        "{axis:?}"
                    );
                }
            }
        }
    }

    #[test]
    fn ranges_are_padded_and_skip_what_is_not_finite() {
        assert_eq!(padded_range([1.0, f64::NAN, 3.0, f64::INFINITY], 0.5), Some((0.0, 4.0)));
        assert_eq!(padded_range([f64::NAN], 0.5), None);
    }
}
