//! Axes: a range, how it is spaced, where its ticks stand and what they say.
//!
//! An axis gets as many labels as fit beside each other. Long numbers lose their common power of ten, and a large
//! common offset, to the title: `flow − 10⁹ (10⁻³ m³/s)`.

use super::numbers::exponent_of;
use super::numbers::fixed;
use super::numbers::fixed_grouped;
use super::numbers::log10;
use super::numbers::power_of_ten;
use super::numbers::significant;
use super::numbers::ten_to;
use super::text;
use super::text::Face;

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

/// A labelled tick.
#[derive(Debug, Clone, PartialEq)]
pub struct Tick {
    /// Its value.
    pub at: f64,
    /// What stands beside it; empty for a tick without a label.
    pub label: String,
}

/// An axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    low: f64,
    high: f64,
    scale: Scale,
    marking: Marking,
}

/// Ticks of an axis and what its title has to say about them.
#[derive(Debug, Clone, PartialEq)]
struct Marking {
    ticks: Vec<Tick>,
    minor: Vec<f64>,
    power: i32,
    offset: f64,
}

impl Axis {
    /// The axis from `low` to `high` with as many labels as fit.
    ///
    /// A range that is empty, turned round or not finite is replaced by one that can be drawn: around the value if
    /// there is one, otherwise 0 to 1. On a log axis both ends become positive.
    #[must_use]
    pub fn new(low: f64, high: f64, scale: Scale, room: Room) -> Self {
        let (low, high) = drawable(low, high, scale);
        let mut marking = marking(low, high, scale, 2);
        for most in (2..=room.most.max(2)).rev() {
            let trial = self::marking(low, high, scale, most);
            if fits(&trial, low, high, scale, room) {
                marking = trial;
                break;
            }
        }
        if !fits(&marking, low, high, scale, room) {
            for tick in marking.ticks.iter_mut().skip(1) {
                tick.label.clear();
            }
        }
        let powers = log10(high / low).max(1.0);
        if room.length / powers < 2.0 * room.size {
            marking.minor.clear();
        }
        Self { low, high, scale, marking }
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

fn marking(low: f64, high: f64, scale: Scale, most: usize) -> Marking {
    match scale {
        Scale::Linear => linear(low, high, most, false),
        Scale::Whole => linear(low, high, most, true),
        Scale::Log => logarithmic(low, high, most),
    }
}

/// Round values of a range: every multiple of `multiple * 10^power` in it.
fn multiples(low: f64, high: f64, multiple: f64, power: i32) -> Vec<f64> {
    // Whole multiples are divided by, or multiplied with, an exact power: 3 * 0.1 is not 0.3.
    let value = |i: f64| {
        if power >= 0 { i * multiple * power_of_ten(power) } else { i * multiple / power_of_ten(-power) }
    };
    let step = multiple * power_of_ten(power);
    let slack = 1e-9 * (high - low);
    let first = ((low - slack) / step).ceil();
    (0..60).map(|i| value(first + f64::from(i))).take_while(|&v| v <= high + slack).collect()
}

/// Ticks at multiples of 1, 2, 2.5 or 5 times a power of ten, at most `most` of them labelled.
fn linear(low: f64, high: f64, most: usize, whole: bool) -> Marking {
    let around = exponent_of(high - low);
    let mut best: Option<(Vec<f64>, i32)> = None;
    // From the coarsest step down, the last one with few enough ticks wins.
    for power in ((around - 2)..=around).rev() {
        for multiple in [5.0, 2.5, 2.0, 1.0] {
            if whole && (power < 0 || (multiple == 2.5 && power < 1)) {
                continue;
            }
            let ticks = multiples(low, high, multiple, power);
            let finest = power - i32::from(multiple == 2.5);
            if ticks.len() >= 2 && (ticks.len() <= most || best.is_none()) {
                best = Some((ticks, finest));
            }
        }
    }
    let (values, finest) = best.unwrap_or_else(|| {
        let only = if whole { low.ceil() } else { low };
        (vec![only.min(high)], around - 1)
    });
    let mut marking = labelled(&values, finest);
    let last = marking.ticks.len() - 1;
    if marking.ticks.len() > most {
        for tick in &mut marking.ticks[1..last] {
            tick.label.clear();
        }
    }
    marking
}

/// Labels with a common number of decimals, power and offset; `finest` is the power of ten of their last digit.
fn labelled(values: &[f64], finest: i32) -> Marking {
    let largest = values.iter().fold(0.0_f64, |most, value| most.max(value.abs()));
    let spread = values.iter().fold(0.0_f64, |most, value| most.max((value - values[0]).abs()));
    let mut offset = 0.0;
    let mut shown: Vec<f64> = values.to_vec();
    if spread > 0.0 && largest > 0.0 && exponent_of(largest) - finest > 5 {
        let coarse = power_of_ten(exponent_of(spread) + 1);
        offset = (values[0] / coarse).floor() * coarse;
        shown = values.iter().map(|value| value - offset).collect();
    }
    let largest = shown.iter().fold(0.0_f64, |most, value| most.max(value.abs()));
    let exponent = if largest > 0.0 { exponent_of(largest * (1.0 + 1e-12)) } else { 0 };
    let power = if (-3..5).contains(&exponent) && finest >= -5 { 0 } else { exponent };
    let decimals = (power - finest).max(0) as usize;
    let label = |value: f64| {
        let scaled = if power >= 0 { value / power_of_ten(power) } else { value * power_of_ten(-power) };
        fixed_grouped(scaled, decimals)
    };
    let ticks = values.iter().zip(&shown).map(|(&at, &value)| Tick { at, label: label(value) }).collect();
    Marking { ticks, minor: Vec::new(), power, offset }
}

/// Ticks at powers of ten; at 1, 2 and 5 times them in a range of less than two powers; evenly in one below a factor 3.
fn logarithmic(low: f64, high: f64, most: usize) -> Marking {
    let (first, last) = ((log10(low) - 1e-9).ceil() as i32, (log10(high) + 1e-9).floor() as i32);
    if last - first >= 2 || (last - first == 1 && most <= 3) {
        let stride = [1, 2, 3, 5, 10, 20, 50, 100, 200]
            .into_iter()
            .find(|stride| ((last - first) / stride) as usize + 1 <= most)
            .unwrap_or(500);
        let powers: Vec<i32> = (first..=last).collect();
        let plain = first >= -2 && last <= 3;
        let say = |power: i32| match power {
            _ if power.rem_euclid(stride) != first.rem_euclid(stride) => String::new(),
            _ if plain => fixed(power_of_ten(power), (-power).max(0) as usize),
            _ => ten_to(power),
        };
        let ticks = powers.iter().map(|&power| Tick { at: power_of_ten(power), label: say(power) }).collect();
        let mut minor = Vec::new();
        if last - first <= 7 {
            let between = (first - 1..=last).flat_map(|power| (2..10).map(move |m| f64::from(m) * power_of_ten(power)));
            minor = between.filter(|value| (low..=high).contains(value)).collect();
        }
        return Marking { ticks, minor, power: 0, offset: 0.0 };
    }
    if high / low < 3.0 {
        return linear(low, high, most, false);
    }
    let decade = exponent_of(low);
    let steps: [&[f64]; 3] = [&[1.0, 2.0, 5.0], &[1.0, 3.0], &[1.0]];
    for steps in steps {
        let between = (decade..=decade + 3).flat_map(|power| steps.iter().map(move |m| m * power_of_ten(power)));
        let values: Vec<f64> = between.filter(|value| (low..=high).contains(value)).collect();
        if (2..=most).contains(&values.len()) {
            let mut marking = labelled(&values, exponent_of(values[0]));
            for tick in &mut marking.ticks {
                // A power of ten needs no zeros behind the point: 0.5, 1, 2.
                if tick.label.contains('.') {
                    tick.label = tick.label.trim_end_matches('0').trim_end_matches('.').to_owned();
                }
            }
            return marking;
        }
    }
    linear(low, high, most, false)
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
