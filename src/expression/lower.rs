//! A formula's tree to operations, with a check at every node that its parts fit.

use std::collections::HashMap;
use std::ops::Range;

use super::columns::RowsId;
use super::kinds::{Binary, Id, Unary};
use super::lexer::Fault;
use super::operations::Operations;
use super::parser::{Infix, Node, Place, Syntax};
use super::scope::Scope;

/// What a node of a formula is.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Value {
    /// A number or, with rows, a column of them; `nature` says what else it can stand for.
    Plain { id: Id, rows: Option<RowsId>, nature: Nature },
    /// The labels of a column: the number of its entity.
    Texts(usize),
    /// A label in quotes.
    Label(String),
    /// Something that an error was told about already.
    Broken,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Nature {
    Number,
    Condition,
    /// Both: what `present` gives.
    Either,
}

/// An operation and the rows it runs over.
pub(super) type Checked = (Id, Option<RowsId>);

/// Builds the operations of one formula after the other.
pub(super) struct Lowering<'a> {
    pub(super) scope: &'a Scope,
    pub(super) operations: Operations,
    /// The values of formulas, by entity.
    pub(super) formulas: HashMap<usize, Value>,
    /// Operations of data columns, and tables of members, made so far.
    pub(super) columns: HashMap<usize, Id>,
    pub(super) tables: HashMap<(usize, usize), u32>,
    pub(super) faults: Vec<Fault>,
    /// The values of the nodes of the formula at hand, and its text.
    pub(super) values: Vec<Value>,
    pub(super) text: String,
}

impl<'a> Lowering<'a> {
    pub(super) fn new(scope: &'a Scope) -> Self {
        let row_counts = scope.rows.iter().map(|rows| rows.len).collect();
        Self {
            scope,
            operations: Operations::new(row_counts),
            formulas: HashMap::new(),
            columns: HashMap::new(),
            tables: HashMap::new(),
            faults: Vec::new(),
            values: Vec::new(),
            text: String::new(),
        }
    }

    pub(super) fn into_operations(self) -> Operations {
        self.operations
    }

    pub(super) fn operations(&mut self) -> &mut Operations {
        &mut self.operations
    }

    /// Remembers what formula `entity` is.
    pub(super) fn keep(&mut self, entity: usize, value: Value) {
        self.formulas.insert(entity, value);
    }

    pub(super) fn fault(&mut self, fault: Fault) {
        self.faults.push(fault);
    }

    pub(super) fn has_faults(&self) -> bool {
        !self.faults.is_empty()
    }

    pub(super) fn faults(&self) -> &[Fault] {
        &self.faults
    }

    pub(super) fn take_faults(&mut self) -> Vec<Fault> {
        std::mem::take(&mut self.faults)
    }

    /// What the value of the node at `place` of the formula last lowered is.
    pub(super) fn value(&self, place: Place) -> &Value {
        &self.values[place]
    }

    /// "the rows of readings.csv".
    pub(super) fn describe(&self, rows: RowsId) -> &'a str {
        &self.scope.rows[rows.0 as usize].description
    }

    /// The value of a whole formula.
    pub(super) fn lower(&mut self, text: &str, syntax: &Syntax) -> Value {
        self.text = text.to_string();
        self.values.clear();
        for (node, span) in &syntax.nodes {
            let value = self.node(syntax, node, span).unwrap_or(Value::Broken);
            self.values.push(value);
        }
        self.values[syntax.root()].clone()
    }

    /// The value of a node whose parts are known; `None` after telling an error, or because a part is broken.
    fn node(&mut self, syntax: &Syntax, node: &Node, span: &Range<usize>) -> Option<Value> {
        match node {
            Node::Number(value) => Some(number(self.operations.constant(*value), None)),
            Node::Label(label) => Some(Value::Label(label.clone())),
            Node::Name(name) => self.name(name, span),
            Node::Index { group, member, member_span } => self.index(group, member, span, member_span),
            Node::Negate(of) => {
                let (id, rows) = self.number_at(syntax, *of)?;
                Some(number(self.operations.unary(Unary::Negate, id), rows))
            }
            Node::Not(of) => {
                let (id, rows) = self.condition_at(syntax, *of)?;
                Some(condition(self.operations.unary(Unary::Not, id), rows))
            }
            Node::Infix(infix, a, b) => self.infix(syntax, *infix, *a, *b, span),
            Node::Call { name, name_span, arguments } => self.call(syntax, name, name_span, arguments, span),
            Node::Broken => None,
        }
    }

    /// `value` as a number or a column of them; else the error is told.
    pub(super) fn number(&mut self, value: &Value, span: &Range<usize>) -> Option<Checked> {
        match value {
            Value::Plain { id, rows, nature: Nature::Number | Nature::Either } => Some((*id, *rows)),
            Value::Plain { .. } => {
                let message = format!("`{}` is a condition, and a number is wanted", self.slice(span));
                self.faults.push(Fault::new(span.clone(), message).help("if(condition, 1, 0) makes a number of it"));
                None
            }
            other => self.no_text(other, span),
        }
    }

    /// `value` as a condition or a column of them; else the error is told.
    pub(super) fn condition(&mut self, value: &Value, span: &Range<usize>) -> Option<Checked> {
        match value {
            Value::Plain { id, rows, nature: Nature::Condition | Nature::Either } => Some((*id, *rows)),
            Value::Plain { .. } => {
                let message = format!("`{}` is a number, and a condition is wanted", self.slice(span));
                self.faults.push(Fault::new(span.clone(), message).help("compare it with something: < <= > >= == !="));
                None
            }
            other => self.no_text(other, span),
        }
    }

    /// Tells that labels are neither numbers nor conditions.
    fn no_text(&mut self, value: &Value, span: &Range<usize>) -> Option<Checked> {
        let slice = self.slice(span);
        self.faults.push(match value {
            Value::Texts(_) => Fault::new(span.clone(), format!("`{slice}` is a column of labels, not of numbers"))
                .help(self.use_of_labels(&slice)),
            Value::Label(_) => Fault::new(span.clone(), format!("{slice} is a label, not a number"))
                .help("compare a column of labels with it, as in station == 'Alder', or use it in square brackets"),
            _ => return None,
        });
        None
    }

    pub(super) fn number_at(&mut self, syntax: &Syntax, place: Place) -> Option<Checked> {
        self.number(&self.values[place].clone(), &syntax.nodes[place].1)
    }

    pub(super) fn condition_at(&mut self, syntax: &Syntax, place: Place) -> Option<Checked> {
        self.condition(&self.values[place].clone(), &syntax.nodes[place].1)
    }

    pub(super) fn slice(&self, span: &Range<usize>) -> String {
        self.text[span.clone()].to_string()
    }

    /// The rows that parts have in common; numbers go with any. Two kinds of rows are an error.
    pub(super) fn common_rows(&mut self, syntax: &Syntax, parts: &[(Place, Option<RowsId>)]) -> Option<Option<RowsId>> {
        let mut first: Option<(Place, RowsId)> = None;
        for &(place, rows) in parts {
            let Some(rows) = rows else { continue };
            match first {
                None => first = Some((place, rows)),
                Some((_, known)) if known == rows => {}
                Some((other, known)) => {
                    let (a, b) = (&syntax.nodes[other].1, &syntax.nodes[place].1);
                    let message = format!(
                        "`{}` runs over {} and `{}` over {}: they have no rows in common",
                        self.slice(a),
                        self.describe(known),
                        self.slice(b),
                        self.describe(rows)
                    );
                    let span = a.start.min(b.start)..a.end.max(b.end);
                    let by_rows = self.of_each_row(a, known, rows).or_else(|| self.of_each_row(b, rows, known));
                    let help = by_rows.unwrap_or_else(|| {
                        "make a number of one of them first: sum(...), mean(...), min(...), max(...)".to_owned()
                    });
                    self.faults.push(Fault::new(span, message).help(help));
                    return None;
                }
            }
        }
        Some(first.map(|(_, rows)| rows))
    }

    fn infix(&mut self, syntax: &Syntax, infix: Infix, a: Place, b: Place, span: &Range<usize>) -> Option<Value> {
        if matches!(infix, Infix::Equal | Infix::Differ) {
            let texts = |value: &Value| matches!(value, Value::Texts(_) | Value::Label(_));
            if texts(&self.values[a]) || texts(&self.values[b]) {
                return self.compare_texts(syntax, infix, a, b, span);
            }
        }
        let joins = matches!(infix, Infix::And | Infix::Or);
        let check = if joins { Self::condition_at } else { Self::number_at };
        let (left, right) = (check(self, syntax, a), check(self, syntax, b));
        let ((x, x_rows), (y, y_rows)) = match (left, right) {
            (Some(left), Some(right)) => (left, right),
            // Whatever the other one is, together with a column it makes a column.
            (Some((id, rows @ Some(_))), None) | (None, Some((id, rows @ Some(_)))) => {
                let makes_number = !joins
                    && !matches!(
                        infix,
                        Infix::Less
                            | Infix::LessEqual
                            | Infix::Greater
                            | Infix::GreaterEqual
                            | Infix::Equal
                            | Infix::Differ
                    );
                return Some(if makes_number { number(id, rows) } else { condition(id, rows) });
            }
            _ => return None,
        };
        let rows = self.common_rows(syntax, &[(a, x_rows), (b, y_rows)])?;
        let list = &mut self.operations;
        Some(match infix {
            Infix::Add => number(list.binary(Binary::Add, x, y), rows),
            Infix::Subtract => number(list.binary(Binary::Subtract, x, y), rows),
            Infix::Multiply => number(list.binary(Binary::Multiply, x, y), rows),
            Infix::Divide => number(list.binary(Binary::Divide, x, y), rows),
            Infix::Power => number(list.power(x, y), rows),
            Infix::Less => condition(list.binary(Binary::Less, x, y), rows),
            Infix::LessEqual => condition(list.binary(Binary::LessEqual, x, y), rows),
            Infix::Greater => condition(list.binary(Binary::Less, y, x), rows),
            Infix::GreaterEqual => condition(list.binary(Binary::LessEqual, y, x), rows),
            Infix::Equal => condition(list.binary(Binary::Equal, x, y), rows),
            Infix::Differ => condition(list.binary(Binary::Differ, x, y), rows),
            Infix::And => condition(list.binary(Binary::And, x, y), rows),
            Infix::Or => condition(list.binary(Binary::Or, x, y), rows),
        })
    }
}

/// A number or, with rows, a column of them.
pub(super) fn number(id: Id, rows: Option<RowsId>) -> Value {
    Value::Plain { id, rows, nature: Nature::Number }
}

/// A condition or, with rows, a column of them.
pub(super) fn condition(id: Id, rows: Option<RowsId>) -> Value {
    Value::Plain { id, rows, nature: Nature::Condition }
}
