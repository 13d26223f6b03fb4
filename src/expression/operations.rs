//! The operations of which every formula is made, and the shared list in which each stands once.

use std::collections::HashMap;
use std::collections::HashSet;

use super::columns::RowsId;
use super::forward::{Operand, Row, binary_long, finish_log_sum_exp, reduce_row, select, unary_long};

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

/// All operations of a program, each once (hash consing), arguments before results. What depends on no input is
/// evaluated on entry: numbers become constants, columns become data.
#[derive(Debug, Clone, Default)]
pub(super) struct Operations {
    entries: Vec<Entry>,
    seen: HashMap<Op, Id>,
    separable: HashSet<Id>,
    /// Length of every kind of rows.
    pub(super) row_counts: Vec<usize>,
    /// Data columns; [`Op::Data`] points here.
    pub(super) data: Vec<Vec<f64>>,
    data_rows: Vec<RowsId>,
    /// Which member each row belongs to; [`Op::InputMember`] points here.
    pub(super) members: Vec<Vec<u32>>,
    member_rows: Vec<RowsId>,
}

/// What a sum was taken out of, to be put back around it.
enum Outside {
    Negated,
    Times(Id),
    Over(Id),
    Plus(Id),
    Minus(Id),
    From(Id),
}

impl Operations {
    pub(super) fn len(&self) -> usize {
        self.entries.len()
    }

    pub(super) fn entry(&self, id: Id) -> Entry {
        self.entries[id as usize]
    }

    fn rows(&self, id: Id) -> Option<RowsId> {
        self.entry(id).rows
    }

    /// How many rows `rows` has.
    pub(super) fn row_count(&self, rows: RowsId) -> usize {
        self.row_counts[rows.0 as usize]
    }

    /// The value of a constant.
    pub(super) fn as_constant(&self, id: Id) -> Option<f64> {
        match self.entry(id).op {
            Op::Constant(bits) => Some(f64::from_bits(bits)),
            _ => None,
        }
    }

    pub(super) fn constant(&mut self, value: f64) -> Id {
        self.add(Op::Constant(value.to_bits()), None, false)
    }

    pub(super) fn data(&mut self, rows: RowsId, values: Vec<f64>) -> Id {
        let id = self.add(Op::Data(self.data.len() as u32), Some(rows), false);
        self.data.push(values);
        self.data_rows.push(rows);
        id
    }

    pub(super) fn input(&mut self, index: usize) -> Id {
        self.add(Op::Input(index as u32), None, true)
    }

    pub(super) fn input_row(&mut self, first: usize, rows: RowsId) -> Id {
        self.add(Op::InputRow { first: first as u32, rows }, Some(rows), true)
    }

    /// A table of members for [`Op::InputMember`].
    pub(super) fn member_table(&mut self, rows: RowsId, members: Vec<u32>) -> u32 {
        self.members.push(members);
        self.member_rows.push(rows);
        self.members.len() as u32 - 1
    }

    pub(super) fn input_member(&mut self, first: usize, table: u32) -> Id {
        let rows = self.member_rows[table as usize];
        self.add(Op::InputMember { first: first as u32, table }, Some(rows), true)
    }

    pub(super) fn unary(&mut self, function: Unary, of: Id) -> Id {
        let op = Op::Unary(function, of);
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        if self.entry(of).varies {
            return self.add(op, self.rows(of), true);
        }
        self.fold(op, self.rows(of), |list, out| unary_long(function, list.operand(of), out))
    }

    pub(super) fn binary(&mut self, function: Binary, a: Id, b: Id) -> Id {
        use Binary::{Add, And, Equal, Multiply, Or};
        // Sums and products commute to the last bit: one order stands for both.
        let (a, b) = if matches!(function, Add | Multiply | Equal | And | Or) && a > b { (b, a) } else { (a, b) };
        let op = Op::Binary(function, a, b);
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        let rows = self.rows(a).or(self.rows(b));
        if self.entry(a).varies || self.entry(b).varies {
            return self.add(op, rows, true);
        }
        self.fold(op, rows, |list, out| binary_long(function, list.operand(a), list.operand(b), out))
    }

    /// `a^b`, by multiplication and square roots where the exponent is a constant that allows it.
    pub(super) fn power(&mut self, a: Id, b: Id) -> Id {
        match self.as_constant(b) {
            Some(2.0) => self.unary(Unary::Square, a),
            Some(0.5) => self.unary(Unary::Sqrt, a),
            Some(n) if n == n.floor() && (1.0..=16.0).contains(&n.abs()) => self.unary(Unary::WholePower(n as i32), a),
            _ => self.binary(Binary::Power, a, b),
        }
    }

    pub(super) fn select(&mut self, condition: Id, yes: Id, no: Id) -> Id {
        if yes == no {
            return yes;
        }
        // A condition that no input changes and that is the same in every row chooses for good.
        if !self.entry(condition).varies {
            let known = match self.operand(condition) {
                Operand::Scalar(value) => Some(value != 0.0),
                Operand::Block(values) if values.iter().all(|&value| value != 0.0) => Some(true),
                Operand::Block(values) if values.iter().all(|&value| value == 0.0) => Some(false),
                Operand::Block(_) => None,
            };
            if let Some(known) = known {
                return if known { yes } else { no };
            }
        }
        let op = Op::Select(condition, yes, no);
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        let rows = self.rows(condition).or(self.rows(yes)).or(self.rows(no));
        if [condition, yes, no].iter().any(|&id| self.entry(id).varies) {
            return self.add(op, rows, true);
        }
        self.fold(op, rows, |list, out| select(list.operand(condition), list.operand(yes), list.operand(no), out))
    }

    pub(super) fn lag(&mut self, of: Id, first: Id, rows: RowsId) -> Id {
        let op = Op::Lag { of, first, rows };
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        if self.entry(of).varies || self.entry(first).varies {
            return self.add(op, Some(rows), true);
        }
        self.fold(op, Some(rows), |list, out| {
            for r in (0..out.len()).rev() {
                out[r] = if r == 0 { list.operand(first).at(0) } else { list.operand(of).at(r - 1) };
            }
        })
    }

    /// One number of the column `of`, which runs over `rows` (or is the same in each of them).
    ///
    /// Factors that are the same in every row leave a sum, and so do the sides of what is [`Self::separable`].
    pub(super) fn reduce(&mut self, reduction: Reduction, of: Id, rows: RowsId) -> Id {
        let count = self.row_count(rows);
        if count == 0 {
            return self.constant(match reduction {
                Reduction::Sum => 0.0,
                Reduction::Minimum => f64::INFINITY,
                Reduction::Maximum | Reduction::LogSumExp => f64::NEG_INFINITY,
            });
        }
        if reduction != Reduction::Sum {
            return self.reduce_plain(reduction, of, count);
        }
        let (inner, around) = self.peel(of, rows);
        let mut sum = self.reduce_plain(Reduction::Sum, inner, count);
        for outside in around.into_iter().rev() {
            sum = match outside {
                Outside::Negated => self.unary(Unary::Negate, sum),
                Outside::Times(factor) => self.binary(Binary::Multiply, factor, sum),
                Outside::Over(divisor) => self.binary(Binary::Divide, sum, divisor),
                Outside::Plus(other) => self.binary(Binary::Add, sum, other),
                Outside::Minus(other) => self.binary(Binary::Subtract, sum, other),
                Outside::From(other) => self.binary(Binary::Subtract, other, sum),
            };
        }
        sum
    }

    /// What is left of the summand `of` once everything that can is taken out, and that, outermost first.
    fn peel(&mut self, of: Id, rows: RowsId) -> (Id, Vec<Outside>) {
        let mut inner = of;
        let mut around = Vec::new();
        while let Some(all_rows) = self.rows(inner) {
            debug_assert_eq!(all_rows, rows);
            let (outside, next) = match self.entry(inner).op {
                Op::Unary(Unary::Negate, a) => (Outside::Negated, a),
                Op::Binary(Binary::Multiply, a, b) if self.rows(a).is_none() => (Outside::Times(a), b),
                Op::Binary(Binary::Multiply, a, b) if self.rows(b).is_none() => (Outside::Times(b), a),
                Op::Binary(Binary::Divide, a, b) if self.rows(b).is_none() => (Outside::Over(b), a),
                Op::Binary(function @ (Binary::Add | Binary::Subtract), a, b) if self.separable.contains(&inner) => {
                    // The simple side is a number or data: its own sum costs nothing a point.
                    let simple = |id: Id| self.rows(id).is_none() || !self.entry(id).varies;
                    let (apart, rest) = if simple(b) { (b, a) } else { (a, b) };
                    if !simple(apart) {
                        break;
                    }
                    let other = self.reduce(Reduction::Sum, apart, rows);
                    let outside = match function {
                        Binary::Add => Outside::Plus(other),
                        _ if apart == b => Outside::Minus(other),
                        _ => Outside::From(other),
                    };
                    (outside, rest)
                }
                _ => break,
            };
            around.push(outside);
            inner = next;
        }
        (inner, around)
    }

    /// Says that a sum over the sum or difference `id` may be taken of its sides one by one.
    ///
    /// That is done for the normalising parts of log densities only: of `sum(level - mean)` it would make the
    /// difference of two large sums and lose what the analyst took care to keep.
    pub(super) fn separable(&mut self, id: Id) -> Id {
        self.separable.insert(id);
        id
    }

    fn reduce_plain(&mut self, reduction: Reduction, of: Id, count: usize) -> Id {
        let entry = self.entry(of);
        if entry.rows.is_none() {
            // The same number in every row.
            let n = self.constant(count as f64);
            return match reduction {
                Reduction::Sum => self.binary(Binary::Multiply, n, of),
                Reduction::Minimum | Reduction::Maximum => of,
                Reduction::LogSumExp => {
                    let ln_n = self.unary(Unary::Ln, n);
                    self.binary(Binary::Add, of, ln_n)
                }
            };
        }
        let op = Op::Reduce(reduction, of);
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        if entry.varies {
            return self.add(op, None, true);
        }
        self.fold(op, None, |list, out| {
            let mut extra = [0.0];
            let mut spare = [Row::ZERO; 2];
            for r in 0..count {
                reduce_row(reduction, r, Operand::Scalar(list.operand(of).at(r)), &mut spare, out, &mut extra);
            }
            if reduction == Reduction::LogSumExp {
                finish_log_sum_exp(out, &extra);
            }
        })
    }

    /// Evaluates `op` now, by `fill` over one number or all rows, and enters the result in its place.
    fn fold(&mut self, op: Op, rows: Option<RowsId>, fill: impl FnOnce(&Self, &mut [f64])) -> Id {
        let mut out = vec![0.0; rows.map_or(1, |rows| self.row_count(rows))];
        fill(self, &mut out);
        let id = match rows {
            None => self.constant(out[0]),
            Some(rows) => self.data(rows, out),
        };
        self.seen.insert(op, id);
        id
    }

    /// A constant or a data column, for folding.
    fn operand(&self, id: Id) -> Operand<'_> {
        match self.entry(id).op {
            Op::Constant(bits) => Operand::Scalar(f64::from_bits(bits)),
            Op::Data(column) => Operand::Block(&self.data[column as usize]),
            _ => unreachable!("only constants and data do not vary"),
        }
    }

    fn add(&mut self, op: Op, rows: Option<RowsId>, varies: bool) -> Id {
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        let id = self.entries.len() as Id;
        self.entries.push(Entry { op, rows, varies });
        self.seen.insert(op, id);
        id
    }
}
