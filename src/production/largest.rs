//! The largest of many numbers: the tail, whoever met it.

use super::numbers;
use serde::Deserialize;
use serde::Serialize;

/// The `room` largest of all numbers seen, as a multiset: order of adding and of merging do not matter.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Largest {
    room: usize,
    /// At most `2 room` numbers; the largest ones are among them.
    #[serde(with = "numbers")]
    values: Vec<f64>,
    /// Numbers at or below it cannot be among the largest.
    #[serde(skip, default = "nothing")]
    floor: f64,
}

fn nothing() -> f64 {
    f64::NEG_INFINITY
}

impl Largest {
    /// None yet, and room for so many.
    #[must_use]
    pub fn new(room: usize) -> Self {
        Self { room, values: Vec::new(), floor: nothing() }
    }

    /// Looks at a number. Zeros, negative numbers and NaN are no part of a tail.
    #[inline]
    pub fn add(&mut self, x: f64) {
        if x > self.floor && x > 0.0 {
            self.values.push(x);
            if self.values.len() >= 2 * self.room {
                self.shrink();
            }
        }
    }

    /// Looks at all that another one holds.
    pub fn merge(&mut self, other: &Self) {
        other.values.iter().for_each(|&x| self.add(x));
    }

    /// The largest, from the top.
    #[must_use]
    pub fn sorted(&self) -> Vec<f64> {
        let mut values = self.values.clone();
        values.sort_unstable_by(|a, b| b.total_cmp(a));
        values.truncate(self.room);
        values
    }

    /// The very largest; zero where there is none.
    #[must_use]
    pub fn top(&self) -> f64 {
        self.values.iter().copied().fold(0.0, f64::max)
    }

    /// Puts the numbers into the one order that a file shows.
    pub fn settle(&mut self) {
        self.values = self.sorted();
    }

    fn shrink(&mut self) {
        if self.room > 0 {
            self.values.select_nth_unstable_by(self.room - 1, |a, b| b.total_cmp(a));
            self.floor = self.values[self.room - 1];
        }
        self.values.truncate(self.room);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

        #[test]
        fn the_same_are_kept_in_any_order(values in prop::collection::vec(-1.0_f64..20.0, 0..200), room in 1_usize..20, at in 0_usize..200) {
            let values: Vec<f64> = values.iter().map(|x| x.round()).collect();
            let (left, right) = values.split_at(at.min(values.len()));
            let of = |part: &[f64]| {
                let mut largest = Largest::new(room);
                part.iter().for_each(|&x| largest.add(x));
                largest
            };
            let mut merged = of(right);
            merged.merge(&of(left));
            let mut want: Vec<f64> = values.iter().copied().filter(|&x| x > 0.0).collect();
            want.sort_by(|a, b| b.total_cmp(a));
            want.truncate(room);
            prop_assert_eq!(merged.sorted(), want.clone());
            prop_assert_eq!(of(&values).sorted(), want.clone());
            prop_assert_eq!(merged.top(), want.first().copied().unwrap_or(0.0));
        }
    }
}
