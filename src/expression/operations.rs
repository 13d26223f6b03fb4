//! The shared list of operations, in which each stands once.

use std::collections::HashMap;
use std::collections::HashSet;

use super::columns::RowsId;
use super::forward::{Operand, binary_long, select, unary_long};
use super::kinds::{Binary, Entry, Id, Op, Unary};

/// All operations of a program, each once (hash consing), arguments before results. What depends on no input is
/// evaluated on entry: numbers become constants, columns become data.
#[derive(Debug, Clone, Default)]
pub(super) struct Operations {
    entries: Vec<Entry>,
    pub(super) seen: HashMap<Op, Id>,
    pub(super) separable: HashSet<Id>,
    /// Length of every kind of rows.
    row_counts: Vec<usize>,
    /// Data columns; [`Op::Data`] points here.
    pub(super) data: Vec<Vec<f64>>,
    data_rows: Vec<RowsId>,
    /// Which member each row belongs to; [`Op::InputMember`] points here.
    pub(super) members: Vec<Vec<u32>>,
    member_rows: Vec<RowsId>,
}

impl Operations {
    /// No operations yet; `row_counts` are the lengths of all kinds of rows.
    pub(super) fn new(row_counts: Vec<usize>) -> Self {
        Self { row_counts, ..Self::default() }
    }

    pub(super) fn len(&self) -> usize {
        self.entries.len()
    }

    pub(super) fn entry(&self, id: Id) -> Entry {
        self.entries[id as usize]
    }

    pub(super) fn rows(&self, id: Id) -> Option<RowsId> {
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
            Some(0.0) => self.constant(1.0),
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

    /// Evaluates `op` now, by `fill` over one number or all rows, and enters the result in its place.
    pub(super) fn fold(&mut self, op: Op, rows: Option<RowsId>, fill: impl FnOnce(&Self, &mut [f64])) -> Id {
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
    pub(super) fn operand(&self, id: Id) -> Operand<'_> {
        match self.entry(id).op {
            Op::Constant(bits) => Operand::Scalar(f64::from_bits(bits)),
            Op::Data(column) => Operand::Block(&self.data[column as usize]),
            _ => unreachable!("only constants and data do not vary"),
        }
    }

    pub(super) fn add(&mut self, op: Op, rows: Option<RowsId>, varies: bool) -> Id {
        if let Some(&known) = self.seen.get(&op) {
            return known;
        }
        let id = self.entries.len() as Id;
        self.entries.push(Entry { op, rows, varies });
        self.seen.insert(op, id);
        id
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn list() -> Operations {
        Operations::new(vec![3])
    }

    #[test]
    fn equal_parts_are_one_and_order_of_sums_does_not_matter() {
        let mut list = list();
        let (x, y) = (list.input(0), list.input(1));
        let sum = list.binary(Binary::Add, x, y);
        assert_eq!(list.binary(Binary::Add, y, x), sum);
        assert_ne!(list.binary(Binary::Subtract, x, y), list.binary(Binary::Subtract, y, x));
        let before = list.len();
        let (a, b) = (list.unary(Unary::Exp, sum), list.unary(Unary::Exp, sum));
        assert_eq!((a, list.len()), (b, before + 1));
    }

    #[test]
    fn what_no_input_changes_is_computed_at_once() {
        let mut list = list();
        let rows = RowsId(0);
        let (two, column) = (list.constant(2.0), list.data(rows, vec![1.0, 2.0, 4.0]));
        let eight = list.power(two, two);
        let eight = list.binary(Binary::Multiply, eight, two);
        assert_eq!(list.as_constant(eight), Some(8.0));
        let product = list.binary(Binary::Multiply, eight, column);
        let logs = list.unary(Unary::Ln, product);
        let again = list.binary(Binary::Multiply, eight, column);
        assert_eq!(list.unary(Unary::Ln, again), logs, "a folded column is shared like any other");
        let Op::Data(made) = list.entry(product).op else { panic!("a column of numbers is data") };
        assert_eq!(list.data[made as usize], [8.0, 16.0, 32.0]);
        let before = list.lag(column, two, rows);
        let Op::Data(made) = list.entry(before).op else { panic!("a lag of data is data") };
        assert_eq!(list.data[made as usize], [2.0, 1.0, 2.0]);
        assert!(!list.entry(logs).varies);
    }

    #[test]
    fn known_conditions_choose_for_good() {
        let mut list = list();
        let rows = RowsId(0);
        let (x, zero) = (list.input(0), list.constant(0.0));
        let everywhere = list.data(rows, vec![1.0; 3]);
        let nowhere = list.data(rows, vec![0.0; 3]);
        let somewhere = list.data(rows, vec![1.0, 0.0, 1.0]);
        assert_eq!(list.select(everywhere, x, zero), x);
        assert_eq!(list.select(nowhere, x, zero), zero);
        assert_eq!(list.select(somewhere, x, x), x);
        let chosen = list.select(somewhere, x, zero);
        assert_eq!(list.entry(chosen).rows, Some(rows));
    }

    #[test]
    fn small_whole_powers_and_roots_need_no_logarithm() {
        let mut list = list();
        let x = list.input(0);
        for (exponent, want) in [
            (2.0, Op::Unary(Unary::Square, x)),
            (3.0, Op::Unary(Unary::WholePower(3), x)),
            (-16.0, Op::Unary(Unary::WholePower(-16), x)),
            (0.5, Op::Unary(Unary::Sqrt, x)),
        ] {
            let n = list.constant(exponent);
            let power = list.power(x, n);
            assert_eq!(list.entry(power).op, want);
        }
        let n = list.constant(1.7);
        let power = list.power(x, n);
        assert_eq!(list.entry(power).op, Op::Binary(Binary::Power, x, n));
    }
}
