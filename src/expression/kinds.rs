//! The operations of which every formula is made.

use super::columns::RowsId;

/// Place of an operation in [`Operations`]; its arguments have smaller ones.
pub(super) type Id = u32;

/// Functions of one number.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub(super) enum Unary {
    Negate,
    Not,
    Square,
    WholePower(i32),
    Exp,
    Ln,
    Log10,
    Log1p,
    Expm1,
    Sqrt,
    Abs,
    Floor,
    Ceil,
    Round,
    Sin,
    Cos,
    Tan,
    Asin,
    Acos,
    Atan,
    Sinh,
    Cosh,
    Tanh,
    LnGamma,
    LnGammaPositive,
    LnGammaHalfStep,
    Erf,
    Erfc,
    NormalCdf,
    NormalQuantile,
    LogNormalTail,
    Logistic,
    Logit,
    Softplus,
    Present,
    IsFraction,
}

/// Functions of two numbers. Conditions are 1 and 0; a comparison with an undefined side is 0.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub(super) enum Binary {
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
    Atan2,
    Hypot,
    Minimum,
    Maximum,
    /// The smaller of the two that are defined: margins of events joined by `or`.
    MinimumDefined,
    LogAddExp,
    XLogY,
    XLog1pY,
    LnRising,
    Less,
    LessEqual,
    Equal,
    Differ,
    And,
    Or,
}

/// Ways to make one number of a column.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub(super) enum Reduction {
    Sum,
    Minimum,
    Maximum,
    LogSumExp,
}

/// One operation. Floating-point constants are told apart by their bits.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub(super) enum Op {
    Constant(u64),
    /// A column of numbers known before any point is.
    Data(u32),
    /// An input of the program.
    Input(u32),
    /// In row `r`, input `first + r`.
    InputRow {
        first: u32,
        rows: RowsId,
    },
    /// In row `r`, input `first + members[table][r]`.
    InputMember {
        first: u32,
        table: u32,
    },
    Unary(Unary, Id),
    Binary(Binary, Id, Id),
    /// The second argument where the first is not zero, else the third.
    Select(Id, Id, Id),
    /// The value in the row before; in the first row `first`.
    Lag {
        of: Id,
        first: Id,
        rows: RowsId,
    },
    Reduce(Reduction, Id),
}

/// An operation and what is known of its result.
#[derive(Debug, Clone, Copy)]
pub(super) struct Entry {
    pub(super) op: Op,
    /// The rows it runs over; `None` for one number.
    pub(super) rows: Option<RowsId>,
    /// Whether it depends on the inputs.
    pub(super) varies: bool,
}
