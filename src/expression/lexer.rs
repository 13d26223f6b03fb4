//! Formula text to tokens, each with its place in the text.

use std::ops::Range;

/// What is wrong at a place of a formula's text, before the formula has a name.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Fault {
    pub(super) span: Range<usize>,
    pub(super) message: String,
    pub(super) help: Option<String>,
}

impl Fault {
    pub(super) fn new(span: Range<usize>, message: impl Into<String>) -> Self {
        Self { span, message: message.into(), help: None }
    }

    pub(super) fn help(mut self, help: impl Into<String>) -> Self {
        self.help = Some(help.into());
        self
    }
}

/// The smallest unit of meaning of a formula.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Token {
    Number(f64),
    /// A name, perhaps with dots (`gauge.flow`), or one of the words `and`, `or`, `not`, `if`.
    Name(String),
    /// A label in quotes, without them.
    Label(String),
    /// An operator, a bracket or a comma.
    Sign(&'static str),
    End,
}

/// Signs of the language, longer ones before those they begin with.
const SIGNS: [&str; 16] = ["<=", ">=", "==", "!=", "<", ">", "+", "-", "*", "/", "^", "(", ")", "[", "]", ","];

/// What people write when they mean something else, and what to write instead.
const FOREIGN: [(&str, &str); 19] = [
    ("**", "write ^ for a power"),
    ("&&", "write `and`"),
    ("||", "write `or`"),
    ("&", "write `and`"),
    ("|", "write `or`, or abs(...) for an absolute value"),
    ("!", "write `not`"),
    ("=", "write == to compare"),
    ("≤", "write <="),
    ("≥", "write >="),
    ("≠", "write !="),
    ("×", "write *"),
    ("·", "write *"),
    ("÷", "write /"),
    ("\u{2212}", "write the plain minus sign of the keyboard"),
    ("\u{2013}", "write the plain minus sign of the keyboard"),
    ("%", "write x - floor(x/m)*m for a remainder, x/100 for a percentage"),
    ("_", "a name begins with a letter"),
    ("²", "write ^2"),
    ("³", "write ^3"),
];

/// Whether `c` may begin a name.
pub(super) fn begins_name(c: char) -> bool {
    c.is_alphabetic()
}

/// Whether `c` may stand inside a name: letters and digits of any script, `_`, and the accents that some systems
/// write as characters of their own. Superscripts may not: `x²` is meant as a power.
pub(super) fn continues_name(c: char) -> bool {
    let superscript = matches!(c, '²' | '³' | '¹' | '⁰' | '⁴'..='⁹');
    (c.is_alphanumeric() && !superscript) || c == '_' || ('\u{300}'..='\u{36f}').contains(&c)
}

/// All tokens of `text` with their byte spans; the last one is [`Token::End`].
pub(super) fn tokens(text: &str) -> Result<Vec<(Token, Range<usize>)>, Fault> {
    let mut found = Vec::new();
    let mut at = 0;
    while let Some(c) = text[at..].chars().next() {
        if c.is_whitespace() {
            at += c.len_utf8();
            continue;
        }
        let (token, end) = if begins_name(c) {
            name(text, at)
        } else if c.is_ascii_digit() || (c == '.' && text[at + 1..].starts_with(|d: char| d.is_ascii_digit())) {
            number(text, at)?
        } else if c == '\'' || c == '"' {
            label(text, at, c)?
        } else {
            sign(text, at, c)?
        };
        found.push((token, at..end));
        at = end;
    }
    found.push((Token::End, text.len()..text.len()));
    Ok(found)
}

/// A name and, when a letter follows a dot directly, the name after it.
fn name(text: &str, from: usize) -> (Token, usize) {
    let mut end = from;
    loop {
        end += text[end..].find(|c| !continues_name(c)).unwrap_or(text.len() - end);
        match text[end..].strip_prefix('.') {
            Some(rest) if rest.starts_with(begins_name) => end += 1,
            _ => return (Token::Name(text[from..end].to_string()), end),
        }
    }
}

/// Digits with a point and an exponent where wanted: `2`, `2.`, `.5`, `1e-3`.
fn number(text: &str, from: usize) -> Result<(Token, usize), Fault> {
    let bytes = text.as_bytes();
    let digits = |mut at: usize| {
        while bytes.get(at).is_some_and(u8::is_ascii_digit) {
            at += 1;
        }
        at
    };
    let mut end = digits(from);
    if bytes.get(end) == Some(&b'.') {
        end = digits(end + 1);
    }
    if matches!(bytes.get(end), Some(b'e' | b'E')) {
        let signed = end + 1 + usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
        let last = digits(signed);
        if last == signed {
            return Err(Fault::new(from..last, format!("the exponent of `{}` has no digits", &text[from..last]))
                .help("write a number as in 1e-3; write 2*e for a product with a name"));
        }
        end = last;
    }
    match text[from..end].parse::<f64>() {
        Ok(value) if value.is_finite() => Ok((Token::Number(value), end)),
        _ => Err(Fault::new(from..end, format!("`{}` is beyond the largest number, 1.8e308", &text[from..end]))
            .help("write inf for infinity")),
    }
}

fn label(text: &str, from: usize, quote: char) -> Result<(Token, usize), Fault> {
    match text[from + 1..].find(quote) {
        Some(length) => {
            let end = from + 1 + length;
            Ok((Token::Label(text[from + 1..end].to_string()), end + 1))
        }
        None => {
            Err(Fault::new(from..text.len(), "this label has no closing quote").help(format!("end it with {quote}")))
        }
    }
}

fn sign(text: &str, at: usize, c: char) -> Result<(Token, usize), Fault> {
    let rest = &text[at..];
    let own = SIGNS.iter().find(|sign| rest.starts_with(**sign));
    let foreign = FOREIGN.iter().find(|(sign, _)| rest.starts_with(sign));
    match (own, foreign) {
        (Some(sign), None) => Ok((Token::Sign(sign), at + sign.len())),
        // `!=` is ours and `!` is not; `**` is not and `*` is ours: the longer one was meant.
        (Some(sign), Some((other, _))) if sign.len() > other.len() => Ok((Token::Sign(sign), at + sign.len())),
        (_, Some((other, help))) => {
            Err(Fault::new(at..at + other.len(), format!("`{other}` is no part of a formula")).help(*help))
        }
        (None, None) => {
            Err(Fault::new(at..at + c.len_utf8(), format!("`{}` is no part of a formula", c.escape_debug())))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn plain(text: &str) -> Vec<Token> {
        tokens(text).unwrap().into_iter().map(|(token, _)| token).collect()
    }

    #[test]
    fn numbers_are_read_as_written() {
        for (text, want) in [("1e-3", 1e-3), (".5", 0.5), ("2.", 2.0), ("12.5E+2", 1250.0), ("0", 0.0)] {
            assert_eq!(plain(text), vec![Token::Number(want), Token::End], "{text}");
        }
        for text in ["1e", "1e+", "1e999"] {
            assert_eq!(tokens(text).unwrap_err().span, 0..text.len(), "{text}");
        }
    }

    #[test]
    fn names_come_in_any_script_and_with_dots() {
        let found = tokens("gauge.flow*größe_2 + 流量").unwrap();
        assert_eq!(found[0], (Token::Name("gauge.flow".into()), 0..10));
        assert_eq!(found[2], (Token::Name("größe_2".into()), 11..20));
        assert_eq!(found[4], (Token::Name("流量".into()), 23..29));
    }

    #[test]
    fn signs_from_elsewhere_are_explained() {
        for (text, part) in
            [("a ** b", "^"), ("a && b", "and"), ("a = b", "=="), ("a ≤ b", "<="), ("a − b", "minus"), ("a ² ", "^2")]
        {
            let fault = tokens(text).unwrap_err();
            assert!(fault.help.unwrap().contains(part), "{text}");
            assert_eq!(fault.span.start, 2);
        }
        assert_eq!(tokens("größe²").unwrap_err().span, 7..9);
        assert_eq!(plain("Q₁₀₀"), vec![Token::Name("Q₁₀₀".into()), Token::End]);
        assert_eq!(plain("a != b").len(), 4);
        assert!(tokens("a $ b").unwrap_err().message.contains('$'));
        assert!(tokens("x == 'Alder").unwrap_err().message.contains("closing quote"));
    }
}
