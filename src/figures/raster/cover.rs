//! How much of each pixel a shape covers.

use crate::figures::text::Spot;

/// Signed areas of a window of the picture, as differences along each row.
pub(super) struct Cover {
    left: f64,
    top: f64,
    width: usize,
    height: usize,
    /// Rows of `width + 2`: what falls to the right of the window lands in the last two.
    sums: Vec<f64>,
}

impl Cover {
    pub(super) fn new(left: usize, top: usize, width: usize, height: usize) -> Self {
        Self { left: left as f64, top: top as f64, width, height, sums: vec![0.0; (width + 2) * height] }
    }

    /// Adds a closed outline.
    pub(super) fn outline(&mut self, contour: &[Spot]) {
        for (i, &from) in contour.iter().enumerate() {
            self.edge(from, contour[(i + 1) % contour.len()]);
        }
    }

    /// The covered share of each pixel of a row, between 0 and 1.
    pub(super) fn shares(&self, row: usize) -> impl Iterator<Item = f64> {
        let mut sum = 0.0;
        self.sums[row * (self.width + 2)..][..self.width].iter().map(move |step| {
            sum += step;
            sum.abs().min(1.0)
        })
    }

    /// Adds the edge from `a` to `b`.
    fn edge(&mut self, a: Spot, b: Spot) {
        let (a, b) = ((a.0 - self.left, a.1 - self.top), (b.0 - self.left, b.1 - self.top));
        if a.1 == b.1 {
            return;
        }
        let (sign, (x0, y0), (x1, y1)) = if a.1 < b.1 { (1.0, a, b) } else { (-1.0, b, a) };
        let slope = (x1 - x0) / (y1 - y0);
        let (from, to) = (y0.max(0.0), y1.min(self.height as f64));
        let mut y = from;
        while y < to {
            let row = (y.floor() as usize).min(self.height - 1);
            let next = ((row + 1) as f64).min(to);
            self.piece(row, sign * (next - y), x0 + (y - y0) * slope, x0 + (next - y0) * slope);
            y = next;
        }
    }

    /// Adds a piece within one row: it runs from `x0` to `x1` and is `rise` high (signed).
    fn piece(&mut self, row: usize, rise: f64, x0: f64, x1: f64) {
        let most = self.width as f64;
        let (low, high) = if x0 < x1 {
            (x0.clamp(0.0, most), x1.clamp(0.0, most))
        } else {
            (x1.clamp(0.0, most), x0.clamp(0.0, most))
        };
        let row = &mut self.sums[row * (self.width + 2)..(row + 1) * (self.width + 2)];
        let mut add = |column: usize, rise: f64, middle: f64| {
            let inside = middle - column as f64;
            row[column] += rise * (1.0 - inside);
            row[column + 1] += rise * inside;
        };
        let (first, last) = (low.floor() as usize, high.floor() as usize);
        if first == last {
            add(first, rise, f64::midpoint(low, high));
            return;
        }
        let per_column = rise / (high - low);
        let mut x = low;
        for column in first..=last {
            let next = ((column + 1) as f64).min(high);
            add(column, per_column * (next - x), f64::midpoint(x, next));
            x = next;
        }
    }
}
