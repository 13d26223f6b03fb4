//! Random formulas against the naive evaluator, and random texts against the parser.

use evenpoise::expression::{Wanted, names_used};
use evenpoise::numeric::Points;
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

use crate::naive::{Tree, Unsure};
use crate::world::{program, scope};

/// Makes a tree from a list of choices, so that proptest can shrink the list.
struct Grower<'a> {
    choices: std::slice::Iter<'a, u16>,
}

impl Grower<'_> {
    fn choose(&mut self, n: usize) -> usize {
        self.choices.next().map_or(0, |&choice| choice as usize % n)
    }

    fn number(&mut self) -> Tree {
        Tree::Number([0.5, 2.0, 1.25, 3.0, 0.1, 7.0][self.choose(6)])
    }

    fn leaf(&mut self, column: bool) -> Tree {
        match self.choose(if column { 7 } else { 3 }) {
            0 => Tree::Input(0),
            1 => Tree::Input(1 + self.choose(4)),
            2 => self.number(),
            3 | 4 => Tree::Flow,
            5 => Tree::Level,
            _ => Tree::EffectOfStation,
        }
    }

    /// A tree; a column only where `column` allows it.
    fn tree(&mut self, depth: usize, column: bool) -> Tree {
        if depth == 0 {
            return self.leaf(column);
        }
        match self.choose(12) {
            0 => self.leaf(column),
            1..=3 => {
                let functions = [
                    "-", "exp", "log", "sqrt", "abs", "sin", "cos", "tanh", "atan", "log1p", "expm1", "logistic", "^2",
                    "^3", "^-2", "floor",
                ];
                let name = functions[self.choose(functions.len())];
                Tree::One(name, Box::new(self.tree(depth - 1, column)))
            }
            4..=7 => {
                let names = ["+", "-", "*", "/", "+", "*", "^", "min", "max", "hypot", "logsumexp"];
                let name = names[self.choose(names.len())];
                let (a, b) = (self.tree(depth - 1, column), self.tree(depth - 1, column));
                Tree::Two(name, Box::new(a), Box::new(b))
            }
            8 => {
                let compare = ["<", "<=", ">", ">="][self.choose(4)];
                Tree::If(compare, std::array::from_fn(|_| Box::new(self.tree(depth - 1, column))))
            }
            9 if column => {
                let (of, first) = (self.tree(depth - 1, true), self.tree(depth - 1, false));
                if of.is_column() { Tree::Lag(Box::new(of), Box::new(first)) } else { of }
            }
            _ => {
                let name = ["sum", "sum", "mean", "min", "max", "logsumexp"][self.choose(6)];
                let of = self.tree(depth - 1, true);
                if of.is_column() { Tree::All(name, Box::new(of)) } else { of }
            }
        }
    }
}

fn grown(choices: &[u16]) -> Tree {
    Grower { choices: choices.iter() }.tree(5, false)
}

/// Central differences of the naive value in input `i`, extrapolated (Richardson), with a bound of their error:
/// rounding over the step, and what two steps disagree by. Unsure where anything is decided differently nearby.
fn difference(tree: &Tree, inputs: &[f64], i: usize) -> Result<(f64, f64), Unsure> {
    let mut here = Vec::new();
    tree.value(inputs, 0, &mut here)?;
    let at = |x: f64| {
        let mut moved = inputs.to_vec();
        moved[i] = x;
        let mut there = Vec::new();
        let value = tree.value(&moved, 0, &mut there)?;
        if there == here { Ok(value) } else { Err(Unsure) }
    };
    let slope = |h: f64| {
        let (up, down) = (inputs[i] + h, inputs[i] - h);
        let (high, low) = (at(up)?, at(down)?);
        Ok(((high.value - low.value) / (up - down), (high.error + low.error) * f64::EPSILON / (up - down)))
    };
    let ((wide, wide_error), (near, near_error)) = (slope(2e-4)?, slope(1e-4)?);
    let extrapolated = (4.0 * near - wide) / 3.0;
    Ok((extrapolated, 2.0 * (near_error + wide_error) + (near - wide).abs()))
}

fn run(tree: &Tree, inputs: &[f64]) -> Result<(), TestCaseError> {
    let text = tree.text();
    let Ok(naive) = tree.value(inputs, 0, &mut Vec::new()) else { return Err(TestCaseError::reject("unsure")) };
    let program = program(&text, Wanted::Number);
    let points = Points::from_rows(5, inputs);
    let (value, gradient) = program.value_and_gradient(0, &points);
    let alone = program.values(&points)[0].get(0, 0);
    prop_assert_eq!(value[0].to_bits(), alone.to_bits());
    // Both sides err by the bound at most, each by its own roundings; sums leave factors in another order.
    let bound = 4.0 * naive.error * f64::EPSILON;
    prop_assert!(
        (value[0] - naive.value).abs() <= bound,
        "{}: {} and {}, bound {}",
        text,
        value[0],
        naive.value,
        bound
    );
    for i in 0..5 {
        let Ok((want, error)) = difference(tree, inputs, i) else { continue };
        let got = gradient.get(0, i);
        // A blunt bound would prove nothing: where the differences disagree by more than 1 %, they are left out.
        if error <= 0.01 * want.abs().max(1e-3) {
            prop_assert!(
                (got - want).abs() <= error,
                "{}: derivative {} is {}, wanted {} +- {}",
                text,
                i,
                got,
                want,
                error
            );
        }
    }
    Ok(())
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 3000, max_global_rejects: 100_000, failure_persistence: None,
        rng_seed: RngSeed::Fixed(20_240_611), ..ProptestConfig::default() })]

    #[test]
    fn values_and_gradients_match_the_naive_evaluator(
        choices in proptest::collection::vec(any::<u16>(), 10..120),
        inputs in proptest::collection::vec(-2.0..2.0_f64, 5),
    ) {
        run(&grown(&choices), &inputs)?;
    }
}

/// Pieces of formulas, in and out of place.
const PIECES: [&str; 52] = [
    "x",
    "y",
    "flow",
    "effect",
    "[",
    "]",
    "station",
    "rain.depth",
    "gap",
    "(",
    ")",
    "(",
    ")",
    ",",
    "+",
    "-",
    "*",
    "/",
    "^",
    "<",
    "<=",
    "==",
    "!=",
    ">",
    ">=",
    "and",
    "or",
    "not",
    "if(",
    "sum(",
    "min(",
    "lag(",
    "present(",
    "count(",
    "log(",
    "log_density_normal(",
    "1",
    "2.5",
    "1e",
    ".",
    "1e999",
    "'Alder'",
    "\"",
    "'",
    " ",
    "\n",
    "ä",
    "流量",
    "𝑥",
    "\u{301}",
    "≤",
    "_",
];

/// Reads and checks `text` as everything that can be wanted; errors must point into it.
fn read(text: &str) -> Result<(), TestCaseError> {
    let _ = names_used("target", text);
    for wanted in [Wanted::Number, Wanted::Column, Wanted::Condition, Wanted::NumberOrColumn, Wanted::Margin] {
        match scope().compile(&[("target", text, wanted)]) {
            Ok(program) => {
                let values = program.values(&Points::from_rows(5, &[0.5, 1.0, 0.0, -1.0, 2.0]));
                prop_assert_eq!(values.len(), program.n_outputs());
            }
            Err(errors) => {
                prop_assert!(!errors.is_empty());
                for error in errors {
                    prop_assert!(text.get(error.span.clone()).is_some(), "{:?} in {:?}", error, text);
                }
            }
        }
    }
    Ok(())
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 3000, failure_persistence: None,
        rng_seed: RngSeed::Fixed(20_240_611), ..ProptestConfig::default() })]

    #[test]
    fn no_heap_of_pieces_breaks_the_parser(pieces in proptest::collection::vec(0..PIECES.len(), 0..25)) {
        read(&pieces.iter().map(|&piece| PIECES[piece]).collect::<String>())?;
    }

    #[test]
    fn no_text_breaks_the_parser(text in "\\PC{0,40}") {
        read(&text)?;
    }

    #[test]
    fn no_half_of_a_formula_breaks_the_parser(choices in proptest::collection::vec(any::<u16>(), 10..60), cut in any::<u16>()) {
        let text = grown(&choices).text();
        let cut = cut as usize % (text.len() + 1);
        read(&text[..cut])?;
        read(&text[cut..])?;
    }
}
