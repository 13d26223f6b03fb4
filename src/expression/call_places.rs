//! Where a text calls a function.

use std::ops::Range;

use super::parser::{Node, parse};

/// A call of a function of one argument.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct CallPlace {
    /// The function.
    pub function: String,
    /// The bytes of its argument.
    pub argument: Range<usize>,
}

/// The calls of one of `functions` with one argument, in the order of the text; none in what is no formula.
///
/// ```
/// use evenpoise::expression::call_places;
/// let text = "2*sin(bearing) + log(x)";
/// let found = call_places(text, &["sin", "cos"]);
/// assert_eq!((found.len(), &text[found[0].argument.clone()]), (1, "bearing"));
/// ```
#[must_use]
pub fn call_places(text: &str, functions: &[&str]) -> Vec<CallPlace> {
    let parsed = parse(text);
    let Some(syntax) = parsed.syntax.filter(|_| parsed.faults.is_empty()) else { return Vec::new() };
    let mut found: Vec<CallPlace> = Vec::new();
    for (node, _) in &syntax.nodes {
        if let Node::Call { name, arguments, .. } = node
            && let [argument] = arguments.as_slice()
            && functions.contains(&name.as_str())
        {
            found.push(CallPlace { function: name.clone(), argument: syntax.nodes[*argument].1.clone() });
        }
    }
    found.sort_by_key(|call| call.argument.start);
    found
}
