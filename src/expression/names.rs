//! What names, square brackets and labels stand for.

use std::ops::Range;

use super::columns::RowsId;
use super::errors::nearest;
use super::functions::{function, written};
use super::lexer::Fault;
use super::lower::{Lowering, Value, condition, number};
use super::parser::{Infix, Member, Place, Syntax};
use super::scope::Entity;

impl Lowering<'_> {
    pub(super) fn name(&mut self, name: &str, span: &Range<usize>) -> Option<Value> {
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

    pub(super) fn index(
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

    /// `station == 'Alder'`, `upstream != downstream`: known before any point is.
    pub(super) fn compare_texts(
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
