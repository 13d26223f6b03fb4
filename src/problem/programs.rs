//! From texts of formulas to programs: the scope, the outputs, and the places of what is wrong with them.

use std::collections::BTreeMap;
use std::ops::Range;

use super::columns::Cells;
use super::columns::DataTable;
use super::expand::Expanded;
use super::faults::Fault;
use super::names::all_of;
use super::outside::table_of;
use super::outside_table::OutsideSpec;
use super::statement::Stated;
use super::statement::Statement;
use super::table::Reader;
use super::target::Aim;
use super::text_value::Text;
use super::variables_table::Each;
use super::variables_table::ParameterSpec;
use crate::expression::FormulaError;
use crate::expression::Program;
use crate::expression::Rows;
use crate::expression::RowsId;
use crate::expression::Scope;
use crate::expression::Wanted;
use crate::expression::is_name;
use crate::expression::is_reserved;
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

/// Everything that was compiled but parameters.
#[derive(Debug)]
pub(crate) struct Programs {
    pub(crate) target: FormulaTarget,
    /// None without estimates.
    pub(crate) estimates: Option<Program>,
    /// Names of what each estimate that is a column runs over: labels of members, numbers of rows.
    pub(crate) estimate_labels: Vec<Option<Vec<String>>>,
    /// What a model outside the file takes, one output a value, and the names of these values.
    pub(crate) takes: Option<(Program, Vec<String>)>,
}

/// The formulas among the parameters of a variable.
#[derive(Debug)]
pub(crate) enum ParameterProgram {
    /// There are none.
    Numbers,
    /// In their order.
    Formulas(Box<Program>),
    /// Something is wrong with them, and was told.
    Faulty,
}

/// One formula that is asked for.
struct Output<'a> {
    key: String,
    text: &'a Text,
    wanted: Wanted,
}

/// Compiles all formulas; what is wrong with them goes to `reader`. Parameters are there for every variable as stated,
/// the rest only where all is well.
pub(crate) fn compile(
    reader: &mut Reader<'_>,
    stated: &Stated,
    expanded: &[Expanded<'_>],
    tables: &[DataTable],
) -> (Option<Programs>, Vec<ParameterProgram>) {
    let statement = &stated.statement;
    let taken = statement.outside.as_ref().map(|outside| {
        check_rows(reader, statement, outside);
        taken(reader, statement, outside, expanded)
    });
    let (scope, kinds) = scope(reader, statement, expanded, tables);
    let take_outputs: Vec<Output<'_>> = taken.iter().flatten().map(Taken::output).collect();
    let target: Vec<Output<'_>> = stated.target.texts.iter().map(target_output).collect();
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
    let errors = scope.compile(&asked(all.iter().copied())).err().unwrap_or_default();
    let texts = texts_by_key(statement, &all);
    for error in &errors {
        tell(reader, error, &texts);
    }
    tell_assumed(reader, &texts, tables);
    unused(reader, statement, &scope, &all, &errors);
    let program = |outputs: &[Output<'_>]| scope.compile_alone(&asked(outputs.iter())).ok();
    let n_variables = expanded.last().map_or(0, |variable| variable.places.end);
    // Neither what a model takes nor a parameter can depend on what the model returns.
    let mut beforehand = |outputs: &[Output<'_>]| {
        check_early(reader, &scope, outputs, n_variables);
        program(outputs)?.narrowed(n_variables)
    };
    let takes = taken.as_ref().map(|taken| {
        let names: Vec<String> = taken.iter().map(|one| one.name.clone()).collect();
        beforehand(&take_outputs).map(|program| (program, names))
    });
    let parameters = parameters.iter().map(|outputs| match outputs.as_slice() {
        [] => ParameterProgram::Numbers,
        outputs => match beforehand(outputs) {
            Some(program) => ParameterProgram::Formulas(Box::new(program)),
            None => ParameterProgram::Faulty,
        },
    });
    let parameters = parameters.collect();
    let whole = || {
        let takes = match takes {
            Some(takes) => Some(takes?),
            None => None,
        };
        let target = program(&target)?;
        let estimates = if estimates.is_empty() { None } else { Some(program(&estimates)?) };
        let labels = |program: &Program, k: usize| {
            let rows = program.output_rows(k)?;
            kinds.iter().find(|(id, _)| *id == rows).map(|(_, names)| names.clone())
        };
        let of_estimate = |k: usize| estimates.as_ref().and_then(|program| labels(program, k));
        let estimate_labels = (0..statement.estimates.len()).map(of_estimate).collect();
        let requirements = statement.target.require.len();
        let first_requirement = if statement.target.aim == Aim::Probability { 2 } else { 1 };
        let target = FormulaTarget { program: target, first_requirement, requirements };
        Some(Programs { target, estimates, estimate_labels, takes })
    };
    let sound = errors.is_empty() && reader.faults.is_empty();
    (if sound { whole() } else { None }, parameters)
}

/// A fault for what is wrong with a formula, at its place in the file.
fn tell(reader: &mut Reader<'_>, error: &FormulaError, texts: &BTreeMap<String, &Text>) {
    let text = texts.get(error.key.as_str());
    let place = text.map_or(0..0, |text| text.place(&error.span));
    let mut fault = Fault::new(place, error.message.clone());
    if let Some(help) = &error.help {
        fault = fault.help(help.clone());
    }
    if error.help.is_none() && error.message.starts_with("nothing is called") {
        fault = fault.help(UNKNOWN_NAME_HELP);
    }
    reader.fault(fault);
}

/// Columns that formulas use by a name that they do not have: their headers are none.
fn tell_assumed(reader: &mut Reader<'_>, texts: &BTreeMap<String, &Text>, tables: &[DataTable]) {
    for table in tables {
        let place = table.raw.spec.name.as_ref().map_or("[data]".into(), |table| format!("[data.{table}]"));
        let news: Vec<String> = table
            .assumed
            .iter()
            .map(|(name, header)| format!("{} = \"{header}\"", name.rsplit('.').next().unwrap_or(name)))
            .collect();
        for (name, header) in &table.assumed {
            let is_word = |c: char| c.is_alphanumeric() || c == '_' || c == '.';
            let found = texts.values().filter_map(|text| {
                let places = text.value.match_indices(name.as_str());
                let whole = |at: usize| {
                    let (before, after) = (&text.value[..at], &text.value[at + name.len()..]);
                    !before.ends_with(is_word) && !after.starts_with(is_word)
                };
                places.map(|(at, _)| at).find(|&at| whole(at)).map(|at| text.place(&(at..at + name.len())))
            });
            let Some(span) = found.min_by_key(|span| span.start) else { continue };
            let fault = Fault::new(span, format!("nothing is called `{name}`"));
            reader.fault(fault.help(format!(
                "the header \"{header}\" of `{}` is no name; give it one under {place}: names = {{ {} }}",
                table.raw.shown,
                news.join(", ")
            )));
        }
    }
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

/// What the model takes: the names that it lists, a group standing for its members; or all variables. Names of nothing
/// are left out.
fn taken(
    reader: &mut Reader<'_>,
    statement: &Statement,
    outside: &OutsideSpec,
    expanded: &[Expanded<'_>],
) -> Vec<Taken> {
    let all = || expanded.iter().map(|variable| Text::unplaced(&variable.spec.name)).collect();
    let listed: Vec<Text> = outside.takes.clone().unwrap_or_else(all);
    let mut known: Vec<&str> = expanded.iter().map(|variable| variable.spec.name.as_str()).collect();
    known.extend(statement.constants.iter().map(|(name, _, _)| name.as_str()));
    known.extend(statement.formulas.iter().map(|formula| formula.name.as_str()));
    let mut taken = Vec::new();
    for text in listed {
        let name = text.value.clone();
        if !known.contains(&name.as_str()) {
            let near = nearest(&name, known.iter().copied());
            let help =
                near.map_or_else(|| format!("there are {}", all_of(&known)), |near| format!("did you mean `{near}`?"));
            // One that is meant is used; one that is stated wrongly was told.
            reader.mentions.extend(near.map(str::to_owned));
            if !reader.may_be_a_column(&name) {
                let message = format!("`takes` names `{name}`, which is no variable, constant or formula");
                reader.fault(Fault::new(text.span.clone(), message).help(help));
            }
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
    taken
}

/// Whether every column that the model returns has rows to run over, as far as data are stated.
fn check_rows(reader: &mut Reader<'_>, statement: &Statement, outside: &OutsideSpec) {
    // A plain [data] that cannot be made out was told.
    if reader.may_be_a_column("") {
        return;
    }
    let stated = &statement.data;
    let known: Vec<&str> = stated.iter().filter_map(|spec| spec.name.as_deref()).collect();
    for (column, named) in &outside.returns_rows {
        let message = match named {
            Some(name) if !known.contains(&name.value.as_str()) => {
                format!("there is no data table `{}` for the column `{}` to run over", name.value, column.value)
            }
            None if stated.is_empty() => {
                format!("the column `{}` runs over the rows of data, and there are none", column.value)
            }
            None if stated.len() > 1 => {
                format!("it is not said over which of the data files the column `{}` runs", column.value)
            }
            _ => continue,
        };
        let span = named.as_ref().map_or(&column.span, |name| &name.span).clone();
        let help = if known.is_empty() {
            "name the data file under [data]: file = \"readings.csv\"".to_owned()
        } else {
            format!("write returns_rows = {{ {} = \"{}\" }}; the tables are {}", column.value, known[0], all_of(&known))
        };
        reader.fault(Fault::new(span, message).help(help));
    }
}

/// A fault for every output that depends on more than the first `n_variables` inputs.
fn check_early(reader: &mut Reader<'_>, scope: &Scope, outputs: &[Output<'_>], n_variables: usize) {
    if scope.n_inputs() == n_variables {
        return;
    }
    for output in outputs {
        let alone = scope.compile_alone(&asked(std::iter::once(output))).ok();
        if alone.is_some_and(|alone| alone.narrowed(n_variables).is_none()) {
            let message = "this depends on what the model returns, and must be known before it is asked";
            let fault = Fault::new(output.text.span.clone(), message);
            reader.fault(fault.help("use variables, constants, and formulas of these alone"));
        }
    }
}

const UNKNOWN_NAME_HELP: &str =
    "a formula knows the names under [constants], [variables] and [formulas] and the columns of the data";

fn asked<'a>(outputs: impl Iterator<Item = &'a Output<'a>>) -> Vec<(&'a str, &'a str, Wanted)> {
    outputs.map(|output| (output.key.as_str(), output.text.value.as_str(), output.wanted)).collect()
}

fn target_output((key, text, wanted): &(String, Text, Wanted)) -> Output<'_> {
    Output { key: key.clone(), text, wanted: *wanted }
}

fn parameter_outputs<'a>(expanded: &Expanded<'a>) -> Vec<Output<'a>> {
    let parameters = expanded.spec.nature.parameters();
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

/// Formulas and constants that nothing uses are faults: they are slips, or leftovers that mislead a reader. One that a
/// misspelt name means is used.
fn unused(
    reader: &mut Reader<'_>,
    statement: &Statement,
    scope: &Scope,
    outputs: &[&Output<'_>],
    errors: &[FormulaError],
) {
    let place = |name: &str| -> Option<(&'static str, Range<usize>)> {
        let formula = statement.formulas.iter().find(|formula| formula.name == name);
        let constant = statement.constants.iter().find(|(constant, _, _)| constant == name);
        formula
            .map(|formula| ("formula", formula.name_span.clone()))
            .or_else(|| constant.map(|(_, _, span)| ("constant", span.clone())))
    };
    let meant: Vec<&str> = errors.iter().filter_map(|error| error.meant.as_deref()).collect();
    let mut texts: Vec<&str> = outputs.iter().map(|output| output.text.value.as_str()).collect();
    texts.extend(reader.mentions.iter().map(String::as_str).chain(meant));
    // What is meant by an unknown name that is like no other may be any of them.
    let astray: Vec<&FormulaError> =
        errors.iter().filter(|error| error.meant.is_none() && error.message.starts_with("nothing is called")).collect();
    let usable = |name: &String| is_name(name) && !is_reserved(name) && !reader.faulty.contains(name);
    let left: Vec<String> = scope.unused(&texts).into_iter().filter(usable).collect();
    for name in left {
        if let Some((kind, span)) = place(&name) {
            let fault = Fault::new(span, format!("nothing uses the {kind} `{name}`")).label("not used");
            reader.fault(match astray.as_slice() {
                [] => fault.help("use it, take it out, or put a `#` before the line"),
                [one, ..] => {
                    let unknown = one.message.trim_start_matches("nothing is called ");
                    fault.help(format!(
                        "use it, perhaps for {unknown}, which nothing is called; or put a `#` before the line"
                    ))
                }
            });
        }
    }
}

/// Kinds of rows, each with the names of its rows: labels, or numbers from 1.
type Kinds = Vec<(RowsId, Vec<String>)>;

fn scope(
    reader: &Reader<'_>,
    statement: &Statement,
    expanded: &[Expanded<'_>],
    tables: &[DataTable],
) -> (Scope, Kinds) {
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
            if variable.unknown {
                scope.faulty(name);
            }
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
            match at.and_then(|at| kinds.get(at)) {
                Some((rows, _)) => drop(scope.model_column(&name.value, *rows)),
                None => scope.faulty(&name.value),
            }
        }
    }
    for formula in &statement.formulas {
        scope.formula(&formula.name, &formula.formula.value);
    }
    reader.faulty.iter().for_each(|name| scope.faulty(name));
    reader.open.iter().for_each(|prefix| scope.open(prefix));
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
