//! What names, square brackets and labels stand for.

use std::ops::Range;

use super::columns::RowsId;
use super::errors::nearest;
use super::functions::{function, written};
use super::lexer::Fault;
use super::lower::{Lowering, Value, condition, number};
use super::parser::{Infix, Member, Place, Syntax};
use super::scope::Entity;

impl<'a> Lowering<'a> {
    pub(super) fn name(&mut self, name: &str, span: &Range<usize>) -> Option<Value> {
        match name {
            "pi" => return Some(number(self.operations.constant(std::f64::consts::PI), None)),
            "inf" => return Some(number(self.operations.constant(f64::INFINITY), None)),
            _ => {}
        }
        let Some(at) = self.scope.find(name) else {
            return self.unknown_name(name, span);
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
            Entity::Faulty => Value::Broken,
        })
    }

    /// Tells that nothing has this name; gives what is suggested instead.
    fn unknown_name(&mut self, name: &str, span: &Range<usize>) -> Option<Value> {
        if let Some(function) = function(name) {
            let help = format!("write {}", written(function));
            self.faults.push(Fault::new(span.clone(), format!("`{name}` is a function")).help(help));
            return None;
        }
        if self.scope.may_be_elsewhere(name) {
            return None;
        }
        let known = self.scope.names.iter().map(String::as_str).chain(["pi", "inf"]);
        let mut fault = Fault::new(span.clone(), format!("nothing is called `{name}`"));
        let near = nearest(name, known).or_else(|| self.longer_or_shorter(name));
        fault.meant = near.map(str::to_owned);
        let columns = self.columns_known();
        let fault = match (near, name) {
            (Some(near), _) if columns.is_empty() => fault.help(format!("did you mean `{near}`?")),
            (Some(near), _) => fault.help(format!("did you mean `{near}`? The columns of the data are {columns}")),
            (None, _) if self.is_label(name) => fault.help(format!("a label stands in quotes: '{name}'")),
            (None, "e") => fault.help("write exp(1), or exp(x) for a power of it"),
            (None, "π") => fault.help("write pi"),
            (None, "infinity" | "Infinity" | "Inf") => fault.help("write inf"),
            (None, _) if self.scope.names.is_empty() => fault,
            (None, _) => {
                let known = shortened(self.scope.names.iter().map(String::as_str));
                fault.help(format!("the names that are known are {known}"))
            }
        };
        self.faults.push(fault);
        // The rest is looked at as if the advice had been taken: what is wrong then is told as well.
        let value = self.name(near?, span)?;
        matches!(value, Value::Plain { .. }).then_some(value)
    }

    /// The one name that `name` is the beginning of, or that is the beginning of it.
    fn longer_or_shorter(&self, name: &str) -> Option<&'a str> {
        let of_enough = |text: &str| text.chars().count() >= 3;
        let mut found = self.scope.names.iter().filter(|known| {
            of_enough(name) && of_enough(known) && (known.starts_with(name) || name.starts_with(known.as_str()))
        });
        found.next().filter(|_| found.next().is_none()).map(String::as_str)
    }

    /// Whether some column holds this label.
    fn is_label(&self, name: &str) -> bool {
        self.scope.entities.iter().any(|entity| match entity {
            Entity::Texts { texts, .. } => texts.iter().any(|text| text == name),
            _ => false,
        })
    }

    fn columns_known(&self) -> String {
        let named = self.scope.entities.iter().zip(&self.scope.names);
        let columns = named.filter(|(entity, _)| matches!(entity, Entity::Column { .. } | Entity::Texts { .. }));
        shortened(columns.map(|(_, name)| name.as_str()))
    }

    /// The columns that tell which member of `group` a row belongs to, in the order of the data.
    pub(super) fn columns_of_group(&self, group: &str) -> Vec<&'a str> {
        let links = &self.scope.links;
        let names = self.scope.names.iter().filter(|name| links.contains_key(&(group.to_owned(), (*name).clone())));
        names.map(String::as_str).collect()
    }

    /// What to write for the member of each row, where `part` names a group that runs over `members` and some column of
    /// `rows` tells which member a row belongs to.
    pub(super) fn of_each_row(&self, part: &Range<usize>, members: RowsId, rows: RowsId) -> Option<String> {
        let text = self.slice(part);
        let is_word = |c: char| c.is_alphanumeric() || c == '_' || c == '.';
        for (entity, name) in self.scope.entities.iter().zip(&self.scope.names) {
            let named = text.split(|c| !is_word(c)).any(|word| word == name);
            let (Entity::Group { rows: own, .. }, true) = (entity, named) else { continue };
            let of_rows = |column: &&str| {
                self.scope.find(column).is_some_and(|at| match &self.scope.entities[at] {
                    Entity::Column { rows: its, .. } | Entity::Texts { rows: its, .. } => *its == rows,
                    _ => false,
                })
            };
            if *own == members
                && let Some(column) = self.columns_of_group(name).into_iter().find(of_rows)
            {
                return Some(format!("write {name}[{column}]: for each row the one of its {column}"));
            }
        }
        None
    }

    /// What a column of labels is good for.
    pub(super) fn use_of_labels(&self, column: &str) -> String {
        let groups = self.scope.links.keys().filter(|(_, of)| of == column).map(|(group, _)| group.as_str());
        match groups.min() {
            Some(group) => {
                format!("write {group}[{column}], or compare it with a label, as in {column} == 'Alder'")
            }
            None => format!("compare it with a label, as in {column} == 'Alder', or use it in square brackets"),
        }
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
            if !matches!(self.scope.entities[at], Entity::Faulty) {
                self.no_group(at, member, group_span);
            }
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

    fn no_group(&mut self, at: usize, member: &Member, span: Range<usize>) {
        let group = &self.scope.names[at];
        let message = format!("`{group}` is no variable made with `each`: square brackets do not go with it");
        let fault = Fault::new(span, message);
        let help = match (&self.scope.entities[at], member) {
            (Entity::Input(_), Member::Column(column)) => {
                format!("write each = \"{column}\" in the line of `{group}` to have one for every label of {column}")
            }
            (Entity::Column { .. } | Entity::Texts { .. } | Entity::Formula(_), _) => {
                format!("write {group}: a formula is worked out row by row, with the value of each row")
            }
            _ => format!("write {group} without them"),
        };
        self.faults.push(fault.help(help));
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
            if matches!(self.scope.entities[at], Entity::Faulty) {
                return None;
            }
            let columns = self.columns_of_group(group);
            let message = format!("`{column}` does not tell which member of `{group}` a row belongs to");
            let fault = Fault::new(span.clone(), message);
            self.faults.push(if columns.is_empty() {
                fault.help(format!("write a position, {group}[1], or make the variable with each = \"{column}\""))
            } else {
                let written: Vec<String> = columns.iter().map(|column| format!("{group}[{column}]")).collect();
                fault.help(format!("write {}", written.join(" or ")))
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

/// Names one after the other, no longer than a line.
fn shortened<'n>(names: impl Iterator<Item = &'n str>) -> String {
    let mut text = String::new();
    for name in names {
        if text.chars().count() + name.chars().count() > 70 {
            return text + ", ...";
        }
        text = if text.is_empty() { name.to_owned() } else { format!("{text}, {name}") };
    }
    text
}
