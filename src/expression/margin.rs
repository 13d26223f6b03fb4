//! Events: how far a point is from one, and whether it is in it as written.

use super::kinds::{Binary, Id};
use super::lexer::Fault;
use super::lower::{Lowering, Value};
use super::parser::{Infix, Node, Place, Syntax};

/// Margin and truth of the event that `lowering` lowered last, `syntax`; `None` after telling what is no event in it.
///
/// The margin of an inequality is negative or zero where it holds: `B - A` for `A >= B` and `A > B`, `A - B` for the
/// others. `and` takes the largest, `or` the smallest of those that are defined. The truth is that of the text.
pub(super) fn event(lowering: &mut Lowering<'_>, syntax: &Syntax) -> Option<(Id, Id)> {
    let mut inequalities = Vec::new();
    let mut open = vec![syntax.root()];
    let mut sound = true;
    while let Some(place) = open.pop() {
        match &syntax.nodes[place].0 {
            Node::Infix(Infix::And | Infix::Or, a, b) => {
                inequalities.push(place);
                open.extend([*b, *a]);
            }
            Node::Infix(Infix::Less | Infix::LessEqual | Infix::Greater | Infix::GreaterEqual, ..) => {
                sound &= is_one_condition(lowering, syntax, place);
                inequalities.push(place);
            }
            _ => {
                sound = false;
                tell_no_inequality(lowering, syntax, place);
            }
        }
    }
    if !sound || lowering.has_faults() {
        return None;
    }
    // Parts come before wholes.
    inequalities.sort_unstable();
    let mut margins: Vec<Option<Id>> = vec![None; syntax.nodes.len()];
    for place in inequalities {
        margins[place] = Some(margin(lowering, syntax, place, &margins)?);
    }
    Some((margins[syntax.root()]?, plain(lowering, syntax.root())?))
}

/// The operation of a node that is one number or condition.
fn plain(lowering: &Lowering<'_>, place: Place) -> Option<Id> {
    match lowering.value(place) {
        Value::Plain { id, rows: None, .. } => Some(*id),
        _ => None,
    }
}

fn is_one_condition(lowering: &mut Lowering<'_>, syntax: &Syntax, place: Place) -> bool {
    if let Value::Plain { rows: Some(rows), .. } = lowering.value(place) {
        let rows = *rows;
        let message = format!("this inequality is one for each of {}", lowering.describe(rows));
        let help = "make numbers of its columns first, as in max(level) > crest";
        lowering.fault(Fault::new(syntax.nodes[place].1.clone(), message).help(help));
        return false;
    }
    *lowering.value(place) != Value::Broken
}

fn margin(lowering: &mut Lowering<'_>, syntax: &Syntax, place: Place, margins: &[Option<Id>]) -> Option<Id> {
    let Node::Infix(infix, a, b) = &syntax.nodes[place].0 else { return None };
    let (function, x, y) = match infix {
        Infix::And => (Binary::Maximum, margins[*a]?, margins[*b]?),
        Infix::Or => (Binary::MinimumDefined, margins[*a]?, margins[*b]?),
        Infix::Greater | Infix::GreaterEqual => (Binary::Subtract, plain(lowering, *b)?, plain(lowering, *a)?),
        _ => (Binary::Subtract, plain(lowering, *a)?, plain(lowering, *b)?),
    };
    Some(lowering.operations().binary(function, x, y))
}

fn tell_no_inequality(lowering: &mut Lowering<'_>, syntax: &Syntax, place: Place) {
    if *lowering.value(place) == Value::Broken {
        return;
    }
    let (node, span) = &syntax.nodes[place];
    if lowering.faults().iter().any(|fault| fault.span == *span) {
        return; // A number where a condition should be: that is the same said twice.
    }
    let fault = match node {
        Node::Infix(Infix::Equal | Infix::Differ, a, b) => {
            let help = instead_of_equality(lowering, syntax, node, *a, *b);
            let fault = Fault::new(span.clone(), "an event is made of inequalities; equality has no margin");
            return lowering.fault(fault.help(help));
        }
        Node::Not(of) => {
            let help = match opposite(lowering, syntax, *of) {
                Some(written) => format!("write {written}"),
                None => "write the opposite inequalities, joined by `and`, `or` and parentheses".to_owned(),
            };
            return lowering.fault(Fault::new(span.clone(), "an event knows no `not`").help(help));
        }
        Node::Call { name, .. } if name == "if" => Fault::new(span.clone(), "an event knows no `if`"),
        Node::Name(name) => Fault::new(span.clone(), format!("`{name}` is no inequality")),
        _ => Fault::new(span.clone(), "this is no inequality"),
    };
    lowering.fault(fault.help("write inequalities joined by `and`, `or` and parentheses, as in level > crest"));
}

/// What to write where two numbers are compared for equality.
fn instead_of_equality(lowering: &Lowering<'_>, syntax: &Syntax, node: &Node, a: Place, b: Place) -> String {
    let text = |place: Place| lowering.slice(&syntax.nodes[place].1);
    let (left, right) = (text(a), text(b));
    let (from, to) = (syntax.nodes[a].1.start, syntax.nodes[b].1.end);
    if lowering.faults().iter().any(|fault| from <= fault.span.start && fault.span.end <= to) {
        return "for a whole number write a >= b or a <= b".to_owned();
    }
    if matches!(node, Node::Infix(Infix::Differ, ..)) {
        return format!("write {left} < {right} or {left} > {right}");
    }
    match syntax.nodes[b].0 {
        Node::Number(value) => {
            let (sign, other, word) = if value > 0.0 { (">=", "<=", "larger") } else { ("<=", ">=", "smaller") };
            format!(
                "for a whole number write {left} {sign} {right}; where {word} ones do not count, {left} {sign} {right} and \
                 {left} {other} {right}"
            )
        }
        _ => format!("write {left} >= {right} or {left} <= {right}: numbers that vary are never exactly equal"),
    }
}

/// What holds where an inequality does not, as one writes it.
fn opposite(lowering: &Lowering<'_>, syntax: &Syntax, place: Place) -> Option<String> {
    let Node::Infix(infix, a, b) = &syntax.nodes[place].0 else { return None };
    let sign = match infix {
        Infix::Less => ">=",
        Infix::LessEqual => ">",
        Infix::Greater => "<=",
        Infix::GreaterEqual => "<",
        _ => return None,
    };
    let text = |place: Place| lowering.slice(&syntax.nodes[place].1);
    Some(format!("{} {sign} {}", text(*a), text(*b)))
}
