//! The order in which the operations behind some outputs are evaluated.
//!
//! Operations that are one number a point run once. Those of a column run once a row, in a *pass* over the rows that
//! also feeds every sum over them; only one row of a column exists at a time. A pass may need the results of earlier
//! passes (`sum((level - mean(level))^2)`), hence *stages*: the numbers of stage `s`, then its passes, then stage
//! `s + 1`.

use super::columns::RowsId;
use super::kinds::{Binary, Id, Op, Reduction, Unary};
use super::operations::Operations;

/// Place of a stretch of points' numbers in the work space.
pub(super) type Slot = u32;

/// Where an argument comes from.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Source {
    Slot(Slot),
    Constant(f64),
    Data(u32),
    Input(u32),
    InputRow(u32),
    InputMember { first: u32, table: u32 },
}

/// One operation, to be evaluated into its slot.
#[derive(Debug, Clone, Copy)]
pub(super) enum Action {
    Unary(Unary, Source),
    Binary(Binary, Source, Source),
    Select(Source, Source, Source),
}

/// An operation and the slot of its result.
#[derive(Debug, Clone, Copy)]
pub(super) struct Step {
    pub(super) action: Action,
    pub(super) out: Slot,
}

/// A reduction that a pass feeds; `extra` is a slot for what it needs to remember.
#[derive(Debug, Clone, Copy)]
pub(super) struct Fold {
    pub(super) reduction: Reduction,
    pub(super) body: Source,
    pub(super) out: Slot,
    pub(super) extra: Slot,
}

/// A `lag`: its slot holds the value of the row before while a row is evaluated.
#[derive(Debug, Clone, Copy)]
pub(super) struct Lag {
    pub(super) of: Source,
    pub(super) first: Source,
    pub(super) out: Slot,
}

/// One run over all rows of a kind.
#[derive(Debug, Clone)]
pub(super) struct Pass {
    pub(super) n_rows: usize,
    pub(super) steps: Vec<Step>,
    pub(super) folds: Vec<Fold>,
    /// In the order of their operations: a lag of a lag comes after it.
    pub(super) lags: Vec<Lag>,
    /// Outputs that are columns, by their number, and what goes into them row by row.
    pub(super) columns: Vec<(usize, Source)>,
}

/// Numbers, then passes that need no more than these and earlier stages.
#[derive(Debug, Clone, Default)]
pub(super) struct Stage {
    pub(super) steps: Vec<Step>,
    pub(super) passes: Vec<Pass>,
}

/// An output to be computed: its number, its operation, and its rows if it is a column.
#[derive(Debug, Clone, Copy)]
pub(super) struct Root {
    pub(super) output: usize,
    pub(super) id: Id,
    pub(super) rows: Option<RowsId>,
}

/// How to compute some outputs.
#[derive(Debug, Clone, Default)]
pub(super) struct Plan {
    pub(super) stages: Vec<Stage>,
    /// Outputs that are numbers.
    pub(super) numbers: Vec<(usize, Source)>,
    pub(super) n_slots: usize,
    /// Inputs that matter.
    pub(super) inputs: Vec<u32>,
}

impl Plan {
    /// The plan for `roots`.
    pub(super) fn new(operations: &Operations, roots: &[Root]) -> Self {
        Planner::new(operations, roots).plan(roots)
    }
}

/// The ids an operation uses.
fn arguments(op: Op) -> impl Iterator<Item = Id> {
    let all = match op {
        Op::Constant(_) | Op::Data(_) | Op::Input(_) | Op::InputRow { .. } | Op::InputMember { .. } => [None; 3],
        Op::Unary(_, a) | Op::Reduce(_, a) => [Some(a), None, None],
        Op::Binary(_, a, b) => [Some(a), Some(b), None],
        Op::Lag { of, first, .. } => [Some(of), Some(first), None],
        Op::Select(a, b, c) => [Some(a), Some(b), Some(c)],
    };
    all.into_iter().flatten()
}

/// What a pass over some rows must bring about.
struct Aim {
    rows: RowsId,
    folds: Vec<Id>,
    columns: Vec<Root>,
}

struct Planner<'a> {
    operations: &'a Operations,
    needed: Vec<bool>,
    /// The stage after whose numbers an operation can be evaluated.
    stage: Vec<usize>,
    slots: Vec<Slot>,
    extras: Vec<Slot>,
    n_slots: u32,
}

impl<'a> Planner<'a> {
    fn new(operations: &'a Operations, roots: &[Root]) -> Self {
        let n = operations.len();
        let needed = reached(operations, roots.iter().map(|root| root.id), true);
        let mut planner =
            Self { operations, needed, stage: vec![0; n], slots: vec![0; n], extras: vec![0; n], n_slots: 0 };
        for id in 0..n as Id {
            planner.place(id);
        }
        planner
    }

    /// Stage and slots of one operation; arguments come first in the list.
    fn place(&mut self, id: Id) {
        let at = id as usize;
        if !self.needed[at] {
            return;
        }
        let op = self.operations.entry(id).op;
        self.stage[at] = arguments(op).map(|argument| self.stage[argument as usize]).max().unwrap_or(0);
        match op {
            Op::Unary(..) | Op::Binary(..) | Op::Select(..) | Op::Lag { .. } => self.slots[at] = self.new_slot(),
            Op::Reduce(..) => {
                self.stage[at] += 1;
                self.slots[at] = self.new_slot();
                self.extras[at] = self.new_slot();
            }
            Op::Constant(_) | Op::Data(_) | Op::Input(_) | Op::InputRow { .. } | Op::InputMember { .. } => {}
        }
    }

    fn new_slot(&mut self) -> Slot {
        self.n_slots += 1;
        self.n_slots - 1
    }

    fn source(&self, id: Id) -> Source {
        match self.operations.entry(id).op {
            Op::Constant(bits) => Source::Constant(f64::from_bits(bits)),
            Op::Data(column) => Source::Data(column),
            Op::Input(input) => Source::Input(input),
            Op::InputRow { first, .. } => Source::InputRow(first),
            Op::InputMember { first, table } => Source::InputMember { first, table },
            _ => Source::Slot(self.slots[id as usize]),
        }
    }

    fn step(&self, id: Id) -> Option<Step> {
        let action = match self.operations.entry(id).op {
            Op::Unary(function, a) => Action::Unary(function, self.source(a)),
            Op::Binary(function, a, b) => Action::Binary(function, self.source(a), self.source(b)),
            Op::Select(a, b, c) => Action::Select(self.source(a), self.source(b), self.source(c)),
            _ => return None,
        };
        Some(Step { action, out: self.slots[id as usize] })
    }

    fn plan(&self, roots: &[Root]) -> Plan {
        let needed = || (0..self.operations.len() as Id).filter(|&id| self.needed[id as usize]);
        let n_stages = needed().map(|id| self.stage[id as usize] + 1).max().unwrap_or(1);
        let mut stages = vec![Stage::default(); n_stages];
        let mut aims: Vec<Vec<Aim>> = (0..n_stages).map(|_| Vec::new()).collect();
        for id in needed() {
            let entry = self.operations.entry(id);
            if let Op::Reduce(_, body) = entry.op {
                let rows = self.operations.entry(body).rows.expect("only columns are reduced");
                aim(&mut aims[self.stage[body as usize]], rows).folds.push(id);
            } else if entry.rows.is_none() {
                stages[self.stage[id as usize]].steps.extend(self.step(id));
            }
        }
        for &root in roots {
            if let Some(rows) = root.rows {
                aim(&mut aims[self.stage[root.id as usize]], rows).columns.push(root);
            }
        }
        for (stage, aims) in stages.iter_mut().zip(aims) {
            stage.passes = aims.iter().map(|aim| self.pass(aim)).collect();
        }
        let numbers = roots.iter().filter(|root| root.rows.is_none()).map(|root| (root.output, self.source(root.id)));
        Plan { stages, numbers: numbers.collect(), n_slots: self.n_slots as usize, inputs: self.inputs() }
    }

    fn pass(&self, Aim { rows, folds, columns }: &Aim) -> Pass {
        let body = |id: Id| match self.operations.entry(id).op {
            Op::Reduce(reduction, body) => (reduction, body),
            _ => unreachable!("folds are reductions"),
        };
        let starts = folds.iter().map(|&id| body(id).1).chain(columns.iter().map(|root| root.id));
        let reached = reached(self.operations, starts, false);
        let of_rows = (0..self.operations.len() as Id)
            .filter(|&id| reached[id as usize] && self.operations.entry(id).rows == Some(*rows));
        let mut steps = Vec::new();
        let mut lags = Vec::new();
        for id in of_rows {
            steps.extend(self.step(id));
            if let Op::Lag { of, first, .. } = self.operations.entry(id).op {
                lags.push(Lag { of: self.source(of), first: self.source(first), out: self.slots[id as usize] });
            }
        }
        let fold = |&id: &Id| {
            let (reduction, body) = body(id);
            Fold { reduction, body: self.source(body), out: self.slots[id as usize], extra: self.extras[id as usize] }
        };
        Pass {
            n_rows: self.operations.row_count(*rows),
            steps,
            folds: folds.iter().map(fold).collect(),
            lags,
            columns: columns.iter().map(|root| (root.output, self.source(root.id))).collect(),
        }
    }

    /// The inputs that are reached, ascending.
    fn inputs(&self) -> Vec<u32> {
        let mut found = Vec::new();
        for id in (0..self.operations.len() as Id).filter(|&id| self.needed[id as usize]) {
            match self.operations.entry(id).op {
                Op::Input(input) => found.push(input),
                Op::InputRow { first, rows } => {
                    found.extend((0..self.operations.row_count(rows) as u32).map(|r| first + r));
                }
                Op::InputMember { first, table } => {
                    found.extend(self.operations.members[table as usize].iter().map(|member| first + member));
                }
                _ => {}
            }
        }
        found.sort_unstable();
        found.dedup();
        found
    }
}

/// The entry for `rows` in a stage's aims, made if need be.
fn aim(aims: &mut Vec<Aim>, rows: RowsId) -> &mut Aim {
    let at = aims.iter().position(|aim| aim.rows == rows).unwrap_or_else(|| {
        aims.push(Aim { rows, folds: Vec::new(), columns: Vec::new() });
        aims.len() - 1
    });
    &mut aims[at]
}

/// Which operations `starts` need, themselves included; what is under a reduction only if `under_reductions`.
fn reached(operations: &Operations, starts: impl Iterator<Item = Id>, under_reductions: bool) -> Vec<bool> {
    let mut reached = vec![false; operations.len()];
    for id in starts {
        reached[id as usize] = true;
    }
    for id in (0..operations.len() as Id).rev() {
        let op = operations.entry(id).op;
        if reached[id as usize] && (under_reductions || !matches!(op, Op::Reduce(..))) {
            for argument in arguments(op) {
                reached[argument as usize] = true;
            }
        }
    }
    reached
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The plan of `sum((c - mean(c))^2)` with `c = exp(x * data)`, and the operations.
    fn variance() -> Plan {
        let mut list = Operations::new(vec![4]);
        let rows = RowsId(0);
        let (x, data) = (list.input(0), list.data(rows, vec![1.0, 2.0, 3.0, 4.0]));
        let product = list.binary(Binary::Multiply, x, data);
        let column = list.unary(Unary::Exp, product);
        let sum = list.reduce(Reduction::Sum, column, rows);
        let n = list.constant(4.0);
        let mean = list.binary(Binary::Divide, sum, n);
        let difference = list.binary(Binary::Subtract, column, mean);
        let square = list.unary(Unary::Square, difference);
        let total = list.reduce(Reduction::Sum, square, rows);
        let idle = list.unary(Unary::Sin, x);
        assert!(idle > total);
        Plan::new(&list, &[Root { output: 0, id: total, rows: None }])
    }

    #[test]
    fn sums_over_sums_take_a_pass_each() {
        let plan = variance();
        let shape: Vec<(usize, Vec<(usize, usize)>)> = plan
            .stages
            .iter()
            .map(|stage| {
                let passes = stage.passes.iter().map(|pass| (pass.steps.len(), pass.folds.len())).collect();
                (stage.steps.len(), passes)
            })
            .collect();
        // Stage 0: product, exp and their sum in one pass; stage 1: the mean, then all four again for the squares.
        assert_eq!(shape, [(0, vec![(2, 1)]), (1, vec![(4, 1)]), (0, vec![])]);
        assert_eq!(plan.inputs, [0]);
        // Two for each sum, one for each other operation that is needed.
        assert_eq!(plan.n_slots, 2 * 2 + 5);
    }
}
