//! Formula text to tokens, each with its place in the text.

use std::ops::Range;

/// What is wrong at a place of a formula's text, before the formula has a name.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Fault {
    pub(super) span: Range<usize>,
    pub(super) message: String,
    pub(super) help: Option<String>,
    /// The name that was probably meant, where one was misspelt.
    pub(super) meant: Option<String>,
}

impl Fault {
    pub(super) fn new(span: Range<usize>, message: impl Into<String>) -> Self {
        Self { span, message: message.into(), help: None, meant: None }
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
    /// Something that was told already.
    Broken,
    End,
}

/// Signs of the language, longer ones before those they begin with.
const SIGNS: [&str; 16] = ["<=", ">=", "==", "!=", "<", ">", "+", "-", "*", "/", "^", "(", ")", "[", "]", ","];

/// What a foreign sign is read as, so that the rest of the formula can be looked at as well.
#[derive(Debug, Clone, Copy)]
enum Meant {
    Sign(&'static str),
    Word(&'static str),
    /// A power with this exponent.
    Raised(f64),
    /// Nothing that could be told.
    Unknown,
}

use Meant::{Raised, Sign, Unknown, Word};

/// What people write when they mean something else, what to write instead, and what it is read as.
const FOREIGN: [(&str, &str, Meant); 40] = [
    ("**", "write ^ for a power", Sign("^")),
    ("//", "write floor(a/b) for a whole quotient", Sign("/")),
    ("&&", "write `and`", Word("and")),
    ("||", "write `or`", Word("or")),
    ("&", "write `and`", Word("and")),
    ("|", "write `or`, or abs(...) for an absolute value", Unknown),
    ("!", "write `not`", Word("not")),
    ("===", "write ==", Sign("==")),
    ("=<", "write <=", Sign("<=")),
    ("=>", "write >=", Sign(">=")),
    (">>", "write >, or >= where equality counts", Sign(">")),
    ("<<", "write <, or <= where equality counts", Sign("<")),
    ("<>", "write !=", Sign("!=")),
    ("=", "write == to compare", Sign("==")),
    ("≤", "write <=", Sign("<=")),
    ("≥", "write >=", Sign(">=")),
    ("≠", "write !=", Sign("!=")),
    ("×", "write *", Sign("*")),
    ("·", "write *", Sign("*")),
    ("÷", "write /", Sign("/")),
    ("\u{2212}", "write the plain minus sign of the keyboard", Sign("-")),
    ("\u{2013}", "write the plain minus sign of the keyboard", Sign("-")),
    ("%", "write x - floor(x/m)*m for a remainder, x/100 for a percentage", Unknown),
    ("_", "a name begins with a letter", Unknown),
    ("²", "write ^2", Raised(2.0)),
    ("³", "write ^3", Raised(3.0)),
    ("{", "write ( and ): a formula knows round brackets, and square ones after the name of a group", Sign("(")),
    ("}", "write ( and ): a formula knows round brackets, and square ones after the name of a group", Sign(")")),
    ("√", "write sqrt(...)", Word("sqrt")),
    ("∞", "write inf", Word("inf")),
    ("@", "write sum(a*b) for the product of two columns", Unknown),
    (";", "a formula is one expression; give each further one a name of its own under [formulas]", Unknown),
    (":", "a choice is written if(condition, a, b)", Unknown),
    ("?", "a choice is written if(condition, a, b)", Unknown),
    ("#", "a remark stands after the closing quotes of the formula", Unknown),
    ("$", "a name stands as it is", Unknown),
    ("\u{2018}", "write plain quotes: '...'", Unknown),
    ("\u{2019}", "write plain quotes: '...'", Unknown),
    ("\u{201c}", "write plain quotes: '...'", Unknown),
    ("\u{201d}", "write plain quotes: '...'", Unknown),
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

/// All tokens of `text` with their byte spans, the last one [`Token::End`], and what is wrong with them.
///
/// Reading goes on after a fault with what was meant, so that one look shows all there is.
pub(super) fn tokens(text: &str) -> (Vec<(Token, Range<usize>)>, Vec<Fault>) {
    let (mut found, mut faults) = (Vec::new(), Vec::new());
    let mut at = 0;
    while let Some(c) = text[at..].chars().next() {
        if c.is_whitespace() {
            at += c.len_utf8();
            continue;
        }
        if begins_name(c) {
            let (token, end) = name(text, at);
            found.push((token, at..end));
            at = end;
        } else if c.is_ascii_digit() || (c == '.' && text[at + 1..].starts_with(|d: char| d.is_ascii_digit())) {
            let (token, end) = number(text, at, &mut faults);
            found.push((token, at..end));
            at = end;
        } else if c == '\'' || c == '"' {
            let (token, end) = label(text, at, c, &mut faults);
            found.push((token, at..end));
            at = end;
        } else {
            at = sign(text, at, c, &mut found, &mut faults);
        }
    }
    found.push((Token::End, text.len()..text.len()));
    (found, faults)
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

/// Digits with a point and an exponent where wanted: `2`, `2.`, `.5`, `1e-3`. A number that is none is read as 1.
fn number(text: &str, from: usize, faults: &mut Vec<Fault>) -> (Token, usize) {
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
            let message = format!("the exponent of `{}` has no digits", &text[from..last]);
            let help = "write a number as in 1e-3; write 2*e for a product with a name";
            faults.push(Fault::new(from..last, message).help(help));
            return (Token::Number(1.0), last);
        }
        end = last;
    }
    match text[from..end].parse::<f64>() {
        Ok(value) if value.is_finite() => (Token::Number(value), end),
        _ => {
            let message = format!("`{}` is beyond the largest number, 1.8e308", &text[from..end]);
            faults.push(Fault::new(from..end, message).help("write inf for infinity"));
            (Token::Number(1.0), end)
        }
    }
}

fn label(text: &str, from: usize, quote: char, faults: &mut Vec<Fault>) -> (Token, usize) {
    if let Some(length) = text[from + 1..].find(quote) {
        let end = from + 1 + length;
        return (Token::Label(text[from + 1..end].to_string()), end + 1);
    }
    let fault = Fault::new(from..text.len(), "this label has no closing quote").help(format!("end it with {quote}"));
    faults.push(fault);
    (Token::Broken, text.len())
}

/// Whether the innermost bracket that is open is that of a call.
fn in_call(found: &[(Token, Range<usize>)]) -> bool {
    let mut closed = 0;
    for (at, (token, _)) in found.iter().enumerate().rev() {
        match token {
            Token::Sign(")") => closed += 1,
            Token::Sign("(") if closed == 0 => return at > 0 && matches!(found[at - 1].0, Token::Name(_)),
            Token::Sign("(") => closed -= 1,
            _ => {}
        }
    }
    false
}

/// Reads a sign at `at`, or what stands for one elsewhere, and gives the place after it.
fn sign(text: &str, at: usize, c: char, found: &mut Vec<(Token, Range<usize>)>, faults: &mut Vec<Fault>) -> usize {
    let rest = &text[at..];
    let own = SIGNS.iter().find(|sign| rest.starts_with(**sign));
    let foreign = FOREIGN.iter().filter(|(sign, ..)| rest.starts_with(sign)).max_by_key(|(sign, ..)| sign.len());
    // `!=` is ours and `!` is not; `**` is not and `*` is ours: the longer one was meant.
    if let Some(sign) = own.filter(|sign| foreign.is_none_or(|(other, ..)| sign.len() > other.len())) {
        found.push((Token::Sign(sign), at..at + sign.len()));
        return at + sign.len();
    }
    let Some((other, help, meant)) = foreign else {
        let span = at..at + c.len_utf8();
        faults.push(Fault::new(span.clone(), format!("`{}` is no part of a formula", c.escape_debug())));
        found.push((Token::Broken, span.clone()));
        return span.end;
    };
    let span = at..at + other.len();
    if *other == ";" && in_call(found) {
        let fault = Fault::new(span.clone(), "a semicolon stands between arguments");
        faults.push(fault.help("arguments are separated by commas"));
        found.push((Token::Sign(","), span.clone()));
        return span.end;
    }
    faults.push(Fault::new(span.clone(), format!("`{other}` is no part of a formula")).help(*help));
    match meant {
        Sign(sign) => found.push((Token::Sign(sign), span.clone())),
        Word(word) => found.push((Token::Name((*word).to_owned()), span.clone())),
        Raised(power) => {
            found.push((Token::Sign("^"), span.clone()));
            found.push((Token::Number(*power), span.clone()));
        }
        Unknown => found.push((Token::Broken, span.clone())),
    }
    // A name with a sign before it is no name any more.
    if matches!(*other, "_" | "$") && text[span.end..].starts_with(continues_name) {
        return name(text, span.end).1;
    }
    span.end
}

#[cfg(test)]
mod tests {
    use super::*;

    fn plain(text: &str) -> Vec<Token> {
        let (found, faults) = tokens(text);
        assert_eq!(faults, [], "{text}");
        found.into_iter().map(|(token, _)| token).collect()
    }

    fn fault(text: &str) -> Fault {
        let (_, mut faults) = tokens(text);
        assert_eq!(faults.len(), 1, "{text}: {faults:?}");
        faults.remove(0)
    }

    #[test]
    fn numbers_are_read_as_written() {
        for (text, want) in [("1e-3", 1e-3), (".5", 0.5), ("2.", 2.0), ("12.5E+2", 1250.0), ("0", 0.0)] {
            assert_eq!(plain(text), vec![Token::Number(want), Token::End], "{text}");
        }
        for text in ["1e", "1e+", "1e999"] {
            assert_eq!(fault(text).span, 0..text.len(), "{text}");
        }
    }

    #[test]
    fn names_come_in_any_script_and_with_dots() {
        let (found, _) = tokens("gauge.flow*größe_2 + 流量");
        assert_eq!(found[0], (Token::Name("gauge.flow".into()), 0..10));
        assert_eq!(found[2], (Token::Name("größe_2".into()), 11..20));
        assert_eq!(found[4], (Token::Name("流量".into()), 23..29));
    }

    #[test]
    fn signs_from_elsewhere_are_explained() {
        for (text, part) in
            [("a ** b", "^"), ("a && b", "and"), ("a = b", "=="), ("a ≤ b", "<="), ("a − b", "minus"), ("a ² ", "^2")]
        {
            let fault = fault(text);
            assert!(fault.help.unwrap().contains(part), "{text}");
            assert_eq!(fault.span.start, 2);
        }
        assert_eq!(fault("größe²").span, 7..9);
        assert_eq!(plain("Q₁₀₀"), vec![Token::Name("Q₁₀₀".into()), Token::End]);
        assert_eq!(plain("a != b").len(), 4);
        assert!(fault("a $ b").message.contains('$'));
        assert!(fault("x == 'Alder").message.contains("closing quote"));
    }

    #[test]
    fn reading_goes_on_with_what_was_meant() {
        let (found, faults) = tokens("a ** 2 && b ≤ x² % 3");
        assert_eq!(faults.len(), 5, "{faults:?}");
        let want = ["a", "^", "2", "and", "b", "<=", "x", "^", "2", "broken", "3", "end"];
        let text = |token: &Token| match token {
            Token::Number(value) => value.to_string(),
            Token::Name(name) | Token::Label(name) => name.clone(),
            Token::Sign(sign) => (*sign).to_owned(),
            Token::Broken => "broken".to_owned(),
            Token::End => "end".to_owned(),
        };
        assert_eq!(found.iter().map(|(token, _)| text(token)).collect::<Vec<_>>(), want);
    }
}
