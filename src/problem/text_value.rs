//! A text of the problem file, and where in the file each of its bytes stands.

use std::ops::Range;

/// A quoted text: what it says, and the places of its bytes in the file.
///
/// A formula is checked as the text that TOML made of it. Escapes in `"..."`, quotes of three and trimmed line ends
/// move its bytes; `offsets` leads a place in the formula back to the place in the file.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Text {
    pub(crate) value: String,
    /// The whole text in the file, with its quotes.
    pub(crate) span: Range<usize>,
    /// For every byte of `value`, and for its end: the byte of the file.
    offsets: Vec<usize>,
}

impl Text {
    /// The text `value` that stands at `span` of `source`, quotes included.
    pub(crate) fn new(source: &str, value: &str, span: Range<usize>) -> Self {
        let offsets = offsets(source, value, &span);
        Self { value: value.to_owned(), span, offsets }
    }

    /// A text that stands in no file: its places are its own bytes.
    pub(crate) fn unplaced(value: &str) -> Self {
        Self { value: value.to_owned(), span: 0..value.len(), offsets: (0..=value.len()).collect() }
    }

    /// This text with another value, for one that was misspelt.
    pub(crate) fn meaning(self, value: &str) -> Self {
        Self { value: value.to_owned(), ..self }
    }

    /// Where bytes `part` of the text stand in the file.
    pub(crate) fn place(&self, part: &Range<usize>) -> Range<usize> {
        let last = self.offsets.len() - 1;
        let start = self.offsets[part.start.min(last)];
        // The end of a part is the end of its last character's source, not the start of what follows an escape.
        let end = self.offsets[part.end.min(last)];
        start..end.max(start)
    }
}

fn offsets(source: &str, value: &str, span: &Range<usize>) -> Vec<usize> {
    let raw = &source[span.clone()];
    let (open, escapes) = match raw.as_bytes() {
        [b'"', b'"', b'"', ..] if raw.len() >= 6 => (3, true),
        [b'\'', b'\'', b'\'', ..] if raw.len() >= 6 => (3, false),
        [b'"', ..] => (1, true),
        _ => (1, false),
    };
    let mut at = open;
    if open == 3 {
        // A line end right after the opening quotes is not part of the text.
        at += if raw[at..].starts_with("\r\n") { 2 } else { usize::from(raw[at..].starts_with('\n')) };
    }
    let mut offsets = Vec::with_capacity(value.len() + 1);
    for character in value.chars() {
        if escapes {
            at += skipped_line_ends(&raw[at.min(raw.len())..]);
        }
        let rest = &raw[at.min(raw.len())..];
        for _ in 0..character.len_utf8() {
            offsets.push(span.start + at);
        }
        at += match rest.chars().next() {
            Some('\\') if escapes => escape_length(rest),
            Some('\r') if character == '\n' => 2,
            Some(found) => found.len_utf8(),
            None => 0,
        };
    }
    offsets.push(span.start + at.min(raw.len()));
    offsets
}

/// Bytes of a backslash at the end of a line, with the white space that it swallows.
fn skipped_line_ends(rest: &str) -> usize {
    let Some(after) = rest.strip_prefix('\\') else { return 0 };
    let blank = after.len() - after.trim_start_matches([' ', '\t']).len();
    if !after[blank..].starts_with(['\n', '\r']) {
        return 0;
    }
    1 + after.len() - after.trim_start_matches([' ', '\t', '\n', '\r']).len()
}

/// Bytes of the escape that `rest` begins with.
fn escape_length(rest: &str) -> usize {
    match rest.as_bytes().get(1) {
        Some(b'x') => 4,
        Some(b'u') => 6,
        Some(b'U') => 10,
        _ => 2,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use toml::de::DeTable;

    /// The file's bytes at the place of `part` of the only value in `file`.
    fn check(file: &str, part: &str, want: &str) {
        let document = DeTable::parse(file).unwrap();
        let (_, value) = document.get_ref().iter().next().unwrap();
        let text = Text::new(file, value.get_ref().as_str().unwrap(), value.span());
        let at = text.value.find(part).unwrap();
        assert_eq!(&file[text.place(&(at..at + part.len()))], want, "{file}");
    }

    #[test]
    fn parts_lead_back_to_the_file_whatever_the_quotes() {
        check("f = \"a + wrong\"", "wrong", "wrong");
        check("f = 'a + wrong'", "wrong", "wrong");
        check("f = '''\na +\n  wrong'''", "wrong", "wrong");
        check("f = \"\"\"\r\na +\r\n  wrong\"\"\"", "wrong", "wrong");
        check("f = \"a\\t== \\\"x\\\" + wrong\"", "wrong", "wrong");
        check("f = \"\\u00e9t\\u00E9 + wrong\"", "wrong", "wrong");
        check("f = \"\\u00e9t\\u00E9 + 1\"", "été", "\\u00e9t\\u00E9");
        check("f = \"\"\"a + \\\n     wrong + 2\"\"\"", "wrong", "wrong");
        check("f = 'größe + wrong'", "wrong", "wrong");
    }
}
