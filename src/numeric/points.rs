//! The memory layout of points: blocks of 128, a column per coordinate.

/// Points in a block. 128 doubles are one kibibyte: ten coordinates of a block stay in a first-level cache.
pub const BLOCK: usize = 128;

/// `n` points of `d` coordinates, in blocks of [`BLOCK`] with one contiguous column per coordinate.
///
/// # Shapes
/// Block `b` holds points `128 b` to `128 b + 127`; its columns follow each other. The slots of the last block
/// beyond `n` hold zeros after construction and are never read as points.
///
/// ```
/// use evenpoise::numeric::Points;
/// let mut points = Points::new(2);
/// points.push(&[1.0, 2.0]);
/// points.push(&[3.0, 4.0]);
/// assert_eq!(points.point(1), vec![3.0, 4.0]);
/// assert_eq!(&points.column(0, 1)[..2], &[2.0, 4.0]);
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Points {
    dim: usize,
    len: usize,
    data: Vec<f64>,
}

impl Points {
    /// No points yet, of `dim` coordinates.
    #[must_use]
    pub fn new(dim: usize) -> Self {
        Self { dim, len: 0, data: Vec::new() }
    }

    /// `len` points at the origin.
    #[must_use]
    pub fn zeros(dim: usize, len: usize) -> Self {
        Self { dim, len, data: vec![0.0; dim * len.div_ceil(BLOCK) * BLOCK] }
    }

    /// Points from rows laid end to end: `rows.len()` is a multiple of `dim`.
    #[must_use]
    pub fn from_rows(dim: usize, rows: &[f64]) -> Self {
        let mut points = Self::new(dim);
        for row in rows.chunks_exact(dim.max(1)) {
            points.push(row);
        }
        points
    }

    /// Coordinates of a point.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.dim
    }

    /// Number of points.
    #[must_use]
    pub fn len(&self) -> usize {
        self.len
    }

    /// Whether there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len == 0
    }

    /// Number of blocks, the last one perhaps partly filled.
    #[must_use]
    pub fn n_blocks(&self) -> usize {
        self.len.div_ceil(BLOCK)
    }

    /// How many points block `b` holds.
    #[must_use]
    pub fn block_len(&self, b: usize) -> usize {
        (self.len - b * BLOCK).min(BLOCK)
    }

    /// All columns of block `b`, one after the other: `dim * 128` numbers.
    #[must_use]
    pub fn block(&self, b: usize) -> &[f64] {
        let size = self.dim * BLOCK;
        &self.data[b * size..(b + 1) * size]
    }

    /// All columns of block `b`, to be written.
    pub fn block_mut(&mut self, b: usize) -> &mut [f64] {
        let size = self.dim * BLOCK;
        &mut self.data[b * size..(b + 1) * size]
    }

    /// Every block in turn, to be written (for work shared over cores).
    pub fn blocks_mut(&mut self) -> impl Iterator<Item = &mut [f64]> {
        self.data.chunks_exact_mut((self.dim * BLOCK).max(1))
    }

    /// Coordinate `j` of the 128 points of block `b`.
    #[must_use]
    pub fn column(&self, b: usize, j: usize) -> &[f64] {
        let at = (b * self.dim + j) * BLOCK;
        &self.data[at..at + BLOCK]
    }

    /// Coordinate `j` of the 128 points of block `b`, to be written.
    pub fn column_mut(&mut self, b: usize, j: usize) -> &mut [f64] {
        let at = (b * self.dim + j) * BLOCK;
        &mut self.data[at..at + BLOCK]
    }

    /// Coordinate `j` of point `i`.
    #[must_use]
    pub fn get(&self, i: usize, j: usize) -> f64 {
        self.data[self.index(i, j)]
    }

    /// Sets coordinate `j` of point `i`.
    pub fn set(&mut self, i: usize, j: usize, value: f64) {
        let at = self.index(i, j);
        self.data[at] = value;
    }

    /// Point `i` as a row.
    #[must_use]
    pub fn point(&self, i: usize) -> Vec<f64> {
        (0..self.dim).map(|j| self.get(i, j)).collect()
    }

    /// Copies point `i` into `out`, whose length is `dim`.
    pub fn copy_point(&self, i: usize, out: &mut [f64]) {
        for (j, slot) in out.iter_mut().enumerate() {
            *slot = self.get(i, j);
        }
    }

    /// Appends a point.
    pub fn push(&mut self, point: &[f64]) {
        debug_assert_eq!(point.len(), self.dim);
        if self.len.is_multiple_of(BLOCK) {
            self.data.resize(self.data.len() + self.dim * BLOCK, 0.0);
        }
        self.len += 1;
        for (j, &value) in point.iter().enumerate() {
            self.set(self.len - 1, j, value);
        }
    }

    /// Appends all points of `more`, which has the same `dim`.
    pub fn extend(&mut self, more: &Self) {
        let mut row = vec![0.0; self.dim];
        for i in 0..more.len {
            more.copy_point(i, &mut row);
            self.push(&row);
        }
    }

    /// The points named by `rows`, in that order.
    #[must_use]
    pub fn select(&self, rows: &[usize]) -> Self {
        let mut chosen = Self::zeros(self.dim, rows.len());
        for (to, &from) in rows.iter().enumerate() {
            for j in 0..self.dim {
                chosen.set(to, j, self.get(from, j));
            }
        }
        chosen
    }

    /// Coordinate `j` of every point, in order.
    #[must_use]
    pub fn coordinate(&self, j: usize) -> Vec<f64> {
        (0..self.len).map(|i| self.get(i, j)).collect()
    }

    fn index(&self, i: usize, j: usize) -> usize {
        debug_assert!(i < self.len && j < self.dim);
        ((i / BLOCK) * self.dim + j) * BLOCK + i % BLOCK
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn points_survive_block_borders() {
        let mut points = Points::new(3);
        for i in 0..300 {
            points.push(&[i as f64, -(i as f64), 0.5]);
        }
        assert_eq!(points.n_blocks(), 3);
        assert_eq!(points.block_len(2), 300 - 256);
        assert_eq!(points.point(129), vec![129.0, -129.0, 0.5]);
        assert_eq!(points.select(&[299, 0]).point(0), vec![299.0, -299.0, 0.5]);
        let mut twice = points.clone();
        twice.extend(&points);
        assert_eq!(twice.point(300), points.point(0));
        assert_eq!(twice.coordinate(0)[599], 299.0);
    }
}
