//! From texts of formulas to programs: the scope, the outputs, and the places of what is wrong with them.

use std::collections::BTreeMap;
use std::ops::Range;

use super::columns::Cells;
use super::columns::DataTable;
use super::expand::Expanded;
use super::faults::Fault;
use super::names::Names;
use super::statement::Statement;
use super::table::Reader;
use super::target::Aim;
use super::text_value::Text;
use super::variables_table::Each;
use super::variables_table::NatureSpec;
use super::variables_table::ParameterSpec;
use crate::expression::Program;
use crate::expression::Rows;
use crate::expression::RowsId;
use crate::expression::Scope;
use crate::expression::Wanted;
use crate::expression::is_name;

/// The target of a problem whose target is a formula.
///
/// Outputs: the log density, integrand or margin first; for a probability the event's truth after it; then the margin
/// and the truth of each requirement in turn.
#[derive(Debug, Clone)]
pub(crate) struct FormulaTarget {
    pub(crate) program: Program,
    first_requirement: usize,
    requirements: usize,
}

impl FormulaTarget {
    /// Outputs that say whether each requirement holds (1 or 0).
    pub(crate) fn requires(&self) -> impl Iterator<Item = usize> + Clone + use<> {
        let first = self.first_requirement;
        (0..self.requirements).map(move |k| first + 2 * k + 1)
    }

    /// Outputs that are the margin of each requirement.
    pub(crate) fn require_margins(&self) -> impl Iterator<Item = usize> + Clone + use<> {
        let first = self.first_requirement;
        (0..self.requirements).map(move |k| first + 2 * k)
    }
}

/// Everything that was compiled.
#[derive(Debug)]
pub(crate) struct Programs {
    pub(crate) target: FormulaTarget,
    /// None without estimates.
    pub(crate) estimates: Option<Program>,
    /// Names of what each estimate that is a column runs over: labels of members, numbers of rows.
    pub(crate) estimate_labels: Vec<Option<Vec<String>>>,
    /// For each variable as stated: the program of its parameters that are formulas, in their order.
    pub(crate) parameters: Vec<Option<Program>>,
}

/// One formula that is asked for.
struct Output<'a> {
    key: String,
    text: &'a Text,
    wanted: Wanted,
}

/// Compiles all formulas; what is wrong with them goes to `reader`.
pub(crate) fn compile(
    reader: &mut Reader<'_>,
    names: &Names,
    statement: &Statement,
    expanded: &[Expanded<'_>],
    tables: &[DataTable],
) -> Option<Programs> {
    let (scope, kinds) = scope(statement, expanded, tables);
    let target = target_outputs(statement);
    let estimates: Vec<Output<'_>> = statement
        .estimates
        .iter()
        .map(|estimate| Output {
            key: format!("[estimates] {}", estimate.name),
            text: &estimate.formula,
            wanted: Wanted::NumberOrColumn,
        })
        .collect();
    let parameters: Vec<Vec<Output<'_>>> = expanded.iter().map(parameter_outputs).collect();
    let all: Vec<&Output<'_>> = target.iter().chain(&estimates).chain(parameters.iter().flatten()).collect();
    let whole = match scope.compile(&asked(all.iter().copied())) {
        Ok(program) => program,
        Err(errors) => {
            let texts = texts_by_key(statement, &all);
            for error in errors {
                let text = texts.get(error.key.as_str());
                let place = text.map_or(0..0, |text| text.place(&error.span));
                let wrong = text.and_then(|text| text.value.get(error.span.clone())).unwrap_or("");
                let fault = Fault::new(place, error.message);
                reader.fault(match error.help {
                    Some(help) => fault.help(help),
                    None if is_name(wrong) && !names.has(wrong) => fault.help(UNKNOWN_NAME_HELP),
                    None => fault,
                });
            }
            return None;
        }
    };
    unused(reader, statement, &whole);
    let program = |outputs: &[Output<'_>]| scope.compile(&asked(outputs.iter())).ok();
    let estimates = if estimates.is_empty() { None } else { Some(program(&estimates)?) };
    let labels = |program: &Program, k: usize| {
        program.output_rows(k).and_then(|rows| kinds.iter().find(|(id, _)| *id == rows)).map(|(_, names)| names.clone())
    };
    let estimate_labels =
        (0..statement.estimates.len()).map(|k| estimates.as_ref().and_then(|program| labels(program, k))).collect();
    let requirements = statement.target.require.len();
    let first_requirement = if statement.target.aim == Aim::Probability { 2 } else { 1 };
    Some(Programs {
        target: FormulaTarget { program: program(&target)?, first_requirement, requirements },
        estimates,
        estimate_labels,
        parameters: parameters.iter().map(|outputs| if outputs.is_empty() { None } else { program(outputs) }).collect(),
    })
}

const UNKNOWN_NAME_HELP: &str =
    "a formula knows the names under [constants], [variables] and [formulas] and the columns of the data";

fn asked<'a>(outputs: impl Iterator<Item = &'a Output<'a>>) -> Vec<(&'a str, &'a str, Wanted)> {
    outputs.map(|output| (output.key.as_str(), output.text.value.as_str(), output.wanted)).collect()
}

fn target_outputs(statement: &Statement) -> Vec<Output<'_>> {
    let target = &statement.target;
    let wanted = if target.aim == Aim::Probability { Wanted::Margin } else { Wanted::Number };
    let mut outputs = vec![Output { key: format!("[target] {}", target.key.word()), text: &target.formula, wanted }];
    for (k, text) in target.require.iter().enumerate() {
        outputs.push(Output { key: format!("[target] require {}", k + 1), text, wanted: Wanted::Margin });
    }
    outputs
}

fn parameter_outputs<'a>(expanded: &Expanded<'a>) -> Vec<Output<'a>> {
    let NatureSpec::Random { parameters, .. } = &expanded.spec.nature else { return Vec::new() };
    parameters
        .iter()
        .filter_map(|parameter| match &parameter.value {
            ParameterSpec::Number(_) => None,
            ParameterSpec::Formula(text) => Some(Output {
                key: format!("[variables] {} {}", expanded.spec.name, parameter.key),
                text,
                wanted: Wanted::Number,
            }),
        })
        .collect()
}

fn texts_by_key<'a>(statement: &'a Statement, outputs: &[&Output<'a>]) -> BTreeMap<String, &'a Text> {
    let formulas = statement.formulas.iter().map(|formula| (formula.name.clone(), &formula.formula));
    formulas.chain(outputs.iter().map(|output| (output.key.clone(), output.text))).collect()
}

/// Formulas and constants that nothing uses are faults: they are slips, or leftovers that mislead a reader.
fn unused(reader: &mut Reader<'_>, statement: &Statement, whole: &Program) {
    let place = |name: &str| -> Option<(&'static str, Range<usize>)> {
        let formula = statement.formulas.iter().find(|formula| formula.name == name);
        let constant = statement.constants.iter().find(|(constant, _, _)| constant == name);
        formula
            .map(|formula| ("formula", formula.name_span.clone()))
            .or_else(|| constant.map(|(_, _, span)| ("constant", span.clone())))
    };
    for name in whole.unused_formulas().iter().chain(whole.unused_constants()) {
        if let Some((kind, span)) = place(name) {
            reader.fault(
                Fault::new(span, format!("nothing uses the {kind} `{name}`"))
                    .label("not used")
                    .help("use it, take it out, or put a `#` before the line"),
            );
        }
    }
}

/// Kinds of rows, each with the names of its rows: labels, or numbers from 1.
type Kinds = Vec<(RowsId, Vec<String>)>;

fn scope(statement: &Statement, expanded: &[Expanded<'_>], tables: &[DataTable]) -> (Scope, Kinds) {
    let mut scope = Scope::new();
    let mut kinds: Kinds = Vec::new();
    for (name, value, _) in &statement.constants {
        scope.constant(name, *value);
    }
    for table in tables {
        let rows = scope.rows(Rows { description: format!("the rows of {}", table.raw.shown), len: table.kept.len() });
        kinds.push((rows, (1..=table.kept.len()).map(|row| row.to_string()).collect()));
        for column in &table.columns {
            match &column.cells {
                Cells::Numbers(numbers, _) => scope.column(&column.name, rows, numbers.clone()),
                Cells::Texts(texts) => scope.texts(&column.name, rows, texts.clone()),
            }
        }
    }
    // Members of the same column's labels can be combined with each other.
    let mut shared: Vec<(&str, RowsId)> = Vec::new();
    for variable in expanded {
        let name = &variable.spec.name;
        let Some(labels) = &variable.labels else {
            scope.variable(name);
            continue;
        };
        let rows = match &variable.spec.each {
            Some(Each::Column(column)) => match shared.iter().find(|(known, _)| *known == column.value) {
                Some((_, rows)) => *rows,
                None => {
                    let description = format!("the labels of {}", column.value);
                    let rows = scope.rows(Rows { description, len: labels.len() });
                    shared.push((&column.value, rows));
                    rows
                }
            },
            _ => scope.rows(Rows { description: format!("the members of {name}"), len: labels.len() }),
        };
        if kinds.iter().all(|(known, _)| *known != rows) {
            kinds.push((rows, labels.clone()));
        }
        scope.group(name, rows, labels);
        link_columns(&mut scope, name, labels, tables);
    }
    for formula in &statement.formulas {
        scope.formula(&formula.name, &formula.formula.value);
    }
    (scope, kinds)
}

/// `group[column]` for every column whose labels are all among those of the group.
fn link_columns(scope: &mut Scope, group: &str, labels: &[String], tables: &[DataTable]) {
    let position: BTreeMap<&str, usize> = labels.iter().enumerate().map(|(k, label)| (label.as_str(), k)).collect();
    for column in tables.iter().flat_map(|table| &table.columns) {
        let members: Option<Vec<usize>> =
            column.labels().iter().map(|label| position.get(label.as_str()).copied()).collect();
        if let Some(members) = members {
            scope.member_column(group, &column.name, &members);
        }
    }
}
