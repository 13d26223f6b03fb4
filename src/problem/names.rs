//! Names: what may be one, who has it already, and which names a formula speaks of.

use std::collections::BTreeMap;
use std::ops::Range;

use super::faults::Fault;
use super::faults::Source;
use super::table::Reader;
use crate::expression::is_name;

/// "`a`, `b` or `c`".
pub(crate) fn listed<S: AsRef<str>>(names: &[S]) -> String {
    joined(names, "or")
}

/// "`a`, `b` and `c`".
pub(crate) fn all_of<S: AsRef<str>>(names: &[S]) -> String {
    joined(names, "and")
}

fn joined<S: AsRef<str>>(names: &[S], word: &str) -> String {
    let quoted: Vec<String> = names.iter().map(|name| format!("`{}`", name.as_ref())).collect();
    match quoted.split_last() {
        None => "nothing".into(),
        Some((last, [])) => last.clone(),
        Some((last, rest)) => format!("{} {word} {last}", rest.join(", ")),
    }
}

/// Where a name was given.
#[derive(Debug, Clone)]
pub(crate) enum Given {
    /// In the problem file.
    Here(Range<usize>),
    /// In the header of a data file.
    Header(Source, Range<usize>),
}

/// Every name of a problem, with what it is and where it was given.
#[derive(Debug, Default)]
pub(crate) struct Names(BTreeMap<String, (String, Given)>);

impl Names {
    /// Gives `name` to a thing of `kind` ("the variable", "the constant", ...), unless it is taken.
    pub(crate) fn give(&mut self, reader: &mut Reader<'_>, name: &str, kind: &str, given: Given) -> bool {
        if let Some((other_kind, other)) = self.0.get(name) {
            reader.fault(clash(name, kind, &given, other_kind, other, reader.source));
            reader.faulty.push(name.to_owned());
            return false;
        }
        self.0.insert(name.to_owned(), (kind.to_owned(), given));
        true
    }

    /// Checks the spelling of a name given in the problem file, then gives it.
    pub(crate) fn give_key(&mut self, reader: &mut Reader<'_>, name: &str, kind: &str, span: &Range<usize>) -> bool {
        Self::check_spelling(reader, name, kind, span) && self.give(reader, name, kind, Given::Here(span.clone()))
    }

    /// Whether anything has this name.
    pub(crate) fn has(&self, name: &str) -> bool {
        self.0.contains_key(name)
    }

    /// Whether `name` is a name, and not one of the formula language.
    pub(crate) fn check_spelling(reader: &mut Reader<'_>, name: &str, kind: &str, span: &Range<usize>) -> bool {
        if !is_name(name) {
            reader.fault(
                Fault::new(span.clone(), format!("{kind} \"{name}\" has no proper name"))
                    .label("not a name")
                    .help(format!("a name is a letter, then letters, digits and `_`: `{}`, say", suggestion(name))),
            );
            reader.faulty.push(suggestion(name));
            return false;
        }
        if crate::expression::is_reserved(name) {
            reader.fault(
                Fault::new(span.clone(), format!("{kind} `{name}` takes a name of the formula language"))
                    .label("taken")
                    .help(match name {
                        "pi" => "take it out: every formula knows pi, 3.14159...".to_owned(),
                        "inf" => "take it out: every formula knows inf".to_owned(),
                        _ => format!("choose another name, `{name}_value` for instance, here and in the formulas"),
                    }),
            );
            reader.faulty.extend([name.to_owned(), format!("{name}_value")]);
            return false;
        }
        true
    }
}

/// A name like `text` that is one.
pub(crate) fn suggestion(text: &str) -> String {
    let mapped: String = text.chars().map(|c| if c.is_alphanumeric() { c } else { '_' }).collect();
    let parts: Vec<&str> = mapped.split('_').filter(|part| !part.is_empty()).collect();
    let trimmed = parts.join("_");
    let begins = trimmed.chars().next().is_some_and(char::is_alphabetic);
    if begins { trimmed } else { format!("x{trimmed}") }
}

fn clash(name: &str, kind: &str, given: &Given, other_kind: &str, other: &Given, source: &str) -> Fault {
    let message = format!("{kind} `{name}` and {other_kind} `{name}` share a name");
    match (given, other) {
        (Given::Here(span), Given::Here(first)) => Fault::new(span.clone(), message)
            .label("given again here")
            .also(first.clone(), "given first here")
            .help("give one of them another name"),
        (Given::Header(file, span), Given::Here(first)) => {
            let line = 1 + source[..first.start.min(source.len())].matches('\n').count();
            Fault::new(first.clone(), format!("{other_kind} `{name}` and a column of `{}` share a name", file.file))
                .label(format!("the column is in line 1 of `{}`, character {}", file.file, span.start + 1))
                .help(format!(
                    "rename the one in line {line}, or the column: names = {{ {name}_data = \"{}\" }}",
                    &file.text[span.clone()]
                ))
        }
        (Given::Here(span), Given::Header(file, at)) => Fault::new(span.clone(), message)
            .label(format!("the column is in line 1 of `{}`, character {}", file.file, at.start + 1))
            .help("give one of them another name"),
        (Given::Header(file, span), Given::Header(first, other)) => {
            let message =
                if file == first { format!("two columns of `{}` are called `{name}`", file.file) } else { message };
            let fault = Fault::new(span.clone(), message).label("again").within(file.clone());
            let fault = if file == first { fault.also(other.clone(), "first") } else { fault };
            fault.help("give each column its own header")
        }
    }
}

/// A piece of a formula, as far as names and labels are concerned.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Piece<'a> {
    /// A name, a dotted one included.
    Name(&'a str),
    /// A text in quotes.
    Quoted,
    /// `[`, `]`, `==`, `!=`, or any other sign.
    Sign(&'a str),
}

/// The pieces of a formula in order. Numbers and blanks are left out.
pub(crate) fn pieces(formula: &str) -> Vec<Piece<'_>> {
    let mut found = Vec::new();
    let mut rest = formula;
    while let Some(first) = rest.chars().next() {
        let length = match first {
            '\'' | '"' => rest[1..].find(first).map_or(rest.len(), |end| end + 2),
            c if c.is_alphabetic() => rest
                .char_indices()
                .find(|&(_, c)| !(c.is_alphanumeric() || c == '_' || c == '.'))
                .map_or(rest.len(), |(end, _)| end),
            c if c.is_ascii_digit() => number_length(rest),
            '=' | '!' | '<' | '>' if rest[1..].starts_with('=') => 2,
            c => c.len_utf8(),
        };
        let piece = &rest[..length];
        match first {
            '\'' | '"' => found.push(Piece::Quoted),
            c if c.is_alphabetic() => found.push(Piece::Name(piece)),
            c if c.is_ascii_digit() || c.is_whitespace() => {}
            _ => found.push(Piece::Sign(piece)),
        }
        rest = &rest[length..];
    }
    found
}

/// Bytes of the number that `text` begins with: `1e5` is no name `e5`.
fn number_length(text: &str) -> usize {
    let bytes = text.as_bytes();
    let mut end = 0;
    while end < bytes.len() && (bytes[end].is_ascii_alphanumeric() || bytes[end] == b'.') {
        end += 1;
    }
    end
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_suggested_and_listed() {
        for text in ["1x", "_x", "a b", "Flow (m3/s)", "a-b", "a.b"] {
            assert!(!is_name(text), "{text}");
            assert!(is_name(&suggestion(text)), "{text}");
        }
        assert_eq!(listed(&["a", "b", "c"]), "`a`, `b` or `c`");
        assert_eq!(suggestion("Flow (m3/s)"), "Flow_m3_s");
    }

    #[test]
    fn formulas_are_cut_into_pieces() {
        let found = pieces("sum(effect[station]) + 1e5*gauge.flow >= if(tag == 'a b', 2x, 3)");
        let names: Vec<&str> =
            found.iter().filter_map(|piece| if let Piece::Name(name) = piece { Some(*name) } else { None }).collect();
        assert_eq!(names, ["sum", "effect", "station", "gauge.flow", "if", "tag"]);
        assert!(found.contains(&Piece::Sign("==")) && found.contains(&Piece::Quoted));
    }
}
