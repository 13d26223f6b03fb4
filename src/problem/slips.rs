//! What people write where TOML wants something else, line by line.

use std::ops::Range;

use super::foreign::meant_family;
use super::written_numbers::{is_plain, mended_number, number_and_rest, trimmed, ungrouped, worked_out};
use crate::distribution::Distribution;

/// One slip: where it is in its line, what to write instead, and the edits that make the line one of TOML.
#[derive(Debug, PartialEq)]
pub(crate) struct Slip {
    pub(crate) span: Range<usize>,
    pub(crate) message: String,
    pub(crate) help: Vec<String>,
    pub(crate) edits: Vec<(Range<usize>, String)>,
    /// Whether the edits only stand in for a value that is not known.
    pub(crate) mute: bool,
}

impl Slip {
    fn new(span: Range<usize>, message: impl Into<String>, help: impl Into<String>) -> Self {
        Self { span, message: message.into(), help: vec![help.into()], edits: Vec::new(), mute: false }
    }

    fn edit(mut self, span: Range<usize>, text: impl Into<String>) -> Self {
        self.edits.push((span, text.into()));
        self
    }

    /// Replaces what is wrong.
    fn write(self, text: impl Into<String>) -> Self {
        let span = self.span.clone();
        self.edit(span, text)
    }
}

/// The first slip of `line`, of the table `table`, of which TOML says `message` at `at`.
pub(crate) fn find(line: &str, table: &str, message: &str, at: usize) -> Option<Slip> {
    let begin = line.len() - line.trim_start().len();
    let rest = &line[begin..];
    for sign in ["//", ";", "--"] {
        if rest.starts_with(sign) {
            let slip =
                Slip::new(begin..begin + sign.len(), format!("`{sign}` begins no remark"), "a remark begins with #");
            return Some(slip.write("#"));
        }
    }
    if let Some(slip) = typographic(line) {
        return Some(slip);
    }
    if rest.starts_with('[') && !rest.contains('=') && !message.contains("array") {
        return header(line, begin);
    }
    let slip = Line { line, table }.entry(begin);
    slip.or_else(|| {
        let lacks = message.contains("missing comma");
        let comma = || Slip::new(at..at, "a comma is missing", "put a comma between the items of a list or table");
        lacks.then(|| comma().edit(at..at, ", "))
    })
}

fn typographic(line: &str) -> Option<Slip> {
    let marks = ['\u{201c}', '\u{201d}', '\u{201e}', '\u{2018}', '\u{2019}', '\u{201a}', '«', '»', '`'];
    let found: Vec<(usize, &str)> = line.match_indices(marks).collect();
    let (first, mark) = *found.first()?;
    let slip =
        Slip::new(first..first + mark.len(), format!("{mark} is a typographic quote"), "write plain quotes: \"...\"");
    Some(found.iter().fold(slip, |slip, (at, mark)| slip.edit(*at..at + mark.len(), "\"")))
}

/// A header whose brackets do not close.
fn header(line: &str, begin: usize) -> Option<Slip> {
    let end = line.find('#').unwrap_or(line.len());
    let text = line[begin..end].trim_end();
    let (open, close) = if text.starts_with("[[") { ("[[", "]]") } else { ("[", "]") };
    if text.ends_with(close) {
        return None;
    }
    let name = text.trim_matches(['[', ']', ')', '}', ' ', ':']);
    let slip =
        Slip::new(begin..begin + open.len(), "this bracket is never closed", format!("write {open}{name}{close}"));
    Some(slip.edit(begin..begin + text.len(), format!("{open}{name}{close}")))
}

/// Where a value stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Inside {
    Line,
    Table,
    List,
}

struct Line<'a> {
    line: &'a str,
    /// The table it belongs to.
    table: &'a str,
}

/// Either the place after what was read, or a slip in it.
type Read = Result<usize, Slip>;

impl Line<'_> {
    fn skip_blanks(&self, at: usize) -> usize {
        at + self.line[at..].len() - self.line[at..].trim_start_matches([' ', '\t', '\r']).len()
    }

    fn char_at(&self, at: usize) -> Option<char> {
        self.line[at..].chars().next()
    }

    /// The end of the line without its remark.
    fn end(&self, from: usize) -> usize {
        let end = self.line[from..].find('#').map_or(self.line.len(), |remark| from + remark);
        from + self.line[from..end].trim_end().len()
    }

    /// The slip of a line `key = value`.
    fn entry(&self, begin: usize) -> Option<Slip> {
        let value = match self.key(begin, Inside::Line) {
            Ok(value) => value,
            Err(slip) => return Some(slip),
        };
        let end = match self.value(value, Inside::Line) {
            Ok(end) => end,
            Err(slip) => return Some(slip),
        };
        let at = self.skip_blanks(end);
        match self.char_at(at) {
            Some(';' | ',') => {
                let sign = &self.line[at..=at];
                let word = if sign == ";" { "semicolon" } else { "comma" };
                let message = format!("a {word} stands at the end of the line");
                Some(Slip::new(at..at + 1, message, "take it away: a line holds one key").write(" "))
            }
            None | Some('#') => None,
            Some(_) => {
                let stop = self.end(at).max(at);
                let message = "something follows the value";
                Some(
                    Slip::new(at..stop, message, "a line holds one key and its value; a remark begins with #")
                        .write(""),
                )
            }
        }
    }

    /// Reads a key and the sign after it; gives the place of the value.
    fn key(&self, begin: usize, inside: Inside) -> Read {
        let stop = match self.char_at(begin) {
            Some(quote @ ('"' | '\'')) => {
                self.line[begin + 1..].find(quote).map_or(self.line.len(), |end| begin + end + 2)
            }
            _ => {
                let ends =
                    |c: char| matches!(c, '=' | ':' | ',' | '{' | '}' | '[' | ']' | '#' | '"' | '\'' | '~' | '<');
                self.line[begin..].find(ends).map_or(self.line.len(), |end| begin + end)
            }
        };
        let key = self.line[begin..stop].trim_end();
        let at = self.skip_blanks(begin + key.len());
        let span = begin..begin + key.len();
        if key.is_empty() {
            return Ok(begin);
        }
        let bare = |text: &str| text.chars().all(|c| c.is_ascii_alphanumeric() || matches!(c, '_' | '-' | '.'));
        if self.line[at..].starts_with(']') && inside == Inside::Line && bare(key) {
            return Err(Slip::new(span.clone(), "an opening bracket is missing", format!("write [{key}]"))
                .edit(begin..at + 1, format!("[{key}]")));
        }
        if inside == Inside::Line && self.line[at..].trim_end() == ":" && bare(key) {
            return Err(Slip::new(span, "a table begins with its name in brackets", format!("write [{key}]"))
                .edit(begin..at + 1, format!("[{key}]")));
        }
        let words: Vec<&str> = key.split_whitespace().collect();
        let sign = self.sign(at);
        let quoted = key.starts_with(['"', '\'']);
        if sign.is_none() && words.len() >= 2 && !quoted && inside == Inside::Line && bare(words[0]) {
            let value = begin + words[0].len();
            return Err(Slip::new(
                span,
                format!("`{}` has no `=`", words[0]),
                format!("write {} = {}", words[0], self.line[value..self.end(value)].trim()),
            )
            .edit(value..value, " ="));
        }
        if !quoted && words.len() > 1 && sign.is_some() {
            return Err(Slip::new(
                span,
                format!("the key `{key}` has a gap"),
                format!("a key is one word: {}", words.join("_")),
            )
            .write(words.join("_")));
        }
        if !quoted && !bare(key) {
            let name = key.chars().all(|c| c.is_alphanumeric() || matches!(c, '_' | '-' | '.'));
            let help = format!("write \"{key}\" = ...");
            return Err(if name {
                Slip::new(span, format!("the key `{key}` needs quotes"), help).write(format!("\"{key}\""))
            } else {
                Slip::new(span, format!("`{key}` is no key"), "a key is a word of letters, digits and _")
                    .write(format!("\"{key}\""))
            });
        }
        match sign {
            Some("=") => Ok(self.skip_blanks(at + 1)),
            Some(sign) => {
                let message = format!("`{sign}` stands between the key `{key}` and its value");
                let written = format!("={}", " ".repeat(sign.len() - 1));
                let written =
                    if sign == ":" && self.line[..at].ends_with(char::is_alphanumeric) { " =".into() } else { written };
                Err(Slip::new(at..at + sign.len(), message, format!("write {key} = ...")).write(written))
            }
            None => {
                let help = match (key.parse::<f64>(), self.parameters()) {
                    (Ok(_), Some(names)) => format!("each parameter has its name: {names}"),
                    _ => format!("write {key} = and its value"),
                };
                let slip = Slip::new(span, format!("`{key}` has no value"), help);
                Err(Slip { mute: true, ..slip.edit(at..at, " = \"\"") })
            }
        }
    }

    /// The parameters of the distribution that the line names, as one writes them.
    fn parameters(&self) -> Option<String> {
        let (_, rest) = self.line.split_once("distribution")?;
        let family = meant_family(rest.split(['"', '\'']).nth(1)?)?;
        let set = Distribution::parameters_of(family)?.first()?;
        let each: Vec<String> = set.required.iter().map(|key| format!("{key} = ...")).collect();
        Some(each.join(", "))
    }

    fn sign(&self, at: usize) -> Option<&'static str> {
        ["==", ":=", "<-", "=:", "=>", "=", ":", "~"].into_iter().find(|sign| self.line[at..].starts_with(sign))
    }

    fn value(&self, at: usize, inside: Inside) -> Read {
        match self.char_at(at) {
            Some('"' | '\'') => self.text(at, inside),
            Some('[') => self.list(at, inside),
            Some('{') => self.inner_table(at),
            _ => self.bare(at, inside),
        }
    }

    fn text(&self, at: usize, inside: Inside) -> Read {
        let quote = self.char_at(at).unwrap_or('"');
        if self.line[at..].starts_with(&quote.to_string().repeat(3)) {
            // Texts of several lines are left to TOML.
            let close = self.line[at + 3..].find(&quote.to_string().repeat(3));
            return Ok(close.map_or(self.line.len(), |end| at + end + 6));
        }
        let mut escaped = false;
        let close = self.line[at + 1..].char_indices().find(|&(_, c)| {
            let found = c == quote && !escaped;
            escaped = c == '\\' && quote == '"' && !escaped;
            found
        });
        let Some(end) = close.map(|(end, _)| at + end + 2) else {
            let stop = self.unclosed_end(at, inside);
            let text = &self.line[at..stop];
            return Err(Slip::new(
                at..stop,
                "this text has no closing quote",
                format!("end it with {quote}: {text}{quote}"),
            )
            .edit(stop..stop, quote.to_string()));
        };
        if let Some(slip) = self.escapes(at, end).or_else(|| self.inner_quotes(at, end, quote, inside)) {
            return Err(slip);
        }
        Ok(end)
    }

    /// Where a text that is not closed probably ends.
    fn unclosed_end(&self, at: usize, inside: Inside) -> usize {
        let rest = &self.line[at..];
        let stops: &[char] = match inside {
            Inside::Line => &['#'],
            Inside::Table => &[',', '}'],
            Inside::List => &[',', ']'],
        };
        let end = rest.find(stops).map_or(self.line.len(), |end| at + end);
        at + self.line[at..end].trim_end().len()
    }

    /// A backslash that begins no escape, as in the path of a file.
    fn escapes(&self, at: usize, end: usize) -> Option<Slip> {
        if !self.line[at..].starts_with('"') {
            return None;
        }
        let mut characters = self.line[at..end].char_indices();
        while let Some((place, c)) = characters.next() {
            if c != '\\' {
                continue;
            }
            let (_, next) = characters.next()?;
            if !"btnfre\"\\uUx".contains(next) {
                let place = at + place;
                let message = format!("\\{next} is no escape");
                let help = "write / in the path of a file; else \\\\ for a backslash, or the text in '...'";
                return Some(Slip::new(place..place + 1 + next.len_utf8(), message, help).edit(place..place, "\\"));
            }
        }
        None
    }

    /// Quotes of the same kind inside a text: it ends too early, and something follows that is neither comma nor end.
    fn inner_quotes(&self, at: usize, end: usize, quote: char, inside: Inside) -> Option<Slip> {
        let next = self.skip_blanks(end);
        let follows = self.char_at(next);
        let fine = match inside {
            Inside::Line => matches!(follows, None | Some('#' | ';' | ',')),
            Inside::Table => matches!(follows, None | Some(',' | '}' | ']' | ')' | '#')),
            Inside::List => matches!(follows, None | Some(',' | ']' | '}' | ')' | '#')),
        };
        let last = self.line.rfind(quote)?;
        // `"normal" mean = "2"`: a comma is missing.
        let comma = inside == Inside::Table && self.line[next..].contains('=') && !self.line[next..].contains("==");
        // Two texts side by side are items without a comma between them.
        let gap = next > end && matches!(follows, Some('"' | '\''));
        if fine || last < end || comma || gap {
            return None;
        }
        let other = if quote == '"' { '\'' } else { '"' };
        let inner = self.line[at + 1..last].match_indices(quote).map(|(found, _)| at + 1 + found);
        let inner: Vec<usize> = inner.collect();
        if self.line[at + 1..last].contains(other) || inner.len() % 2 == 1 {
            return None;
        }
        let message = format!("quotes inside a text in {quote}...{quote} end it");
        let slip = Slip::new(inner[0]..inner[0] + 1, message, format!("write {other} for the inner ones"));
        Some(inner.into_iter().fold(slip, |slip, place| slip.edit(place..place + 1, other.to_string())))
    }

    fn list(&self, open: usize, inside: Inside) -> Read {
        let mut at = self.skip_blanks(open + 1);
        let mut after_item = open + 1;
        loop {
            match self.char_at(at) {
                Some(']') => return Ok(at + 1),
                None | Some('#') => return Err(self.close(open, after_item, "]")),
                Some(c @ ('}' | ')')) if inside != Inside::Table || c == ')' => return Err(self.wrong_close(at, ']')),
                Some('}') => return Err(self.close(open, after_item, "]")),
                _ => {}
            }
            if self.is_key(at) {
                // `[0.0, inf, near = 5.0`: the bracket belongs before the last comma.
                return Err(self.close(open, after_item, "]"));
            }
            let end = self.value(at, Inside::List)?;
            if end == at {
                return Err(Slip::new(
                    at..at + 1,
                    "a value is missing here",
                    "a list holds values with commas between them",
                )
                .write(""));
            }
            after_item = end;
            at = self.skip_blanks(end);
            match self.char_at(at) {
                Some(',') => at = self.skip_blanks(at + 1),
                Some(']' | '}' | ')' | '#') | None => {}
                Some(_) => return Err(self.comma(end)),
            }
        }
    }

    fn inner_table(&self, open: usize) -> Read {
        let mut at = self.skip_blanks(open + 1);
        loop {
            match self.char_at(at) {
                Some('}') => return Ok(at + 1),
                None | Some('#') => {
                    let end = self.line[..at].trim_end().len();
                    return Err(self.close(open, end, " }"));
                }
                Some(']' | ')') => return Err(self.wrong_close(at, '}')),
                Some(',') => return Err(Slip::new(at..at + 1, "a comma too many", "take it away").write("")),
                _ => {}
            }
            let value = self.key(at, Inside::Table)?;
            let end = self.value(value, Inside::Table)?;
            at = self.skip_blanks(end);
            match self.char_at(at) {
                Some(',') => {
                    let next = self.skip_blanks(at + 1);
                    let run = self.line[value..].find(|c: char| !(c.is_ascii_digit() || matches!(c, ',' | '.' | '-')));
                    let run = self.line[value..run.map_or(self.line.len(), |end| value + end)].trim_end_matches(',');
                    if let Some(number) = ungrouped(run) {
                        return Err(grouped(run, value..value + run.len(), &number));
                    }
                    let digits = self.line[next..].len()
                        - self.line[next..].trim_start_matches(|c: char| c.is_ascii_digit()).len();
                    let number = self.line[value..end].trim();
                    if digits > 0 && number.parse::<f64>().is_ok() && !self.is_key(next) {
                        return Err(decimal_comma(at, number, &self.line[next..next + digits], next));
                    }
                    at = next;
                }
                Some('}' | ']' | ')' | '#') | None => {}
                Some(_) => return Err(self.comma(end)),
            }
        }
    }

    fn comma(&self, at: usize) -> Slip {
        Slip::new(at..at, "a comma is missing", "put a comma between the items").edit(at..at, ",")
    }

    fn close(&self, open: usize, at: usize, sign: &str) -> Slip {
        let message = "this bracket is never closed";
        let shown = format!("{}{sign}", &self.line[open..at]);
        Slip::new(open..open + 1, message, format!("write {shown}")).edit(at..at, sign)
    }

    fn wrong_close(&self, at: usize, right: char) -> Slip {
        let wrong = &self.line[at..=at];
        let message = format!("`{wrong}` closes what another bracket opened");
        Slip::new(at..at + 1, message, format!("write {right}")).write(right.to_string())
    }

    /// Whether a key with its `=` stands here.
    fn is_key(&self, at: usize) -> bool {
        let rest = &self.line[at..];
        let key = rest.len() - rest.trim_start_matches(|c: char| c.is_alphanumeric() || matches!(c, '_' | '-')).len();
        let after = rest[key..].trim_start();
        key > 0 && after.starts_with('=') && !after.starts_with("==")
    }

    /// A value without quotes and brackets.
    fn bare(&self, at: usize, inside: Inside) -> Read {
        let stop = self.bare_end(at, inside);
        let text = self.line[at..stop].trim_end();
        let span = at..at + text.len();
        if text.is_empty() && inside != Inside::List {
            let slip = Slip::new(
                self.line[..at].trim_end().len().saturating_sub(1)..at,
                "the value is missing",
                "write it after the =",
            );
            return Err(Slip { mute: true, ..slip.edit(at..at, "\"\"") });
        }
        if is_plain(text) {
            return Ok(span.end);
        }
        Err(self.not_plain(text, span, inside))
    }

    fn bare_end(&self, at: usize, inside: Inside) -> usize {
        if inside == Inside::Line {
            return self.end(at);
        }
        let mut depth = 0;
        for (place, c) in self.line[at..].char_indices() {
            match c {
                '(' | '[' => depth += 1,
                ')' | ']' if depth > 0 => depth -= 1,
                ',' | '}' | ']' | ')' if depth == 0 => return at + place,
                '#' => return at + place,
                _ => {}
            }
        }
        self.line.len()
    }

    fn not_plain(&self, text: &str, span: Range<usize>, inside: Inside) -> Slip {
        let at = span.start;
        if let Some((before, after)) = text.split_once(';').filter(|_| inside == Inside::List) {
            let place = at + before.len();
            let help = format!("write {}, {}", before.trim(), after.trim());
            return Slip::new(place..place + 1, "a semicolon stands where a comma should", help).write(",");
        }
        let gap = text.find(' ').unwrap_or(text.len());
        if inside == Inside::List && is_plain(&text[..gap]) && gap < text.len() {
            let help = format!("write {}", text.split_whitespace().collect::<Vec<_>>().join(", "));
            return Slip::new(at + gap..at + gap + 1, "a comma is missing", help).edit(at + gap..at + gap, ",");
        }
        if let Some(number) = ungrouped(text) {
            return grouped(text, span, &number);
        }
        if let Some(mended) = mended_number(text) {
            let (message, mended) = mended;
            return Slip::new(span, message, format!("write {mended}")).write(mended);
        }
        if let Some((whole, part)) = text.split_once(',')
            && inside == Inside::Line
            && whole.parse::<f64>().is_ok()
            && !part.is_empty()
            && part.chars().all(|c| c.is_ascii_digit())
        {
            return decimal_comma(at + whole.len(), whole, part, at + whole.len() + 1);
        }
        if text.starts_with('(')
            && text.ends_with(')')
            && text[1..text.len() - 1].split(',').all(|part| is_plain(part.trim()))
        {
            let slip = Slip::new(
                span.clone(),
                "a list stands in square brackets",
                format!("write [{}]", &text[1..text.len() - 1]),
            );
            return slip.edit(at..at + 1, "[").edit(span.end - 1..span.end, "]");
        }
        if let Some(stripped) = text.strip_suffix(';').filter(|text| is_plain(text.trim())) {
            let place = at + stripped.len();
            return Slip::new(place..place + 1, "a semicolon stands at the end of the line", "take it away").write(" ");
        }
        if let Some(percent) = text.strip_suffix('%').and_then(|number| number.trim().parse::<f64>().ok()) {
            let written = trimmed(percent / 100.0);
            let help = format!("write a share as a number: {written}");
            return Slip::new(span, format!("`{text}` is no plain number"), help).write(written);
        }
        let thousands = [("k", 1e3), ("K", 1e3), ("M", 1e6)];
        for (sign, size) in thousands {
            let number = text.strip_suffix(sign).and_then(|number| number.trim().parse::<f64>().ok());
            if let Some(number) = number.filter(|_| self.table == "tuning") {
                let written = (number * size).to_string();
                return Slip::new(span, format!("`{text}` is no number"), format!("write {written}")).write(written);
            }
        }
        let cut_off =
            text.strip_suffix(['e', 'E', '+', '-']).filter(|number| is_plain(number.trim_end_matches(['e', 'E'])));
        if let Some(number) = cut_off {
            let number = number.trim_end_matches(['e', 'E']);
            let help = format!("write {number}, or the digits of the exponent as in {number}e3");
            return Slip::new(span, format!("`{text}` is no number"), help).write(number);
        }
        if let Some((number, rest)) = number_and_rest(text) {
            let help = match self.table {
                "constants" => format!("write {number} alone; the unit may follow as a remark: {number} # {rest}"),
                _ => format!("write {number} alone; the unit of a variable is a key of its own: unit = \"{rest}\""),
            };
            return Slip::new(span, format!("`{text}` is more than a number"), help).write(number);
        }
        if let Some(table) = called_family(text).filter(|_| self.table == "variables" && inside == Inside::Line) {
            let message = "a variable is a table of its distribution and its parameters";
            return Slip::new(span, message, format!("write {table}")).write(table);
        }
        let in_formulas = ["formulas", "estimates", "target"].contains(&self.table);
        if !in_formulas && let Some(value) = worked_out(text) {
            let help = format!("write the number itself, {value:?}");
            return Slip::new(span, format!("`{text}` is no plain number"), help).write(format!("{value:?}"));
        }
        let quote = if text.contains('"') { "'" } else { "\"" };
        let end = span.end;
        let quoted = format!("{quote}{text}{quote}");
        let slip =
            Slip::new(span, format!("`{text}` has no quotes"), format!("texts and formulas stand in quotes: {quoted}"));
        Slip { mute: self.table == "constants", ..slip.edit(at..at, quote).edit(end..end, quote) }
    }
}

/// `normal(0, 1)` as the table of a variable, with the parameters by their names.
fn called_family(text: &str) -> Option<String> {
    let (word, rest) = text.split_once('(')?;
    let family = meant_family(word.trim())?;
    let values: Vec<&str> = rest.strip_suffix(')')?.split(',').map(str::trim).collect();
    let sets = Distribution::parameters_of(family)?;
    let set = sets.iter().find(|set| set.required.len() == values.len())?;
    let each = set.required.iter().zip(values).map(|(key, value)| {
        if is_plain(value) { format!(", {key} = {value}") } else { format!(", {key} = \"{value}\"") }
    });
    Some(format!("{{ distribution = \"{family}\"{} }}", each.collect::<String>()))
}

fn grouped(text: &str, span: Range<usize>, number: &str) -> Slip {
    let first = text.find([',', '.']).map_or("", |at| &text[at..=at]);
    let sign = if first == "," { "commas" } else { "points" };
    let message = format!("{sign} group the thousands of `{text}`");
    Slip::new(span, message, format!("write {number}")).write(number)
}

fn decimal_comma(at: usize, whole: &str, part: &str, next: usize) -> Slip {
    let help = if part.len() == 3 && whole != "0" && whole.len() <= 3 {
        format!("write {whole}{part} for a large number, {whole}.{part} for a fraction")
    } else {
        format!("write a point: {whole}.{part}")
    };
    Slip::new(at..at + 1, "a decimal comma", help).edit(at..next, ".")
}
