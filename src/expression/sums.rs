//! Reductions of columns, and what leaves a sum because it is the same in every row.

use super::columns::RowsId;
use super::forward::{Operand, Row, finish_log_sum_exp, reduce_row};
use super::kinds::{Binary, Id, Op, Reduction, Unary};
use super::operations::Operations;

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
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `x` is a number, `rows` the data 1, 2, 4, and `column` varies from row to row and with the point.
    fn list() -> (Operations, Id, Id, Id) {
        let mut list = Operations::new(vec![3, 0]);
        let (x, data) = (list.input(0), list.data(RowsId(0), vec![1.0, 2.0, 4.0]));
        let product = list.binary(Binary::Multiply, x, data);
        let column = list.unary(Unary::Exp, product);
        (list, x, data, column)
    }

    #[test]
    fn factors_leave_a_sum_and_terms_do_not() {
        let (mut list, x, data, column) = list();
        let plain = list.reduce(Reduction::Sum, column, RowsId(0));
        let scaled = list.binary(Binary::Multiply, column, x);
        let scaled = list.unary(Unary::Negate, scaled);
        let sum = list.reduce(Reduction::Sum, scaled, RowsId(0));
        let want = list.binary(Binary::Multiply, x, plain);
        assert_eq!(sum, list.unary(Unary::Negate, want));

        let shifted = list.binary(Binary::Subtract, column, x);
        let sum = list.reduce(Reduction::Sum, shifted, RowsId(0));
        assert_eq!(list.entry(sum).op, Op::Reduce(Reduction::Sum, shifted), "the difference would cancel");
        list.separable(shifted);
        let sum = list.reduce(Reduction::Sum, shifted, RowsId(0));
        let three = list.constant(3.0);
        let of_x = list.binary(Binary::Multiply, three, x);
        assert_eq!(sum, list.binary(Binary::Subtract, plain, of_x));

        let linear = list.binary(Binary::Multiply, x, data);
        let sum = list.reduce(Reduction::Sum, linear, RowsId(0));
        let seven = list.constant(7.0);
        assert_eq!(sum, list.binary(Binary::Multiply, x, seven), "nothing is left to do for each row");
    }

    #[test]
    fn data_is_reduced_at_once_and_so_are_no_rows() {
        let (mut list, x, data, _) = list();
        for (reduction, want, of_none) in [
            (Reduction::Sum, 7.0, 0.0),
            (Reduction::Minimum, 1.0, f64::INFINITY),
            (Reduction::Maximum, 4.0, f64::NEG_INFINITY),
            (Reduction::LogSumExp, (1.0_f64.exp() + 2.0_f64.exp() + 4.0_f64.exp()).ln(), f64::NEG_INFINITY),
        ] {
            let all = list.reduce(reduction, data, RowsId(0));
            let got = list.as_constant(all).unwrap();
            assert!((got - want).abs() <= 4.0 * f64::EPSILON * want, "{reduction:?}: {got}");
            let none = list.reduce(reduction, x, RowsId(1));
            assert_eq!(list.as_constant(none), Some(of_none));
        }
        assert_eq!(list.reduce(Reduction::Maximum, x, RowsId(0)), x);
    }
}
