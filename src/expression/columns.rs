//! What a column runs over.

/// Names one kind of rows within a [`Scope`](super::Scope): the rows of a data file, the members of a group.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct RowsId(pub(super) u32);

/// One kind of rows: columns over the same kind can be combined row by row, others cannot.
#[derive(Debug, Clone, PartialEq)]
pub struct Rows {
    /// What they are, as errors should say it: "the rows of readings.csv", "the members of effect".
    pub description: String,
    /// How many there are.
    pub len: usize,
}
