//! Tokens to a tree, by binding powers (Pratt, POPL 1973): `or` < `and` < `not` < comparison < `+ -` < `* /` <
//! unary minus < `^`.
//!
//! The tree is a list in which every node comes after its parts, so that whoever works on it runs a loop and no
//! recursion: a formula of ten thousand terms is as safe as one of two. Only brackets nest the parser itself, and
//! [`MAX_NESTING`] ends that.

use std::ops::Range;

use super::lexer::{Fault, Token, tokens};

/// How deep brackets, powers and signs may nest.
pub(super) const MAX_NESTING: usize = 200;

/// Place of a node in [`Syntax::nodes`].
pub(super) type Place = usize;

/// Operators with two sides.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Infix {
    Or,
    And,
    Less,
    LessEqual,
    Greater,
    GreaterEqual,
    Equal,
    Differ,
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
}

/// What stands in the square brackets after a group's name.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Member {
    Column(String),
    Label(String),
    Position(f64),
}

/// One node of a formula's tree.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Node {
    Number(f64),
    Name(String),
    Label(String),
    Negate(Place),
    Not(Place),
    Infix(Infix, Place, Place),
    Call {
        name: String,
        name_span: Range<usize>,
        arguments: Vec<Place>,
    },
    Index {
        group: String,
        member: Member,
        member_span: Range<usize>,
    },
    /// Something that was told already, and whose meaning cannot be told.
    Broken,
}

/// A formula's tree: `nodes` with their spans, parts before wholes; the last one is the whole formula.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Syntax {
    pub(super) nodes: Vec<(Node, Range<usize>)>,
}

impl Syntax {
    pub(super) fn root(&self) -> Place {
        self.nodes.len() - 1
    }

    /// Every name that stands for a value, with its span, in order.
    pub(super) fn names(&self) -> impl Iterator<Item = (&str, Range<usize>)> {
        self.nodes
            .iter()
            .flat_map(|(node, span)| match node {
                Node::Name(name) => [Some((name.as_str(), span.clone())), None],
                Node::Index { group, member, member_span } => {
                    let column = match member {
                        Member::Column(column) => Some((column.as_str(), member_span.clone())),
                        _ => None,
                    };
                    [Some((group.as_str(), span.start..span.start + group.len())), column]
                }
                _ => [None, None],
            })
            .flatten()
    }
}

/// What reading a text gave.
pub(super) struct Parsed {
    /// The tree; none where nesting ended the reading.
    pub(super) syntax: Option<Syntax>,
    /// What is wrong, in the order of the places.
    pub(super) faults: Vec<Fault>,
    /// Every word of the text with its place, those of functions included: there even where the tree has a gap.
    pub(super) words: Vec<(String, Range<usize>)>,
}

/// The tree of `text`, and what is wrong with it. After a fault reading goes on with what was meant, or else with a
/// node that is [`Node::Broken`], so that independent mistakes are told together.
pub(super) fn parse(text: &str) -> Parsed {
    let (mut tokens, mut faults) = tokens(text);
    small_letters(&mut tokens, &mut faults);
    let words = tokens.iter().filter_map(|(token, span)| match token {
        Token::Name(name) => Some((name.clone(), span.clone())),
        _ => None,
    });
    let words = words.collect();
    let mut parser = Parser { text, tokens, at: 0, nodes: Vec::new(), depth: 0, faults, given_up: false };
    let whole = parser.whole();
    let mut faults = parser.faults;
    let syntax = match whole {
        Ok(()) => Some(Syntax { nodes: parser.nodes }),
        Err(fault) => {
            faults.push(fault);
            None
        }
    };
    faults.sort_by_key(|fault| fault.span.start);
    Parsed { syntax, faults, words }
}

/// Reads `AND`, `Or`, `NOT`, `IF` as the words in small letters where no name can stand, and tells of it.
fn small_letters(tokens: &mut [(Token, Range<usize>)], faults: &mut Vec<Fault>) {
    for at in 0..tokens.len() {
        let Token::Name(word) = &tokens[at].0 else { continue };
        let small = word.to_lowercase();
        if *word == small || !["and", "or", "not", "if"].contains(&small.as_str()) {
            continue;
        }
        let next = tokens.get(at + 1).map(|(token, _)| token);
        let opens = matches!(next, Some(Token::Sign("(")));
        let after_value = at > 0
            && match &tokens[at - 1].0 {
                Token::Number(_) | Token::Label(_) | Token::Sign(")" | "]") => true,
                Token::Name(before) => !["and", "or", "not"].contains(&before.as_str()),
                _ => false,
            };
        let before_value = matches!(next, Some(Token::Name(_) | Token::Number(_) | Token::Sign("(")));
        let joins = small == "and" || small == "or";
        let meant = match small.as_str() {
            "if" => opens,
            "not" => before_value,
            _ => opens || after_value,
        };
        if !meant {
            continue;
        }
        // A call `AND(a, b)` is told as a whole.
        if !joins || after_value {
            let help = if small == "if" { "write if(condition, a, b)".to_owned() } else { format!("write {small}") };
            let message = format!("`{word}` is written with small letters");
            faults.push(Fault::new(tokens[at].1.clone(), message).help(help));
        }
        tokens[at].0 = Token::Name(small);
    }
}

/// Binding power of a prefix minus: between products and powers.
const MINUS_POWER: u8 = 11;
/// Binding power of `not`: between `and` and comparisons.
const NOT_POWER: u8 = 5;
/// Left binding power of all comparisons, which do not chain.
const COMPARE_POWER: u8 = 6;

struct Parser<'t> {
    text: &'t str,
    tokens: Vec<(Token, Range<usize>)>,
    at: usize,
    nodes: Vec<(Node, Range<usize>)>,
    depth: usize,
    faults: Vec<Fault>,
    /// Whether the rest was left out: then nothing is told of what is missing there.
    given_up: bool,
}

impl Parser<'_> {
    fn peek(&self) -> &Token {
        &self.tokens[self.at].0
    }

    fn span(&self) -> Range<usize> {
        self.tokens[self.at].1.clone()
    }

    fn is_sign(&self, sign: &str) -> bool {
        matches!(self.peek(), Token::Sign(found) if *found == sign)
    }

    /// Moves on; the last token, the end, stays.
    fn advance(&mut self) -> Range<usize> {
        let span = self.span();
        self.at = (self.at + 1).min(self.tokens.len() - 1);
        span
    }

    fn push(&mut self, node: Node, span: Range<usize>) -> Place {
        self.nodes.push((node, span));
        self.nodes.len() - 1
    }

    fn span_of(&self, place: Place) -> Range<usize> {
        self.nodes[place].1.clone()
    }

    /// All tokens.
    fn whole(&mut self) -> Result<(), Fault> {
        self.expression(0)?;
        self.rest("")?;
        Ok(())
    }

    /// Goes on after a value until `sign` or the end; whatever stands before it is told and passed over.
    fn rest(&mut self, sign: &str) -> Result<(), Fault> {
        let in_call = sign == ",";
        while *self.peek() != Token::End && !self.is_sign(sign) && !(in_call && self.is_sign(")")) {
            let fault = self.unexpected_after_value();
            // What stood where a value should is told already.
            if self.faults.last().is_none_or(|last| last.span != fault.span) {
                self.faults.push(fault);
            }
            if self.is_sign("[") {
                while *self.peek() != Token::End && !self.is_sign("]") {
                    self.advance();
                }
            }
            let from = self.advance().start;
            while self.infix().is_some() {
                self.advance();
            }
            if self.begins_value() {
                self.expression(0)?;
            }
            let end = self.span().start.max(from);
            self.push(Node::Broken, from..end);
        }
        Ok(())
    }

    fn begins_value(&self) -> bool {
        match self.peek() {
            Token::Number(_) | Token::Label(_) | Token::Broken => true,
            Token::Name(word) => word != "and" && word != "or",
            Token::Sign(sign) => *sign == "(",
            Token::End => false,
        }
    }

    /// An expression whose operators bind at least as tightly as `least`.
    fn expression(&mut self, least: u8) -> Result<Place, Fault> {
        if self.depth == MAX_NESTING {
            return Err(Fault::new(self.span(), format!("nested more than {MAX_NESTING} deep"))
                .help("give inner parts names of their own under [formulas]"));
        }
        self.depth += 1;
        let mut left = self.prefix()?;
        let mut compared = false;
        loop {
            let broken = self.pass_broken();
            let Some((infix, left_power, right_power)) = self.infix().or_else(|| self.left_out()) else { break };
            if left_power < least {
                break;
            }
            let chained = left_power == COMPARE_POWER && std::mem::replace(&mut compared, true);
            if chained {
                self.faults.push(Fault::new(self.span(), "comparisons do not chain").help("write a < b and b < c"));
            }
            if self.infix().is_some() {
                self.advance();
            } else if !broken && self.tell_left_out() {
                break;
            }
            let right = self.expression(right_power)?;
            let span = self.span_of(left).start..self.span_of(right).end.max(self.span_of(left).end);
            let node = if broken || chained { Node::Broken } else { Node::Infix(infix, left, right) };
            left = self.push(node, span);
        }
        self.depth -= 1;
        Ok(left)
    }

    /// Passes over what the lexer told already. Whether the value before is of that kind.
    fn pass_broken(&mut self) -> bool {
        while *self.peek() == Token::Broken {
            self.advance();
        }
        self.at > 0 && self.tokens[self.at - 1].0 == Token::Broken
    }

    /// The operator that was left out before the value here: a comparison before a label, else a product.
    fn left_out(&self) -> Option<(Infix, u8, u8)> {
        match self.peek() {
            Token::Label(_) => Some((Infix::Equal, COMPARE_POWER, 7)),
            _ if self.begins_value() => Some((Infix::Multiply, 9, 10)),
            _ => None,
        }
    }

    /// Tells that an operator was left out. Whether the rest was given up, as after `a if b else c`.
    fn tell_left_out(&mut self) -> bool {
        let fault = self.unexpected_after_value();
        self.faults.push(fault);
        let given_up = matches!(self.peek(), Token::Name(word) if ["if", "else", "then"].contains(&word.as_str()));
        if given_up {
            self.give_up();
        }
        given_up
    }

    /// Leaves out all that follows, and closes every bracket: nothing can be told of it.
    fn give_up(&mut self) {
        self.at = self.tokens.len() - 1;
        self.given_up = true;
        let span = self.span();
        self.push(Node::Broken, span);
    }

    /// The operator here, with the powers by which it binds to its left and its right.
    fn infix(&self) -> Option<(Infix, u8, u8)> {
        Some(match self.peek() {
            Token::Name(word) if word == "or" => (Infix::Or, 1, 2),
            Token::Name(word) if word == "and" => (Infix::And, 3, 4),
            Token::Sign("<") => (Infix::Less, COMPARE_POWER, 7),
            Token::Sign("<=") => (Infix::LessEqual, COMPARE_POWER, 7),
            Token::Sign(">") => (Infix::Greater, COMPARE_POWER, 7),
            Token::Sign(">=") => (Infix::GreaterEqual, COMPARE_POWER, 7),
            Token::Sign("==") => (Infix::Equal, COMPARE_POWER, 7),
            Token::Sign("!=") => (Infix::Differ, COMPARE_POWER, 7),
            Token::Sign("+") => (Infix::Add, 7, 8),
            Token::Sign("-") => (Infix::Subtract, 7, 8),
            Token::Sign("*") => (Infix::Multiply, 9, 10),
            Token::Sign("/") => (Infix::Divide, 9, 10),
            Token::Sign("^") => (Infix::Power, 14, 13),
            _ => return None,
        })
    }

    fn prefix(&mut self) -> Result<Place, Fault> {
        match self.peek().clone() {
            Token::Sign("-") => {
                let from = self.advance().start;
                let of = self.expression(MINUS_POWER)?;
                let span = from..self.span_of(of).end;
                Ok(self.push(Node::Negate(of), span))
            }
            Token::Sign("+") => {
                self.advance();
                self.expression(MINUS_POWER)
            }
            Token::Sign("(") => self.bracket(),
            Token::Number(value) => {
                let span = self.advance();
                Ok(self.push(Node::Number(value), span))
            }
            Token::Label(label) => {
                let span = self.advance();
                Ok(self.push(Node::Label(label), span))
            }
            Token::Name(word) if word == "not" => {
                let from = self.advance().start;
                let of = self.expression(NOT_POWER)?;
                let span = from..self.span_of(of).end;
                Ok(self.push(Node::Not(of), span))
            }
            Token::Name(word) if word != "and" && word != "or" => self.name(word),
            Token::Name(word) if matches!(self.tokens.get(self.at + 1), Some((Token::Sign("("), _))) => {
                self.joined(&word)
            }
            Token::Broken => {
                let span = self.advance();
                Ok(self.push(Node::Broken, span))
            }
            found => {
                let fault = match found {
                    Token::Name(word) => self.missing_value(&word),
                    Token::Sign(sign) => self.missing_value(sign),
                    _ => self.ends_early(),
                };
                let span = fault.span.start..fault.span.start;
                // After an operator that was told already nothing new is missing.
                let told =
                    self.at > 0 && self.faults.last().is_some_and(|last| last.span == self.tokens[self.at - 1].1);
                if !told || *self.peek() != Token::End {
                    self.faults.push(fault);
                }
                Ok(self.push(Node::Broken, span))
            }
        }
    }

    fn ends_early(&self) -> Fault {
        if self.tokens.len() == 1 {
            return Fault::new(self.span(), "the formula is empty");
        }
        Fault::new(self.span(), "the formula ends where a value should follow")
            .help("a number, a name, a function or an opening bracket can stand here")
    }

    fn missing_value(&self, found: &str) -> Fault {
        if found == "[" {
            return Fault::new(self.span(), "square brackets hold no value")
                .help("group with round brackets; write the arguments of a function one after the other: max(a, b)");
        }
        Fault::new(self.span(), format!("`{found}` stands where a value should"))
            .help("a number, a name, a function or an opening bracket can stand here")
    }

    fn bracket(&mut self) -> Result<Place, Fault> {
        let open = self.advance();
        let inner = self.expression(0)?;
        let close = self.close(")", &open)?;
        // The brackets belong to the span, so that an error about the whole underlines them as well.
        self.nodes[inner].1 = open.start..close.end;
        Ok(inner)
    }

    /// The closing bracket that answers `open`.
    fn close(&mut self, sign: &str, open: &Range<usize>) -> Result<Range<usize>, Fault> {
        if !self.is_sign(sign) {
            self.rest(sign)?;
        }
        if *self.peek() == Token::End && !self.given_up {
            let fault = Fault::new(open.clone(), "this bracket is never closed").help(format!("close it with {sign}"));
            self.faults.push(fault);
        }
        Ok(self.advance())
    }

    fn name(&mut self, word: String) -> Result<Place, Fault> {
        let span = self.advance();
        if self.is_sign("(") {
            return self.call(word, span);
        }
        if word == "if" {
            self.faults.push(Fault::new(span, "`if` has no bracket").help("a choice is written if(condition, a, b)"));
            self.give_up();
            return Ok(self.nodes.len() - 1);
        }
        if self.is_sign("[") {
            return self.index(word, &span);
        }
        Ok(self.push(Node::Name(word), span))
    }

    fn call(&mut self, name: String, name_span: Range<usize>) -> Result<Place, Fault> {
        let (arguments, end) = self.arguments(&name)?;
        Ok(self.push(Node::Call { name, name_span: name_span.clone(), arguments }, name_span.start..end))
    }

    /// What stands in the brackets of a call, and the end of these.
    fn arguments(&mut self, name: &str) -> Result<(Vec<Place>, usize), Fault> {
        let open = self.advance();
        let mut arguments = Vec::new();
        let mut named: Vec<(Range<usize>, String)> = Vec::new();
        if !self.is_sign(")") {
            loop {
                let is_switch = self.argument_name(name, &mut named);
                let argument = self.argument()?;
                if is_switch {
                    self.nodes[argument].0 = Node::Broken;
                } else {
                    arguments.push(argument);
                }
                if !self.is_sign(",") {
                    break;
                }
                self.advance();
            }
        }
        if let (Some((first, _)), Some((last, _))) = (named.first(), named.last()) {
            let span = first.start..last.end;
            let each: Vec<String> = named.iter().map(|(_, text)| format!("`{text}`")).collect();
            let help = format!("leave out {}: their order tells what they are", each.join(", "));
            self.faults.push(Fault::new(span, "arguments have no names").help(help));
        }
        let close = self.close(")", &open)?;
        Ok((arguments, close.end))
    }

    /// Passes over the name of an argument, `mean =`, and notes it. Whether the argument is a switch as `log = TRUE`,
    /// which has no place at all.
    fn argument_name(&mut self, function: &str, named: &mut Vec<(Range<usize>, String)>) -> bool {
        let conditions = ["if", "and", "or", "not", "count", "where", "ifelse", "iif"];
        let (Token::Name(name), Some((Token::Sign("=="), sign))) = (self.peek().clone(), self.tokens.get(self.at + 1))
        else {
            return false;
        };
        if sign.len() != 1 || conditions.contains(&function) {
            return false;
        }
        let sign = sign.clone();
        self.faults.retain(|fault| fault.span != sign);
        let from = self.advance().start;
        self.advance();
        let is_switch = match self.peek() {
            Token::Name(word) => matches!(word.to_lowercase().as_str(), "true" | "false"),
            _ => false,
        };
        let (end, text) = match is_switch {
            true => (self.span().end, self.text[from..self.span().end].to_owned()),
            false => (sign.end, format!("{name} =")),
        };
        named.push((from..end, text));
        is_switch
    }

    /// `and(a, b)`, read as `a and b`.
    fn joined(&mut self, word: &str) -> Result<Place, Fault> {
        let name_span = self.advance();
        let (nodes, faults) = (self.nodes.len(), self.faults.len());
        let (arguments, end) = self.arguments(word)?;
        let infix = if word == "and" { Infix::And } else { Infix::Or };
        let doubtful = |(node, _): &(Node, Range<usize>)| {
            matches!(node, Node::Broken | Node::Infix(Infix::Equal | Infix::Differ, ..))
        };
        let inside = |fault: &Fault| fault.span.start > name_span.start && fault.span.end <= end;
        let sound =
            self.faults.len() == faults && !self.faults.iter().any(inside) && !self.nodes[nodes..].iter().any(doubtful);
        let parts: Vec<String> = arguments
            .iter()
            .map(|&place| {
                let text = self.text[self.span_of(place)].trim();
                let weaker = infix == Infix::And && matches!(self.nodes[place].0, Node::Infix(Infix::Or, ..));
                if weaker && !text.starts_with('(') { format!("({text})") } else { text.to_owned() }
            })
            .collect();
        let written = parts.join(&format!(" {word} "));
        let help = match sound && parts.len() > 1 && written.len() <= 70 {
            true => format!("write {written}"),
            false => format!("write a {word} b: it stands between the conditions"),
        };
        let own = &self.text[name_span.clone()];
        self.faults.push(Fault::new(name_span.clone(), format!("`{own}` is no function")).help(help));
        let mut whole: Option<Place> = None;
        for place in arguments {
            whole = Some(match whole {
                None => place,
                Some(so_far) => self.push(Node::Infix(infix, so_far, place), name_span.start..end),
            });
        }
        Ok(match whole {
            // The whole must come last.
            Some(place) if place + 1 == self.nodes.len() => place,
            _ => self.push(Node::Broken, name_span.start..end),
        })
    }

    /// One argument, up to a comma or the closing bracket.
    fn argument(&mut self) -> Result<Place, Fault> {
        let first = self.expression(0)?;
        let before = self.nodes.len();
        self.rest(",")?;
        Ok(if self.nodes.len() > before { self.nodes.len() - 1 } else { first })
    }

    fn index(&mut self, group: String, group_span: &Range<usize>) -> Result<Place, Fault> {
        let open = self.advance();
        let member = match self.peek().clone() {
            Token::Name(column) if !matches!(column.as_str(), "and" | "or" | "not" | "if") => Member::Column(column),
            Token::Label(label) => Member::Label(label),
            Token::Number(position) => Member::Position(position),
            _ => {
                let fault = Fault::new(self.span(), format!("`{group}[...]` wants to know which one"))
                    .help("in square brackets stands a column of labels, a label in quotes, or a position from 1");
                self.faults.push(fault);
                while *self.peek() != Token::End && !self.is_sign("]") {
                    self.advance();
                }
                let end = self.advance().end;
                return Ok(self.push(Node::Broken, group_span.start..end));
            }
        };
        let member_span = self.advance();
        let close = self.close("]", &open)?;
        Ok(self.push(Node::Index { group, member, member_span }, group_span.start..close.end))
    }

    /// What follows a whole value and cannot.
    fn unexpected_after_value(&self) -> Fault {
        let span = self.span();
        let operator = "an operator is missing before it, * for a product";
        let after_number = self.at > 0 && matches!(self.tokens[self.at - 1].0, Token::Number(_));
        match self.peek() {
            Token::Number(value) => Fault::new(span, format!("the number {value} follows a value")).help(operator),
            Token::Name(word) if word == "x" && !after_number => Fault::new(span, "`x` follows a value")
                .help("an operator is missing before it; if it is meant as one, write *"),
            Token::Name(word) if ["if", "else", "then"].contains(&word.as_str()) => {
                Fault::new(span, format!("`{word}` follows a value")).help("a choice is written if(condition, a, b)")
            }
            Token::Name(word) if after_number => Fault::new(span, format!("`{word}` follows a number"))
                .help("an operator is missing before it, * for a product; units have no place in a formula"),
            Token::Name(word) => Fault::new(span, format!("`{word}` follows a value")).help(operator),
            Token::Label(label) => Fault::new(span, format!("the label '{label}' follows a value"))
                .help("compare a column with it: station == 'Alder'"),
            Token::Sign("(") => Fault::new(span, "a bracket follows a value").help(operator),
            Token::Sign("[") => Fault::new(span, "square brackets follow a value")
                .help("only the name of a variable made with `each` takes square brackets"),
            Token::Sign(",") => Fault::new(span, "a comma stands outside the brackets of a function")
                .help("write decimals with a point, and no comma between the digits of a large number"),
            Token::Sign(sign) => Fault::new(span, format!("`{sign}` closes no bracket that is open")),
            Token::End | Token::Broken => self.ends_early(),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The tree written out with all its brackets.
    fn shape(text: &str) -> String {
        fn write(syntax: &Syntax, place: Place) -> String {
            let of = |place: &Place| write(syntax, *place);
            match &syntax.nodes[place].0 {
                Node::Number(value) => value.to_string(),
                Node::Name(name) => name.clone(),
                Node::Label(label) => format!("'{label}'"),
                Node::Negate(a) => format!("(-{})", of(a)),
                Node::Not(a) => format!("(not {})", of(a)),
                Node::Infix(infix, a, b) => format!("({} {infix:?} {})", of(a), of(b)),
                Node::Call { name, arguments, .. } => {
                    format!("{name}({})", arguments.iter().map(of).collect::<Vec<_>>().join(", "))
                }
                Node::Index { group, member, .. } => format!("{group}[{member:?}]"),
                Node::Broken => "?".to_owned(),
            }
        }
        let parsed = parse(text);
        assert!(parsed.faults.is_empty(), "{text}: {:?}", parsed.faults);
        let syntax = parsed.syntax.unwrap();
        write(&syntax, syntax.root())
    }

    #[test]
    fn operators_bind_as_promised() {
        for (text, want) in [
            ("-2^2", "(-(2 Power 2))"),
            ("2^3^2", "(2 Power (3 Power 2))"),
            ("2^-x*3", "((2 Power (-x)) Multiply 3)"),
            ("-a*b", "((-a) Multiply b)"),
            ("a-b-c", "((a Subtract b) Subtract c)"),
            ("a/b*c", "((a Divide b) Multiply c)"),
            (
                "a+b < c*d or e > f and not g <= h",
                "(((a Add b) Less (c Multiply d)) Or ((e Greater f) And (not (g LessEqual h))))",
            ),
            ("if(a < b, f(), -g(1, 2))", "if((a Less b), f(), (-g(1, 2)))"),
            ("+a - +b", "(a Subtract b)"),
            (
                "effect[gauge.station] * effect['Alder'] * effect[2]",
                "((effect[Column(\"gauge.station\")] Multiply effect[Label(\"Alder\")]) Multiply effect[Position(2.0)])",
            ),
        ] {
            assert_eq!(shape(text), want, "{text}");
        }
    }

    #[test]
    fn mistakes_are_placed() {
        for (text, span, part) in [
            ("", 0..0, "empty"),
            ("a +", 3..3, "ends where"),
            ("(a + b", 0..1, "never closed"),
            ("f(a, b", 1..2, "never closed"),
            ("a + b)", 5..6, "closes no bracket"),
            ("2 x", 2..3, "follows a number"),
            ("2(x)", 1..2, "follows a value"),
            ("a < b < c", 6..7, "do not chain"),
            ("a, b", 1..2, "comma"),
            ("a * / b", 4..5, "where a value should"),
            ("effect[]", 7..8, "which one"),
            ("and", 0..3, "where a value should"),
        ] {
            let faults = parse(text).faults;
            assert_eq!(faults.len(), 1, "{text}: {faults:?}");
            assert_eq!(faults[0].span, span, "{text}: {faults:?}");
            assert!(faults[0].message.contains(part), "{text}: {faults:?}");
        }
    }

    #[test]
    fn deep_nesting_is_an_error_and_long_chains_are_not() {
        for opening in ["(", "-", "2^", "exp(", "not ", "if(", "+"] {
            let parsed = parse(&opening.repeat(100_000));
            assert!(parsed.syntax.is_none() && parsed.faults[0].message.contains("nested"), "{opening}");
        }
        let long = vec!["x"; 50_000].join("+");
        assert_eq!(parse(&long).syntax.unwrap().nodes.len(), 99_999);
    }

    #[test]
    fn several_mistakes_are_told_together() {
        for (text, parts) in [
            ("a ** 2 + f(b %% c", vec!["`**`", "never closed", "`%`", "`%`"]),
            ("2 x + (3 y", vec!["`x` follows a number", "never closed", "`y` follows"]),
            ("a < b < c && d", vec!["do not chain", "`&&`"]),
            ("a * / b + f(, c) d", vec!["`/` stands", "`,` stands", "`d` follows"]),
            ("a if b > 2 else c", vec!["`if` follows"]),
            ("f(if a then b, g(", vec!["`if` has no bracket"]),
            ("|x| + y", vec!["`|`", "`|`"]),
            ("f(a b, c) ) + 1 2", vec!["`b` follows", "closes no", "number 2"]),
        ] {
            let faults = parse(text).faults;
            assert_eq!(faults.len(), parts.len(), "{text}: {faults:?}");
            for (fault, part) in faults.iter().zip(parts) {
                assert!(fault.message.contains(part), "{text}: {faults:?}");
            }
        }
    }
}
