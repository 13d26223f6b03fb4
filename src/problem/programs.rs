//! From texts of formulas to programs: the scope, the outputs, and the places of what is wrong with them.

use std::collections::BTreeMap;
use std::ops::Range;

use super::columns::Cells;
use super::columns::DataTable;
use super::expand::Expanded;
use super::faults::Fault;
use super::names::Names;
use super::names::all_of;
use super::outside::table_of;
use super::outside_table::OutsideSpec;
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
use crate::expression::nearest;

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
    /// What a model outside the file takes, one output a value, and the names of these values.
    pub(crate) takes: Option<(Program, Vec<String>)>,
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
    let taken = match &statement.outside {
        Some(outside) => {
            if !rows_known(reader, outside, tables) {
                return None;
            }
            Some(taken(reader, statement, outside, expanded)?)
        }
        None => None,
    };
    let (scope, kinds) = scope(statement, expanded, tables);
    let take_outputs: Vec<Output<'_>> = taken.iter().flatten().map(Taken::output).collect();
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
    let all: Vec<&Output<'_>> =
        target.iter().chain(&estimates).chain(&take_outputs).chain(parameters.iter().flatten()).collect();
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
    let n_variables = expanded.last().map_or(0, |variable| variable.places.end);
    // Neither what a model takes nor a parameter can depend on what the model returns.
    let beforehand = |reader: &mut Reader<'_>, outputs: &[Output<'_>]| -> Option<Program> {
        let late = outputs.iter().find(|output| {
            let alone = scope.compile(&asked(std::iter::once(*output))).ok();
            alone.is_some_and(|alone| alone.narrowed(n_variables).is_none())
        });
        if let Some(late) = late {
            reader.fault(
                Fault::new(
                    late.text.span.clone(),
                    "this depends on what the model returns, and must be known before it is asked",
                )
                .help("use variables, constants, and formulas of these alone"),
            );
            return None;
        }
        program(outputs)?.narrowed(n_variables)
    };
    let takes = match &taken {
        Some(taken) => {
            Some((beforehand(reader, &take_outputs)?, taken.iter().map(|one| one.name.clone()).collect::<Vec<_>>()))
        }
        None => None,
    };
    let mut parameter_programs = Vec::new();
    for outputs in &parameters {
        parameter_programs.push(if outputs.is_empty() { None } else { Some(beforehand(reader, outputs)?) });
    }
    let requirements = statement.target.require.len();
    let first_requirement = if statement.target.aim == Aim::Probability { 2 } else { 1 };
    Some(Programs {
        target: FormulaTarget { program: program(&target)?, first_requirement, requirements },
        estimates,
        estimate_labels,
        parameters: parameter_programs,
        takes,
    })
}

/// One value that a model takes.
struct Taken {
    name: String,
    key: String,
    text: Text,
}

impl Taken {
    fn output(&self) -> Output<'_> {
        Output { key: self.key.clone(), text: &self.text, wanted: Wanted::Number }
    }
}

/// What the model takes: the names that it lists, a group standing for its members; or all variables.
fn taken(
    reader: &mut Reader<'_>,
    statement: &Statement,
    outside: &OutsideSpec,
    expanded: &[Expanded<'_>],
) -> Option<Vec<Taken>> {
    let all = || expanded.iter().map(|variable| Text::unplaced(&variable.spec.name)).collect();
    let listed: Vec<Text> = outside.takes.clone().unwrap_or_else(all);
    let mut known: Vec<&str> = expanded.iter().map(|variable| variable.spec.name.as_str()).collect();
    known.extend(statement.constants.iter().map(|(name, _, _)| name.as_str()));
    known.extend(statement.formulas.iter().map(|formula| formula.name.as_str()));
    let mut taken = Vec::new();
    let mut whole = true;
    for text in listed {
        let name = text.value.clone();
        if !known.contains(&name.as_str()) {
            let fault = Fault::new(
                text.span.clone(),
                format!("`takes` names `{name}`, which is no variable, constant or formula"),
            );
            let help = nearest(&name, known.iter().copied())
                .map_or_else(|| format!("there are {}", all_of(&known)), |near| format!("did you mean `{near}`?"));
            reader.fault(fault.help(help));
            whole = false;
            continue;
        }
        let group = expanded.iter().find(|variable| variable.spec.name == name && variable.labels.is_some());
        let members = group.map(Expanded::names).unwrap_or_default();
        for (k, (member, _)) in members.iter().enumerate() {
            let mut text = Text::unplaced(&format!("{name}[{}]", k + 1));
            text.span = 0..0;
            taken.push(Taken { name: member.clone(), key: format!("{} takes {member}", outside.table), text });
        }
        if members.is_empty() {
            taken.push(Taken { key: format!("{} takes {name}", outside.table), name, text });
        }
    }
    whole.then_some(taken)
}

/// Whether every column that the model returns has rows to run over.
fn rows_known(reader: &mut Reader<'_>, outside: &OutsideSpec, tables: &[DataTable]) -> bool {
    let before = reader.faults.len();
    let known: Vec<&str> = tables.iter().filter_map(|table| table.raw.spec.name.as_deref()).collect();
    for (column, named) in &outside.returns_rows {
        if table_of(named.as_ref().map(|name| name.value.as_str()), tables).is_some() {
            continue;
        }
        let span = named.as_ref().map_or(&column.span, |name| &name.span).clone();
        let message = match named {
            Some(name) => {
                format!("there is no data table `{}` for the column `{}` to run over", name.value, column.value)
            }
            None if tables.is_empty() => {
                format!("the column `{}` runs over the rows of data, and there are none", column.value)
            }
            None => format!("it is not said over which of the data files the column `{}` runs", column.value),
        };
        let help = if known.is_empty() {
            "name the data file under [data]: file = \"readings.csv\"".to_owned()
        } else {
            format!("write returns_rows = {{ {} = \"{}\" }}; the tables are {}", column.value, known[0], all_of(&known))
        };
        reader.fault(Fault::new(span, message).help(help));
    }
    reader.faults.len() == before
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
    if let Some(outside) = &statement.outside {
        for name in &outside.returns {
            scope.model_value(&name.value);
        }
        for (name, table) in &outside.returns_rows {
            let at = table_of(table.as_ref().map(|name| name.value.as_str()), tables)
                .and_then(|table| tables.iter().position(|known| std::ptr::eq(known, table)));
            // Every table made a kind of rows, in order, before anything else did.
            if let Some((rows, _)) = at.and_then(|at| kinds.get(at)) {
                scope.model_column(&name.value, *rows);
            }
        }
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
