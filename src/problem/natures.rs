//! Distributions of the variables: settled ones, and groups whose parameters depend on other variables.

use super::expand::Expanded;
use super::faults::Fault;
use super::given::GivenGroup;
use super::given::Parameter;
use super::given::placed;
use super::names::all_of;
use super::programs::ParameterProgram;
use super::table::Reader;
use super::variable::Nature;
use super::variable::Variable;
use super::variables_table::NatureSpec;
use super::variables_table::ParameterEntry;
use super::variables_table::ParameterSpec;
use crate::distribution::Distribution;
use crate::distribution::DistributionError;
use crate::distribution::Form;
use crate::distribution::ParameterSet;
use crate::expression::Program;
use crate::numeric::Points;

/// Every coordinate's variable, and the groups with dependent parameters, each after those it depends on.
pub(crate) struct Natures {
    /// None where what it is could not be told.
    pub(crate) variables: Vec<Option<Variable>>,
    pub(crate) groups: Vec<GivenGroup>,
}

/// Settles all distributions; `programs` are those of the parameters, one for each variable as stated. What is wrong
/// with one leaves the others.
pub(crate) fn settle(reader: &mut Reader<'_>, expanded: &[Expanded<'_>], programs: &[ParameterProgram]) -> Natures {
    let dim = expanded.last().map_or(0, |variable| variable.places.end);
    let mut variables = Vec::new();
    let mut groups = Vec::new();
    for (variable, program) in expanded.iter().zip(programs) {
        let settled = match program {
            ParameterProgram::Numbers => nature_of(reader, variable, None, dim),
            ParameterProgram::Formulas(program) => nature_of(reader, variable, Some(program), dim),
            ParameterProgram::Faulty => {
                check_form(reader, variable);
                None
            }
        };
        let settled = settled.filter(|_| !variable.unknown);
        for (name, member) in variable.names() {
            variables.push(settled.as_ref().map(|(nature, _)| {
                let mut one = Variable::plain(&name, nature.clone());
                one.label = variable.spec.label.clone();
                one.unit = variable.spec.unit.clone();
                one.note = variable.spec.note.clone();
                one.near = variable.spec.near.as_ref().map(|(near, _)| *near);
                one.spread = variable.spec.spread.as_ref().map(|(spread, _)| *spread);
                one.member = member;
                one
            }));
        }
        groups.extend(settled.and_then(|(_, group)| group));
    }
    let groups = in_order(reader, expanded, groups).unwrap_or_default();
    Natures { variables, groups }
}

/// Whether the parameters make a distribution, where their formulas cannot be worked out.
fn check_form(reader: &mut Reader<'_>, variable: &Expanded<'_>) {
    let NatureSpec::Random { family, parameters, .. } = &variable.spec.nature else { return };
    let keys: Vec<&str> = parameters.iter().map(|entry| entry.key.as_str()).collect();
    if let Err(error) = Form::new(&family.value, &keys) {
        refuse(reader, variable, &error, None);
    }
}

fn nature_of(
    reader: &mut Reader<'_>,
    variable: &Expanded<'_>,
    program: Option<&Program>,
    dim: usize,
) -> Option<(Nature, Option<GivenGroup>)> {
    let (family, parameters, between, shift) = match &variable.spec.nature {
        NatureSpec::Range { low, high } => return Some((Nature::Range { low: *low, high: *high }, None)),
        NatureSpec::Random { family, parameters, between, shift } => {
            (family, parameters, between.as_ref().map(|(ends, _)| *ends), shift.as_ref().map(|(shift, _)| *shift))
        }
        NatureSpec::Faulty { .. } => return None,
    };
    if let Some(program) = program.filter(|program| (0..dim).any(|input| program.uses_input(input))) {
        let mut output = 0;
        let keys: Vec<&str> = parameters.iter().map(|entry| entry.key.as_str()).collect();
        let form = match Form::new(&family.value, &keys) {
            Ok(form) => form,
            Err(error) => {
                refuse(reader, variable, &error, None);
                return None;
            }
        };
        let values = parameters
            .iter()
            .map(|entry| match &entry.value {
                ParameterSpec::Number(number) => Parameter::Fixed(*number),
                ParameterSpec::Formula(_) => {
                    output += 1;
                    Parameter::Output(output - 1)
                }
            })
            .collect();
        let written = parameters.iter().map(|entry| (entry.key.clone(), as_written(entry))).collect();
        let nature = Nature::Dependent { family: family.value.clone(), parameters: written };
        let group = GivenGroup {
            members: variable.places.clone(),
            form,
            parameters: values,
            program: program.clone(),
            between,
            shift,
            discrete: Variable::plain("", nature.clone()).is_discrete(),
        };
        return Some((nature, Some(group)));
    }
    // Formulas of constants alone are numbers.
    let outputs = program.map(|program| program.values(&Points::zeros(dim, 1))).unwrap_or_default();
    let mut formulas = outputs.iter().map(|output| output.get(0, 0));
    let values: Vec<(&str, f64)> = parameters
        .iter()
        .map(|entry| {
            let value = match &entry.value {
                ParameterSpec::Number(number) => *number,
                ParameterSpec::Formula(_) => formulas.next().unwrap_or(f64::NAN),
            };
            (entry.key.as_str(), value)
        })
        .collect();
    let settled = Distribution::new(&family.value, &values).and_then(|plain| placed(plain, shift, between));
    match settled {
        Ok(distribution) => Some((Nature::Random(distribution), None)),
        Err(error) => {
            refuse(reader, variable, &error, None);
            None
        }
    }
}

fn as_written(entry: &ParameterEntry) -> String {
    match &entry.value {
        ParameterSpec::Number(number) => format!("{number:?}"),
        ParameterSpec::Formula(text) => text.value.clone(),
    }
}

/// What is wrong with a distribution, at the parameter that the error names, or at the distribution's name.
pub(crate) fn refuse(
    reader: &mut Reader<'_>,
    variable: &Expanded<'_>,
    error: &DistributionError,
    circumstance: Option<&str>,
) {
    let NatureSpec::Random { family, parameters, between, shift } = &variable.spec.nature else { return };
    let placed = match error {
        DistributionError::Value { parameter, .. } => {
            parameters.iter().find(|entry| entry.key == *parameter).map(|entry| entry.span.clone())
        }
        DistributionError::Between { .. } | DistributionError::NoMass { .. } => {
            between.as_ref().map(|(_, span)| span.clone())
        }
        DistributionError::Shift { .. } => shift.as_ref().map(|(_, span)| span.clone()),
        _ => None,
    };
    let span = placed.unwrap_or_else(|| family.span.clone());
    let (message, help) = explained(error);
    let fault = Fault::new(span, format!("`{}`: {message}", variable.spec.name));
    let fault = if help.is_empty() { fault } else { fault.help(help) };
    reader.fault(circumstance.into_iter().fold(fault, Fault::help));
}

/// What is wrong with a distribution, and what to write instead.
fn explained(error: &DistributionError) -> (String, String) {
    match error {
        DistributionError::Incomplete { distribution, given, sets } => {
            let message = match given.as_slice() {
                [] => format!("the {distribution} distribution needs parameters"),
                [one] => format!("`{one}` alone makes no {distribution} distribution"),
                several => format!("{} together make no {distribution} distribution", all_of(several)),
            };
            let set = |set: &ParameterSet| {
                let required = all_of(set.required);
                let optional: Vec<&str> = set.optional.iter().map(|(name, _)| *name).collect();
                if optional.is_empty() {
                    required
                } else {
                    format!("{required} (and {} if need be)", all_of(&optional))
                }
            };
            (message, format!("give {}", sets.iter().map(set).collect::<Vec<_>>().join(", or ")))
        }
        DistributionError::Value { distribution, parameter, value, allowed } => (
            format!("`{parameter}` = {value} is not allowed in the {distribution} distribution"),
            format!("give {allowed}"),
        ),
        DistributionError::NoMass { distribution, low, high, least, greatest } => (
            format!("no value of the {distribution} distribution lies between {low} and {high}"),
            format!("its values lie between {least} and {greatest}"),
        ),
        DistributionError::Shift { distribution, .. } => (
            format!("the {distribution} distribution cannot be shifted"),
            "`shift` moves what lives on a half-line from 0 on; give this one another place by its own parameters"
                .into(),
        ),
        other => {
            let text = other.to_string();
            let (message, help) = text.split_once("; ").unwrap_or((&text, ""));
            (message.to_owned(), help.to_owned())
        }
    }
}

/// Groups in an order in which each comes after those it depends on; a circle is a fault.
fn in_order(
    reader: &mut Reader<'_>,
    expanded: &[Expanded<'_>],
    mut waiting: Vec<GivenGroup>,
) -> Option<Vec<GivenGroup>> {
    let mut ordered: Vec<GivenGroup> = Vec::new();
    while !waiting.is_empty() {
        let depends = |group: &GivenGroup, on: &GivenGroup| on.members.clone().any(|i| group.program.uses_input(i));
        let ready = (0..waiting.len()).find(|&k| waiting.iter().all(|other| !depends(&waiting[k], other)));
        let Some(k) = ready else {
            let circle = circle(&waiting, depends);
            let spec = |group: &GivenGroup| expanded.iter().find(|variable| variable.places == group.members);
            let names: Vec<&str> =
                circle.iter().filter_map(|&k| spec(&waiting[k])).map(|v| v.spec.name.as_str()).collect();
            let first = spec(&waiting[circle[0]]).map_or(0..0, |variable| variable.spec.name_span.clone());
            let message = match names.as_slice() {
                [one] => format!("a parameter of `{one}` depends on `{one}` itself"),
                [head, rest @ ..] => {
                    let steps: Vec<String> = rest.iter().map(|name| format!("on `{name}`, which depends")).collect();
                    format!("`{head}` depends {} on `{head}`", steps.join(" "))
                }
                [] => "parameters depend on each other in a circle".into(),
            };
            reader.fault(
                Fault::new(first, message).label("depends on itself in the end").help(
                    "give one of them parameters that are numbers, or that depend on variables outside the circle",
                ),
            );
            return None;
        };
        ordered.push(waiting.remove(k));
    }
    Some(ordered)
}

/// Some circle among groups of which each depends on another one: walked until a group comes again.
fn circle(groups: &[GivenGroup], depends: impl Fn(&GivenGroup, &GivenGroup) -> bool) -> Vec<usize> {
    let mut path: Vec<usize> = vec![0];
    loop {
        let last = path[path.len() - 1];
        let next = (0..groups.len()).find(|&k| depends(&groups[last], &groups[k])).unwrap_or(last);
        if let Some(start) = path.iter().position(|&k| k == next) {
            return path[start..].to_vec();
        }
        path.push(next);
    }
}

/// Tries the parameters of every dependent variable where the search starts: what fails there fails everywhere.
pub(crate) fn try_at_start(reader: &mut Reader<'_>, expanded: &[Expanded<'_>], groups: &[GivenGroup], start: &Points) {
    for group in groups {
        let values = group.parameter_values(start);
        let Err(error) = group.try_distribution(&values, 0) else { continue };
        if let Some(variable) = expanded.iter().find(|variable| variable.places == group.members) {
            let circumstance = "this is so where the search starts, with every other variable at its median or `near`";
            refuse(reader, variable, &error, Some(circumstance));
        }
    }
}
