//! Formulas ready to be evaluated over points.

use rayon::iter::{IndexedParallelIterator, IntoParallelIterator, ParallelIterator};

use super::columns::RowsId;
use super::operations::Operations;
use super::plan::{Plan, Root};
use super::sweep::{Block, Sweep, WorkSpace};
use crate::numeric::{BLOCK, Points};

/// An output and what it is called.
#[derive(Debug, Clone)]
pub(super) struct Output {
    pub(super) key: String,
    pub(super) root: Root,
}

/// Checked formulas: an immutable list of shared operations with plans to evaluate them.
///
/// Values and gradients depend on nothing but the inputs: not on the number of threads, nor on which points are
/// evaluated together, nor on the processor.
#[derive(Debug, Clone)]
pub struct Program {
    operations: Operations,
    outputs: Vec<Output>,
    n_inputs: usize,
    /// For all outputs at once.
    values: Plan,
    /// For each output by itself.
    single: Vec<Plan>,
    unused_formulas: Vec<String>,
    unused_constants: Vec<String>,
}

/// Reusable room for the evaluation of one block after another; one for each thread.
#[derive(Debug, Clone, Default)]
pub struct Work(WorkSpace);

impl Program {
    pub(super) fn new(
        operations: Operations,
        mut outputs: Vec<Output>,
        n_inputs: usize,
        unused_formulas: Vec<String>,
        unused_constants: Vec<String>,
    ) -> Self {
        for (k, output) in outputs.iter_mut().enumerate() {
            output.root.output = k;
        }
        let roots: Vec<Root> = outputs.iter().map(|output| output.root).collect();
        let single = roots.iter().map(|root| Plan::new(&operations, &[Root { output: 0, ..*root }])).collect();
        let values = Plan::new(&operations, &roots);
        Self { operations, outputs, n_inputs, values, single, unused_formulas, unused_constants }
    }

    /// Numbers a point has: variables, members of groups and values of models, in the order of the scope.
    #[must_use]
    pub fn n_inputs(&self) -> usize {
        self.n_inputs
    }

    /// Outputs, an event counted twice: its margin, and after it whether it holds.
    #[must_use]
    pub fn n_outputs(&self) -> usize {
        self.outputs.len()
    }

    /// The same program for points that bring only the first `n` of its inputs; none where an output uses another.
    #[must_use]
    pub fn narrowed(mut self, n: usize) -> Option<Self> {
        if n > self.n_inputs || (n..self.n_inputs).any(|i| self.uses_input(i)) {
            return None;
        }
        self.n_inputs = n;
        Some(self)
    }

    /// The number of the (first) output called `key`.
    #[must_use]
    pub fn output(&self, key: &str) -> Option<usize> {
        self.outputs.iter().position(|output| output.key == key)
    }

    /// How many values output `k` has for a point: 1, or as many as there are rows.
    #[must_use]
    pub fn output_len(&self, k: usize) -> usize {
        self.outputs[k].root.rows.map_or(1, |rows| self.operations.row_count(rows))
    }

    /// What output `k` runs over, if it is a column.
    #[must_use]
    pub fn output_rows(&self, k: usize) -> Option<RowsId> {
        self.outputs[k].root.rows
    }

    /// Whether any output depends on input `i`.
    #[must_use]
    pub fn uses_input(&self, i: usize) -> bool {
        self.values.inputs.binary_search(&(i as u32)).is_ok()
    }

    /// Whether output `k` depends on input `i`.
    #[must_use]
    pub fn output_uses_input(&self, k: usize, i: usize) -> bool {
        self.single[k].inputs.binary_search(&(i as u32)).is_ok()
    }

    /// Formulas that no output uses, in their order.
    #[must_use]
    pub fn unused_formulas(&self) -> &[String] {
        &self.unused_formulas
    }

    /// Constants that no output uses, in their order.
    #[must_use]
    pub fn unused_constants(&self) -> &[String] {
        &self.unused_constants
    }

    /// All outputs at all points, block by block on as many threads as there are. NaN: the point left the domain of
    /// a formula.
    ///
    /// # Shapes
    /// `inputs` has `dim() == n_inputs()`; for output `k` comes as many points of `dim() == output_len(k)`.
    ///
    /// # Panics
    /// `inputs` has another dimension.
    #[must_use]
    pub fn values(&self, inputs: &Points) -> Vec<Points> {
        let mut outputs: Vec<Points> =
            (0..self.n_outputs()).map(|k| Points::zeros(self.output_len(k), inputs.len())).collect();
        // For every block the pieces of all outputs that belong to it.
        let mut pieces: Vec<Vec<&mut [f64]>> = (0..inputs.n_blocks()).map(|_| Vec::new()).collect();
        for points in &mut outputs {
            let mut blocks = points.blocks_mut();
            for piece in &mut pieces {
                piece.push(blocks.next().unwrap_or_default());
            }
        }
        pieces.into_par_iter().enumerate().for_each_init(Work::default, |work, (b, mut piece)| {
            self.values_block(inputs, b, work, &mut piece);
        });
        outputs
    }

    /// All outputs at the points of block `b` of `inputs`; `outputs[k]` holds `output_len(k)` columns of 128.
    ///
    /// # Panics
    /// `inputs` has another dimension than [`Self::n_inputs`], or an output is too short.
    pub fn values_block(&self, inputs: &Points, b: usize, work: &mut Work, outputs: &mut [&mut [f64]]) {
        let block = self.block(inputs, b);
        Sweep::new(&self.operations, &self.values, block, &mut work.0).forward(&mut |output, row, values| {
            values.copy_to(&mut outputs[output][row * BLOCK..][..block.len]);
        });
    }

    /// Output `output`, a number, and its derivatives with respect to every input.
    ///
    /// # Shapes
    /// One value a point, and points of `dim() == n_inputs()`.
    ///
    /// # Panics
    /// `inputs` has another dimension than [`Self::n_inputs`], or the output is a column.
    #[must_use]
    pub fn value_and_gradient(&self, output: usize, inputs: &Points) -> (Vec<f64>, Points) {
        let mut values = vec![0.0; inputs.n_blocks() * BLOCK];
        let mut gradient = Points::zeros(self.n_inputs, inputs.len());
        let mut blocks = gradient.blocks_mut();
        let pieces: Vec<(&mut [f64], &mut [f64])> =
            values.chunks_exact_mut(BLOCK).map(|values| (values, blocks.next().unwrap_or_default())).collect();
        drop(blocks);
        pieces.into_par_iter().enumerate().for_each_init(Work::default, |work, (b, (values, gradient))| {
            self.value_and_gradient_block(output, inputs, b, work, values, gradient);
        });
        values.truncate(inputs.len());
        (values, gradient)
    }

    /// [`Self::value_and_gradient`] at the points of block `b`: 128 values and `n_inputs()` columns of 128.
    ///
    /// # Panics
    /// `inputs` has another dimension than [`Self::n_inputs`], the output is a column, or a slice is too short.
    pub fn value_and_gradient_block(
        &self,
        output: usize,
        inputs: &Points,
        b: usize,
        work: &mut Work,
        values: &mut [f64],
        gradient: &mut [f64],
    ) {
        assert!(self.outputs[output].root.rows.is_none(), "a column has no gradient");
        let block = self.block(inputs, b);
        let plan = &self.single[output];
        let mut sweep = Sweep::new(&self.operations, plan, block, &mut work.0);
        sweep.forward(&mut |_, _, computed| computed.copy_to(&mut values[..block.len]));
        gradient.fill(0.0);
        for &(_, source) in &plan.numbers {
            sweep.backward(source, gradient);
        }
        // The points that fill up a block are nobody's.
        for column in gradient.chunks_exact_mut(BLOCK) {
            column[block.len..].fill(0.0);
        }
    }

    fn block<'a>(&self, inputs: &'a Points, b: usize) -> Block<'a> {
        assert_eq!(inputs.dim(), self.n_inputs, "a point has as many numbers as the program has inputs");
        Block { inputs: inputs.block(b), len: inputs.block_len(b) }
    }
}
