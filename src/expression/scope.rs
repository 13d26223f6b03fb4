//! The names a formula may use, and what they stand for.

use std::collections::HashMap;

use super::check::{compile, unused};
use super::columns::{Rows, RowsId};
use super::errors::FormulaError;
use super::functions::FUNCTIONS;
use super::lexer::{begins_name, continues_name};
use super::parser::parse;
use super::program::Program;

/// What an output must be.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum Wanted {
    /// One number.
    Number,
    /// A number for every row of something.
    Column,
    /// One condition, evaluated to 1 or 0.
    Condition,
    /// Either of the first two.
    NumberOrColumn,
    /// An event: inequalities joined by `and`, `or` and parentheses. It makes two outputs, its margin and, after it,
    /// whether it holds as written (1 or 0).
    Margin,
}

/// What a name stands for.
#[derive(Debug, Clone)]
pub(super) enum Entity {
    Constant(f64),
    Input(usize),
    Group {
        rows: RowsId,
        labels: Vec<String>,
        first: usize,
    },
    Column {
        rows: RowsId,
        values: Vec<f64>,
    },
    Texts {
        rows: RowsId,
        texts: Vec<String>,
    },
    ModelColumn {
        rows: RowsId,
        first: usize,
    },
    Formula(String),
    /// Something whose nature is not known, because it is stated wrongly: nothing is told of its uses.
    Faulty,
}

/// All names that formulas may use. Inputs are numbered in the order in which they are given.
///
/// ```
/// use evenpoise::expression::{Rows, Scope, Wanted};
/// use evenpoise::numeric::Points;
///
/// let mut scope = Scope::new();
/// let rows = scope.rows(Rows { description: "the rows of readings.csv".into(), len: 3 });
/// scope.column("level", rows, vec![1.0, 2.0, 6.0]);
/// scope.variable("datum");
/// scope.formula("height", "level - datum");
/// let program = scope.compile(&[("total", "sum(height^2)", Wanted::Number)]).unwrap();
/// let (values, gradient) = program.value_and_gradient(0, &Points::from_rows(1, &[1.0, 3.0]));
/// assert_eq!(values, vec![26.0, 14.0]);
/// assert_eq!(gradient.coordinate(0), vec![-12.0, 0.0]);
/// ```
#[derive(Debug, Clone, Default)]
pub struct Scope {
    pub(super) rows: Vec<Rows>,
    pub(super) names: Vec<String>,
    pub(super) entities: Vec<Entity>,
    by_name: HashMap<String, usize>,
    /// For a group and a column, the member each row belongs to.
    pub(super) links: HashMap<(String, String), Vec<u32>>,
    pub(super) n_inputs: usize,
    /// What names may begin with that are not known, as of a file that cannot be read; the empty text for all.
    open: Vec<String>,
}

impl Scope {
    /// No names yet but `pi`, `inf` and the functions.
    #[must_use]
    pub fn new() -> Self {
        Self::default()
    }

    /// A kind of rows for columns to run over.
    pub fn rows(&mut self, rows: Rows) -> RowsId {
        self.rows.push(rows);
        RowsId(self.rows.len() as u32 - 1)
    }

    /// A number known beforehand.
    pub fn constant(&mut self, name: &str, value: f64) {
        self.enter(name, Entity::Constant(value));
    }

    /// A variable: the next input, whose number is returned.
    pub fn variable(&mut self, name: &str) -> usize {
        let input = self.take_inputs(1);
        self.enter(name, Entity::Input(input));
        input
    }

    /// A group of variables, one for every label: the next inputs, the first of whose numbers is returned. `rows`
    /// are its members, as many as there are labels.
    pub fn group(&mut self, name: &str, rows: RowsId, labels: &[String]) -> usize {
        let first = self.take_inputs(labels.len());
        self.enter(name, Entity::Group { rows, labels: labels.to_vec(), first });
        first
    }

    /// A column of data, a number for every row of `rows`; NaN is a missing cell.
    pub fn column(&mut self, name: &str, rows: RowsId, values: Vec<f64>) {
        debug_assert_eq!(values.len(), self.rows[rows.0 as usize].len);
        self.enter(name, Entity::Column { rows, values });
    }

    /// A column of labels; an empty text is a missing cell.
    pub fn texts(&mut self, name: &str, rows: RowsId, texts: Vec<String>) {
        debug_assert_eq!(texts.len(), self.rows[rows.0 as usize].len);
        self.enter(name, Entity::Texts { rows, texts });
    }

    /// Lets formulas write `group[column]`: for every row of `column`, which member (from 0) it belongs to.
    pub fn member_column(&mut self, group: &str, column: &str, members: &[usize]) {
        let members = members.iter().map(|&member| member as u32).collect();
        self.links.insert((group.to_string(), column.to_string()), members);
    }

    /// A number that a model program returns: the next input, whose number is returned.
    pub fn model_value(&mut self, name: &str) -> usize {
        self.variable(name)
    }

    /// A column that a model program returns: the next inputs, one for every row; the first of their numbers is
    /// returned.
    pub fn model_column(&mut self, name: &str, rows: RowsId) -> usize {
        let first = self.take_inputs(self.rows[rows.0 as usize].len);
        self.enter(name, Entity::ModelColumn { rows, first });
        first
    }

    /// A formula, which others may use by its name; the order does not matter.
    pub fn formula(&mut self, name: &str, text: &str) {
        self.enter(name, Entity::Formula(text.to_string()));
    }

    /// A name that was given to something stated wrongly. Formulas may use it; whatever follows from that is not told.
    pub fn faulty(&mut self, name: &str) {
        self.enter(name, Entity::Faulty);
    }

    /// Says that there are more names, not known here, that begin with `prefix` and a dot, or, where it is empty, have
    /// no dot: a name that is not known is no mistake then.
    pub fn open(&mut self, prefix: &str) {
        self.open.push(prefix.to_owned());
    }

    /// Numbers a point must bring along: variables, members of groups and values of models.
    #[must_use]
    pub fn n_inputs(&self) -> usize {
        self.n_inputs
    }

    /// Checks every formula and the `outputs`, each a key for messages, a text and what it must be, and makes a
    /// program that evaluates the outputs.
    ///
    /// # Errors
    /// All mistakes that do not follow from one another, in the order of the formulas and then the outputs.
    pub fn compile(&self, outputs: &[(&str, &str, Wanted)]) -> Result<Program, Vec<FormulaError>> {
        compile(self, outputs, true)
    }

    /// As [`Scope::compile`], but of the formulas only those are looked at that the outputs need.
    ///
    /// # Errors
    /// All mistakes in the outputs and in what they need.
    pub fn compile_alone(&self, outputs: &[(&str, &str, Wanted)]) -> Result<Program, Vec<FormulaError>> {
        compile(self, outputs, false)
    }

    /// Names of formulas and of constants that no output needs, whatever may be wrong with them.
    #[must_use]
    pub fn unused(&self, outputs: &[&str]) -> Vec<String> {
        unused(self, outputs)
    }

    /// Whether `name` may be one that is not known here.
    pub(super) fn may_be_elsewhere(&self, name: &str) -> bool {
        let table = name.rsplit_once('.').map_or("", |(table, _)| table);
        self.open.iter().any(|prefix| prefix == table)
    }

    /// The entity `name` stands for, with its number.
    pub(super) fn find(&self, name: &str) -> Option<usize> {
        self.by_name.get(name).copied()
    }

    fn enter(&mut self, name: &str, entity: Entity) {
        self.by_name.insert(name.to_string(), self.names.len());
        self.names.push(name.to_string());
        self.entities.push(entity);
    }

    fn take_inputs(&mut self, n: usize) -> usize {
        self.n_inputs += n;
        self.n_inputs - n
    }
}

/// Whether `text` can be a name: a letter, then letters, digits and `_`, in any script.
///
/// ```
/// use evenpoise::expression::is_name;
/// assert!(is_name("Zufluss_2") && is_name("流量") && !is_name("2nd") && !is_name("gate-level"));
/// ```
#[must_use]
pub fn is_name(text: &str) -> bool {
    text.starts_with(begins_name) && text.chars().all(continues_name)
}

/// Whether the language itself uses the name: `pi`, `inf`, `and`, `or`, `not`, `if` and the functions.
#[must_use]
pub fn is_reserved(name: &str) -> bool {
    ["pi", "inf", "and", "or", "not", "if"].contains(&name) || FUNCTIONS.iter().any(|function| function.name == name)
}

/// The names of values that a formula's text uses itself, each once, in the order of their first place: what a
/// caller needs to know before it can build a [`Scope`]. `pi` and `inf` are left out.
///
/// # Errors
/// The text is no formula; the error carries `key`.
pub fn names_used(key: &str, text: &str) -> Result<Vec<String>, FormulaError> {
    let parsed = parse(text);
    if let Some(fault) = parsed.faults.into_iter().next() {
        return Err(FormulaError::new(key, fault));
    }
    let Some(syntax) = parsed.syntax else { return Ok(Vec::new()) };
    let mut found: Vec<String> = Vec::new();
    let mut places: Vec<_> = syntax.names().collect();
    places.sort_by_key(|(_, span)| span.start);
    for (name, _) in places {
        if name != "pi" && name != "inf" && !found.iter().any(|known| known == name) {
            found.push(name.to_string());
        }
    }
    Ok(found)
}
