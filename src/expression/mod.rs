//! Formulas: text to checked expression, to values and exact gradients over blocks of points.
//!
//! A [`Scope`] holds the names a formula may use; [`Scope::compile`] turns texts into a [`Program`]. On the way:
//! `lexer` and `parser` make a tree in which parts come before wholes; `lower` checks it (numbers, columns,
//! conditions, labels) and enters it into one shared list of `operations`, where equal parts are one, what concerns
//! constants and data only is computed at once, and factors leave sums; `plan` puts the operations of some outputs
//! into an order, with one pass over the rows for each level of sums; `sweep` runs a plan over a block of 128
//! points, one operation at a time down contiguous columns, forward for values (`forward`) and backward for
//! gradients (`backward`).
//!
//! **Domain.** What is undefined is NaN, silently: the point is outside. `log(0)` is `-inf`. A comparison with an
//! undefined side is false. The branch of an `if` that is not taken reaches neither value nor gradient.
//!
//! **Limits.** Brackets nest 200 deep; the length of formulas and the number of rows are limited by memory for the
//! operations and the data only: of a column that depends on the point one row exists at a time.

mod backward;
mod call_places;
mod calls;
mod check;
mod columns;
mod densities;
mod errors;
mod forward;
mod functions;
mod gamma;
mod kinds;
mod lexer;
mod lower;
mod margin;
mod names;
mod operations;
mod parser;
mod plan;
mod program;
mod scope;
mod special;
mod sums;
mod sweep;

pub use call_places::{CallPlace, call_places};
pub use columns::{Rows, RowsId};
pub use errors::{FormulaError, nearest};
pub use program::{Program, Work};
pub use scope::{Scope, Wanted, is_name, is_reserved, names_used};
