//! Places on the page: rectangles, and positions moved apart.

use super::text::Spot;

/// A rectangle on the page, in points.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Area {
    /// Left edge.
    pub left: f64,
    /// Top edge.
    pub top: f64,
    /// Right edge.
    pub right: f64,
    /// Bottom edge.
    pub bottom: f64,
}

impl Area {
    /// Width, in points.
    #[must_use]
    pub fn width(&self) -> f64 {
        self.right - self.left
    }

    /// Height, in points.
    #[must_use]
    pub fn height(&self) -> f64 {
        self.bottom - self.top
    }

    /// Whether the two rectangles share more than an edge.
    #[must_use]
    pub fn overlaps(&self, other: &Self) -> bool {
        self.left < other.right && other.left < self.right && self.top < other.bottom && other.top < self.bottom
    }

    /// Whether `other` lies inside.
    #[must_use]
    pub fn holds(&self, other: &Self) -> bool {
        self.left <= other.left && other.right <= self.right && self.top <= other.top && other.bottom <= self.bottom
    }

    /// Whether the spot lies inside or on the edge.
    #[must_use]
    pub fn has(&self, (x, y): Spot) -> bool {
        (self.left..=self.right).contains(&x) && (self.top..=self.bottom).contains(&y)
    }
}

/// Moves `wanted` positions (in rising order) apart until neighbours are `gap[i]` from each other (between `i` and
/// `i + 1`), inside `[low, high]` where there is room; the moves are as small as a few passes make them.
#[must_use]
pub fn spread(wanted: &[f64], gaps: &[f64], low: f64, high: f64) -> Vec<f64> {
    let mut places: Vec<f64> = wanted.iter().map(|&at| at.clamp(low, high.max(low))).collect();
    for _ in 0..200 {
        for i in 1..places.len() {
            let lack = gaps[i - 1] - (places[i] - places[i - 1]);
            if lack > 0.0 {
                places[i - 1] -= lack / 2.0;
                places[i] += lack / 2.0;
            }
        }
        if let Some(first) = places.first_mut() {
            *first = first.max(low);
        }
        if let Some(last) = places.last_mut() {
            *last = last.min(high);
        }
    }
    // One pass each way settles what the halving left over: first from above, then, decisively, from below.
    for i in (1..places.len()).rev() {
        places[i - 1] = places[i - 1].min(places[i] - gaps[i - 1]);
    }
    if let Some(first) = places.first_mut() {
        *first = first.max(low);
    }
    for i in 1..places.len() {
        places[i] = places[i].max(places[i - 1] + gaps[i - 1]);
    }
    places
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn spread_keeps_the_gaps_and_the_order() {
        let places = spread(&[5.0, 5.0, 5.1, 90.0], &[10.0, 10.0, 10.0], 0.0, 100.0);
        assert!(places.windows(2).all(|pair| pair[1] - pair[0] >= 10.0 - 1e-9), "{places:?}");
        assert!(places[0] >= 0.0 && (places[3] - 90.0).abs() < 1e-9);
        let high = spread(&[99.0, 100.0], &[10.0], 0.0, 100.0);
        assert!((high[1] - high[0] - 10.0).abs() < 1e-9 && high[1] <= 100.0 + 1e-9, "{high:?}");
        assert!(spread(&[], &[], 0.0, 1.0).is_empty());
    }

    #[test]
    fn rectangles_overlap_hold_and_touch() {
        let area = |left, right| Area { left, top: 0.0, right, bottom: 10.0 };
        assert!(area(0.0, 5.0).overlaps(&area(4.0, 9.0)));
        assert!(!area(0.0, 5.0).overlaps(&area(5.0, 9.0)), "a common edge is no overlap");
        assert!(area(0.0, 9.0).holds(&area(2.0, 9.0)) && !area(0.0, 9.0).holds(&area(2.0, 9.1)));
        assert!(area(0.0, 5.0).has((5.0, 10.0)) && !area(0.0, 5.0).has((5.1, 1.0)));
    }
}
