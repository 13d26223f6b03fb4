//! Where the ticks of an axis stand and what they say.

use super::axis::Scale;
use super::numbers::exponent_of;
use super::numbers::fixed;
use super::numbers::fixed_grouped;
use super::numbers::log10;
use super::numbers::power_of_ten;
use super::numbers::ten_to;

/// A labelled tick.
#[derive(Debug, Clone, PartialEq)]
pub struct Tick {
    /// Its value.
    pub at: f64,
    /// What stands beside it; empty for a tick without a label.
    pub label: String,
}

/// Ticks of an axis and what its title has to say about them.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Marking {
    pub(super) ticks: Vec<Tick>,
    /// Small ticks between.
    pub(super) minor: Vec<f64>,
    /// Power of ten that the labels leave out.
    pub(super) power: i32,
    /// What the labels leave out before that.
    pub(super) offset: f64,
}

/// Most powers of ten in a range that all get a tick.
const MOST_POWERS: i32 = 30;

/// Ticks of the range, at most `most` of them labelled.
pub(super) fn marking(low: f64, high: f64, scale: Scale, most: usize) -> Marking {
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
        (vec![only.min(high)], if whole { 0 } else { around - 1 })
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
        // A rounder number is worth a digit more in the labels.
        let coarse = power_of_ten(exponent_of(spread) + 2);
        offset = (values[values.len() / 2] / coarse).round() * coarse;
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
            .find(|stride| ((last - first) / stride) < most as i32)
            .unwrap_or(500);
        let powers = first..=last;
        let plain = first >= -2 && last <= 3;
        // Wide strides stand at round powers, 0, −50, −100, without small ticks between.
        let start = if stride > 3 { 0 } else { first };
        let is_said = |power: i32| (power - start).rem_euclid(stride) == 0;
        let say = |power: i32| match power {
            _ if !is_said(power) => String::new(),
            _ if plain => fixed(power_of_ten(power), (-power).max(0) as usize),
            _ => ten_to(power),
        };
        let shown = powers.filter(|&power| last - first <= MOST_POWERS || is_said(power));
        let ticks = shown.map(|power| Tick { at: power_of_ten(power), label: say(power) }).collect();
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
