//! Slips against TOML: told in plain words and, where what was meant is plain, mended in a copy, so that the rest of the
//! file can be looked at as well.
//!
//! The copy differs from the file within lines only; every byte of it knows its place in the file.

use std::ops::Range;

use toml::de::DeTable;

use super::faults::Fault;
use super::slips;
use super::slips::Slip;

/// Slips that are mended in one file, at most.
const MOST: usize = 30;

/// A file that TOML can read, made from one that it may not.
#[derive(Debug)]
pub(crate) struct Mended {
    pub(crate) text: String,
    /// What was wrong; places count in the file itself.
    pub(crate) faults: Vec<Fault>,
    /// Whether the copy can be read.
    pub(crate) readable: bool,
    /// For every byte of the copy, and its end: the byte of the file.
    places: Vec<usize>,
    /// Lines that were left out, because their table stands twice: what they name may be used elsewhere.
    pub(crate) left_out: Vec<String>,
    /// Lines of the file (from 0) whose values stand in for others: nothing more is told of them.
    muted: Vec<usize>,
}

impl Mended {
    /// The place in the file of a place in the copy.
    pub(crate) fn place(&self, span: &Range<usize>) -> Range<usize> {
        let last = self.places.len() - 1;
        let start = self.places[span.start.min(last)];
        let end = match span.end.min(last) {
            end if end > span.start => self.places[end - 1] + 1,
            _ => start,
        };
        start..end.max(start)
    }

    /// Whether nothing more should be told of this place of the file.
    pub(crate) fn is_muted(&self, source: &str, start: usize) -> bool {
        let line = source[..start.min(source.len())].matches('\n').count();
        self.muted.contains(&line)
    }
}

/// Mends what can be mended.
pub(crate) fn mend(source: &str) -> Mended {
    let mut mended = Mended {
        text: source.to_owned(),
        faults: Vec::new(),
        readable: true,
        places: (0..=source.len()).collect(),
        left_out: Vec::new(),
        muted: Vec::new(),
    };
    for _ in 0..MOST {
        let (_, errors) = DeTable::parse_recoverable(&mended.text);
        let end = mended.text.len();
        let place = |error: &toml::de::Error| error.span().unwrap_or(end..end);
        let slip = errors.iter().filter(|error| !is_twice(error)).min_by_key(|error| place(error).start);
        let Some(error) = slip else {
            if !tell_twice(&mut mended, source, &errors.iter().map(place).collect::<Vec<_>>()) {
                return mended;
            }
            continue;
        };
        let (span, message) = (place(error), error.message().to_owned());
        let line = line_at_fault(&mended.text, span.start, &message);
        let text = mended.text[line.clone()].to_owned();
        let table = table_of(&mended.text[..line.start]);
        let at = span.start.clamp(line.start, line.end) - line.start;
        match slips::find(&text, &table, &message, at) {
            Some(slip) => apply(&mut mended, source, line.start, slip),
            None => {
                mended.faults.push(unreadable(&mended.place(&span), &message));
                mended.readable = false;
                return mended;
            }
        }
    }
    mended.readable = false;
    mended
}

fn apply(mended: &mut Mended, source: &str, from: usize, slip: Slip) {
    let moved = |span: &Range<usize>| from + span.start..from + span.end;
    let fault = Fault::new(mended.place(&moved(&slip.span)), slip.message);
    mended.faults.push(slip.help.into_iter().fold(fault, Fault::help));
    if slip.mute {
        let start = mended.places[from];
        mended.muted.push(source[..start].matches('\n').count());
    }
    // From the end on, so that the places of earlier edits stay right.
    let mut edits = slip.edits;
    edits.sort_by_key(|(span, _)| std::cmp::Reverse((span.start, span.end)));
    for (span, text) in edits {
        let span = moved(&span);
        let place = mended.places[span.start];
        mended.places.splice(span.clone(), std::iter::repeat_n(place, text.len()));
        mended.text.replace_range(span, &text);
    }
}

/// The line that holds the slip: that of the error, or the one before where something is missing at its end.
fn line_at_fault(text: &str, at: usize, message: &str) -> Range<usize> {
    let line_of = |at: usize| {
        let start = text[..at].rfind('\n').map_or(0, |end| end + 1);
        let end = text[at..].find('\n').map_or(text.len(), |end| at + end);
        start..end
    };
    let at = at.min(text.len());
    let line = line_of(at);
    let missing = ["missing comma", "unclosed", "unexpected `=` in array"].iter().any(|part| message.contains(part));
    let before = text[..line.start].trim_end();
    if missing && text[line.start..at].trim().is_empty() && !before.is_empty() {
        return line_of(before.len());
    }
    line
}

/// The name of the table that the next line belongs to, without its brackets.
fn table_of(before: &str) -> String {
    let header = before.lines().rev().find(|line| line.trim_start().starts_with('[') && !line.contains('='));
    header.map_or_else(String::new, |line| line.trim().trim_matches(['[', ']']).trim().to_owned())
}

fn is_twice(error: &toml::de::Error) -> bool {
    error.message().contains("duplicate key")
}

/// Tells of all keys that stand twice, in the file `places` of the copy. A table that does is left out the second time;
/// whether there was one.
fn tell_twice(mended: &mut Mended, source: &str, places: &[Range<usize>]) -> bool {
    let told: Vec<(Fault, bool)> = places.iter().map(|place| twice(mended, source, place)).collect();
    // One table at a time, since every line that is left out moves the places behind it.
    if let Some(k) = told.iter().position(|(_, is_key)| !is_key) {
        mended.faults.push(told[k].0.clone());
        leave_out(mended, places[k].start);
        return true;
    }
    mended.faults.extend(told.into_iter().map(|(fault, _)| fault));
    false
}

/// Makes remarks of the lines of a table, its header included.
fn leave_out(mended: &mut Mended, at: usize) {
    let mut start = mended.text[..at].rfind('\n').map_or(0, |end| end + 1);
    loop {
        let end = mended.text[start..].find('\n').map_or(mended.text.len(), |end| start + end);
        mended.left_out.push(mended.text[start..end].to_owned());
        let place = mended.places[start];
        mended.text.insert(start, '#');
        mended.places.insert(start, place);
        start = end + 2;
        if start >= mended.text.len() || mended.text[start..].trim_start().starts_with('[') {
            return;
        }
    }
}

/// A key that stands twice, and whether the rest can be read all the same.
fn twice(mended: &Mended, source: &str, span: &Range<usize>) -> (Fault, bool) {
    let text = &mended.text;
    let key = &text[span.clone()];
    let line_start = text[..span.start].rfind('\n').map_or(0, |end| end + 1);
    let is_header = text[line_start..].trim_start().starts_with('[');
    let what = if is_header {
        format!(
            "the table {}",
            text[line_start..].lines().next().unwrap_or(key).split('#').next().unwrap_or(key).trim()
        )
    } else {
        format!("the key `{key}`")
    };
    let fault = Fault::new(mended.place(span), format!("{what} stands twice")).label("again");
    let first = first_place(text, key, line_start, span.start, is_header).map(|first| mended.place(&first));
    let fault = match first {
        Some(first) => {
            let line = 1 + source[..first.start].matches('\n').count();
            let help = if is_header {
                format!("put the lines of both under the one in line {line}")
            } else {
                format!("keep one of the two; the other is in line {line}")
            };
            fault.also(first, "first here").help(help)
        }
        None if is_header => fault
            .help(format!("`{key}` has a line of its own already: put these keys into its braces, {key} = {{ ... }}")),
        None => fault.help("keep one of the two"),
    };
    (fault, !is_header)
}

/// Where a key or a header stood before: in the same line or else in the same table.
fn first_place(text: &str, key: &str, line_start: usize, at: usize, is_header: bool) -> Option<Range<usize>> {
    let is_key = |start: usize| {
        let after = text[start + key.len()..].trim_start_matches(['"', '\'', ' ', '\t']);
        let before = text[..start].chars().next_back();
        let whole = before.is_none_or(|c| !(c.is_alphanumeric() || matches!(c, '_' | '-')));
        let line = &text[text[..start].rfind('\n').map_or(0, |end| end + 1)..start];
        whole
            && if is_header {
                line.trim_start().starts_with('[') && after.starts_with([']', '.'])
            } else {
                after.starts_with(['=', '.'])
            }
    };
    let from = |begin: usize, end: usize| {
        text[begin..end].match_indices(key).map(|(found, _)| begin + found).find(|&start| is_key(start))
    };
    let same_line = from(line_start, at);
    let section = text[..line_start].rmatch_indices('[').map(|(found, _)| found).find(|&found| {
        let start = text[..found].rfind('\n').map_or(0, |end| end + 1);
        text[start..found].trim().is_empty()
    });
    let begin = if is_header { 0 } else { section.unwrap_or(0) };
    same_line.or_else(|| from(begin, line_start)).map(|start| start..start + key.len())
}

/// A slip that is none of those that are known.
fn unreadable(span: &Range<usize>, message: &str) -> Fault {
    let help = if message.contains("string") {
        "close the text with the quotes it began with; a backslash in \"...\" is written \\\\, in '...' as it is"
    } else {
        "a key and its value stand on one line: key = value; texts and formulas in quotes, tables under [name]"
    };
    Fault::new(span.clone(), format!("this is not TOML: {}", message.trim()))
        .help(help)
        .help("the file cannot be read beyond this; mend it and look again")
}

#[cfg(test)]
mod tests {
    use super::*;

    /// What is told of a file, and the copy.
    fn check(file: &str, told: &[&str], copy: &str) {
        let mended = mend(file);
        let messages: Vec<&str> = mended.faults.iter().map(Fault::message).collect();
        assert_eq!(messages.len(), told.len(), "{file}: {messages:?}");
        for (message, part) in messages.iter().zip(told) {
            assert!(message.contains(part), "{file}: {messages:?}");
        }
        assert!(mended.readable, "{file}");
        assert_eq!(mended.text, copy, "{file}");
    }

    #[test]
    fn what_is_meant_is_plain() {
        check("a = normal\nb = 1\n", &["no quotes"], "a = \"normal\"\nb = 1\n");
        check("[formulas]\na = x / sqrt(4*pi) # peak\n", &["no quotes"], "[formulas]\na = \"x / sqrt(4*pi)\" # peak\n");
        check("v = { d = normal, m = 1 }\n", &["no quotes"], "v = { d = \"normal\", m = 1 }\n");
        check("v = { d = \"normal, m = 1 }\nb = 1\n", &["no closing quote"], "v = { d = \"normal\", m = 1 }\nb = 1\n");
        check("v = { d = \"n\", m = 1\nb = 1\n", &["never closed"], "v = { d = \"n\", m = 1 }\nb = 1\n");
        check("v = { d = \"n\" m = 1 }\n", &["comma is missing"], "v = { d = \"n\", m = 1 }\n");
        check("r = [0.0, inf\nb = 1\n", &["never closed"], "r = [0.0, inf]\nb = 1\n");
        check("v = { r = [0.0, inf, n = 5 }\n", &["never closed"], "v = { r = [0.0, inf], n = 5 }\n");
        check("aim == \"x\"\n", &["`==`"], "aim =  \"x\"\n");
        check("aim : \"x\"\n", &["`:`"], "aim = \"x\"\n");
        check("[variables\nb = 1\n", &["never closed"], "[variables]\nb = 1\n");
        check("variables]\nb = 1\n", &["opening bracket"], "[variables]\nb = 1\n");
        check("v = { m = 0,5, s = 0,25 }\n", &["decimal comma", "decimal comma"], "v = { m = 0.5, s = 0.25 }\n");
        check("a = .5\nb = 5.\nc = Inf\n", &["digit", "digit", "`Inf`"], "a = 0.5\nb = 5.0\nc = inf\n");
        check("r = [0, 2*pi]\n", &["plain number"], "r = [0, 6.283185307179586]\n");
        check("budget 2000\n", &["no `=`"], "budget = 2000\n");
        check("// note\nb = 1\n", &["remark"], "# note\nb = 1\n");
        check("v = { a = 1, b = 2 ]\n", &["closes"], "v = { a = 1, b = 2 }\n");
        check("r = (0.0, 1.0)\n", &["square brackets"], "r = [0.0, 1.0]\n");
        check("größe = 2\n", &["quotes"], "\"größe\" = 2\n");
        check("a = “x”\n", &["typographic"], "a = \"x\"\n");
        check("f = \"if(s == \"Alder\", 1, 0)\"\n", &["quotes inside"], "f = \"if(s == 'Alder', 1, 0)\"\n");
        check("a = 1;\n", &["semicolon"], "a = 1 \n");
    }

    #[test]
    fn places_lead_back_to_the_file() {
        let file = "a = normal\nb = wrong\n";
        let mended = mend(file);
        let at = mended.text.find("wrong").unwrap();
        assert_eq!(&file[mended.place(&(at..at + 5))], "wrong");
        let (told, _) = twice(&mend("[t]\na = 1\n[u]\na = 2\na = 3\n"), "[t]\na = 1\n[u]\na = 2\na = 3\n", &(20..21));
        assert!(told.advice()[0].contains("line 4"), "{told:?}");
    }
}
