//! A formula's tree to operations, with a check at every node that its parts fit.

use std::collections::HashMap;
use std::ops::Range;

use super::columns::RowsId;
use super::errors::nearest;
use super::functions::{Body, FOREIGN_FUNCTIONS, FUNCTIONS, Function, Reduce, function};
use super::lexer::Fault;
use super::operations::{Binary, Id, Operations, Reduction, Unary};
use super::parser::{Infix, Member, Node, Place, Syntax};
use super::scope::{Entity, Scope};

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
    scope: &'a Scope,
    operations: Operations,
    /// The values of formulas, by entity.
    formulas: HashMap<usize, Value>,
    /// Operations of data columns, and tables of members, made so far.
    columns: HashMap<usize, Id>,
    tables: HashMap<(usize, usize), u32>,
    faults: Vec<Fault>,
    /// The values of the nodes of the formula at hand, and its text.
    values: Vec<Value>,
    text: String,
}

impl<'a> Lowering<'a> {
    pub(super) fn new(scope: &'a Scope) -> Self {
        let mut operations = Operations::default();
        operations.row_counts = scope.rows.iter().map(|rows| rows.len).collect();
        Self {
            scope,
            operations,
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
                .help(format!("compare it with a label, as in {slice} == 'Alder', or use it in square brackets")),
            Value::Label(_) => Fault::new(span.clone(), format!("{slice} is a label, not a number"))
                .help("compare a column of labels with it, as in station == 'Alder', or use it in square brackets"),
            _ => return None,
        });
        None
    }

    fn number_at(&mut self, syntax: &Syntax, place: Place) -> Option<Checked> {
        self.number(&self.values[place].clone(), &syntax.nodes[place].1)
    }

    fn condition_at(&mut self, syntax: &Syntax, place: Place) -> Option<Checked> {
        self.condition(&self.values[place].clone(), &syntax.nodes[place].1)
    }

    fn slice(&self, span: &Range<usize>) -> String {
        self.text[span.clone()].to_string()
    }

    /// The rows that parts have in common; numbers go with any. Two kinds of rows are an error.
    fn common_rows(&mut self, syntax: &Syntax, parts: &[(Place, Option<RowsId>)]) -> Option<Option<RowsId>> {
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
                    let help = "make a number of one of them first: sum(...), mean(...), min(...), max(...)";
                    self.faults.push(Fault::new(span, message).help(help));
                    return None;
                }
            }
        }
        Some(first.map(|(_, rows)| rows))
    }

    fn name(&mut self, name: &str, span: &Range<usize>) -> Option<Value> {
        match name {
            "pi" => return Some(number(self.operations.constant(std::f64::consts::PI), None)),
            "inf" => return Some(number(self.operations.constant(f64::INFINITY), None)),
            _ => {}
        }
        let Some(at) = self.scope.find(name) else {
            self.unknown_name(name, span);
            return None;
        };
        Some(match &self.scope.entities[at] {
            Entity::Constant(value) => number(self.operations.constant(*value), None),
            Entity::Input(input) => number(self.operations.input(*input), None),
            Entity::Group { rows, first, .. } | Entity::ModelColumn { rows, first } => {
                number(self.operations.input_row(*first, *rows), Some(*rows))
            }
            Entity::Column { rows, values } => {
                let operations = &mut self.operations;
                let id = *self.columns.entry(at).or_insert_with(|| operations.data(*rows, values.clone()));
                number(id, Some(*rows))
            }
            Entity::Texts { .. } => Value::Texts(at),
            Entity::Formula(_) => self.formulas.get(&at).cloned().unwrap_or(Value::Broken),
        })
    }

    fn unknown_name(&mut self, name: &str, span: &Range<usize>) {
        if let Some(function) = function(name) {
            let help = format!("write {}", written(function));
            self.faults.push(Fault::new(span.clone(), format!("`{name}` is a function")).help(help));
            return;
        }
        let known = self.scope.names.iter().map(String::as_str).chain(["pi", "inf"]);
        let fault = Fault::new(span.clone(), format!("nothing is called `{name}`"));
        self.faults.push(match nearest(name, known) {
            Some(near) => fault.help(format!("did you mean `{near}`?")),
            None if name == "e" => fault.help("write exp(1), or exp(x) for a power of it"),
            None => fault,
        });
    }

    fn index(
        &mut self,
        group: &str,
        member: &Member,
        span: &Range<usize>,
        member_span: &Range<usize>,
    ) -> Option<Value> {
        let group_span = span.start..span.start + group.len();
        let Some(at) = self.scope.find(group) else {
            self.unknown_name(group, &group_span);
            return None;
        };
        let Entity::Group { labels, first, .. } = &self.scope.entities[at] else {
            let message = format!("`{group}` is no variable made with `each`: square brackets do not go with it");
            self.faults.push(Fault::new(group_span, message));
            return None;
        };
        match member {
            Member::Position(position) => {
                if *position == position.floor() && (1.0..=labels.len() as f64).contains(position) {
                    return Some(number(self.operations.input(first + *position as usize - 1), None));
                }
                let message = format!("`{group}` has no member {position}");
                let help = format!("positions are the whole numbers from 1 to {}", labels.len());
                self.faults.push(Fault::new(member_span.clone(), message).help(help));
                None
            }
            Member::Label(label) => {
                if let Some(position) = labels.iter().position(|known| known == label) {
                    return Some(number(self.operations.input(first + position), None));
                }
                let message = format!("`{group}` has no member '{label}'");
                self.faults.push(Fault::new(member_span.clone(), message).help(labels_help(label, labels)));
                None
            }
            Member::Column(column) => self.indexed_by_column(at, *first, column, member_span),
        }
    }

    fn indexed_by_column(&mut self, group_at: usize, first: usize, column: &str, span: &Range<usize>) -> Option<Value> {
        let Some(at) = self.scope.find(column) else {
            self.unknown_name(column, span);
            return None;
        };
        let group = &self.scope.names[group_at];
        let linked = self.scope.links.get(&(group.clone(), column.to_string()));
        let (Entity::Texts { rows, .. } | Entity::Column { rows, .. }, Some(members)) =
            (&self.scope.entities[at], linked)
        else {
            let mut columns: Vec<&str> =
                self.scope.links.keys().filter(|(of, _)| of == group).map(|(_, column)| column.as_str()).collect();
            columns.sort_unstable();
            let message = format!("`{column}` does not tell which member of `{group}` a row belongs to");
            let fault = Fault::new(span.clone(), message);
            self.faults.push(if columns.is_empty() {
                fault.help(format!("write a position, {group}[1], or make the variable with each = \"{column}\""))
            } else {
                fault.help(format!("the column that does: {}", columns.join(", ")))
            });
            return None;
        };
        let operations = &mut self.operations;
        let table =
            *self.tables.entry((group_at, at)).or_insert_with(|| operations.member_table(*rows, members.clone()));
        Some(number(self.operations.input_member(first, table), Some(*rows)))
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
        let ((x, x_rows), (y, y_rows)) = (left?, right?);
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

    /// `station == 'Alder'`, `upstream != downstream`: known before any point is.
    fn compare_texts(
        &mut self,
        syntax: &Syntax,
        infix: Infix,
        a: Place,
        b: Place,
        span: &Range<usize>,
    ) -> Option<Value> {
        let scope = self.scope;
        let column = |value: &Value| match value {
            Value::Texts(at) => match &scope.entities[*at] {
                Entity::Texts { rows, texts } => Some((*rows, texts)),
                _ => None,
            },
            _ => None,
        };
        let (left, right) = (self.values[a].clone(), self.values[b].clone());
        let (rows, same): (RowsId, Vec<bool>) = match (column(&left), column(&right), &left, &right) {
            (Some((rows, texts)), None, _, Value::Label(label)) => {
                self.label_occurs(label, texts, &syntax.nodes[b].1)?;
                (rows, texts.iter().map(|text| text == label).collect())
            }
            (None, Some((rows, texts)), Value::Label(label), _) => {
                self.label_occurs(label, texts, &syntax.nodes[a].1)?;
                (rows, texts.iter().map(|text| text == label).collect())
            }
            (Some((rows, texts)), Some((other_rows, others)), ..) => {
                self.common_rows(syntax, &[(a, Some(rows)), (b, Some(other_rows))])?;
                (rows, texts.iter().zip(others).map(|(a, b)| a == b).collect())
            }
            _ => {
                if left != Value::Broken && right != Value::Broken {
                    let fault = Fault::new(span.clone(), "a label can only be compared with a column of labels");
                    self.faults.push(fault.help("a column of numbers is compared with a number, without quotes"));
                }
                return None;
            }
        };
        let holds = |same: bool| if same == (infix == Infix::Equal) { 1.0 } else { 0.0 };
        let id = self.operations.data(rows, same.into_iter().map(holds).collect());
        Some(condition(id, Some(rows)))
    }

    /// A comparison with a label that no row has is a slip of the pen, not a question.
    fn label_occurs(&mut self, label: &str, texts: &[String], span: &Range<usize>) -> Option<()> {
        if texts.iter().any(|text| text == label) {
            return Some(());
        }
        let mut labels: Vec<String> = Vec::new();
        for text in texts {
            if !labels.contains(text) {
                labels.push(text.clone());
            }
        }
        let fault = Fault::new(span.clone(), format!("no row has the label '{label}'"));
        self.faults.push(fault.help(labels_help(label, &labels)));
        None
    }

    fn call(
        &mut self,
        syntax: &Syntax,
        name: &str,
        name_span: &Range<usize>,
        arguments: &[Place],
        span: &Range<usize>,
    ) -> Option<Value> {
        let Some(function) = function(name) else {
            self.unknown_function(name, name_span);
            return None;
        };
        let n = function.arguments.len();
        let fits = match function.body {
            Body::Chain(..) => !arguments.is_empty(),
            _ => arguments.len() == n,
        };
        if !fits {
            let wants =
                if matches!(function.body, Body::Chain(..)) { "at least one".to_string() } else { n.to_string() };
            let noun = if wants == "1" || wants == "at least one" { "argument" } else { "arguments" };
            let message = format!("`{name}` takes {wants} {noun}, not {}", arguments.len());
            self.faults.push(Fault::new(span.clone(), message).help(format!("write {}", written(function))));
            return None;
        }
        match function.body {
            Body::If => self.choose(syntax, arguments),
            Body::Lag => self.lag(syntax, arguments),
            Body::Present => self.present(syntax, arguments[0]),
            Body::Reduce(reduce) => self.reduce(syntax, name, reduce, arguments[0]),
            Body::Chain(_, reduce) if arguments.len() == 1 => self.reduce(syntax, name, reduce, arguments[0]),
            Body::Unary(_) | Body::Binary(_) | Body::Build(_) | Body::Chain(..) => {
                // All arguments are looked at before the first mistake ends it.
                let checked: Vec<_> = arguments.iter().map(|&place| self.number_at(syntax, place)).collect();
                let checked: Vec<Checked> = checked.into_iter().collect::<Option<_>>()?;
                let parts: Vec<_> = arguments.iter().zip(&checked).map(|(&place, &(_, rows))| (place, rows)).collect();
                let rows = self.common_rows(syntax, &parts)?;
                let ids: Vec<Id> = checked.iter().map(|&(id, _)| id).collect();
                Some(number(apply(function.body, &mut self.operations, &ids), rows))
            }
        }
    }

    fn unknown_function(&mut self, name: &str, span: &Range<usize>) {
        let foreign = FOREIGN_FUNCTIONS.iter().find(|(other, _)| *other == name);
        let fault = match (self.scope.find(name), foreign) {
            (Some(_), _) => Fault::new(span.clone(), format!("`{name}` is no function"))
                .help(format!("write {name}*(...) for a product")),
            (None, Some((_, help))) => Fault::new(span.clone(), format!("no function is called `{name}`")).help(*help),
            (None, None) => {
                let fault = Fault::new(span.clone(), format!("no function is called `{name}`"));
                match nearest(name, FUNCTIONS.iter().map(|function| function.name)) {
                    Some(near) => fault.help(format!("did you mean `{near}`?")),
                    None => fault,
                }
            }
        };
        self.faults.push(fault);
    }

    fn choose(&mut self, syntax: &Syntax, arguments: &[Place]) -> Option<Value> {
        let &[which, yes, no] = arguments else { return None };
        let conditions = |value: &Value| matches!(value, Value::Plain { nature: Nature::Condition, .. });
        let of_conditions = conditions(&self.values[yes]) && conditions(&self.values[no]);
        let check = if of_conditions { Self::condition_at } else { Self::number_at };
        let parts = (self.condition_at(syntax, which), check(self, syntax, yes), check(self, syntax, no));
        let ((c, c_rows), (a, a_rows), (b, b_rows)) = (parts.0?, parts.1?, parts.2?);
        let rows = self.common_rows(syntax, &[(which, c_rows), (yes, a_rows), (no, b_rows)])?;
        let id = self.operations.select(c, a, b);
        Some(if of_conditions { condition(id, rows) } else { number(id, rows) })
    }

    fn lag(&mut self, syntax: &Syntax, arguments: &[Place]) -> Option<Value> {
        let &[of, first] = arguments else { return None };
        let (checked, before) = (self.number_at(syntax, of), self.number_at(syntax, first));
        let ((id, rows), (first_id, first_rows)) = (checked?, before?);
        let Some(rows) = rows else {
            self.wants_column("lag", &syntax.nodes[of].1);
            return None;
        };
        if first_rows.is_some() {
            let span = syntax.nodes[first].1.clone();
            let message = format!("`{}` is a column; the value before the first row is one number", self.slice(&span));
            self.faults.push(Fault::new(span, message).help("write lag(x, 0), or a variable for what came before"));
            return None;
        }
        Some(number(self.operations.lag(id, first_id, rows), Some(rows)))
    }

    fn wants_column(&mut self, name: &str, span: &Range<usize>) {
        let message = format!("`{name}` works on a column, and `{}` is one number", self.slice(span));
        self.faults
            .push(Fault::new(span.clone(), message).help("a data column or a group makes an expression a column"));
    }

    fn present(&mut self, syntax: &Syntax, of: Place) -> Option<Value> {
        let span = &syntax.nodes[of].1;
        let (id, rows) = match self.values[of].clone() {
            Value::Texts(at) => {
                let Entity::Texts { rows, texts } = &self.scope.entities[at] else { return None };
                let filled = texts.iter().map(|text| if text.is_empty() { 0.0 } else { 1.0 }).collect();
                (self.operations.data(*rows, filled), *rows)
            }
            value => {
                let (id, rows) = self.number(&value, span)?;
                let Some(rows) = rows.filter(|_| !self.operations.entry(id).varies) else {
                    let message = format!("`{}` is no column of data", self.slice(span));
                    let help = "present(x) tells in which rows a data column has a value";
                    self.faults.push(Fault::new(span.clone(), message).help(help));
                    return None;
                };
                (self.operations.unary(Unary::Present, id), rows)
            }
        };
        Some(Value::Plain { id, rows: Some(rows), nature: Nature::Either })
    }

    fn reduce(&mut self, syntax: &Syntax, name: &str, reduce: Reduce, of: Place) -> Option<Value> {
        let span = &syntax.nodes[of].1;
        let value = self.values[of].clone();
        let (id, rows, is_condition) = match (&value, reduce) {
            (Value::Texts(at), Reduce::Count) => {
                let Entity::Texts { rows, .. } = &self.scope.entities[*at] else { return None };
                (self.operations.constant(1.0), Some(*rows), false)
            }
            (Value::Plain { id, rows, nature }, Reduce::Count) => (*id, *rows, *nature != Nature::Number),
            _ => {
                let (id, rows) = self.number(&value, span)?;
                (id, rows, false)
            }
        };
        if value == Value::Broken {
            return None;
        }
        let Some(rows) = rows else {
            self.wants_column(name, span);
            return None;
        };
        let list = &mut self.operations;
        let n = list.row_count(rows) as f64;
        Some(number(
            match reduce {
                Reduce::Count if !is_condition => list.constant(n),
                Reduce::Sum | Reduce::Count => list.reduce(Reduction::Sum, id, rows),
                Reduce::Mean => {
                    let sum = list.reduce(Reduction::Sum, id, rows);
                    let n = list.constant(n);
                    list.binary(Binary::Divide, sum, n)
                }
                Reduce::Minimum => list.reduce(Reduction::Minimum, id, rows),
                Reduce::Maximum => list.reduce(Reduction::Maximum, id, rows),
                Reduce::LogSumExp => list.reduce(Reduction::LogSumExp, id, rows),
            },
            None,
        ))
    }
}

/// A function of numbers, row by row.
fn apply(body: Body, list: &mut Operations, of: &[Id]) -> Id {
    match body {
        Body::Unary(function) => list.unary(function, of[0]),
        Body::Binary(function) => list.binary(function, of[0], of[1]),
        Body::Build(build) => build(list, of),
        Body::Chain(function, _) => of[1..].iter().fold(of[0], |so_far, &next| list.binary(function, so_far, next)),
        Body::Reduce(_) | Body::If | Body::Lag | Body::Present => unreachable!("handled by their own functions"),
    }
}

/// A function as one writes it: `atan2(y, x)`.
fn written(function: &Function) -> String {
    match function.body {
        Body::Chain(..) => format!("{0}(column) or {0}(a, b, ...)", function.name),
        _ => format!("{}({})", function.name, function.arguments.join(", ")),
    }
}

fn number(id: Id, rows: Option<RowsId>) -> Value {
    Value::Plain { id, rows, nature: Nature::Number }
}

fn condition(id: Id, rows: Option<RowsId>) -> Value {
    Value::Plain { id, rows, nature: Nature::Condition }
}

/// The label that was meant, or some of those there are.
fn labels_help(label: &str, labels: &[String]) -> String {
    if let Some(near) = nearest(label, labels.iter().map(String::as_str)) {
        return format!("did you mean '{near}'?");
    }
    let shown: Vec<String> = labels.iter().take(6).map(|label| format!("'{label}'")).collect();
    let more = if labels.len() > shown.len() { ", ..." } else { "" };
    format!("there are {}{more}", shown.join(", "))
}
