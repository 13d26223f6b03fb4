//! Weighted counts in fixed bins: quantiles that can be pooled.

use serde::Deserialize;
use serde::Deserializer;
use serde::Serialize;
use serde::Serializer;
use serde::de::Error;

/// Bins of an estimate. The first and the last are open.
pub const BINS: usize = 4096;
/// Weights are counted in whole multiples of `2^-64`, their squares in multiples of `2^-32`: whole numbers add up in any order.
const UNIT: f64 = 18_446_744_073_709_551_616.0;
const SQUARE_UNIT: f64 = 4_294_967_296.0;
/// A weight this many times the mean has no place in a count that 10^11 draws may be added to.
const LARGEST: f64 = 4_294_967_296.0;
/// Normal quantile of a two-sided 95 % interval.
const TWO_SIDED_95: f64 = 1.959_963_984_540_054;

/// The inner borders of the bins, ascending: bin `b` holds what lies from border `b - 1` up to below border `b`.
///
/// They are the weighted quantiles `k / 4096` of earlier draws, `values` with `weights`; where those repeat there are fewer.
/// Empty where nothing has weight, or every value is the same.
#[must_use]
pub fn borders(values: &[f64], weights: &[f64]) -> Vec<f64> {
    let mut order: Vec<usize> = (0..values.len()).filter(|&i| weights[i] > 0.0 && values[i].is_finite()).collect();
    order.sort_by(|&a, &b| values[a].total_cmp(&values[b]));
    let total: f64 = order.iter().map(|&i| weights[i]).sum();
    let mut borders: Vec<f64> = Vec::new();
    // Between the middles of two neighbours' weights the value runs from one to the other.
    let (mut k, mut below) = (1, 0.0);
    let mut last: Option<(f64, f64)> = None;
    for &i in &order {
        let middle = (below + 0.5 * weights[i]) / total;
        below += weights[i];
        while k < BINS && k as f64 / (BINS as f64) < middle {
            let p = k as f64 / BINS as f64;
            let value = match last {
                Some((p0, x0)) if middle > p0 => x0 + (values[i] - x0) * ((p - p0) / (middle - p0)),
                _ => values[i],
            };
            if borders.last().is_none_or(|&b| value > b) {
                borders.push(value);
            }
            k += 1;
        }
        last = Some((middle, values[i]));
    }
    if borders.len() < 2 { Vec::new() } else { borders }
}

/// Weights, and their squares, that fell into each bin.
#[derive(Debug, Clone, PartialEq)]
pub struct Bins {
    mass: Vec<u128>,
    square: Vec<u128>,
    /// A weight was too large to be counted: no quantile can be given.
    overflow: bool,
}

/// A quantile with its 95 % interval, as wide as its bins.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Quantile {
    /// The quantile.
    pub value: f64,
    /// Its interval.
    pub interval_95: [f64; 2],
}

impl Bins {
    /// Empty bins between so many borders.
    #[must_use]
    pub fn new(borders: usize) -> Self {
        Self { mass: vec![0; borders + 1], square: vec![0; borders + 1], overflow: false }
    }

    /// Counts a value of a weight, which is not negative.
    #[inline]
    pub fn add(&mut self, borders: &[f64], value: f64, weight: f64) {
        if !(weight < LARGEST) {
            self.overflow = true;
            return;
        }
        let bin = borders.partition_point(|&border| border <= value);
        self.mass[bin] += (weight * UNIT) as u128;
        self.square[bin] += (weight * weight * SQUARE_UNIT) as u128;
    }

    /// Adds all that others hold between the same borders.
    pub fn merge(&mut self, other: &Self) {
        self.mass.iter_mut().zip(&other.mass).for_each(|(a, b)| *a += b);
        self.square.iter_mut().zip(&other.square).for_each(|(a, b)| *a += b);
        self.overflow |= other.overflow;
    }

    /// Number of bins.
    #[must_use]
    pub fn len(&self) -> usize {
        self.mass.len()
    }

    /// Never: there is at least one bin.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.mass.is_empty()
    }

    /// The quantile `p`; none where it, or an end of its interval, lies in an open bin.
    ///
    /// The distribution function at a border is a ratio of sums, whose error is
    /// `sqrt(sum w^2 (1{below} - p)^2) / sum w`; the quantiles at `p -+ 1.96` errors, moved out to the borders of their
    /// bins, are the ends of the interval.
    ///
    /// # Source
    /// R. S. Woodruff, "Confidence intervals for medians and other position measures", J. Am. Stat. Assoc. 47 (1952) 635-646.
    #[must_use]
    pub fn quantile(&self, borders: &[f64], p: f64) -> Option<Quantile> {
        let total: u128 = self.mass.iter().sum();
        if self.overflow || total == 0 || borders.is_empty() {
            return None;
        }
        let (bin, within) = self.place(p, total);
        if bin == 0 || bin == borders.len() {
            return None;
        }
        let sum = |squares: &[u128]| squares.iter().sum::<u128>() as f64 / SQUARE_UNIT;
        let (below, above) = (sum(&self.square[..=bin]), sum(&self.square[bin + 1..]));
        let error = (below * (1.0 - p) * (1.0 - p) + above * p * p).sqrt() / (total as f64 / UNIT);
        let (low, _) = self.place(p - TWO_SIDED_95 * error, total);
        let (high, _) = self.place(p + TWO_SIDED_95 * error, total);
        if low == 0 || high == borders.len() {
            return None;
        }
        let value = borders[bin - 1] + within * (borders[bin] - borders[bin - 1]);
        Some(Quantile { value, interval_95: [borders[low - 1], borders[high]] })
    }

    /// The bin where the distribution function passes `p`, and how far into it.
    fn place(&self, p: f64, total: u128) -> (usize, f64) {
        let wanted = p * total as f64;
        let mut below = 0_u128;
        for (bin, &mass) in self.mass.iter().enumerate() {
            if mass > 0 && (below + mass) as f64 >= wanted {
                let within = ((wanted - below as f64) / mass as f64).clamp(0.0, 1.0);
                return (bin, within);
            }
            below += mass;
        }
        (self.mass.len() - 1, 1.0)
    }
}

/// `bin:mass:square` for every bin that is not empty, in hexadecimal; `!` first where a weight overflowed.
impl Serialize for Bins {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        let mut text = format!("{:x}{}", self.mass.len(), if self.overflow { " !" } else { "" });
        for (bin, (mass, square)) in self.mass.iter().zip(&self.square).enumerate() {
            if *mass > 0 || *square > 0 {
                text.push_str(&format!(" {bin:x}:{mass:x}:{square:x}"));
            }
        }
        serializer.serialize_str(&text)
    }
}

impl<'de> Deserialize<'de> for Bins {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = String::deserialize(deserializer)?;
        read(&text).ok_or_else(|| D::Error::custom("these are no weighted counts in bins"))
    }
}

fn read(text: &str) -> Option<Bins> {
    let mut words = text.split_ascii_whitespace();
    let bins = usize::from_str_radix(words.next()?, 16).ok().filter(|&n| (1..=BINS).contains(&n))?;
    let mut read = Bins::new(bins - 1);
    for word in words {
        if word == "!" {
            read.overflow = true;
            continue;
        }
        let mut parts = word.split(':');
        let bin = usize::from_str_radix(parts.next()?, 16).ok().filter(|&bin| bin < bins)?;
        read.mass[bin] = u128::from_str_radix(parts.next()?, 16).ok()?;
        read.square[bin] = u128::from_str_radix(parts.next()?, 16).ok()?;
    }
    Some(read)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::Stream;
    use crate::numeric::normal;
    use crate::numeric::{Purpose, stream};

    fn draws(n: usize, rng: &mut Stream) -> Vec<(f64, f64)> {
        // Drawn from N(0, 1.3^2), weighted to N(0, 1).
        let weight = |x: f64| 1.3 * crate::numeric::exp(-0.5 * x * x + 0.5 * (x / 1.3) * (x / 1.3));
        (0..n).map(|_| 1.3 * normal::draw(rng)).map(|x| (x, weight(x))).collect()
    }

    /// 400 repetitions of 4,000 weighted draws in bins laid out by 2,000 others: at least 363 intervals of each quantile hold the
    /// truth (false alarm 2e-4 each at 95 %).
    #[test]
    fn intervals_cover_the_quantiles() {
        let truths = [(0.05, -1.644_853_626_951_472_8), (0.5, 0.0), (0.9, 1.281_551_565_544_600_5)];
        let mut inside = [0; 3];
        for repetition in 0..400 {
            let mut rng = stream(3, Purpose::Trial, repetition, 0);
            let (values, weights): (Vec<f64>, Vec<f64>) = draws(2000, &mut rng).into_iter().unzip();
            let borders = borders(&values, &weights);
            let mut bins = Bins::new(borders.len());
            draws(4000, &mut rng).into_iter().for_each(|(x, w)| bins.add(&borders, x, w));
            for (count, (p, truth)) in inside.iter_mut().zip(truths) {
                let quantile = bins.quantile(&borders, p).unwrap();
                let [low, high] = quantile.interval_95;
                assert!(low <= quantile.value && quantile.value <= high && high - low < 0.6);
                *count += i32::from(low <= truth && truth <= high);
            }
        }
        assert!(inside.iter().all(|&count| count >= 363), "{inside:?} of 400");
    }

    #[test]
    fn open_bins_give_no_quantile() {
        let values: Vec<f64> = (0..5000).map(f64::from).collect();
        let borders = borders(&values, &vec![1.0; 5000]);
        assert!(borders.windows(2).all(|pair| pair[0] < pair[1]) && borders.len() == BINS - 1);
        let mut bins = Bins::new(borders.len());
        values.iter().for_each(|&x| bins.add(&borders, x, 0.5));
        assert!(bins.quantile(&borders, 1e-5).is_none() && bins.quantile(&borders, 1.0 - 1e-5).is_none());
        assert!((bins.quantile(&borders, 0.25).unwrap().value - 1250.0).abs() < 3.0);
        bins.add(&borders, 3.0, f64::INFINITY);
        assert!(bins.quantile(&borders, 0.5).is_none());
        assert!(super::borders(&[1.0; 9], &[1.0; 9]).is_empty() && super::borders(&[], &[]).is_empty());
    }

    #[test]
    fn counts_are_the_same_in_any_order_and_read_back() {
        let mut rng = stream(5, Purpose::Trial, 0, 0);
        let all = draws(600, &mut rng);
        let (values, weights): (Vec<f64>, Vec<f64>) = all.iter().copied().unzip();
        let borders = borders(&values, &weights);
        let of = |part: &[(f64, f64)]| {
            let mut bins = Bins::new(borders.len());
            part.iter().for_each(|&(x, w)| bins.add(&borders, x, w));
            bins
        };
        let mut merged = of(&all[200..]);
        merged.merge(&of(&all[..200]));
        assert_eq!(merged, of(&all));
        let text = serde_json::to_string(&merged).unwrap();
        assert_eq!(serde_json::from_str::<Bins>(&text).unwrap(), merged);
        for text in ["\"\"", "\"0\"", "\"2 5:1:1\"", "\"2 0:1\"", "\"2 0:x:1\""] {
            assert!(serde_json::from_str::<Bins>(text).is_err(), "{text}");
        }
    }
}
