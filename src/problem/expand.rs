//! Variables as stated, spread out over the labels of their `each`: one place for every coordinate.

use std::ops::Range;

use super::columns::Column;
use super::columns::DataTable;
use super::faults::Fault;
use super::names::all_of;
use super::statement::Statement;
use super::table::Reader;
use super::text_value::Text;
use super::variable::Member;
use super::variables_table::Each;
use super::variables_table::VariableSpec;
use crate::expression::nearest;

/// A variable as stated, and the places that it, or its members, have among all coordinates.
#[derive(Debug, Clone)]
pub(crate) struct Expanded<'a> {
    pub(crate) spec: &'a VariableSpec,
    pub(crate) places: Range<usize>,
    /// Labels of the members of an `each`.
    pub(crate) labels: Option<Vec<String>>,
    /// Whether how many there are could not be told: then there is a place for one.
    pub(crate) unknown: bool,
}

impl Expanded<'_> {
    /// Names of its coordinates with their membership: `depth`, or `effect[Alder]`, `effect[Birch]`, ...
    pub(crate) fn names(&self) -> Vec<(String, Option<Member>)> {
        let name = &self.spec.name;
        match &self.labels {
            None => vec![(name.clone(), None)],
            Some(labels) => labels
                .iter()
                .enumerate()
                .map(|(position, label)| {
                    let member = Member { group: name.clone(), label: label.clone(), position };
                    (format!("{name}[{label}]"), Some(member))
                })
                .collect(),
        }
    }
}

/// Members of a group, at most: a proposal of so many coordinates is beyond any search.
const MOST_MEMBERS: u64 = 10_000;

/// Spreads out every variable. A fault of one leaves the others.
pub(crate) fn expand<'a>(reader: &mut Reader<'_>, statement: &'a Statement, tables: &[DataTable]) -> Vec<Expanded<'a>> {
    let mut expanded = Vec::new();
    let mut next = 0;
    for spec in &statement.variables {
        let labels: Option<Vec<String>> = match &spec.each {
            None => None,
            Some(Each::Count(n)) if *n > MOST_MEMBERS => {
                let message = format!("`{}` would be {n} variables; at most {MOST_MEMBERS} can be searched", spec.name);
                reader.fault(Fault::new(spec.name_span.clone(), message).help("write fewer"));
                None
            }
            Some(Each::Count(n)) => Some((1..=*n).map(|k| k.to_string()).collect()),
            Some(Each::Column(column)) => labels_of(reader, column, tables),
        };
        let unknown = spec.each_unknown || (spec.each.is_some() && labels.is_none());
        let size = labels.as_ref().map_or(1, Vec::len);
        expanded.push(Expanded { spec, places: next..next + size, labels, unknown });
        next += size;
    }
    expanded
}

fn labels_of(reader: &mut Reader<'_>, name: &Text, tables: &[DataTable]) -> Option<Vec<String>> {
    let Some((table, column)) = column_named(&name.value, tables) else {
        if reader.may_be_a_column(&name.value) {
            return None;
        }
        let known: Vec<&str> =
            tables.iter().flat_map(|table| &table.columns).map(|column| column.name.as_str()).collect();
        let fault = Fault::new(name.span.clone(), format!("there is no data column `{}`", name.value));
        let help = match (nearest(&name.value, known.iter().copied()), known.is_empty()) {
            (_, true) => "name the data file under [data]: file = \"readings.csv\"; or say how many: each = 4".into(),
            (Some(near), _) => format!("did you mean `{near}`?"),
            (None, _) => format!("the columns are {}", all_of(&known)),
        };
        reader.fault(fault.label("no such column").help(help));
        // The column that is suggested is taken, to go on with.
        let near = nearest(&name.value, known.iter().copied())?;
        return column_named(near, tables).and_then(|(_, column)| column.distinct_labels().ok());
    };
    match column.distinct_labels() {
        Ok(labels) => Some(labels),
        Err(row) => {
            let record = table.kept[row];
            let line = table.raw.records[record].0;
            let message = format!("line {line} of `{}` has no label in the column `{}`", table.raw.shown, column.name);
            let fault = table.raw.cell_fault(record, column.place(), message).label("no label");
            reader.fault(fault.help("fill the cell: the column says which member of the `each` a row belongs to"));
            None
        }
    }
}

/// A column by the name that formulas use.
pub(crate) fn column_named<'t>(name: &str, tables: &'t [DataTable]) -> Option<(&'t DataTable, &'t Column)> {
    tables
        .iter()
        .flat_map(|table| table.columns.iter().map(move |column| (table, column)))
        .find(|(_, column)| column.name == name)
}
