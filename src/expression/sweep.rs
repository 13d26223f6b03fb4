//! Runs a [`Plan`] over a block of points: forward for values, and backward for gradients.

use super::backward::{add_all, branch_slope, left_slope, right_slope, row_slope, unary_slope};
use super::forward::{Operand, Row, Spare, binary, finish_log_sum_exp, reduce_row, select, unary};
use super::kinds::Reduction;
use super::operations::Operations;
use super::plan::{Action, Fold, Lag, Pass, Plan, Slot, Source, Step};
use crate::numeric::BLOCK;

/// Room for one block's numbers; kept from block to block.
#[derive(Debug, Clone)]
pub(super) struct WorkSpace {
    values: Vec<Row>,
    adjoints: Vec<Row>,
    spare: Spare,
}

impl Default for WorkSpace {
    fn default() -> Self {
        Self { values: Vec::new(), adjoints: Vec::new(), spare: [Row::ZERO; 2] }
    }
}

/// A block of points: the columns of its inputs, and how many points of it are looked at.
#[derive(Debug, Clone, Copy)]
pub(super) struct Block<'a> {
    pub(super) inputs: &'a [f64],
    pub(super) len: usize,
}

/// Where outputs go: `write(output, row, values)` with one value for every point of the block.
pub(super) type Write<'a> = dyn FnMut(usize, usize, Operand<'_>) + 'a;

/// The slots of a work space around the one that is written: arguments are read from `below` and `above` it.
struct Around<'a> {
    below: &'a [Row],
    above: &'a [Row],
    out: Slot,
}

impl<'a> Around<'a> {
    fn slot(&self, slot: Slot, width: usize) -> &'a [f64] {
        if slot < self.out {
            &self.below[slot as usize].0[..width]
        } else {
            &self.above[(slot - self.out - 1) as usize].0[..width]
        }
    }
}

/// The slot `out` to write, and the others to read.
fn open(slots: &mut [Row], out: Slot, width: usize) -> (&mut [f64], Around<'_>) {
    let (below, rest) = slots.split_at_mut(out as usize);
    let (own, above) = rest.split_at_mut(1);
    (&mut own[0].0[..width], Around { below, above, out })
}

/// One block on its way through one plan.
pub(super) struct Sweep<'a> {
    operations: &'a Operations,
    plan: &'a Plan,
    inputs: &'a [f64],
    /// Points computed: the block's own, filled up to a multiple of eight so that vector instructions come out even.
    width: usize,
    values: &'a mut [Row],
    adjoints: &'a mut [Row],
    spare: &'a mut Spare,
}

impl<'a> Sweep<'a> {
    pub(super) fn new(operations: &'a Operations, plan: &'a Plan, block: Block<'a>, space: &'a mut WorkSpace) -> Self {
        space.values.resize(plan.n_slots, Row::ZERO);
        space.adjoints.resize(plan.n_slots, Row::ZERO);
        Self {
            operations,
            plan,
            inputs: block.inputs,
            width: block.len.next_multiple_of(8).min(BLOCK),
            values: &mut space.values,
            adjoints: &mut space.adjoints,
            spare: &mut space.spare,
        }
    }

    /// Evaluates everything and hands every output to `write`.
    pub(super) fn forward(&mut self, write: &mut Write<'_>) {
        let plan = self.plan;
        for stage in &plan.stages {
            for &step in &stage.steps {
                self.step(step, 0);
            }
            for pass in &stage.passes {
                self.pass_forward(pass, write);
            }
        }
        for &(output, source) in &plan.numbers {
            write(output, 0, self.read(source, 0));
        }
    }

    /// Adds the derivatives of output number `source` to `gradient`, the columns of all inputs; after [`Self::forward`].
    pub(super) fn backward(&mut self, source: Source, gradient: &mut [f64]) {
        let plan = self.plan;
        self.adjoints.fill(Row::ZERO);
        let ones = [1.0; BLOCK];
        self.give(source, 0, &ones[..self.width], gradient);
        for stage in plan.stages.iter().rev() {
            for pass in stage.passes.iter().rev() {
                self.pass_backward(pass, gradient);
            }
            for &step in stage.steps.iter().rev() {
                self.step_backward(step, 0, gradient);
            }
        }
    }

    /// The numbers of `source` in row `row`.
    fn read(&self, source: Source, row: usize) -> Operand<'_> {
        match source {
            Source::Slot(slot) => Operand::Block(&self.values[slot as usize].0[..self.width]),
            other => leaf(self.operations, self.inputs, other, row, self.width),
        }
    }

    fn step(&mut self, step: Step, row: usize) {
        let (operations, inputs, width) = (self.operations, self.inputs, self.width);
        let (out, around) = open(self.values, step.out, width);
        let read = |source| match source {
            Source::Slot(slot) => Operand::Block(around.slot(slot, width)),
            other => leaf(operations, inputs, other, row, width),
        };
        match step.action {
            Action::Unary(function, x) => match read(x) {
                Operand::Block(x) => unary(function, x, out),
                Operand::Scalar(_) => unreachable!("what does not vary is folded"),
            },
            Action::Binary(function, a, b) => binary(function, read(a), read(b), self.spare, out),
            Action::Select(condition, yes, no) => select(read(condition), read(yes), read(no), out),
        }
    }

    /// Copies `source` as it is in row `row` into slot `to`.
    fn copy(&mut self, source: Source, row: usize, to: Slot) {
        let (operations, inputs, width) = (self.operations, self.inputs, self.width);
        let (out, around) = open(self.values, to, width);
        match source {
            Source::Slot(slot) => out.copy_from_slice(around.slot(slot, width)),
            other => leaf(operations, inputs, other, row, width).copy_to(out),
        }
    }

    fn pass_forward(&mut self, pass: &Pass, write: &mut Write<'_>) {
        self.first_row(&pass.lags);
        for row in 0..pass.n_rows {
            for &step in &pass.steps {
                self.step(step, row);
            }
            for fold in &pass.folds {
                self.fold(fold, row);
            }
            for &(output, source) in &pass.columns {
                write(output, row, self.read(source, row));
            }
            self.next_row(&pass.lags, row);
        }
        for fold in pass.folds.iter().filter(|fold| fold.reduction == Reduction::LogSumExp) {
            let (total, extra, ..) = self.open_fold(fold);
            finish_log_sum_exp(total, extra);
        }
    }

    fn fold(&mut self, fold: &Fold, row: usize) {
        let (operations, inputs, width) = (self.operations, self.inputs, self.width);
        let (total, extra, around, spare) = self.open_fold(fold);
        let body = match fold.body {
            Source::Slot(slot) => Operand::Block(around.slot(slot, width)),
            other => leaf(operations, inputs, other, row, width),
        };
        reduce_row(fold.reduction, row, body, spare, total, extra);
    }

    /// The two slots of a reduction, which follow each other, and those before them.
    fn open_fold(&mut self, fold: &Fold) -> (&mut [f64], &mut [f64], Around<'_>, &mut Spare) {
        let (below, rest) = self.values.split_at_mut(fold.out as usize);
        let (total, rest) = rest.split_at_mut(1);
        let around = Around { below, above: &[], out: fold.out };
        (&mut total[0].0[..self.width], &mut rest[0].0[..self.width], around, self.spare)
    }

    fn first_row(&mut self, lags: &[Lag]) {
        for lag in lags {
            self.copy(lag.first, 0, lag.out);
        }
    }

    /// Makes `row` the row before. The last lag first: it may be a lag of an earlier one.
    fn next_row(&mut self, lags: &[Lag], row: usize) {
        for lag in lags.iter().rev() {
            self.copy(lag.of, row, lag.out);
        }
    }

    /// Adds `g` to the adjoint of `source` in row `row`.
    fn give(&mut self, source: Source, row: usize, g: &[f64], gradient: &mut [f64]) {
        let width = self.width;
        match source {
            Source::Slot(slot) => add_all(g, &mut self.adjoints[slot as usize].0[..width]),
            other => {
                if let Some(input) = input(self.operations, other, row) {
                    add_all(g, &mut gradient[input * BLOCK..][..width]);
                }
            }
        }
    }

    fn step_backward(&mut self, step: Step, row: usize, gradient: &mut [f64]) {
        let (operations, inputs, width) = (self.operations, self.inputs, self.width);
        let (below, rest) = self.adjoints.split_at_mut(step.out as usize);
        let g = &rest[0].0[..width];
        let values: &[Row] = self.values;
        let spare = &mut *self.spare;
        let y = &values[step.out as usize].0[..width];
        let read = |source| match source {
            Source::Slot(slot) => Operand::Block(&values[slot as usize].0[..width]),
            other => leaf(operations, inputs, other, row, width),
        };
        // Arguments have smaller slots than results.
        let mut give = |source, add: &mut dyn FnMut(&mut [f64])| match source {
            Source::Slot(slot) => add(&mut below[slot as usize].0[..width]),
            other => {
                if let Some(input) = input(operations, other, row) {
                    add(&mut gradient[input * BLOCK..][..width]);
                }
            }
        };
        match step.action {
            Action::Unary(function, x) => {
                if let Operand::Block(xs) = read(x) {
                    give(x, &mut |gx| unary_slope(function, g, xs, y, gx));
                }
            }
            Action::Binary(function, a, b) => {
                give(a, &mut |ga| left_slope(function, g, (read(a), read(b)), y, spare, ga));
                give(b, &mut |gb| right_slope(function, g, (read(a), read(b)), y, spare, gb));
            }
            Action::Select(condition, yes, no) => {
                give(yes, &mut |to| branch_slope(true, g, read(condition), to));
                give(no, &mut |to| branch_slope(false, g, read(condition), to));
            }
        }
    }

    fn pass_backward(&mut self, pass: &Pass, gradient: &mut [f64]) {
        if pass.lags.is_empty() {
            for row in (0..pass.n_rows).rev() {
                self.row_backward(pass, row, &mut [], gradient);
            }
        } else {
            self.lagged_pass_backward(pass, gradient);
        }
    }

    /// Rows backward where each needs the one before: the lagged values are kept at every `stride`-th row on a first
    /// run, and at every row of one stretch on a second; `2 sqrt(n)` of them instead of `n`.
    fn lagged_pass_backward(&mut self, pass: &Pass, gradient: &mut [f64]) {
        let stride = (pass.n_rows as f64).sqrt().ceil().max(1.0) as usize;
        let mut starts = Vec::new();
        self.first_row(&pass.lags);
        for row in 0..pass.n_rows {
            if row.is_multiple_of(stride) {
                starts.push(self.lagged(&pass.lags));
            }
            self.row_forward(pass, row);
        }
        let mut pending = vec![vec![0.0; self.width]; pass.lags.len()];
        for (stretch, start) in starts.iter().enumerate().rev() {
            let rows = stretch * stride..((stretch + 1) * stride).min(pass.n_rows);
            self.set_lagged(&pass.lags, start);
            let mut kept = Vec::with_capacity(rows.len());
            for row in rows.clone() {
                kept.push(self.lagged(&pass.lags));
                self.row_forward(pass, row);
            }
            for (row, lagged) in rows.zip(&kept).rev() {
                self.set_lagged(&pass.lags, lagged);
                self.row_backward(pass, row, &mut pending, gradient);
            }
        }
    }

    fn row_forward(&mut self, pass: &Pass, row: usize) {
        for &step in &pass.steps {
            self.step(step, row);
        }
        self.next_row(&pass.lags, row);
    }

    /// The values of all lags, one after the other.
    fn lagged(&self, lags: &[Lag]) -> Vec<f64> {
        let slot = |lag: &Lag| &self.values[lag.out as usize].0[..self.width];
        lags.iter().flat_map(slot).copied().collect()
    }

    fn set_lagged(&mut self, lags: &[Lag], values: &[f64]) {
        for (lag, values) in lags.iter().zip(values.chunks_exact(self.width)) {
            self.values[lag.out as usize].0[..self.width].copy_from_slice(values);
        }
    }

    /// Recomputes one row and takes the adjoints through it. `pending` holds what the lags of the row after owe to
    /// this one, and then what those of this row owe to the row before.
    fn row_backward(&mut self, pass: &Pass, row: usize, pending: &mut [Vec<f64>], gradient: &mut [f64]) {
        for &step in &pass.steps {
            self.step(step, row);
            self.adjoints[step.out as usize].0[..self.width].fill(0.0);
        }
        for lag in &pass.lags {
            self.adjoints[lag.out as usize].0[..self.width].fill(0.0);
        }
        for (lag, owed) in pass.lags.iter().zip(pending.iter()) {
            self.give(lag.of, row, owed, gradient);
        }
        for fold in &pass.folds {
            self.fold_backward(fold, row, gradient);
        }
        for &step in pass.steps.iter().rev() {
            self.step_backward(step, row, gradient);
        }
        for (lag, owed) in pass.lags.iter().zip(pending) {
            owed.copy_from_slice(&self.adjoints[lag.out as usize].0[..self.width]);
            if row == 0 {
                let owed = owed.clone();
                self.give(lag.first, 0, &owed, gradient);
            }
        }
    }

    fn fold_backward(&mut self, fold: &Fold, row: usize, gradient: &mut [f64]) {
        let (operations, inputs, width) = (self.operations, self.inputs, self.width);
        let values: &[Row] = self.values;
        let slot = |slot: Slot| &values[slot as usize].0[..width];
        let results = (slot(fold.out), slot(fold.extra));
        let body = match fold.body {
            Source::Slot(body) => Operand::Block(slot(body)),
            other => leaf(operations, inputs, other, row, width),
        };
        match fold.body {
            Source::Slot(slot) => {
                // A column comes before its sum in the list, and so do their slots.
                let (below, rest) = self.adjoints.split_at_mut(fold.out as usize);
                let to = &mut below[slot as usize].0[..width];
                row_slope(fold.reduction, row, &rest[0].0[..width], body, results, to);
            }
            other => {
                if let Some(input) = input(operations, other, row) {
                    let g = &self.adjoints[fold.out as usize].0[..width];
                    let to = &mut gradient[input * BLOCK..][..width];
                    row_slope(fold.reduction, row, g, body, results, to);
                }
            }
        }
    }
}

/// The numbers of a source that is no slot.
#[inline]
fn leaf<'a>(operations: &'a Operations, inputs: &'a [f64], source: Source, row: usize, width: usize) -> Operand<'a> {
    match source {
        Source::Constant(value) => Operand::Scalar(value),
        Source::Data(column) => Operand::Scalar(operations.data[column as usize][row]),
        other => match input(operations, other, row) {
            Some(input) => Operand::Block(&inputs[input * BLOCK..][..width]),
            None => unreachable!("slots are read by their owner"),
        },
    }
}

/// Which input a source is in row `row`, if it is one.
#[inline]
fn input(operations: &Operations, source: Source, row: usize) -> Option<usize> {
    match source {
        Source::Input(input) => Some(input as usize),
        Source::InputRow(first) => Some(first as usize + row),
        Source::InputMember { first, table } => Some((first + operations.members[table as usize][row]) as usize),
        Source::Slot(_) | Source::Constant(_) | Source::Data(_) => None,
    }
}
