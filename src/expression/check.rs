//! From texts to a program: which formulas are there, in which order, and what is wrong with them.

use std::ops::Range;

use super::errors::FormulaError;
use super::kinds::Id;
use super::lexer::Fault;
use super::lower::{Lowering, Value};
use super::margin::event;
use super::parser::{Syntax, parse};
use super::plan::Root;
use super::program::{Output, Program};
use super::scope::{Entity, Scope, Wanted};

/// A text with its key and, as far as it is a formula, its tree.
struct Text<'a> {
    key: &'a str,
    text: &'a str,
    syntax: Option<Syntax>,
    words: Vec<(String, Range<usize>)>,
}

/// Does what [`Scope::compile`] promises, or with `all` false what [`Scope::compile_alone`] does.
pub(super) fn compile(
    scope: &Scope,
    outputs: &[(&str, &str, Wanted)],
    all: bool,
) -> Result<Program, Vec<FormulaError>> {
    let mut errors = Vec::new();
    let mut formulas = formulas(scope);
    let mut targets: Vec<(Text<'_>, Vec<Fault>)> = outputs.iter().map(|(key, text, _)| read(key, text)).collect();
    let used = reached(scope, &formulas, targets.iter().map(|(text, _)| text));
    for (formula, used) in formulas.iter_mut().zip(&used) {
        *formula = formula.take().filter(|_| all || *used);
    }
    for (text, faults) in formulas.iter_mut().flatten().chain(&mut targets) {
        errors.extend(std::mem::take(faults).into_iter().map(|fault| FormulaError::new(text.key, fault)));
    }
    let formulas: Vec<Option<Text<'_>>> = formulas.into_iter().map(|text| text.map(|(text, _)| text)).collect();

    let mut lowering = Lowering::new(scope);
    for at in order(scope, &formulas, &mut errors) {
        let Some(text) = &formulas[at] else { continue };
        let value = match &text.syntax {
            Some(syntax) => lowering.lower(text.text, syntax),
            None => Value::Broken,
        };
        lowering.keep(at, value);
        take_faults(&mut lowering, text.key, &mut errors);
    }
    let mut made = Vec::new();
    for ((text, _), (_, _, wanted)) in targets.iter().zip(outputs) {
        if let Some(syntax) = &text.syntax {
            made.extend(output(&mut lowering, text, syntax, *wanted));
            if *wanted == Wanted::Margin {
                forget_equal_signs(lowering.faults(), text.key, &mut errors);
            }
            take_faults(&mut lowering, text.key, &mut errors);
        }
    }
    if !errors.is_empty() {
        return Err(in_order_of_texts(errors, scope, outputs));
    }
    let names_left = |wanted: fn(&Entity) -> bool| {
        let unused = |&at: &usize| !used[at] && wanted(&scope.entities[at]);
        (0..used.len()).filter(unused).map(|at| scope.names[at].clone()).collect()
    };
    let unused_formulas = names_left(|entity| matches!(entity, Entity::Formula(_)));
    let unused_constants = names_left(|entity| matches!(entity, Entity::Constant(_)));
    Ok(Program::new(lowering.into_operations(), made, scope.n_inputs, unused_formulas, unused_constants))
}

/// Does what [`Scope::unused`] promises.
pub(super) fn unused(scope: &Scope, outputs: &[&str]) -> Vec<String> {
    let targets: Vec<Text<'_>> = outputs.iter().map(|text| read("", text).0).collect();
    let used = reached(scope, &formulas(scope), targets.iter());
    let may_be_unused = |at: usize| matches!(scope.entities[at], Entity::Formula(_) | Entity::Constant(_));
    (0..used.len()).filter(|&at| !used[at] && may_be_unused(at)).map(|at| scope.names[at].clone()).collect()
}

/// For every entity that is a formula its text, and what is wrong with it.
fn formulas(scope: &Scope) -> Vec<Option<(Text<'_>, Vec<Fault>)>> {
    let each = scope.entities.iter().zip(&scope.names).map(|(entity, name)| match entity {
        Entity::Formula(text) => Some(read(name, text)),
        _ => None,
    });
    each.collect()
}

fn read<'a>(key: &'a str, text: &'a str) -> (Text<'a>, Vec<Fault>) {
    let parsed = parse(text);
    (Text { key, text, syntax: parsed.syntax, words: parsed.words }, parsed.faults)
}

/// An event knows no equality: `=` is then no slip for `==`, and what is told of it says so.
fn forget_equal_signs(faults: &[Fault], key: &str, errors: &mut Vec<FormulaError>) {
    let equalities: Vec<&Fault> = faults.iter().filter(|fault| fault.message.contains("equality")).collect();
    // `NOT(...)`: small letters do not help where there is no `not` at all.
    let unknown: Vec<&Fault> = faults.iter().filter(|fault| fault.message.starts_with("an event knows no")).collect();
    errors.retain(|error| {
        let begins = |fault: &&Fault| fault.span.start == error.span.start;
        error.key != key || !error.message.ends_with("small letters") || !unknown.iter().any(begins)
    });
    let is_sign = |error: &FormulaError| error.key == key && error.message.starts_with("`=`");
    errors.retain(|error| {
        let inside = |fault: &&Fault| fault.span.start <= error.span.start && error.span.end <= fault.span.end;
        !is_sign(error) || !equalities.iter().any(inside)
    });
    for error in errors.iter_mut().filter(|error| is_sign(error)) {
        error.help = Some("an event is made of inequalities: write >= or <=".to_owned());
    }
}

fn take_faults(lowering: &mut Lowering<'_>, key: &str, errors: &mut Vec<FormulaError>) {
    errors.extend(lowering.take_faults().into_iter().map(|fault| FormulaError::new(key, fault)));
}

/// Errors by the place of their text (formulas, then outputs) and within it.
fn in_order_of_texts(
    mut errors: Vec<FormulaError>,
    scope: &Scope,
    outputs: &[(&str, &str, Wanted)],
) -> Vec<FormulaError> {
    let place = |key: &str| {
        let formula = scope.find(key).filter(|&at| matches!(scope.entities[at], Entity::Formula(_)));
        formula.or_else(|| outputs.iter().position(|(other, ..)| *other == key).map(|k| scope.names.len() + k))
    };
    errors.sort_by_key(|error| (place(&error.key), error.span.start));
    errors
}

/// The entities a text uses by name.
fn uses(scope: &Scope, text: &Text<'_>) -> Vec<(usize, Range<usize>)> {
    text.words.iter().filter_map(|(name, span)| scope.find(name).map(|at| (at, span.clone()))).collect()
}

/// The formulas, each after those it uses. Those on a circle are told and left out.
fn order(scope: &Scope, formulas: &[Option<Text<'_>>], errors: &mut Vec<FormulaError>) -> Vec<usize> {
    #[derive(Clone, Copy, PartialEq)]
    enum State {
        New,
        Open,
        Done,
    }
    let used: Vec<Vec<(usize, Range<usize>)>> =
        formulas.iter().map(|text| text.as_ref().map_or_else(Vec::new, |text| uses(scope, text))).collect();
    let mut state = vec![State::New; formulas.len()];
    let mut found = Vec::new();
    for start in 0..formulas.len() {
        if formulas[start].is_none() || state[start] != State::New {
            continue;
        }
        // The way from `start` to where we are, with how many uses of each have been looked at: no recursion, so
        // that a chain of ten thousand formulas is no danger.
        let mut way = vec![(start, 0)];
        state[start] = State::Open;
        while let Some(&mut (at, ref mut next)) = way.last_mut() {
            let Some((to, span)) = used[at].get(*next) else {
                state[at] = State::Done;
                found.push(at);
                way.pop();
                continue;
            };
            *next += 1;
            match state[*to] {
                _ if formulas[*to].is_none() => {}
                State::New => {
                    state[*to] = State::Open;
                    way.push((*to, 0));
                }
                State::Open => {
                    let circle = way.iter().map(|(at, _)| *at).skip_while(|at| at != to).collect::<Vec<_>>();
                    errors.push(FormulaError::new(&scope.names[at], circle_fault(scope, &circle, span)));
                }
                State::Done => {}
            }
        }
    }
    found
}

fn circle_fault(scope: &Scope, circle: &[usize], span: &Range<usize>) -> Fault {
    let names: Vec<&str> = circle.iter().chain(&circle[..1]).map(|&at| scope.names[at].as_str()).collect();
    let message = match circle {
        [at] => format!("`{}` uses itself", scope.names[*at]),
        _ => format!("a circle: {}", names.join(" uses ")),
    };
    Fault::new(span.clone(), message).help("a formula can only use what is known without it")
}

/// Which entities the outputs use, directly or through formulas.
fn reached<'a>(
    scope: &Scope,
    formulas: &[Option<(Text<'_>, Vec<Fault>)>],
    targets: impl Iterator<Item = &'a Text<'a>>,
) -> Vec<bool> {
    let mut reached = vec![false; scope.entities.len()];
    let mut open: Vec<usize> = targets.flat_map(|text| uses(scope, text)).map(|(at, _)| at).collect();
    while let Some(at) = open.pop() {
        if !std::mem::replace(&mut reached[at], true)
            && let Some((text, _)) = &formulas[at]
        {
            open.extend(uses(scope, text).into_iter().map(|(at, _)| at));
        }
    }
    reached
}

/// One output, or for an event two; nothing if it is not what is wanted.
fn output(lowering: &mut Lowering<'_>, text: &Text<'_>, syntax: &Syntax, wanted: Wanted) -> Vec<Output> {
    let value = lowering.lower(text.text, syntax);
    let make = |id: Id, rows| Output { key: text.key.to_string(), root: Root { output: 0, id, rows } };
    if wanted == Wanted::Margin {
        return match event(lowering, syntax) {
            Some((margin, truth)) => vec![make(margin, None), make(truth, None)],
            None => Vec::new(),
        };
    }
    let whole = syntax.nodes[syntax.root()].1.clone();
    let checked =
        if wanted == Wanted::Condition { lowering.condition(&value, &whole) } else { lowering.number(&value, &whole) };
    let Some((id, rows)) = checked else { return Vec::new() };
    match (wanted, rows) {
        (Wanted::Number | Wanted::Condition, Some(rows)) => {
            lowering.fault(still_a_column(lowering.describe(rows), text.key, wanted, whole));
            Vec::new()
        }
        (Wanted::Column, None) => {
            let message = format!("`{}` must be a column, and this is one number", text.key);
            lowering.fault(Fault::new(whole, message).help("use a data column, a group or what depends on them"));
            Vec::new()
        }
        _ => vec![make(id, rows)],
    }
}

fn still_a_column(rows: &str, key: &str, wanted: Wanted, span: Range<usize>) -> Fault {
    if wanted == Wanted::Condition {
        let message = format!("`{key}` must be one condition, and this is one for each of {rows}");
        return Fault::new(span, message).help("compare a count(...), min(...) or max(...) of the column");
    }
    let message = format!("`{key}` must be one number, and this is a column over {rows}");
    Fault::new(span, message).help("wrap it in sum(...), or in mean(...), min(...), max(...), logsumexp(...)")
}
